//! Deterministic comparisons with values from outside (`tests/values/README.md`), and how to read them.

use pastproof::exact::{self, Enumeration};
use pastproof::lattice::{Boundary, Kind, Lattice, Regular};
use pastproof::law::{Beta, Critical};
use pastproof::quantity::{Digest, SampleIndex, Seed};
use pastproof::stream::Address;
use pastproof::threshold;
use serde_json::Value;

use crate::systems::{cycle, exact, gas, graph, ising};

pub const TORUS: &str = include_str!("../values/torus.json");
pub const LEVELS: &str = include_str!("../values/levels.json");
pub const HARD_CORE: &str = include_str!("../values/hard_core.json");
pub const COUPLING_TIME: &str = include_str!("../values/coupling_time.json");
const THRESHOLDS: &str = include_str!("../values/thresholds.json");
const WORDS: &str = include_str!("../values/numpy_pcg64dxsm.json");

pub fn parse(text: &str) -> Value {
    serde_json::from_str(text).unwrap()
}

/// The record of a list that has this text.
pub fn record<'a>(list: &'a Value, key: &str, text: &str) -> &'a Value {
    let mut found = list.as_array().unwrap().iter().filter(|record| record[key] == text);
    let record = found.next().unwrap_or_else(|| panic!("no record {text}"));
    assert!(found.next().is_none(), "two records {text}");
    record
}

/// A number written as text.
pub fn float(value: &Value) -> f64 {
    match value.as_str().unwrap() {
        "beta_c" => 0.440_686_793_509_771_5,
        text => text.parse().unwrap(),
    }
}

/// The lattice that a record names: "4x6 torus", "3x3x2 grid", "triangular 3x3 torus", "cycle 10" ...
pub fn lattice_named(name: &str) -> Lattice {
    if let Some(sites) = name.strip_prefix("cycle ") {
        let sites = sites.parse().unwrap();
        return graph(u64::from(sites), &cycle(sites), "", "");
    }
    let kind = if name.starts_with("triangular") {
        Kind::Triangular
    } else if name.starts_with("honeycomb") {
        Kind::Honeycomb
    } else {
        Kind::Hypercubic
    };
    let word = if name.contains("torus") {
        Boundary::Periodic
    } else {
        Boundary::Free
    };
    let mut words = name.split(' ');
    let extents = words.find(|word| word.starts_with(|letter: char| letter.is_ascii_digit()));
    let extents: Vec<u64> = extents
        .unwrap()
        .split('x')
        .map(|extent| extent.parse().unwrap())
        .collect();
    let boundary = vec![word; extents.len()];
    Lattice::Regular(Regular::new(kind, extents, boundary).unwrap())
}

/// The graph of a record with edges [a, b, J] and fields.
pub fn signed_graph(record: &Value) -> Lattice {
    let triples: Vec<(u32, u32, i64)> = serde_json::from_value(record["edges"].clone()).unwrap();
    let edges: Vec<[u32; 2]> = triples.iter().map(|(a, b, _)| [*a, *b]).collect();
    let couplings: Vec<String> = triples.iter().map(|(_, _, coupling)| coupling.to_string()).collect();
    let fields: Vec<String> = record["h"].as_array().unwrap().iter().map(Value::to_string).collect();
    graph(fields.len() as u64, &edges, &couplings.join(" "), &fields.join(" "))
}

fn close(what: &str, found: f64, known: f64, relative: f64) {
    assert!(
        (found - known).abs() <= relative * known.abs(),
        "{what}: found {found:?}, known {known:?}"
    );
}

/// `thresholds.json`: floor(2^128/(1 + exp(-2 beta f))) and critical points to 40 digits.
#[test]
fn thresholds_and_critical_points_are_the_known_ones() {
    let known = parse(THRESHOLDS);
    let mut seen = 0;
    for row in known["heat_bath"].as_array().unwrap() {
        let beta = match row["beta"].as_str().unwrap() {
            "beta_c" => Beta::Critical(Critical::Square),
            text => Beta::Number(exact(text)),
        };
        for (field, theta) in row["f128"].as_object().unwrap() {
            let found = threshold::ising(&beta, &exact(field)).to_string();
            assert_eq!(found, theta.as_str().unwrap(), "beta {beta}, field {field}");
            seen += 1;
        }
    }
    assert_eq!(seen, 6 * 13);
    let points = known["critical_points"].as_array().unwrap();
    let kinds = [Critical::Square, Critical::Triangular, Critical::Honeycomb];
    assert_eq!(points.len(), kinds.len());
    for (point, critical) in points.iter().zip(kinds) {
        // 40 rounded digits there, cut digits here
        let (value, found) = (
            point["value"].as_str().unwrap(),
            threshold::critical_decimal(critical, 45),
        );
        assert_eq!(found[..40], value[..40], "{}", point["name"]);
    }
}

/// `numpy_pcg64dxsm.json`: words of NumPy's PCG64DXSM at addresses.
#[test]
fn words_are_those_of_numpy() {
    let known = parse(WORDS);
    let digest = |name: &str| Digest::parse(known[name].as_str().unwrap()).unwrap();
    let runs = known["runs"].as_array().unwrap();
    for run in runs {
        let address = Address {
            seed: Seed(digest("seed")),
            key: digest("key"),
            sample: SampleIndex(run["sample"].as_str().unwrap().parse().unwrap()),
        };
        let place = |name: &str| u32::try_from(run[name].as_u64().unwrap()).unwrap();
        let mut words = address.words(place("epoch"), place("strip"));
        let list = run["words"].as_array().unwrap();
        for word in list {
            assert_eq!(format!("{:016x}", words.next_word()), word.as_str().unwrap(), "{run}");
        }
        assert_eq!(words.drawn(), list.len() as u64);
    }
    assert_eq!(runs.len(), 5);
}

/// `torus.json`: Kaufman's solution, 4x4 to 64x64, six temperatures each.
#[test]
fn kaufman_gives_the_known_energies() {
    let known = parse(TORUS);
    let records = known["kaufman"].as_array().unwrap();
    for record in records {
        let name = record["lattice"].as_str().unwrap();
        let (rows, columns) = name.strip_suffix(" torus").unwrap().split_once('x').unwrap();
        let what = format!("{name} at {}", record["beta"]);
        let torus = exact::kaufman(rows.parse().unwrap(), columns.parse().unwrap(), float(&record["beta"])).unwrap();
        close(&what, torus.ln_partition, float(&record["lnZ"]), 1e-13);
        close(&what, torus.energy_per_site, float(&record["e_per_site"]), 1e-11);
    }
    assert_eq!(records.len(), 48);
}

/// Enumeration against every density of states, ln Z and energy of a system that is small enough.
#[test]
fn enumeration_gives_the_known_states_and_energies() {
    let known = parse(LEVELS);
    let torus = parse(TORUS);
    let mut seen = 0;
    let mut check = |what: &str, lattice: &Lattice, field: &str, g: Option<&Value>, values: &Value| {
        for value in values.as_array().unwrap() {
            let beta = value["beta"].as_str().unwrap();
            // the critical point of the square lattice, asked of other lattices too, is only a number to them
            let beta = if beta == "beta_c" {
                "0.44068679350977151262"
            } else {
                beta
            };
            let exact = Enumeration::new(&ising(lattice.clone(), beta, field)).unwrap();
            let sites = f64::from(exact.sites());
            close(what, exact.ln_partition(), float(&value["lnZ"]), 1e-13);
            close(what, exact.mean_energy().unwrap() / sites, float(&value["e"]), 1e-12);
            if let Some(g) = g {
                let states = exact.states();
                let found = states
                    .iter()
                    .map(|(energy, count)| (energy.to_string(), Value::from(count.to_string())));
                assert_eq!(&Value::from_iter(found), g, "{what}");
            }
            seen += 1;
        }
    };
    for record in known["energy_and_magnetisation"].as_array().unwrap() {
        let name = record["graph"].as_str().unwrap();
        let edges: Vec<[u32; 2]> = serde_json::from_value(record["edges"].clone()).unwrap();
        let sites = record["n"].as_u64().unwrap();
        if name.contains("torus") || name.contains("grid") {
            assert!(
                lattice_named(name).edges().eq(edges.clone()),
                "{name}: edges in their order"
            );
        }
        check(name, &graph(sites, &edges, "", ""), "0", None, &record["values"]);
        // all pairs of energy and magnetisation, at infinite temperature
        let exact = Enumeration::new(&ising(graph(sites, &edges, "", ""), "0", "0")).unwrap();
        let pair = |configuration: u32| {
            let pairs: i64 = edges
                .iter()
                .map(|[a, b]| 1 - 2 * i64::from((configuration >> a ^ configuration >> b) & 1))
                .sum();
            format!(
                "{},{}",
                -pairs,
                2 * i64::from(configuration.count_ones()) - sites as i64
            )
        };
        let states = exact.distribution(pair);
        let known = record["g_E_M"].as_object().unwrap();
        assert_eq!(states.len(), known.len(), "{name}");
        for (pair, count) in known {
            close(name, states[pair] * 2f64.powi(sites as i32), float(count), 1e-12);
        }
    }
    for record in known["uniform_field"].as_array().unwrap() {
        let (name, field) = (record["graph"].as_str().unwrap(), record["h"].to_string());
        check(
            name,
            &lattice_named(name),
            &field,
            Some(&record["g_E"]),
            &record["values"],
        );
    }
    for record in known["signed_couplings"].as_array().unwrap() {
        let name = record["graph"].as_str().unwrap();
        check(
            name,
            &signed_graph(record),
            "0",
            Some(&record["g_E"]),
            &record["values"],
        );
    }
    for record in known["other_lattices"].as_array().unwrap() {
        let name = record["lattice"].as_str().unwrap();
        if record["n"].as_u64().unwrap() <= 18 {
            check(name, &lattice_named(name), "0", Some(&record["g_E"]), &record["values"]);
        }
    }
    assert_eq!(seen, 8 * 4 + 2 * 2 + 7 * 3 + 6 * 6);
    for name in ["2x2 torus", "3x3 torus", "4x4 torus"] {
        let record = record(&torus["density_of_states"], "lattice", name);
        let states = Enumeration::new(&ising(lattice_named(name), "1", "0"))
            .unwrap()
            .states();
        let found = states
            .iter()
            .map(|(energy, count)| (energy.to_string(), Value::from(count.to_string())));
        assert_eq!(&Value::from_iter(found), &record["g"], "{name}");
    }
}

/// `hard_core.json`: numbers of independent sets and densities.
#[test]
fn enumeration_gives_the_known_independent_sets() {
    let known = parse(HARD_CORE);
    let mut seen = 0;
    for record in known["graphs"].as_array().unwrap() {
        let name = record["graph"].as_str().unwrap();
        if name == "petersen" || record["n"].as_u64().unwrap() > 16 {
            continue;
        }
        for value in record["values"].as_array().unwrap() {
            let activity = value["fugacity"].as_str().unwrap();
            let exact = Enumeration::new(&gas(lattice_named(name), activity)).unwrap();
            let occupied = exact.distribution(u32::count_ones);
            let mean: f64 = occupied
                .iter()
                .map(|(count, probability)| f64::from(*count) * probability)
                .sum();
            let density = float(&value["density"]["decimal"]);
            close(name, mean / f64::from(exact.sites()), density, 1e-13);
            let z = crate::systems::exact(activity).as_fraction().to_f64_fast();
            let polynomial = record["independence_polynomial"].as_array().unwrap();
            assert_eq!(occupied.len(), polynomial.len(), "{name}");
            for ((count, probability), sets) in occupied.iter().zip(polynomial) {
                let weight = float(sets) * z.powi(*count as i32);
                close(
                    name,
                    probability * crate::statistics::exp(exact.ln_partition()),
                    weight,
                    1e-12,
                );
            }
            seen += 1;
        }
    }
    assert_eq!(seen, 4 * 4);
}
