//! Known answers of `pastproof stream 1`, made by an independent program (`tests/vectors/README.md`).
//!
//! The bond cases of the files belong to laws that this version does not draw; they are counted,
//! so that a case cannot vanish unseen.

use std::sync::Arc;

use pastproof::engine::coupling;
use pastproof::engine::crew::{Choice, Crew, Settings};
use pastproof::engine::plain::Plain;
use pastproof::engine::word::Width;
use pastproof::engine::{Engine, Stop};
use pastproof::lattice::{Boundary, Graph, Kind, Lattice, Regular, Spin};
use pastproof::law::{Beta, Digits, Held, Law, Model};
use pastproof::number::Exact;
use pastproof::observable::Observables;
use pastproof::quantity::{Digest, SampleIndex, Seed};
use pastproof::random_map::RandomMap;
use pastproof::sample::Outcome;
use pastproof::stream::Address;
use serde_json::Value;

pub const STREAM: &str = include_str!("../vectors/stream1.json");
const STRIPS: &str = include_str!("../vectors/stream1_strips.json");

fn number(value: &Value) -> Exact {
    Exact::parse(value.as_str().unwrap()).unwrap()
}

fn numbers(value: &Value) -> Option<Vec<Exact>> {
    value.as_array().map(|list| list.iter().map(number).collect())
}

fn lattice(case: &Value) -> Lattice {
    let lattice = &case["lattice"];
    if lattice["kind"] == "graph" {
        let edges = serde_json::from_value(lattice["edges"].clone()).unwrap();
        let sites = lattice["sites"].as_u64().unwrap();
        let graph = Graph::new(
            sites,
            edges,
            numbers(&case["edge_couplings"]),
            numbers(&case["site_fields"]),
        );
        return Lattice::Graph(Arc::new(graph.unwrap()));
    }
    let extents: Vec<u64> = serde_json::from_value(lattice["extents"].clone()).unwrap();
    let words = match &lattice["boundary"] {
        Value::Null => vec!["periodic"; extents.len()],
        Value::String(word) => vec![word.as_str(); extents.len()],
        list => list
            .as_array()
            .unwrap()
            .iter()
            .map(|word| word.as_str().unwrap())
            .collect(),
    };
    let boundary = words
        .into_iter()
        .map(|word| Boundary::from_word(word).unwrap())
        .collect();
    let kind = Kind::from_word(lattice["kind"].as_str().unwrap()).unwrap();
    Lattice::Regular(Regular::new(kind, extents, boundary).unwrap())
}

/// The law of a case, or `None` for a law that this version does not draw.
fn law(case: &Value) -> Option<Law> {
    let or = |name: &str, default: &str| match &case[name] {
        Value::Null => Exact::parse(default).unwrap(),
        value => number(value),
    };
    let model = match case["law"].as_str().unwrap() {
        "ising" => Model::Ising {
            beta: Beta::Number(number(&case["beta"])),
            coupling: case["edge_couplings"].is_null().then(|| or("coupling", "1")),
            field: case["site_fields"].is_null().then(|| or("field", "0")),
        },
        "lattice gas" => Model::LatticeGas {
            activity: number(&case["activity"]),
        },
        _ => return None,
    };
    let held = case["held"].as_array().map(|list| {
        let pair = |pair: &Value| {
            let site = u32::try_from(pair[0].as_u64().unwrap()).unwrap();
            (site, Spin::from_value(pair[1].as_i64().unwrap()).unwrap())
        };
        Arc::new(Held::new(list.iter().map(pair).collect()).unwrap())
    });
    Some(Law::new(model, lattice(case), held).unwrap())
}

fn digest(value: &Value) -> Digest {
    Digest::parse(value.as_str().unwrap()).unwrap()
}

/// Checks every sample of a case on every engine at every width, from several first depths.
fn check(case: &Value, law: &Law, first_depths: &[u8]) {
    let map = RandomMap::new(law).unwrap();
    check_engine(case, law, &mut Plain::new(&map), first_depths);
    for width in Width::here() {
        for engine in [Choice::Compact, Choice::Sliced] {
            let settings = Settings {
                engine,
                width: Some(width),
                ..Settings::default()
            };
            check_engine(case, law, Crew::new(&map, &settings).engine().as_mut(), first_depths);
        }
    }
}

fn check_engine(case: &Value, law: &Law, engine: &mut dyn Engine, first_depths: &[u8]) {
    let name = case["name"].as_str().unwrap();
    let observables = Observables::new(law);
    assert_eq!(
        u64::from(law.lattice().sites()),
        case["sites"].as_u64().unwrap(),
        "{name}"
    );
    assert_eq!(
        law.lattice().edges().count() as u64,
        case["edge_count"].as_u64().unwrap(),
        "{name}"
    );
    if let Some(digits) = case["digits"].as_str() {
        assert_eq!(
            law.digits(),
            if digits == "plain" {
                Digits::Plain
            } else {
                Digits::Sliced
            },
            "{name}"
        );
    }
    let limit = case["depth_limit"]
        .as_u64()
        .map_or(30, |limit| u8::try_from(limit).unwrap());
    for sample in case["samples"].as_array().unwrap() {
        let index = sample["index"].as_u64().unwrap();
        let address = Address {
            seed: Seed(digest(&case["seed"])),
            key: digest(&case["key"]),
            sample: SampleIndex(index),
        };
        for first_depth in first_depths {
            let drawn = coupling::draw(engine, &address, *first_depth, limit, &Stop::default()).unwrap();
            let at = format!("{name}, sample {index} from depth {first_depth}");
            assert_eq!(
                drawn.depth,
                u8::try_from(sample["depth"].as_u64().unwrap()).unwrap(),
                "{at}"
            );
            assert_eq!(drawn.merged_at, sample["merged_at"].as_u64().unwrap(), "{at}");
            assert_eq!(drawn.hash(), digest(&sample["hash"]), "{at}");
            let Outcome::Exact(configuration) = &drawn.outcome else {
                assert_eq!(sample["unfinished"], true, "{at}");
                continue;
            };
            assert_eq!(sample["unfinished"], Value::Null, "{at}");
            assert_eq!(drawn.words, sample["words_of_last_attempt"].as_u64().unwrap(), "{at}");
            if let Some(bytes) = sample["bytes"].as_str() {
                let hex: String = configuration
                    .as_bytes()
                    .iter()
                    .map(|byte| format!("{byte:02x}"))
                    .collect();
                assert_eq!(hex, bytes, "{at}");
            }
            for (name, value) in observables.names().iter().zip(observables.measure(configuration)) {
                let known = &sample[*name];
                let known = known.as_str().map_or_else(|| known.to_string(), str::to_string);
                assert_eq!(value.to_string(), known, "{at}: {name}");
            }
        }
    }
}

fn check_all(text: &str, first_depths: &[u8]) -> (usize, usize) {
    let vectors: Value = serde_json::from_str(text).unwrap();
    let (mut drawn, mut left) = (0, 0);
    for case in vectors["cases"].as_array().unwrap() {
        match law(case) {
            Some(law) => {
                check(case, &law, first_depths);
                drawn += 1;
            }
            None => left += 1,
        }
    }
    (drawn, left)
}

#[test]
fn words_are_the_known_ones() {
    let vectors: Value = serde_json::from_str(STREAM).unwrap();
    let runs = vectors["words"].as_array().unwrap();
    for run in runs {
        let field = |name: &str| run[name].as_u64().unwrap();
        let sample = SampleIndex(run["sample"].as_str().unwrap().parse().unwrap());
        let address = Address {
            seed: Seed(digest(&vectors["seed"])),
            key: digest(&vectors["words_key"]),
            sample,
        };
        let mut words = address.words(
            u32::try_from(field("epoch")).unwrap(),
            u32::try_from(field("strip")).unwrap(),
        );
        for known in run["words"].as_array().unwrap() {
            assert_eq!(format!("{:016x}", words.next_word()), known.as_str().unwrap());
        }
    }
    assert_eq!(runs.len(), 4);
}

#[test]
fn samples_are_the_known_ones_from_every_first_depth() {
    assert_eq!(check_all(STREAM, &[0, 5, 12]), (38, 19));
}

#[test]
fn samples_of_several_strips_are_the_known_ones() {
    assert_eq!(check_all(STRIPS, &[0, 3]), (1, 1));
}
