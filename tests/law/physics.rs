//! Physics through the engines that draw and replay use: mean energies of systems too large to enumerate,
//! against exact values.
//!
//! Each check fails at |z| >= 4, which happens by chance with probability 6.4e-5; seeds are fixed, so
//! it fails always or never. There are 19 of them: 1.2e-3 together.

use pastproof::engine::crew::{Crew, Settings};
use pastproof::exact;
use pastproof::lattice::Kind;
use pastproof::law::Law;
use pastproof::observable::Observables;
use pastproof::random_map::RandomMap;

use crate::statistics::{mean, normal_tail};
use crate::systems::{draw, ising, regular};
use crate::values::{LEVELS, float, lattice_named, parse};

/// Draws samples, and holds their mean energy per site (J = 1, no field) against `expected`.
fn check(what: &str, law: &Law, samples: u64, expected: f64) {
    let map = RandomMap::new(law).unwrap();
    let crew = Crew::new(&map, &Settings::default()).to_string();
    assert!(crew.starts_with("bit-sliced"), "{what} goes by the {crew}");
    let observables = Observables::new(law);
    let sites = f64::from(law.lattice().sites());
    let energies: Vec<f64> = draw(law, samples)
        .iter()
        .map(|sample| {
            let pair_sum = &observables.measure(sample.exact().unwrap())[0];
            -pair_sum.to_string().parse::<f64>().unwrap() / sites
        })
        .collect();
    let verdict = mean(what, expected, &energies);
    assert!(verdict.tail > normal_tail(4.0), "{what}: tail {:.1e}", verdict.tail);
}

/// B. Kaufman, Phys. Rev. 76, 1232 (1949), by `exact::kaufman`, which `values` holds against other programs.
#[test]
fn square_tori_have_the_energies_of_kaufman() {
    for (extent, samples) in [(8, 4000), (16, 2000), (32, 500)] {
        for (text, beta) in [("0.2", 0.2), ("0.35", 0.35), ("beta_c", 0.440_686_793_509_771_5)] {
            let law = ising(regular(Kind::Hypercubic, &[extent, extent], "periodic"), text, "0");
            let side = u32::try_from(extent).unwrap();
            let torus = exact::kaufman(side, side, beta).unwrap();
            check(
                &format!("{extent} x {extent} at {text}"),
                &law,
                samples,
                torus.energy_per_site,
            );
        }
    }
}

/// Infinite lattices (R. M. F. Houtappel, Physica 16, 425 (1950); values by numerical integration in 40 digits, a separate
/// program). Correlations are shorter than two edges there, so a torus of 60 or more differs by less than 1e-12.
#[test]
fn triangular_and_honeycomb_lattices_have_the_energies_of_houtappel() {
    for (kind, extents, beta, expected) in [
        (Kind::Triangular, [60, 66], "0.1", -0.373_573_658_443_366_9),
        (Kind::Triangular, [64, 64], "0.1", -0.373_573_658_443_366_9),
        (Kind::Honeycomb, [64, 64], "0.2", -0.296_933_065_500_865_7),
        (Kind::Honeycomb, [63, 61], "0.2", -0.296_933_065_500_865_7),
    ] {
        let law = ising(regular(kind, &extents, "periodic"), beta, "0");
        check(&format!("{kind} {extents:?}"), &law, 400, expected);
    }
}

/// `levels.json`: enumeration by a separate program.
#[test]
fn small_cubic_lattices_have_the_energies_of_enumeration() {
    let known = parse(LEVELS);
    let mut checks = 0;
    for record in known["other_lattices"].as_array().unwrap() {
        let name = record["lattice"].as_str().unwrap();
        if !name.starts_with("2x2x2 torus") && !name.starts_with("3x3x3 torus") && !name.starts_with("triangular 6x6") {
            continue;
        }
        for value in record["values"].as_array().unwrap().iter().take(2) {
            let beta = value["beta"].as_str().unwrap();
            let law = ising(lattice_named(name), beta, "0");
            check(&format!("{name} at {beta}"), &law, 4000, float(&value["e"]));
            checks += 1;
        }
    }
    assert_eq!(checks, 6);
}
