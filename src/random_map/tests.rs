//! Random maps against known answers, and sites one by one against lists of edges.

use dashu_ratio::RBig;

use super::*;
use crate::lattice::{Boundary, Graph, Kind, Lattice, Regular};
use crate::law::Beta;
use crate::law::Model;

fn ising(lattice: Lattice, listed: bool) -> Law {
    let one = |value: &str| Exact::parse(value).unwrap();
    let coupling = (!listed).then(Exact::one);
    let field = Some(one("0"));
    Law::new(
        Model::Ising {
            beta: Beta::Number(one("0.4")),
            coupling,
            field,
        },
        lattice,
        None,
    )
    .unwrap()
}

fn graph(sites: u64, edges: Vec<[u32; 2]>, couplings: Option<Vec<&str>>) -> Lattice {
    let couplings = couplings.map(|list| list.into_iter().map(|text| Exact::parse(text).unwrap()).collect());
    Lattice::Graph(Arc::new(Graph::new(sites, edges, couplings, None).unwrap()))
}

/// `tests/vectors/stream1.json`, made by an independent program.
#[test]
fn colour_classes_are_the_known_ones() {
    let vectors: serde_json::Value = serde_json::from_str(include_str!("../../tests/vectors/stream1.json")).unwrap();
    let cases = vectors["classes"].as_array().unwrap();
    for case in cases {
        let kind = Kind::from_word(case["lattice"]["kind"].as_str().unwrap()).unwrap();
        let extents: Vec<u64> = serde_json::from_value(case["lattice"]["extents"].clone()).unwrap();
        let boundary = vec![Boundary::Periodic; extents.len()];
        let law = ising(Lattice::Regular(Regular::new(kind, extents, boundary).unwrap()), false);
        let known: Vec<Vec<u32>> = serde_json::from_value(case["classes"].clone()).unwrap();
        let map = RandomMap::new(&law).unwrap();
        let found: Vec<Vec<u32>> = map.classes().iter().map(|class| class.sites().collect()).collect();
        assert_eq!(found, known);
    }
    assert_eq!(cases.len(), 4);
}

#[test]
fn a_law_with_too_many_thresholds_is_refused_and_the_crowded_site_named() {
    // 21 couplings 1, 2, 4, ...: 2^21 distinct local fields at site 3
    let star = |count: u32, coupling: fn(u32) -> String| {
        let edges = (0..count)
            .map(|number| [3, if number < 3 { number } else { number + 1 }])
            .collect();
        let couplings: Vec<String> = (0..count).map(coupling).collect();
        graph(
            u64::from(count) + 1,
            edges,
            Some(couplings.iter().map(String::as_str).collect()),
        )
    };
    let error = RandomMap::new(&ising(star(21, |number| (1u64 << number).to_string()), true)).unwrap_err();
    assert!(error.to_string().contains("site 3 has most neighbours: 21"), "{error}");
    // as many neighbours, but few distinct fields: accepted
    assert!(RandomMap::new(&ising(star(40, |number| (number % 7 + 1).to_string()), true)).is_ok());
    // couplings without a usable common unit
    let error = RandomMap::new(&ising(
        star(12, |number| format!("1/{}", 10u64.pow(11) + 3 + 2 * u64::from(number))),
        true,
    ))
    .unwrap_err();
    assert!(error.to_string().contains("common unit"), "{error}");
}

/// By hand: two edges to one site count each; a zero coupling asks for one threshold.
#[test]
fn every_edge_counts_on_its_own() {
    let double = RandomMap::new(&ising(graph(2, vec![[0, 1], [0, 1]], None), false)).unwrap();
    assert_eq!(double.ends(0).count(), 2);
    assert_eq!(double.asked(0).len(), 3);
    let triangle =
        |couplings| RandomMap::new(&ising(graph(3, vec![[0, 1], [1, 2], [0, 2]], Some(couplings)), true)).unwrap();
    assert!(triangle(vec!["1", "1", "1"]).is_ordered());
    assert!(triangle(vec!["-1", "-1", "1"]).is_ordered());
    assert!(!triangle(vec!["-1", "-1", "-1"]).is_ordered());
    assert!(triangle(vec!["-1", "-1", "0"]).is_ordered());
    let silent = RandomMap::new(&ising(graph(2, vec![[0, 1]], Some(vec!["0"])), true)).unwrap();
    assert_eq!(silent.asked(0), [Threshold::Below(1 << 127)]);
    assert_eq!(silent.spread(), 0.0);
    // held sites have no surroundings of their own: the free pair beside one counts, and none may be left free
    let held = |sites: &[u32]| {
        let law = ising(graph(3, vec![[1, 2]], None), false);
        let held = Held::new(sites.iter().map(|site| (*site, Spin::Plus)).collect()).unwrap();
        let law = Law::new(law.model().clone(), law.lattice().clone(), Some(Arc::new(held))).unwrap();
        RandomMap::new(&law).unwrap()
    };
    assert!(held(&[0]).spread() > 0.1);
    let all = held(&[0, 1, 2]);
    assert_eq!((all.spread(), all.lanes(), all.classes().len()), (0.0, 0, 0));
}

fn with_held(law: &Law, sites: &[(u32, Spin)]) -> Law {
    let held = Arc::new(Held::new(sites.to_vec()).unwrap());
    Law::new(law.model().clone(), law.lattice().clone(), Some(held)).unwrap()
}

/// Each site's ends against the list of edges: regular lattices with every kind of edge, graphs, held sites.
#[test]
fn ends_are_those_of_the_edges() {
    use Boundary::{Free, Minus, Periodic, Plus};
    let regular = |kind, extents: &[u64], boundary: &[Boundary]| {
        ising(
            Lattice::Regular(Regular::new(kind, extents.to_vec(), boundary.to_vec()).unwrap()),
            false,
        )
    };
    let chords = vec![[0, 1], [3, 1], [1, 0], [2, 4], [4, 3], [0, 5], [5, 1]];
    let couplings = vec!["1", "-2", "1/3", "0", "1", "-2", "5"];
    let laws = [
        regular(Kind::Hypercubic, &[2], &[Periodic]),
        regular(Kind::Hypercubic, &[5, 2, 3], &[Free, Periodic, Minus]),
        regular(Kind::Triangular, &[2, 4], &[Periodic, Plus]),
        regular(Kind::Triangular, &[5, 5], &[Periodic, Periodic]),
        regular(Kind::Honeycomb, &[3, 2], &[Periodic, Free]),
        ising(graph(7, chords.clone(), None), false),
        ising(graph(7, chords, Some(couplings)), true),
    ];
    for law in laws
        .iter()
        .flat_map(|law| [law.clone(), with_held(law, &[(1, Spin::Plus), (0, Spin::Minus)])])
    {
        let map = RandomMap::new(&law).unwrap();
        let moves = |site: u32| map.held().iter().all(|(held, _)| *held != site);
        let coupling = |edge: usize| match law.lattice().graph().and_then(|graph| graph.couplings()) {
            Some(list) => list[edge].clone(),
            None => Exact::one(),
        };
        let mut expected = vec![Vec::new(); map.sites() as usize];
        for (edge, [a, b]) in law
            .lattice()
            .edges()
            .enumerate()
            .filter(|(_, [a, b])| moves(*a) && moves(*b))
        {
            let coupling = coupling(edge);
            let rising = coupling > Exact::zero();
            expected[a as usize].push((b, coupling.clone(), rising));
            expected[b as usize].push((a, coupling, rising));
        }
        for (site, mut expected) in (0..).zip(expected) {
            let mut found: Vec<End> = map.ends(site).collect();
            found.sort_unstable_by_key(|end| (end.site, end.weight));
            expected.sort_unstable();
            assert_eq!(found.len(), expected.len(), "{law:?}, site {site}");
            for (end, (far, coupling, rising)) in found.iter().zip(&expected) {
                assert_eq!((end.site, end.rising), (*far, *rising), "{law:?}, site {site}");
                // weights are couplings in a unit of the site
                let weigh = |weight: i128, coupling: &Exact| RBig::from(weight) * coupling.as_fraction();
                assert_eq!(weigh(end.weight, &expected[0].1), weigh(found[0].weight, coupling));
            }
        }
    }
}

/// By hand: a law that is ordered only with some sites flipped, with two classes, with three, and with mixed signs.
#[test]
fn an_order_is_found_where_there_is_one() {
    let ordered = |lattice: Lattice, beta: &str| {
        let model = Model::Ising {
            beta: Beta::Number(Exact::parse(beta).unwrap()),
            coupling: lattice
                .graph()
                .is_none_or(|graph| graph.couplings().is_none())
                .then(Exact::one),
            field: Some(Exact::zero()),
        };
        let map = RandomMap::new(&Law::new(model, lattice, None).unwrap()).unwrap();
        (map.is_ordered(), map.classes().len())
    };
    let torus = |extent: u64| {
        Lattice::Regular(Regular::new(Kind::Hypercubic, vec![extent; 2], vec![Boundary::Periodic; 2]).unwrap())
    };
    // a path from 0 over 2 and 3 to 1: bipartite, but greedy colouring needs a third colour for 3
    let path = |couplings| graph(4, vec![[0, 2], [2, 3], [3, 1]], couplings);
    assert_eq!(ordered(torus(4), "-0.2"), (true, 2));
    assert_eq!(ordered(torus(5), "-0.2"), (false, 4));
    assert_eq!(ordered(torus(5), "0.2"), (true, 4));
    assert_eq!(ordered(path(None), "-0.2"), (true, 3));
    assert_eq!(ordered(path(Some(vec!["1", "-1", "1"])), "0.2"), (true, 3));
    assert_eq!(
        ordered(graph(3, vec![[0, 1], [1, 2], [0, 2]], None), "-0.2"),
        (false, 3)
    );
}

/// Profiles are shared by what a site sees: here by how many neighbours move.
#[test]
fn sites_that_see_the_same_share_a_profile() {
    let square = |boundary| {
        let square = Regular::new(Kind::Hypercubic, vec![6, 5], vec![boundary; 2]).unwrap();
        RandomMap::new(&ising(Lattice::Regular(square), false)).unwrap()
    };
    assert_eq!(square(Boundary::Periodic).profiles(), 1);
    let free = square(Boundary::Free);
    assert_eq!(free.profiles(), 3);
    for site in 0..30 {
        for other in 0..30 {
            let same = free.ends(site).count() == free.ends(other).count();
            assert_eq!(free.profile(site) == free.profile(other), same, "{site} and {other}");
        }
    }
}
