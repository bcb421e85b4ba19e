//! Laws in few words, and samples of them as numbers.

use std::sync::Arc;

use pastproof::engine::Engine;
use pastproof::engine::Stop;
use pastproof::engine::coupling;
use pastproof::engine::crew::{Crew, Settings};
use pastproof::lattice::{Boundary, Graph, Kind, Lattice, Regular, Spin};
use pastproof::law::{Beta, Critical, Held, Law, Model};
use pastproof::number::Exact;
use pastproof::quantity::{Digest, SampleIndex, Seed};
use pastproof::random_map::RandomMap;
use pastproof::sample::{Configuration, Sample};
use pastproof::stream::Address;
use rayon::prelude::*;

pub fn exact(text: &str) -> Exact {
    Exact::parse(text).unwrap()
}

fn list(text: &str) -> Option<Vec<Exact>> {
    (!text.is_empty()).then(|| text.split(' ').map(exact).collect())
}

/// A regular lattice; one boundary word for all axes, or one an axis.
pub fn regular(kind: Kind, extents: &[u64], words: &str) -> Lattice {
    let words = words.split(' ').map(|word| Boundary::from_word(word).unwrap());
    let boundary = words.cycle().take(extents.len()).collect();
    Lattice::Regular(Regular::new(kind, extents.to_vec(), boundary).unwrap())
}

/// A graph; couplings and fields as texts, empty for none.
pub fn graph(sites: u64, edges: &[[u32; 2]], couplings: &str, fields: &str) -> Lattice {
    let graph = Graph::new(sites, edges.to_vec(), list(couplings), list(fields));
    Lattice::Graph(Arc::new(graph.unwrap()))
}

pub fn cycle(sites: u32) -> Vec<[u32; 2]> {
    (0..sites).map(|site| [site, (site + 1) % sites]).collect()
}

/// An Ising law: coupling 1 and the field, except where the lattice lists them; beta "beta_c" is the square one.
pub fn ising(lattice: Lattice, beta: &str, field: &str) -> Law {
    let graph = lattice.graph();
    let coupling = graph.is_none_or(|graph| graph.couplings().is_none()).then(Exact::one);
    let field = graph.is_none_or(|graph| graph.fields().is_none()).then(|| exact(field));
    let beta = match beta {
        "beta_c" => Beta::Critical(Critical::Square),
        number => Beta::Number(exact(number)),
    };
    Law::new(Model::Ising { beta, coupling, field }, lattice, None).unwrap()
}

pub fn gas(lattice: Lattice, activity: &str) -> Law {
    let activity = exact(activity);
    Law::new(Model::LatticeGas { activity }, lattice, None).unwrap()
}

pub fn held(law: &Law, sites: &[(u32, Spin)]) -> Law {
    let held = Held::new(sites.to_vec()).unwrap();
    Law::new(law.model().clone(), law.lattice().clone(), Some(Arc::new(held))).unwrap()
}

pub fn address(law: &Law, sample: u64) -> Address {
    Address {
        seed: Seed(Digest::of(b"Larkmoor, samples to judge")),
        key: law.key().unwrap(),
        sample: SampleIndex(sample),
    }
}

/// The first `count` samples that an engine gives; `engine` makes one for each thread.
pub fn draw_with<E: Engine>(engine: impl Fn() -> E + Sync, law: &Law, count: u64) -> Vec<Sample> {
    let address = address(law, 0);
    let draw = |engine: &mut E, sample| {
        let address = Address {
            sample: SampleIndex(sample),
            ..address
        };
        let sample = coupling::draw(engine, &address, 0, 20, &Stop::default()).unwrap();
        assert!(sample.exact().is_some(), "{}: unfinished at depth 20", law.lattice());
        sample
    };
    (0..count).into_par_iter().map_init(&engine, draw).collect()
}

/// The first `count` samples that draw and replay give.
pub fn draw(law: &Law, count: u64) -> Vec<Sample> {
    let map = RandomMap::new(law).unwrap();
    let settings = Settings {
        memory: 64 << 20,
        ..Settings::default()
    };
    let crew = Crew::new(&map, &settings);
    draw_with(|| crew.engine(), law, count)
}

pub fn configurations(samples: &[Sample]) -> impl Iterator<Item = &Configuration> {
    samples.iter().map(|sample| sample.exact().unwrap())
}

/// A small configuration as the number whose bit i is site i.
pub fn number(configuration: &Configuration) -> u32 {
    let bytes = configuration.as_bytes().iter().rev();
    bytes.fold(0, |number, byte| number << 8 | u32::from(*byte))
}
