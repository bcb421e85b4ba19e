//! Properties that hold for every law: tried on random small graphs, always the same ones.

use pastproof::engine::crew::{Choice, Crew, Settings};
use pastproof::engine::plain::Plain;
use pastproof::engine::{Engine, Stop, coupling};
use pastproof::lattice::{Kind, Spin};
use pastproof::law::Law;
use pastproof::random_map::RandomMap;
use pastproof::sample::Outcome;
use proptest::prelude::*;
use proptest::test_runner::RngSeed;

use crate::faults::Variant;
use crate::systems::{address, gas, graph, held, ising, regular};

fn config() -> ProptestConfig {
    ProptestConfig {
        cases: 200,
        rng_seed: RngSeed::Fixed(1996),
        failure_persistence: None,
        ..ProptestConfig::default()
    }
}

/// A law on at most 7 sites: either model, any signs, repeated edges, listed numbers or common ones, held sites.
fn laws() -> impl Strategy<Value = Law> {
    let number = |list: &'static [&'static str]| prop::sample::select(list);
    let numbers = ["0", "1", "-1", "1/2", "-2/3", "2"].as_slice();
    let edges = prop::collection::vec((0u32..7, 1u32..7, number(numbers)), 0..12);
    let fields = prop::collection::vec(number(numbers), 7);
    let held_sites = prop::collection::vec(prop::option::weighted(0.1, any::<bool>()), 7);
    let betas = number(&["0", "0.1", "-0.15", "0.3", "-0.3", "0.5"]);
    let parts = (1u32..=7, edges, fields, held_sites, betas, any::<[bool; 3]>());
    parts.prop_map(
        |(sites, edges, fields, held_sites, beta, [is_gas, list_couplings, list_fields])| {
            // two different sites each: an offset of 1 .. sites-1
            let pair = |from: u32, by: u32| [from % sites, (from % sites + 1 + by % (sites - 1)) % sites];
            let edges: Vec<_> = edges.into_iter().filter(|_| sites > 1).collect();
            let pairs: Vec<_> = edges.iter().map(|(from, by, _)| pair(*from, *by)).collect();
            let listed = |wanted: bool, list: Vec<&str>| {
                if wanted && !is_gas {
                    list.join(" ")
                } else {
                    String::new()
                }
            };
            let couplings = listed(list_couplings, edges.iter().map(|edge| edge.2).collect());
            let listed_fields = listed(list_fields, fields[..sites as usize].to_vec());
            let lattice = graph(u64::from(sites), &pairs, &couplings, &listed_fields);
            let law = if is_gas {
                gas(lattice, "3/4")
            } else {
                ising(lattice, beta, fields[6])
            };
            let fixed: Vec<_> = (0..sites)
                .zip(held_sites)
                // empty in a gas: never of weight zero
                .filter_map(|(site, value)| value.map(|value| (site, Spin::from_bit(value && !is_gas))))
                .collect();
            if fixed.is_empty() { law } else { held(&law, &fixed) }
        },
    )
}

/// By hand: 32 bytes a sample, 2 MiB a sample, and more threads than fit.
#[test]
fn few_large_samples_are_in_memory_at_once() {
    let at_once = |extent, threads: &[usize]| {
        let law = gas(regular(Kind::Hypercubic, &[extent, extent], "periodic"), "1");
        let map = RandomMap::new(&law).unwrap();
        let plain = Settings {
            engine: Choice::Plain,
            ..Settings::default()
        };
        let crew = Crew::new(&map, &plain);
        threads.iter().map(|threads| crew.at_once(*threads)).collect::<Vec<_>>()
    };
    assert_eq!(at_once(16, &[1, 2, 3]), [1024, 1024, 1026]);
    assert_eq!(at_once(4096, &[1, 2, 3, 64]), [4, 4, 6, 128]);
}

/// Beyond this depth a sample may stay unfinished, which is a sample too.
const LIMIT: u8 = 9;

proptest! {
    #![proptest_config(config())]

    /// `STREAM.md` section 6: neither sample nor depth depends on the first attempt, finished or not.
    #[test]
    fn first_depth_changes_nothing(law in laws(), sample in any::<u64>(), first in 0u8..=12) {
        let map = RandomMap::new(&law).unwrap();
        let mut engine = Plain::new(&map);
        let mut draw = |first| coupling::draw(&mut engine, &address(&law, sample), first, LIMIT, &Stop::default()).unwrap();
        prop_assert_eq!(draw(0), draw(first));
    }

    /// Once an attempt meets, all deeper ones meet, with the same bits; no smaller one does.
    #[test]
    fn deeper_attempts_meet_with_the_same_state(law in laws(), sample in any::<u64>()) {
        let map = RandomMap::new(&law).unwrap();
        let mut engine = Plain::new(&map);
        let address = address(&law, sample);
        let drawn = coupling::draw(&mut engine, &address, 0, LIMIT, &Stop::default()).unwrap();
        let Outcome::Exact(state) = &drawn.outcome else { return Ok(()) };
        for depth in 0..drawn.depth + 3 {
            let attempt = engine.attempt(&address, depth, &Stop::default()).unwrap();
            prop_assert_eq!(attempt.merged_at.is_some(), depth >= drawn.depth);
            let [lower, upper] = engine.bounds();
            prop_assert_eq!(lower == upper, depth >= drawn.depth);
            if depth >= drawn.depth {
                prop_assert_eq!(&lower, state);
            }
        }
    }

    /// Every start runs between the bounds at all times, so lower <= upper, and those of a deeper attempt
    /// lie within. The chain in the middle is the law itself: each site by its own threshold.
    #[test]
    fn every_start_stays_between_the_bounds(law in laws(), sample in any::<u64>(), start in any::<[bool; 7]>()) {
        let map = RandomMap::new(&law).unwrap();
        let variant = Variant::new(&map, None);
        let [lower, upper] = variant.start();
        // held sites keep their value
        let between = |site: usize| if lower[site] == upper[site] { lower[site] } else { start[site] };
        let middle = (0..lower.len()).map(between).collect();
        let mut chains = [lower, middle, upper];
        let mut outside = 0;
        variant.carry(
            &address(&law, sample),
            5,
            &mut chains,
            |engine, [lower, middle, upper], site, number| {
                let [low, high] = engine.bounds([lower, upper], site, number);
                [low, map.threshold(site, |end| middle[end.site as usize]).is_above(number), high]
            },
            |[lower, middle, upper], _| {
                let ordered = |site: usize| lower[site] <= middle[site] && middle[site] <= upper[site];
                outside += (0..lower.len()).filter(|site| !ordered(*site)).count();
                false
            },
        );
        prop_assert_eq!(outside, 0);
        let [lower, _, upper] = &chains;
        let mut engine = Plain::new(&map);
        engine.attempt(&address(&law, sample), 5, &Stop::default()).unwrap();
        let found = engine.bounds();
        let same = (0u32..).zip(lower.iter().zip(upper)).all(|(site, (lower, upper))| {
            found.each_ref().map(|bound| bound.is_plus(site)) == [*lower, *upper]
        });
        prop_assert!(same);
    }
}
