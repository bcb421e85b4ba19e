//! Lattices against `STREAM.md` §9: counts by hand, and a second listing of every edge.

use super::*;
use crate::number::Exact;

fn regular(kind: Kind, extents: &[u64], boundary: &[Boundary]) -> Result<Regular> {
    Regular::new(kind, extents.to_vec(), boundary.to_vec())
}

fn edges(kind: Kind, extents: &[u64], boundary: &[Boundary]) -> Vec<[u32; 2]> {
    regular(kind, extents, boundary).unwrap().edges().collect()
}

/// `STREAM.md` §9: a periodic axis of extent 2 has two parallel edges; counts by hand.
#[test]
fn edges_are_counted_and_ordered_as_defined() {
    use Boundary::{Free, Minus, Periodic, Plus};
    assert_eq!(
        edges(Kind::Hypercubic, &[2, 2], &[Periodic, Periodic]),
        [[0, 2], [0, 1], [1, 3], [1, 0], [2, 0], [2, 3], [3, 1], [3, 2]]
    );
    let lattice =
        |kind, extents: &[u64], boundary: &[Boundary]| Lattice::Regular(regular(kind, extents, boundary).unwrap());
    let chain = lattice(Kind::Hypercubic, &[1], &[Plus]);
    assert_eq!(chain.edges().count(), 0);
    assert!(chain.frozen().eq([(0, Spin::Plus), (0, Spin::Plus)]));
    // tests/vectors/stream1.json, triangular 4x4 minus and plus
    let diagonal = lattice(Kind::Triangular, &[4, 4], &[Minus, Plus]);
    let frozen = |wanted| diagonal.frozen().filter(|(_, spin)| *spin == wanted).count();
    assert_eq!(
        (diagonal.edges().count(), frozen(Spin::Minus), frozen(Spin::Plus)),
        (33, 16, 14)
    );
    // STREAM.md §9 by hand: A of cell (0, 0) with B of the same cell, of (0, 2), of (1, 0)
    let comb = edges(Kind::Honeycomb, &[2, 3], &[Periodic, Periodic]);
    assert_eq!(comb[..3], [[0, 1], [0, 5], [0, 7]]);
    let triangles = edges(Kind::Triangular, &[3, 3], &[Periodic, Periodic]);
    assert_eq!(triangles[..3], [[0, 3], [0, 1], [0, 4]]);
    // tests/vectors/stream1.json, honeycomb 3x4 free and plus
    let comb = lattice(Kind::Honeycomb, &[3, 4], &[Free, Plus]);
    assert_eq!((comb.edges().count(), comb.frozen().count()), (29, 6));
}

/// `STREAM.md` §9 once more, by coordinates and as a list: edges in order, and every frozen neighbour.
fn listed(kind: Kind, extents: &[u64], boundary: &[Boundary]) -> (Vec<[u32; 2]>, Vec<(u32, Spin)>) {
    let axes = extents.len();
    let (mut edges, mut frozen) = (Vec::new(), Vec::new());
    for cell in 0..extents.iter().product() {
        let mut place = vec![0; axes];
        let mut rest = cell;
        for axis in (0..axes).rev() {
            place[axis] = i64::try_from(rest % extents[axis]).unwrap();
            rest /= extents[axis];
        }
        let unit = |axis: usize, by: i64| {
            (0..axes)
                .map(|other| if other == axis { by } else { 0 })
                .collect::<Vec<_>>()
        };
        let moves: Vec<Vec<i64>> = match kind {
            Kind::Hypercubic => (0..axes).map(|axis| unit(axis, 1)).collect(),
            Kind::Triangular => vec![vec![1, 0], vec![0, 1], vec![1, 1]],
            Kind::Honeycomb => vec![vec![0, 0], vec![0, -1], vec![-1, 0]],
        };
        for by in moves {
            let mut word = None;
            let mut target = 0;
            for axis in 0..axes {
                let extent = i64::try_from(extents[axis]).unwrap();
                let at = place[axis] + by[axis];
                if (at < 0 || at == extent) && boundary[axis] != Boundary::Periodic {
                    word = word.or(Some(boundary[axis]));
                }
                target = target * extents[axis] + at.rem_euclid(extent).unsigned_abs();
            }
            let ends = match kind {
                Kind::Honeycomb => [2 * cell, 2 * target + 1],
                _ => [cell, target],
            };
            let [from, to] = ends.map(|site| u32::try_from(site).unwrap());
            match word {
                None => edges.push([from, to]),
                Some(Boundary::Plus) => frozen.extend([(from, Spin::Plus), (to, Spin::Plus)]),
                Some(Boundary::Minus) => frozen.extend([(from, Spin::Minus), (to, Spin::Minus)]),
                Some(_) => {}
            }
        }
    }
    (edges, frozen)
}

/// Calls `check` for every boundary of every kind and a range of extents, 1 and 2 among them.
fn each_small_lattice(mut check: impl FnMut(Kind, &[u64], &[Boundary])) {
    let words = BOUNDARY_WORDS.map(|(_, word)| word);
    let shapes: [(Kind, &[&[u64]]); 3] = [
        (
            Kind::Hypercubic,
            &[
                &[1],
                &[2],
                &[3],
                &[7],
                &[1, 1],
                &[1, 4],
                &[2, 2],
                &[2, 3],
                &[5, 4],
                &[2, 1, 3],
                &[3, 4, 2],
                &[2, 2, 3, 1],
            ],
        ),
        (
            Kind::Triangular,
            &[&[1, 1], &[1, 2], &[2, 1], &[2, 2], &[2, 3], &[3, 1], &[4, 5]],
        ),
        (
            Kind::Honeycomb,
            &[&[1, 1], &[1, 2], &[2, 1], &[2, 2], &[2, 3], &[3, 1], &[4, 5]],
        ),
    ];
    for (kind, extents) in shapes {
        for extents in extents {
            for number in 0..4usize.pow(u32::try_from(extents.len()).unwrap()) {
                let boundary: Vec<_> = (0..extents.len()).map(|axis| words[number >> (2 * axis) & 3]).collect();
                check(kind, extents, &boundary);
            }
        }
    }
}

#[test]
fn edges_and_frozen_neighbours_are_those_of_the_listing() {
    let mut seen = 0;
    each_small_lattice(|kind, extents, boundary| {
        let Ok(regular) = regular(kind, extents, boundary) else {
            return;
        };
        let lattice = Lattice::Regular(regular);
        let (edges, mut frozen) = listed(kind, extents, boundary);
        frozen.sort_unstable();
        assert!(lattice.edges().eq(edges), "{lattice}");
        let mut found: Vec<_> = lattice.frozen().collect();
        found.sort_unstable();
        assert_eq!(found, frozen, "{lattice}");
        seen += 1;
    });
    // four words an axis, three where the extent is 1
    assert_eq!(seen, 574);
}

#[test]
fn each_site_sees_its_edges_and_its_frozen_neighbours() {
    each_small_lattice(|kind, extents, boundary| {
        let Ok(regular) = regular(kind, extents, boundary) else {
            return;
        };
        let (edges, frozen) = listed(kind, extents, boundary);
        let mut sees = vec![Vec::new(); regular.sites() as usize];
        for [from, to] in edges {
            sees[from as usize].push(Neighbour::Site(to));
            sees[to as usize].push(Neighbour::Site(from));
        }
        for (site, spin) in frozen {
            sees[site as usize].push(Neighbour::Frozen(spin));
        }
        for (site, mut expected) in (0..).zip(sees) {
            let mut found: Vec<_> = regular.neighbours(site).collect();
            found.sort_unstable();
            expected.sort_unstable();
            assert_eq!(found, expected, "{regular:?}, site {site}");
        }
    });
}

/// `STREAM.md` §10: the digest is that of the canonical JSON, however it is computed.
#[test]
fn a_graph_has_the_digest_of_its_canonical_json() {
    let couplings = ["1/2", "-7/10", "3"].map(|text| Exact::parse(text).unwrap()).to_vec();
    let fields = vec![Exact::zero(); 70_000];
    let edges = vec![[0, 1], [69_999, 2], [1, 0]];
    for (couplings, fields) in [(Some(couplings), None), (None, Some(fields)), (None, None)] {
        let graph = Graph::new(70_000, edges.clone(), couplings, fields).unwrap();
        assert_eq!(
            graph.digest().unwrap(),
            crate::canonical::digest(&graph.to_json()).unwrap()
        );
    }
}

#[test]
fn impossible_lattices_are_refused() {
    use Boundary::{Free, Periodic};
    assert!(regular(Kind::Hypercubic, &[], &[]).is_err());
    assert!(regular(Kind::Hypercubic, &[1], &[Periodic]).is_err());
    assert!(regular(Kind::Hypercubic, &[0], &[Free]).is_err());
    assert!(regular(Kind::Hypercubic, &[4, 4], &[Free]).is_err());
    assert!(regular(Kind::Triangular, &[4, 4, 4], &[Free; 3]).is_err());
    assert!(regular(Kind::Honeycomb, &[1, 4], &[Periodic; 2]).is_err());
    assert!(regular(Kind::Hypercubic, &[u64::MAX, 2], &[Free; 2]).is_err());
    assert!(regular(Kind::Hypercubic, &[1 << 14, 1 << 14], &[Free; 2]).is_err());
    assert!(Graph::new(0, vec![], None, None).is_err());
    assert!(Graph::new(2, vec![[1, 1]], None, None).is_err());
    assert!(Graph::new(2, vec![[0, 2]], None, None).is_err());
    assert!(Graph::new(2, vec![[0, 1]], Some(vec![]), None).is_err());
    assert!(Graph::new(2, vec![[0, 1]], None, Some(vec![Exact::zero()])).is_err());
}
