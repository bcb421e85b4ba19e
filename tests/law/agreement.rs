//! Every engine against the definition: bounds, merged at and words of every attempt, bit for bit, over
//! laws, lattices, extents, boundaries, word widths, memory budgets, threads and orders of attempts.
//!
//! The plain engine is `STREAM.md` line by line; the known answers of an independent program hold it
//! and the others to the text (`vectors`). Nothing here is random from run to run.

use pastproof::engine::crew::{Choice, Crew, Settings};
use pastproof::engine::plain::Plain;
use pastproof::engine::sliced::program::{Program, Rule};
use pastproof::engine::sliced::{Sliced, Strips};
use pastproof::engine::word::Width;
use pastproof::engine::{Attempt, Engine, Stop, coupling};
use pastproof::error::Result;
use pastproof::lattice::{Kind, Spin};
use pastproof::law::Law;
use pastproof::random_map::RandomMap;
use pastproof::sample::Configuration;
use pastproof::stream::Address;
use proptest::prelude::*;
use proptest::test_runner::RngSeed;
use rayon::prelude::*;

use crate::systems::{address, gas, held, ising, regular};

/// Attempts in an order that leaves planes behind, finds them again, and comes back to smaller depths.
const DEPTHS: [u8; 6] = [2, 3, 1, 4, 0, 4];

/// Bytes for kept planes: none, a few sweeps, everything.
const BUDGETS: [u64; 3] = [0, 20_000, 1 << 30];

/// Makes the attempts with the plain engine and with each of the others, on two samples.
fn compare(law: &Law, map: &RandomMap, depths: &[u8], others: &mut [(String, Box<dyn Engine + '_>)]) {
    let mut plain = Plain::new(map);
    for sample in 0..2 {
        let address = address(law, sample);
        for depth in depths {
            let expected = plain.attempt(&address, *depth, &Stop::default()).unwrap();
            for (name, other) in &mut *others {
                let found = other.attempt(&address, *depth, &Stop::default()).unwrap();
                let place = || format!("{name}: {} sample {sample} depth {depth}", law.lattice());
                assert_eq!(found, expected, "{}", place());
                assert!(other.bounds() == plain.bounds(), "{}: bounds differ", place());
            }
        }
    }
}

/// Compares every width and budget of the bit-sliced engine; says which rule it used, if it knows the law.
fn compare_sliced(law: &Law, depths: &[u8]) -> Option<Rule> {
    let map = RandomMap::new(law).unwrap();
    let program = Program::new(&map)?;
    let mut engines: Vec<(String, Box<dyn Engine + '_>)> = Vec::new();
    for width in Width::here() {
        for budget in BUDGETS {
            let sliced = Sliced::new(&map, &program, width.words()?, Strips::InTurn, budget);
            engines.push((format!("{width}, {budget} bytes"), Box::new(sliced)));
        }
    }
    compare(law, &map, depths, &mut engines);
    Some(program.rule)
}

/// Laws that use every rule and every way to compare digits: ferromagnet and antiferromagnet with and without field,
/// thresholds with short binary expansions (1/2 at beta 0; 3/4 and 1/4 on the triangular lattice at its critical
/// point), thresholds at the ends of the range, activities whose thresholds are 0, 1/2, 1/4 and longer.
fn laws(kind: Kind, extents: &[u64], words: &str) -> Vec<Law> {
    let lattice = || regular(kind, extents, words);
    let mut laws: Vec<Law> = [
        ("0.3", "0"),
        ("-0.25", "0"),
        ("0.2", "1/3"),
        ("-0.2", "-1/2"),
        ("0", "0"),
        ("0", "1"),
        ("0.1", "-3"),
        ("60", "0"),
    ]
    .map(|(beta, field)| ising(lattice(), beta, field))
    .into();
    laws.extend(["0", "1", "1/3", "5/7"].map(|activity| gas(lattice(), activity)));
    laws
}

/// Extents at which packing has its edges: one site, one word, one group, and one more or less; odd ones; rows
/// that end inside words and groups.
#[test]
fn the_bit_sliced_engine_agrees_on_small_lattices() {
    let mut lattices = Vec::new();
    for extent in [
        1, 2, 3, 4, 5, 8, 63, 64, 65, 127, 128, 129, 130, 1023, 1024, 1025, 1026, 1100,
    ] {
        for word in ["periodic", "free", "plus", "minus"] {
            lattices.push((Kind::Hypercubic, vec![extent], word.to_string()));
        }
    }
    let words = ["periodic", "free", "plus", "minus"];
    let pairs: Vec<String> = words
        .iter()
        .flat_map(|a| words.iter().map(move |b| format!("{a} {b}")))
        .collect();
    for kind in [Kind::Hypercubic, Kind::Triangular, Kind::Honeycomb] {
        for pair in &pairs {
            for extents in [[1, 1], [1, 4], [2, 2], [3, 3], [4, 6], [5, 2], [7, 9], [8, 8]] {
                lattices.push((kind, extents.to_vec(), pair.clone()));
            }
        }
        for extents in [[16, 16], [31, 33], [32, 32], [2, 70], [70, 2], [23, 46], [64, 34]] {
            lattices.push((kind, extents.to_vec(), "periodic".into()));
            lattices.push((kind, extents.to_vec(), "free plus".into()));
        }
    }
    for extents in [
        vec![2, 2, 2],
        vec![3, 4, 5],
        vec![8, 8, 8],
        vec![1, 7, 6],
        vec![9, 10, 11],
        vec![2, 3, 2, 3],
        vec![4, 4, 4, 4],
        vec![3, 6, 5, 7],
    ] {
        for word in ["periodic", "free", "plus", "free periodic minus"] {
            if extents[0] > 1 || word != "periodic" {
                lattices.push((Kind::Hypercubic, extents.clone(), word.into()));
            }
        }
    }
    let rules: Vec<Option<Rule>> = lattices
        .into_par_iter()
        .filter(|(_, extents, words)| {
            let mut words = words.split(' ').cycle();
            extents
                .iter()
                .all(|extent| words.next() != Some("periodic") || *extent > 1)
        })
        .flat_map(|(kind, extents, words)| laws(kind, &extents, &words))
        .map(|law| {
            compare_sliced(
                &law,
                if law.lattice().sites() > 200 {
                    &DEPTHS[..3]
                } else {
                    &DEPTHS
                },
            )
        })
        .collect();
    for rule in [Rule::Folded, Rule::Ranked, Rule::Exclusion] {
        let count = rules.iter().filter(|found| **found == Some(rule)).count();
        assert!(count > 100, "{rule:?} was used for {count} laws only");
    }
    let refused = rules.iter().filter(|rule| rule.is_none()).count();
    assert_eq!(
        refused,
        0,
        "laws that the bit-sliced engine should know, of {}",
        rules.len()
    );
}

/// Critical points: all folded, on the triangular lattice with thresholds 3/4 and 1/4 among them.
#[test]
fn the_bit_sliced_engine_agrees_at_critical_points() {
    use pastproof::law::{Beta, Critical, Model};
    for (kind, critical) in [
        (Kind::Hypercubic, Critical::Square),
        (Kind::Triangular, Critical::Triangular),
        (Kind::Honeycomb, Critical::Honeycomb),
    ] {
        for extents in [[12, 12], [30, 18]] {
            let law = ising(regular(kind, &extents, "periodic"), "0", "0");
            let Model::Ising { coupling, field, .. } = law.model().clone() else {
                unreachable!()
            };
            let beta = Beta::Critical(critical);
            let law = Law::new(Model::Ising { beta, coupling, field }, law.lattice().clone(), None).unwrap();
            assert_eq!(compare_sliced(&law, &DEPTHS), Some(Rule::Folded));
        }
    }
}

/// Held sites have no lanes and stand between lanes; their neighbours have profiles of their own.
#[test]
fn the_bit_sliced_engine_agrees_around_held_sites() {
    for kind in [Kind::Hypercubic, Kind::Triangular, Kind::Honeycomb] {
        for beta in ["0.3", "-0.2"] {
            let law = ising(regular(kind, &[12, 12], "periodic"), beta, "0");
            let sites = [(0, Spin::Plus), (1, Spin::Minus), (40, Spin::Minus), (100, Spin::Plus)];
            assert!(compare_sliced(&held(&law, &sites), &DEPTHS).is_some());
        }
        let law = gas(regular(kind, &[12, 12], "periodic"), "2");
        assert!(compare_sliced(&held(&law, &[(0, Spin::Minus), (50, Spin::Plus)]), &DEPTHS).is_some());
    }
}

/// Where every site is held nothing is drawn.
#[test]
fn the_bit_sliced_engine_agrees_where_every_site_is_held() {
    let law = ising(regular(Kind::Hypercubic, &[2, 2], "periodic"), "0.3", "0");
    let sites = [0, 1, 2, 3].map(|site| (site, Spin::from_bit(site % 2 == 0)));
    assert!(compare_sliced(&held(&law, &sites), &DEPTHS).is_some());
}

/// An engine that works on the threads of a pool.
struct Pooled<'a>(&'a rayon::ThreadPool, Sliced<'a>);

impl Engine for Pooled<'_> {
    fn attempt(&mut self, address: &Address, depth: u8, stop: &Stop) -> Result<Attempt> {
        self.0.install(|| self.1.attempt(address, depth, stop))
    }

    fn bounds(&self) -> [Configuration; 2] {
        self.1.bounds()
    }
}

/// More than one strip a class: one after the other, and side by side on several threads.
#[test]
fn the_bit_sliced_engine_agrees_over_strips_and_threads() {
    let laws = [
        ising(regular(Kind::Hypercubic, &[400, 400], "periodic"), "0.4", "0"),
        ising(regular(Kind::Honeycomb, &[301, 299], "free periodic"), "-0.3", "1/5"),
        gas(regular(Kind::Triangular, &[500, 501], "periodic"), "1/2"),
    ];
    for law in laws {
        let map = RandomMap::new(&law).unwrap();
        let program = Program::new(&map).unwrap();
        assert!(program.strips() > 1);
        let pool = |threads| rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
        let pools = [pool(1), pool(2), pool(3)];
        let mut engines: Vec<(String, Box<dyn Engine + '_>)> = Vec::new();
        for pool in &pools {
            let threads = pool.current_num_threads();
            for budget in [0, 200_000, 1 << 30] {
                let words = Width::widest();
                let sliced = Sliced::new(&map, &program, words, Strips::SideBySide, budget);
                let name = format!("{threads} threads, {budget} bytes");
                let pooled = Pooled(pool, sliced);
                engines.push((name, Box::new(pooled)));
            }
        }
        let sliced = Sliced::new(&map, &program, Width::widest(), Strips::InTurn, 1 << 30);
        engines.push(("in turn".into(), Box::new(sliced)));
        compare(&law, &map, &[1, 0, 1], &mut engines);
    }
}

/// A stop in the middle of an epoch leaves nothing behind that a later attempt could take for whole.
#[test]
fn an_attempt_after_a_stop_is_made_anew() {
    use std::sync::Arc;
    use std::sync::atomic::AtomicBool;
    let law = ising(regular(Kind::Hypercubic, &[10, 10], "periodic"), "0.35", "0");
    let map = RandomMap::new(&law).unwrap();
    let program = Program::new(&map).unwrap();
    let mut sliced = Sliced::new(&map, &program, Width::widest(), Strips::InTurn, 1 << 20);
    let stopped = Stop::at(Arc::new(AtomicBool::new(true)));
    sliced.attempt(&address(&law, 0), 3, &Stop::default()).unwrap();
    assert!(sliced.attempt(&address(&law, 0), 5, &stopped).is_err());
    compare(&law, &map, &DEPTHS, &mut [("after a stop".into(), Box::new(sliced))]);
}

/// Samples side by side and strips side by side, as a crew shares them, give what one plain engine gives.
#[test]
fn a_crew_gives_the_samples_of_the_plain_engine() {
    for (law, samples) in [
        (
            ising(regular(Kind::Hypercubic, &[9, 12], "periodic free"), "0.3", "0"),
            7u64,
        ),
        (
            ising(regular(Kind::Hypercubic, &[600, 600], "periodic"), "0.05", "0"),
            3,
        ),
    ] {
        let map = RandomMap::new(&law).unwrap();
        let mut plain = Plain::new(&map);
        let expected: Vec<_> = (0..samples)
            .map(|sample| coupling::draw(&mut plain, &address(&law, sample), 0, 20, &Stop::default()).unwrap())
            .collect();
        for threads in [1, 2, 4] {
            for first_depth in [0, 4, 9] {
                let settings = Settings {
                    threads: Some(threads),
                    memory: 1 << 22,
                    ..Settings::default()
                };
                let crew = Crew::new(&map, &settings);
                let items: Vec<u64> = (0..samples).collect();
                let found = settings.pool().unwrap().install(|| {
                    crew.each(&items, |engine, sample| {
                        coupling::draw(engine, &address(&law, *sample), first_depth, 20, &Stop::default())
                    })
                });
                assert!(
                    found.unwrap() == expected,
                    "{threads} threads, from depth {first_depth}"
                );
            }
        }
    }
}

/// The plain engine stays within reach, for whoever wants the definition.
#[test]
fn the_definition_can_be_asked_for() {
    let law = ising(regular(Kind::Hypercubic, &[4, 4], "periodic"), "0.3", "0");
    let map = RandomMap::new(&law).unwrap();
    let settings = Settings {
        engine: Choice::Plain,
        ..Settings::default()
    };
    assert_eq!(Crew::new(&map, &settings).to_string(), "plain engine");
    assert!(
        Crew::new(&map, &Settings::default())
            .to_string()
            .starts_with("bit-sliced")
    );
}

/// A regular lattice with at most 5,000 sites, a law on it, and attempts.
fn cases() -> impl Strategy<Value = (Law, Vec<u8>, u64, usize)> {
    let kinds = prop::sample::select(vec![
        (Kind::Hypercubic, 1),
        (Kind::Hypercubic, 2),
        (Kind::Hypercubic, 2),
        (Kind::Hypercubic, 3),
        (Kind::Hypercubic, 4),
        (Kind::Triangular, 2),
        (Kind::Honeycomb, 2),
    ]);
    let extents = prop::collection::vec(1u64..=70, 4);
    let words = prop::collection::vec(
        prop::sample::select(vec!["periodic", "periodic", "free", "plus", "minus"]),
        4,
    );
    let depths = prop::collection::vec(0u8..4, 1..4);
    (
        kinds,
        extents,
        words,
        0usize..12,
        depths,
        0u64..200_000,
        any::<prop::sample::Index>(),
    )
        .prop_map(|((kind, axes), mut extents, words, law, depths, budget, width)| {
            extents.truncate(axes);
            for (extent, word) in extents.iter_mut().zip(&words) {
                *extent = (*extent).max(if *word == "periodic" { 2 } else { 1 });
            }
            while extents.iter().product::<u64>() > 5000 {
                let largest = (0..axes).max_by_key(|axis| extents[*axis]).unwrap();
                extents[largest] = extents[largest] / 2 + 1;
            }
            let law = laws(kind, &extents, &words[..axes].join(" ")).swap_remove(law);
            (law, depths, budget, width.index(Width::here().count()))
        })
}

fn check_case((law, depths, budget, width): (Law, Vec<u8>, u64, usize)) {
    let map = RandomMap::new(&law).unwrap();
    let program = Program::new(&map).expect("a program");
    let width = Width::here().nth(width).unwrap();
    let sliced = Sliced::new(&map, &program, width.words().unwrap(), Strips::InTurn, budget);
    let name = format!("{width}, {budget} bytes");
    compare(&law, &map, &depths, &mut [(name, Box::new(sliced))]);
}

fn config(cases: u32) -> ProptestConfig {
    ProptestConfig {
        cases,
        rng_seed: RngSeed::Fixed(1996),
        failure_persistence: None,
        ..ProptestConfig::default()
    }
}

proptest! {
    #![proptest_config(config(150))]

    #[test]
    fn the_bit_sliced_engine_agrees_on_any_lattice(case in cases()) {
        check_case(case);
    }
}

proptest! {
    #![proptest_config(config(10_000))]

    /// The same for a night: `.ci/run long`.
    #[test]
    #[ignore = "long"]
    fn the_bit_sliced_engine_agrees_on_many_lattices(case in cases()) {
        check_case(case);
    }
}
