//! The compact engine against the plain one, which is the definition: whole attempts, bit for bit.
//!
//! Laws are chosen for what the compact engine does with them: several groups and strips, parts of groups, every
//! way to add up neighbours, thresholds whose digits end, thresholds that are equal, and none.

use pastproof::engine::compact::{Compact, Program};
use pastproof::engine::plain::Plain;
use pastproof::engine::word::Width;
use pastproof::engine::{Engine, Stop};
use pastproof::lattice::{Kind, Lattice, Spin};
use pastproof::law::{Beta, Critical, Digits, Law, Model};
use pastproof::random_map::RandomMap;
use rayon::prelude::*;

use crate::systems::{address, exact, gas, graph, held, ising, regular};

/// All attempts up to a depth, by one engine of each kind and width, in an order that shows what it forgets.
fn agree(what: &str, law: &Law, depths: &[u8]) {
    let map = RandomMap::new(law).unwrap();
    let program = Program::new(&map);
    let mut plain = Plain::new(&map);
    let mut compact: Vec<_> = Width::here()
        .map(|width| Compact::new(&program, width.words().unwrap()))
        .collect();
    for sample in [7, 1 << 63] {
        for depth in depths {
            let address = address(law, sample);
            let known = plain.attempt(&address, *depth, &Stop::default()).unwrap();
            for (engine, width) in compact.iter_mut().zip(Width::here()) {
                let found = engine.attempt(&address, *depth, &Stop::default()).unwrap();
                let at = format!("{what}: sample {sample}, depth {depth}, {width}");
                assert_eq!(found, known, "{at}");
                assert!(engine.bounds() == plain.bounds(), "{at}: bounds");
            }
        }
    }
}

const DEPTHS: [u8; 4] = [3, 0, 5, 1];

/// Random numbers of a kind that no engine uses (Vigna's SplitMix64, from memory).
struct Draws(u64);

impl Draws {
    fn word(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mixed = (self.0 ^ self.0 >> 30).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        let mixed = (mixed ^ mixed >> 27).wrapping_mul(0x94d0_49bb_1331_11eb);
        mixed ^ mixed >> 31
    }

    fn below(&mut self, count: u64) -> u64 {
        self.word() % count
    }

    fn one_of<'a>(&mut self, list: &[&'a str]) -> &'a str {
        list[self.below(list.len() as u64) as usize]
    }

    fn list(&mut self, count: usize, of: &[&str]) -> String {
        let numbers: Vec<_> = (0..count).map(|_| self.one_of(of)).collect();
        numbers.join(" ")
    }
}

/// How neighbours are chosen.
#[derive(Clone, Copy, Debug)]
enum Shape {
    /// So many sites and edges, at random; edges may be repeated.
    Random(u32, u32),
    /// The same, and one more site that neighbours all others.
    Hub(u32, u32),
}

impl Shape {
    fn edges(self, draws: &mut Draws) -> (u32, Vec<[u32; 2]>) {
        let (Self::Random(sites, edges) | Self::Hub(sites, edges)) = self;
        let mut pair = || {
            let a = draws.below(sites.into()) as u32;
            [a, (a + 1 + draws.below(u64::from(sites) - 1) as u32) % sites]
        };
        let mut pairs: Vec<_> = (0..edges).map(|_| pair()).collect();
        if let Self::Hub(..) = self {
            pairs.extend((0..sites).map(|site| [sites, site]));
            return (sites + 1, pairs);
        }
        (sites, pairs)
    }
}

/// A tenth of all sites held, or in a gas a tenth of them held empty.
fn hold_some(law: &Law, draws: &mut Draws) -> Law {
    let is_gas = matches!(law.model(), Model::LatticeGas { .. });
    let mut sites = Vec::new();
    for site in 0..law.lattice().sites() {
        if draws.below(10) == 0 {
            sites.push((site, Spin::from_bit(!is_gas && draws.below(2) == 0)));
        }
    }
    if sites.is_empty() {
        law.clone()
    } else {
        held(law, &sites)
    }
}

/// Graphs: sites without edges, single sites, one word of lanes and several, several groups.
const SHAPES: [Shape; 7] = [
    Shape::Random(1, 0),
    Shape::Random(5, 12),
    Shape::Random(40, 60),
    Shape::Random(90, 20),
    Shape::Hub(70, 90),
    Shape::Random(700, 1100),
    Shape::Random(1300, 700),
];

#[test]
fn graphs_with_listed_numbers_agree() {
    // by what they are added up with: counts, strides for each choice or for each multiple, zeros
    let couplings: [(&str, &[&str]); 7] = [
        ("ferromagnet", &["1"]),
        ("antiferromagnet", &["-3/2"]),
        ("signs", &["1", "-1"]),
        ("signs and zeros", &["1", "-1", "0"]),
        ("zeros", &["0"]),
        ("integers", &["1", "2", "-3", "5"]),
        ("decimals", &["0.371", "-1.2104", "0.05"]),
    ];
    let fields: [&[&str]; 3] = [&[], &["0", "1", "-1/2"], &["0.123", "-0.77", "0.0009", "2.5", "-1.01"]];
    let mut laws = Vec::new();
    for shape in SHAPES {
        for (name, couplings) in couplings {
            for (number, fields) in fields.into_iter().enumerate() {
                let mut draws = Draws(laws.len() as u64);
                let (sites, edges) = shape.edges(&mut draws);
                let beta = ["0.3", "-0.2", "0", "0.05", "2", "60"][laws.len() % 6];
                // a hub with decimals at random has too many thresholds
                let degrees = if matches!(shape, Shape::Hub(..)) {
                    1
                } else {
                    couplings.len()
                };
                let listed = draws.list(edges.len(), &couplings[..degrees]);
                let listed = if listed.is_empty() { "" } else { &listed };
                let field_list = if fields.is_empty() {
                    String::new()
                } else {
                    draws.list(sites as usize, fields)
                };
                let lattice = graph(sites.into(), &edges, listed, &field_list);
                let law = ising(lattice, beta, "1/10");
                let law = if number == 2 { hold_some(&law, &mut draws) } else { law };
                laws.push((format!("{shape:?}, {name}, beta {beta}, fields {number}"), law));
            }
        }
    }
    assert!(laws.iter().filter(|(_, law)| law.digits() == Digits::Plain).count() > 130);
    laws.par_iter().for_each(|(what, law)| agree(what, law, &DEPTHS));
}

/// Every coupling another one: 2^degree loads a site; and a hub whose weights are searched, for they are few and far
/// apart.
#[test]
fn graphs_with_many_loads_agree() {
    let mut draws = Draws(1);
    let (sites, edges) = Shape::Random(60, 110).edges(&mut draws);
    let decimals: Vec<_> = edges
        .iter()
        .map(|_| format!("{}e-4", draws.below(20_001) as i64 - 10_000))
        .collect();
    agree(
        "decimals",
        &ising(graph(sites.into(), &edges, &decimals.join(" "), ""), "0.4", "1/7"),
        &DEPTHS,
    );
    let far_apart = ["1", "2", "-3", "4", "1e9", "-2e9", "3e9", "4e9"];
    for beta in ["1e-10", "-0.05"] {
        let (sites, edges) = Shape::Hub(24, 30).edges(&mut draws);
        let list = draws.list(edges.len(), &far_apart);
        agree(
            "far apart",
            &ising(graph(sites.into(), &edges, &list, ""), beta, "0"),
            &DEPTHS,
        );
    }
}

#[test]
fn graphs_with_common_numbers_agree() {
    let mut laws = Vec::new();
    for shape in SHAPES {
        for (number, (beta, field)) in [
            ("0.2", "0"),
            ("-0.15", "1/2"),
            ("0", "1"),
            ("1.5", "-0.3"),
            ("-40", "0"),
        ]
        .into_iter()
        .enumerate()
        {
            let mut draws = Draws(number as u64);
            let (sites, edges) = shape.edges(&mut draws);
            let law = ising(graph(sites.into(), &edges, "", ""), beta, field);
            laws.push((format!("{shape:?}, beta {beta}"), law.clone()));
            laws.push((format!("{shape:?}, beta {beta}, held"), hold_some(&law, &mut draws)));
        }
        // thresholds with few digits: 1/2, 3/4, 1/4, 15/16 and none, and with many
        for activity in ["1", "3", "1/3", "15", "0", "2/7", "1e-30", "1e40"] {
            let mut draws = Draws(laws.len() as u64);
            let (sites, edges) = shape.edges(&mut draws);
            let law = gas(graph(sites.into(), &edges, "", ""), activity);
            laws.push((format!("{shape:?}, activity {activity}"), law.clone()));
            laws.push((
                format!("{shape:?}, activity {activity}, held"),
                hold_some(&law, &mut draws),
            ));
        }
    }
    assert!(laws.iter().all(|(_, law)| law.digits() == Digits::Sliced));
    laws.par_iter().for_each(|(what, law)| agree(what, law, &DEPTHS));
}

/// Every family and boundary, with sites held and not; at the triangular critical point thresholds are fractions.
#[test]
fn regular_lattices_agree() {
    let mut laws = Vec::new();
    for (kind, extents) in [
        (Kind::Hypercubic, [33].as_slice()),
        (Kind::Hypercubic, &[1, 5]),
        (Kind::Hypercubic, &[2, 2]),
        (Kind::Hypercubic, &[37, 29]),
        (Kind::Hypercubic, &[3, 4, 5]),
        (Kind::Hypercubic, &[2, 3, 2, 3]),
        (Kind::Triangular, &[7, 5]),
        (Kind::Triangular, &[24, 26]),
        (Kind::Honeycomb, &[5, 6]),
        (Kind::Honeycomb, &[22, 25]),
    ] {
        for words in ["periodic", "free", "plus", "minus", "plus periodic"] {
            if extents[0] == 1 && words.starts_with("periodic") || extents.len() == 1 && words.contains(' ') {
                continue;
            }
            let mut draws = Draws(laws.len() as u64);
            let lattice = || regular(kind, extents, words);
            let what = format!("{kind} {extents:?} {words}");
            let mut add = |what: String, law: Law| {
                laws.push((format!("{what}, held"), hold_some(&law, &mut draws)));
                laws.push((what, law));
            };
            add(format!("{what}, ferromagnet"), ising(lattice(), "0.3", "0"));
            add(format!("{what}, antiferromagnet"), ising(lattice(), "-0.2", "1/5"));
            add(format!("{what}, gas"), gas(lattice(), "1"));
            if kind == Kind::Triangular {
                add(format!("{what}, critical"), critical(lattice(), "1"));
                add(format!("{what}, critical, field"), critical(lattice(), "-2"));
            }
        }
    }
    laws.par_iter().for_each(|(what, law)| agree(what, law, &DEPTHS));
}

fn critical(lattice: Lattice, field: &str) -> Law {
    let model = Model::Ising {
        beta: Beta::Critical(Critical::Triangular),
        coupling: Some(exact("1")),
        field: Some(exact(field)),
    };
    Law::new(model, lattice, None).unwrap()
}

/// Thousands of neighbours: thresholds so close that most lanes need many digits, and a group of one lane.
#[test]
fn hubs_agree() {
    let star = |leaves: u32| (0..leaves).map(|leaf| [leaf + 1, 0]).collect::<Vec<_>>();
    let two_hubs: Vec<_> = (2..1200).flat_map(|leaf| [[0, leaf], [1, leaf]]).collect();
    let complete: Vec<_> = (0..80).flat_map(|a| (a + 1..80).map(move |b| [a, b])).collect();
    let halves: Vec<_> = (0..600).flat_map(|a| (600..630).map(move |b| [a, b])).collect();
    for (name, sites, edges) in [
        ("star", 3001, star(3000)),
        ("two hubs", 1200, two_hubs),
        ("complete", 80, complete),
        ("halves", 630, halves),
    ] {
        let lattice = || graph(sites, &edges, "", "");
        agree(name, &ising(lattice(), "0.002", "0"), &[4, 0]);
        agree(name, &ising(lattice(), "-1/300", "0.7"), &[4, 0]);
        agree(name, &gas(lattice(), "1/50"), &[4, 0]);
        let signs = Draws(3).list(edges.len(), &["1", "-1"]);
        agree(name, &ising(graph(sites, &edges, &signs, ""), "0.01", "0"), &[4, 0]);
    }
    // more than 32,767 ends that lift at one site
    let crowd = star(40_000);
    agree("crowd", &gas(graph(40_001, &crowd, "", ""), "1e-5"), &[2, 0]);
    agree(
        "crowd, signs",
        &ising(graph(40_001, &crowd, &["1"; 40_000].join(" "), ""), "1e-4", "0"),
        &[2, 0],
    );
}

/// Lists of more than 65,536 lanes, whose strips have generators of their own.
#[test]
fn several_strips_agree() {
    let sites = 2 * 65_536 + 700;
    let ring: Vec<_> = (0..sites).map(|site| [site, (site + 1) % sites]).collect();
    agree("gas", &gas(graph(sites.into(), &ring, "", ""), "2/3"), &[1]);
    let signs = Draws(5).list(ring.len(), &["1", "-1"]);
    agree(
        "signs",
        &ising(graph(sites.into(), &ring, &signs, ""), "0.1", "0"),
        &[1],
    );
    // no neighbours, one list of two strips and a bit
    agree("apart", &ising(graph(sites.into(), &[], "", ""), "0.1", "1"), &[2]);
}

/// No lane is left: no word is drawn, and the bounds are equal from the start.
#[test]
fn a_law_without_lanes_agrees() {
    let all: Vec<_> = (0..9).map(|site| (site, Spin::from_bit(site % 2 == 0))).collect();
    let law = held(&ising(regular(Kind::Hypercubic, &[3, 3], "free"), "0.3", "0"), &all);
    agree("all held", &law, &[2, 0, 5]);
    let map = RandomMap::new(&law).unwrap();
    let program = Program::new(&map);
    let attempt = Compact::new(&program, Width::widest()).attempt(&address(&law, 0), 4, &Stop::default());
    let attempt = attempt.unwrap();
    assert_eq!((attempt.words, attempt.merged_at), (0, Some(15)));
}

/// A stopped attempt is an error, and leaves nothing behind in the next one.
#[test]
fn a_stopped_engine_can_go_on() {
    let law = ising(regular(Kind::Hypercubic, &[20, 20], "free"), "0.3", "0");
    let map = RandomMap::new(&law).unwrap();
    let program = Program::new(&map);
    let (mut plain, mut compact) = (Plain::new(&map), Compact::new(&program, Width::widest()));
    let stopped = Stop::at(std::sync::Arc::new(true.into()));
    compact.attempt(&address(&law, 3), 4, &Stop::default()).unwrap();
    assert!(compact.attempt(&address(&law, 0), 4, &stopped).is_err());
    let known = plain.attempt(&address(&law, 1), 3, &Stop::default()).unwrap();
    assert_eq!(compact.attempt(&address(&law, 1), 3, &Stop::default()).unwrap(), known);
    assert!(compact.bounds() == plain.bounds());
}
