//! Observables against sums over edges, one after the other.

use super::*;
use crate::lattice::{Boundary, Kind, Regular};
use crate::law::Beta;

/// Sites as a plain generator gives them (a linear congruence; Knuth 1997, from memory).
fn sites(count: u32, mut state: u64) -> Configuration {
    let next = |_| {
        state = state
            .wrapping_mul(6_364_136_223_846_793_005)
            .wrapping_add(1_442_695_040_888_963_407);
        state >> 63 == 1
    };
    Configuration::pack(&(0..count).map(next).collect::<Vec<_>>())
}

fn law(lattice: Lattice, coupling: Option<&str>) -> Law {
    let model = Model::Ising {
        beta: Beta::Number(Exact::one()),
        coupling: coupling.map(|text| Exact::parse(text).unwrap()),
        field: Some(Exact::zero()),
    };
    Law::new(model, lattice, None).unwrap()
}

/// `pair_sum` and `magnetisation` as they are defined.
fn plain(lattice: &Lattice, couplings: impl Fn(usize) -> RBig, sample: &Configuration) -> Vec<Exact> {
    let value = |site: u32| RBig::from(if sample.is_plus(site) { 1 } else { -1 });
    let pairs = lattice.edges().enumerate();
    let pairs = pairs.map(|(edge, [a, b])| couplings(edge) * value(a) * value(b));
    let sum =
        |terms: &mut dyn Iterator<Item = RBig>| Exact::from_fraction(terms.fold(RBig::ZERO, |sum, term| sum + term));
    vec![sum(&mut pairs.into_iter()), sum(&mut (0..sample.sites()).map(value))]
}

fn check(lattice: &Lattice, by_words: bool) {
    let third = Exact::parse("-2/3").unwrap();
    let observables = Observables::new(&law(lattice.clone(), Some("-2/3")));
    match &observables.pairs {
        Pairs::Common(_, edges) => assert_eq!(matches!(edges, Edges::Shifts { .. }), by_words, "{lattice}"),
        _ => panic!("one coupling"),
    }
    for seed in 0..5 {
        let sample = sites(lattice.sites(), seed);
        let expected = plain(lattice, |_| third.as_fraction().clone(), &sample);
        assert_eq!(observables.measure(&sample), expected, "{lattice}, {seed}");
    }
}

/// Extents about a word, extents of 1 and 2 with their parallel edges, all kinds and boundaries.
#[test]
fn pairs_of_regular_lattices_are_counted_as_by_the_list() {
    let words = ["periodic", "free", "plus", "minus"].map(|word| Boundary::from_word(word).unwrap());
    let shapes: [(Kind, &[&[u64]]); 3] = [
        (
            Kind::Hypercubic,
            &[
                &[1],
                &[2],
                &[63],
                &[64],
                &[65],
                &[129],
                &[2, 2],
                &[8, 8],
                &[5, 64],
                &[66, 3],
                &[2, 2, 2],
                &[7, 2, 5],
                &[4, 3, 2, 8],
            ],
        ),
        (
            Kind::Triangular,
            &[&[1, 1], &[2, 2], &[3, 2], &[8, 8], &[5, 65], &[64, 4]],
        ),
        (
            Kind::Honeycomb,
            &[&[1, 1], &[2, 2], &[3, 2], &[4, 8], &[5, 33], &[32, 3]],
        ),
    ];
    let mut seen = 0;
    for (kind, extents) in shapes {
        for extents in extents {
            for first in words {
                for second in words {
                    let boundary = [first, second].into_iter().cycle().take(extents.len()).collect();
                    if let Ok(regular) = Regular::new(kind, extents.to_vec(), boundary) {
                        check(&Lattice::Regular(regular), true);
                        seen += 1;
                    }
                }
            }
        }
    }
    assert!(seen > 350, "{seen}");
}

#[test]
fn pairs_of_graphs_are_counted_as_by_the_list() {
    let graph = |sites: u64, edges: Vec<[u32; 2]>, couplings| {
        Lattice::Graph(Arc::new(Graph::new(sites, edges, couplings, None).unwrap()))
    };
    // a ring with chords of one length, and parallel edges either way: few differences
    let ring: Vec<_> = (0..200)
        .flat_map(|site| [[site, (site + 1) % 200], [(site + 77) % 200, site]])
        .collect();
    check(&graph(200, [ring.clone(), ring[..50].to_vec()].concat(), None), true);
    // a star: a difference for each edge; no edge at all
    let star = (1..200).map(|site| [site, 0]).collect();
    check(&graph(200, star, None), false);
    check(&graph(3, vec![], None), true);
    // couplings listed edge by edge
    let numbers = ["1", "-1/2", "3/7"].map(|text| Exact::parse(text).unwrap());
    let couplings: Vec<Exact> = numbers.iter().cycle().take(ring.len()).cloned().collect();
    let lattice = graph(200, ring, Some(couplings));
    let sample = sites(200, 7);
    let expected = plain(&lattice, |edge| numbers[edge % 3].as_fraction().clone(), &sample);
    assert_eq!(Observables::new(&law(lattice, None)).measure(&sample), expected);
}
