//! The samples follow the stated law: whole configurations, energies and coupling times, against
//! enumeration (`exact.rs`), published densities of states and the exact law of the pair of bounds.

use std::collections::BTreeMap;

use pastproof::exact::{self, Enumeration};
use pastproof::lattice::{Kind, Spin};
use pastproof::law::Law;
use pastproof::number::Exact;
use pastproof::observable::Observables;
use pastproof::random_map::RandomMap;
use pastproof::sample::{Configuration, Sample};
use serde_json::Value;

use crate::statistics::{Verdict, exp, fit, mean, succession};
use crate::systems::{configurations, cycle, draw, gas, graph, held, ising, number, regular};
use crate::values::{COUPLING_TIME, HARD_CORE, LEVELS, TORUS, float, lattice_named, parse, record, signed_graph};

/// Whole configurations against enumeration.
pub fn configurations_fit(what: &str, law: &Law, samples: &[Sample]) -> Verdict {
    let exact = Enumeration::new(law).unwrap();
    fit(
        what,
        &exact.probabilities().collect(),
        configurations(samples).map(number),
    )
}

/// The whole energy histogram, by -`pair_sum` - sum h s (an empty list for no field), against a density of
/// states `g`.
pub fn energies_fit(
    what: &str,
    law: &Law,
    fields: &[f64],
    beta: &str,
    g: &BTreeMap<i64, f64>,
    samples: &[Sample],
) -> Verdict {
    let energies = energies(law, fields, samples);
    let energies = energies.into_iter().map(|energy| energy.round() as i64);
    fit(what, &boltzmann(float(&beta.into()), g), energies)
}

fn energies(law: &Law, fields: &[f64], samples: &[Sample]) -> Vec<f64> {
    let observables = Observables::new(law);
    assert_eq!(observables.names()[0], "pair_sum");
    let energy = |configuration: &Configuration| {
        let spin = |site| if configuration.is_plus(site) { 1.0 } else { -1.0 };
        let pairs = observables.measure(configuration)[0].as_fraction().to_f64_fast();
        let fields = (0u32..).zip(fields).map(|(site, field)| field * spin(site));
        -pairs - fields.sum::<f64>()
    };
    configurations(samples).map(energy).collect()
}

fn fields(record: &Value) -> Vec<f64> {
    let fields = record["h"].as_array().unwrap();
    fields.iter().map(|field| field.as_f64().unwrap()).collect()
}

fn boltzmann(beta: f64, g: &BTreeMap<i64, f64>) -> BTreeMap<i64, f64> {
    let ground = *g.first_key_value().unwrap().0;
    let weights = g
        .iter()
        .map(|(energy, count)| (*energy, count * exp(-beta * (energy - ground) as f64)));
    let sum: f64 = weights.clone().map(|(_, weight)| weight).sum();
    weights.map(|(energy, weight)| (energy, weight / sum)).collect()
}

/// Depths against the probabilities of the windows T <= 1, 1 < T <= 2, 2 < T <= 4, ...
pub fn windows_fit(what: &str, windows: &[f64], samples: &[Sample]) -> Verdict {
    let law = (0u8..).zip(windows.iter().copied()).collect();
    fit(what, &law, samples.iter().map(|sample| sample.depth))
}

/// Systems whose configurations are all enumerated.
fn small_systems() -> Vec<(&'static str, Law)> {
    let torus = |kind, extents: &[u64]| regular(kind, extents, "periodic");
    let tail = [[0, 1], [1, 2], [2, 3], [3, 0], [0, 2], [3, 4], [3, 4]];
    let (square, triangular, honeycomb) = (Kind::Hypercubic, Kind::Triangular, Kind::Honeycomb);
    vec![
        (
            "square 2x2 torus, double edges",
            ising(torus(square, &[2, 2]), "0.3", "0"),
        ),
        ("square 3x3 torus", ising(torus(square, &[3, 3]), "0.4", "0")),
        (
            "square 3x3 torus, critical",
            ising(torus(square, &[3, 3]), "beta_c", "0"),
        ),
        (
            "square 2x3, free, field",
            ising(regular(square, &[2, 3], "free"), "0.5", "3/10"),
        ),
        ("triangular 3x3 torus", ising(torus(triangular, &[3, 3]), "0.2", "-1/4")),
        (
            "triangular 3x3 torus, frustrated",
            ising(torus(triangular, &[3, 3]), "-0.1", "0"),
        ),
        ("honeycomb 2x2 torus", ising(torus(honeycomb, &[2, 2]), "0.5", "0")),
        (
            "honeycomb 2x2, free and minus",
            ising(regular(honeycomb, &[2, 2], "free minus"), "0.5", "1/5"),
        ),
        (
            "cubic 2x2x2 torus, double edges",
            ising(torus(square, &[2, 2, 2]), "0.12", "0"),
        ),
        (
            "hypercubic 2x2x2, free",
            ising(regular(square, &[2, 2, 2], "free"), "0.35", "0"),
        ),
        (
            "square 3x3, plus and minus",
            ising(regular(square, &[3, 3], "plus minus"), "0.45", "0"),
        ),
        (
            "triangular 2x4, periodic and plus",
            ising(regular(triangular, &[2, 4], "periodic plus"), "0.15", "0"),
        ),
        (
            "chain of 1 between two plus",
            ising(regular(square, &[1], "plus"), "0.4", "-1/7"),
        ),
        ("one site", ising(graph(1, &[], "", ""), "0.7", "1/2")),
        (
            "square 4x2, negative beta",
            ising(regular(square, &[4, 2], "free"), "-0.4", "1/10"),
        ),
        (
            "mixed signs, listed",
            ising(graph(5, &tail, "1 -1 1/2 2 -3/2 1 -1/3", "1/2 0 0 -1 1/3"), "0.35", "0"),
        ),
        (
            "mixed signs, common field",
            ising(graph(5, &tail, "1 -1 1/2 2 0 1 1/3", ""), "-0.3", "1/4"),
        ),
        (
            "fields listed",
            ising(graph(6, &cycle(6), "", "1 -1 0 1/2 0 -2"), "0.5", "0"),
        ),
        (
            "square 3x3 torus, held",
            held(
                &ising(torus(square, &[3, 3]), "0.4", "0"),
                &[(0, Spin::Plus), (1, Spin::Plus), (5, Spin::Minus)],
            ),
        ),
        ("gas on square 3x3, free", gas(regular(square, &[3, 3], "free"), "3/2")),
        ("gas on a 5-cycle", gas(graph(5, &cycle(5), "", ""), "2")),
        ("gas on triangular 3x3 torus", gas(torus(triangular, &[3, 3]), "1/2")),
        (
            "gas on honeycomb 2x2, plus and minus",
            gas(regular(honeycomb, &[2, 2], "plus minus"), "1"),
        ),
        (
            "gas on square 3x4, held",
            held(
                &gas(regular(square, &[3, 4], "periodic free"), "1"),
                &[(1, Spin::Plus), (7, Spin::Minus)],
            ),
        ),
    ]
}

/// 24 checks.
#[test]
fn configurations_are_as_probable_as_enumerated() {
    let systems = small_systems();
    assert_eq!(systems.len(), 24);
    for (name, law) in systems {
        configurations_fit(name, &law, &draw(&law, 40_000)).must_pass();
    }
}

/// 2 checks.
#[test]
fn a_sample_says_nothing_about_the_next() {
    for beta in ["0.2", "0.4"] {
        let law = ising(regular(Kind::Hypercubic, &[3, 3], "periodic"), beta, "0");
        succession(beta, &energies(&law, &[], &draw(&law, 40_000))).must_pass();
    }
}

/// Whole energy histograms and, at the same samples, mean energies against Kaufman's solution: 14 checks.
#[test]
fn energies_of_tori_are_those_of_kaufman_and_of_the_density_of_states() {
    let known = parse(TORUS);
    for (extent, beta, count) in [
        (2, "0.3", 20_000),
        (3, "beta_c", 20_000),
        (4, "0.2", 20_000),
        (4, "beta_c", 20_000),
        (6, "0.3", 10_000),
        (6, "0.4", 5_000),
        (8, "0.2", 5_000),
        (8, "0.4", 2_000),
    ] {
        let name = format!("{extent}x{extent} torus");
        let what = format!("{name} at {beta}");
        let law = ising(lattice_named(&name), beta, "0");
        let samples = draw(&law, count);
        let record = record(&known["density_of_states"], "lattice", &name);
        energies_fit(&what, &law, &[], beta, &levels(&record["g"]), &samples).must_pass();
        if extent > 3 {
            let torus = exact::kaufman(extent, extent, float(&beta.into())).unwrap();
            let expected = torus.energy_per_site * f64::from(extent * extent);
            mean(&what, expected, &energies(&law, &[], &samples)).must_pass();
        }
    }
}

pub fn levels(g: &Value) -> BTreeMap<i64, f64> {
    let levels = g.as_object().unwrap().iter();
    levels
        .map(|(energy, count)| (energy.parse().unwrap(), float(count)))
        .collect()
}

/// Energies of other lattices, graphs, signs and fields: 15 checks.
#[test]
fn energies_of_other_systems_follow_their_density_of_states() {
    let known = parse(LEVELS);
    let mut seen = 0;
    for (lattice, beta) in [
        ("triangular 4x4 torus", "0.2"),
        ("honeycomb 3x3 cells torus", "0.44"),
        ("2x2x2 torus (double bonds)", "0.1"),
        ("3x3x2 grid", "0.3"),
        ("2x3x4 torus (double bonds along the 2)", "0.1"),
        ("3x3x3 torus", "0.1"),
    ] {
        let record = record(&known["other_lattices"], "lattice", lattice);
        let law = ising(lattice_named(lattice), beta, "0");
        let samples = draw(&law, 10_000);
        energies_fit(lattice, &law, &[], beta, &levels(&record["g_E"]), &samples).must_pass();
        seen += 1;
    }
    for record in known["uniform_field"].as_array().unwrap() {
        let field = record["h"].to_string();
        let law = ising(lattice_named(record["graph"].as_str().unwrap()), "0.2", &field);
        let samples = draw(&law, 20_000);
        let what = record["graph"].as_str().unwrap();
        let fields = vec![field.parse().unwrap(); law.lattice().sites() as usize];
        energies_fit(what, &law, &fields, "0.2", &levels(&record["g_E"]), &samples).must_pass();
        seen += 1;
    }
    for record in known["signed_couplings"].as_array().unwrap() {
        // the bounds of a strongly frustrated system meet late: beta as large as the time allows
        let beta = if record["graph"] == "K10" { "0.1" } else { "0.15" };
        let law = ising(signed_graph(record), beta, "0");
        let what = format!("{} {}", record["graph"], record["kind"]);
        let samples = draw(&law, 10_000);
        energies_fit(&what, &law, &fields(record), beta, &levels(&record["g_E"]), &samples).must_pass();
        seen += 1;
    }
    assert_eq!(seen, 15);
}

/// Numbers of occupied sites against independence polynomials: 6 checks.
#[test]
fn occupied_sites_follow_the_independence_polynomial() {
    let known = parse(HARD_CORE);
    for (name, activity) in [
        ("3x3 grid", "1"),
        ("4x4 grid", "1/2"),
        ("4x4 torus", "1"),
        ("6x6 torus", "1/2"),
        ("4x4x2 grid", "1/2"),
        ("cycle 10", "2"),
    ] {
        let record = record(&known["graphs"], "graph", name);
        let law = gas(lattice_named(name), activity);
        let z = exact_float(activity);
        let weights: Vec<f64> = (0i32..)
            .zip(record["independence_polynomial"].as_array().unwrap())
            .map(|(occupied, count)| float(count) * z.powi(occupied))
            .collect();
        let sum: f64 = weights.iter().sum();
        let law_of_occupied = (0u64..).zip(weights.iter().map(|weight| weight / sum)).collect();
        let samples = draw(&law, 20_000);
        fit(
            name,
            &law_of_occupied,
            configurations(&samples).map(|sample| sample.count_plus()),
        )
        .must_pass();
    }
}

fn exact_float(text: &str) -> f64 {
    Exact::parse(text).unwrap().as_fraction().to_f64_fast()
}

/// The exact law of the coupling time, as an independent program gives it: 7 checks.
#[test]
fn depths_follow_the_law_of_the_coupling_time() {
    let known = parse(COUPLING_TIME);
    let mut seen = 0;
    for record in known["ising_heat_bath"].as_array().unwrap() {
        let edges: Vec<[u32; 2]> = serde_json::from_value(record["edges"].clone()).unwrap();
        let order: Vec<u32> = serde_json::from_value(record["site_order"].clone()).unwrap();
        let what = format!("{} at {}", record["graph"], record["beta"]);
        let beta = record["beta"].as_str().unwrap();
        let law = ising(graph(order.len() as u64, &edges, "", ""), beta, "0");
        let windows = windows_of(record);
        // a check of the helper below, in every order of sites
        let own = PairChain::ising(&edges, &vec![1.0; edges.len()], float(&record["beta"]), &order).windows(6);
        for (window, known) in own.iter().zip(&windows) {
            assert!((window - known).abs() < 1e-9, "{what}: {window} is not {known}");
        }
        // one record has the row-major order, which is not ours
        if order_of(&law) != order {
            assert_eq!(record["order"], "row-major");
            continue;
        }
        windows_fit(&what, &windows, &draw(&law, 20_000)).must_pass();
        seen += 1;
    }
    assert_eq!(seen, 7);
}

pub fn windows_of(record: &Value) -> Vec<f64> {
    let mut windows = Vec::new();
    let known = record["P_doubling_window_1_2_4"].as_object().unwrap();
    while let Some(window) = known.get(&(1u64 << windows.len()).to_string()) {
        windows.push(window.as_f64().unwrap());
    }
    assert_eq!(windows.len(), known.len());
    // what is left beyond the last window listed, at most 2e-9
    windows
}

/// All sites in the order in which a sweep decides them.
pub fn order_of(law: &Law) -> Vec<u32> {
    let map = RandomMap::new(law).unwrap();
    map.classes().iter().flat_map(|class| class.sites()).collect()
}

/// The same where bounds cross over, for which the helper computes the law: 4 checks.
#[test]
fn depths_follow_the_law_of_the_coupling_time_where_neighbours_repel() {
    let triangle = cycle(3);
    let torus: Vec<_> = regular(Kind::Hypercubic, &[3, 3], "periodic").edges().collect();
    // orders of sites by hand, after the greedy colouring of STREAM.md section 4
    let four_colours = [0, 4, 8, 1, 3, 2, 6, 5, 7];
    let cases: [(&str, Law, PairChain); 4] = [
        (
            "triangle",
            ising(graph(3, &triangle, "", ""), "-0.4", "0"),
            PairChain::ising(&triangle, &[1.0; 3], -0.4, &[0, 1, 2]),
        ),
        (
            "mixed 5-cycle",
            ising(graph(5, &cycle(5), "1 -1 2 1 1", ""), "0.4", "0"),
            PairChain::ising(&cycle(5), &[1.0, -1.0, 2.0, 1.0, 1.0], 0.4, &[0, 2, 1, 3, 4]),
        ),
        (
            "square 3x3 torus, negative beta",
            ising(graph(9, &torus, "", ""), "-0.2", "0"),
            PairChain::ising(&torus, &[1.0; 18], -0.2, &four_colours),
        ),
        (
            "gas on a 5-cycle",
            gas(graph(5, &cycle(5), "", ""), "2"),
            PairChain::gas(&cycle(5), 2.0, &[0, 2, 1, 3, 4]),
        ),
    ];
    for (name, law, chain) in cases {
        assert_eq!(order_of(&law), chain.order, "{name}");
        windows_fit(name, &chain.windows(20), &draw(&law, 20_000)).must_pass();
    }
}

/// The pair of bounds as a Markov chain: its law after each sweep, by plain sums over all pairs.
///
/// T has the law of the time at which bounds that start together at 0 and go forward meet (the maps
/// are independent and alike, so their order in time does not matter; Propp and Wilson 1996).
pub struct PairChain {
    order: Vec<u32>,
    /// The probability of +1 at a site, for each configuration of the others.
    plus: Vec<Vec<f64>>,
    neighbours: Vec<u32>,
}

impl PairChain {
    pub fn ising(edges: &[[u32; 2]], couplings: &[f64], beta: f64, order: &[u32]) -> Self {
        Self::new(edges, order, |site, configuration| {
            let mut field = 0.0;
            for ([a, b], coupling) in edges.iter().zip(couplings) {
                for (near, far) in [(a, b), (b, a)] {
                    if *near == site {
                        field += if configuration >> far & 1 == 1 {
                            *coupling
                        } else {
                            -coupling
                        };
                    }
                }
            }
            1.0 / (1.0 + exp(-2.0 * beta * field))
        })
    }

    fn gas(edges: &[[u32; 2]], activity: f64, order: &[u32]) -> Self {
        Self::new(edges, order, |site, configuration| {
            let mut ends = edges.iter().filter(|[a, b]| *a == site || *b == site);
            let blocked = ends.any(|[a, b]| configuration >> (a + b - site) & 1 == 1);
            if blocked { 0.0 } else { activity / (1.0 + activity) }
        })
    }

    fn new(edges: &[[u32; 2]], order: &[u32], plus: impl Fn(u32, u32) -> f64) -> Self {
        let sites = order.len() as u32;
        let mut neighbours = vec![0; order.len()];
        for [a, b] in edges {
            neighbours[*a as usize] |= 1 << b;
            neighbours[*b as usize] |= 1 << a;
        }
        let plus = (0..sites).map(|site| (0..1 << sites).map(|others| plus(site, others)).collect());
        Self {
            order: order.to_vec(),
            plus: plus.collect(),
            neighbours,
        }
    }

    /// The least and largest probability of +1 at `site` over all configurations between the bounds.
    fn range(&self, site: u32, lower: u32, upper: u32) -> (f64, f64) {
        let open = (lower ^ upper) & self.neighbours[site as usize];
        let (mut least, mut largest) = (f64::INFINITY, 0f64);
        // all subsets of the open sites
        let mut subset = open;
        loop {
            let plus = self.plus[site as usize][(lower & !open | subset) as usize];
            (least, largest) = (least.min(plus), largest.max(plus));
            if subset == 0 {
                return (least, largest);
            }
            subset = (subset - 1) & open;
        }
    }

    /// P(T <= 1), P(1 < T <= 2), P(2 < T <= 4) ... until less than 1e-12 is left, or `most` windows.
    pub fn windows(&self, most: usize) -> Vec<f64> {
        let all = (1u32 << self.order.len()) - 1;
        let mut law = BTreeMap::from([((0, all), 1.0)]);
        let (mut windows, mut sweeps, mut before) = (Vec::new(), 0u64, 0.0);
        for window in 0..most {
            while sweeps < 1 << window {
                for &site in &self.order {
                    let mut next = BTreeMap::new();
                    for ((lower, upper), probability) in law {
                        let (least, largest) = self.range(site, lower, upper);
                        let (bit, rest) = (1 << site, !(1 << site));
                        for (share, pair) in [
                            (least, (lower | bit, upper | bit)),
                            (largest - least, (lower & rest, upper | bit)),
                            (1.0 - largest, (lower & rest, upper & rest)),
                        ] {
                            if share > 0.0 {
                                *next.entry(pair).or_insert(0.0) += share * probability;
                            }
                        }
                    }
                    law = next;
                }
                sweeps += 1;
            }
            let met: f64 = law
                .iter()
                .filter(|((lower, upper), _)| lower == upper)
                .map(|(_, p)| p)
                .sum();
            windows.push(met - before);
            before = met;
            if met > 1.0 - 1e-12 {
                break;
            }
        }
        windows
    }
}
