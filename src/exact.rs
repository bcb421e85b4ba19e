//! Exact distributions to hold samples against: enumeration of small systems, and the square torus.
//!
//! Nothing here knows the random map: weights are written down from the energy or the activity
//! alone, so that an error in thresholds, colours or bounds cannot hide on both sides of a
//! comparison. Levels are counted in whole numbers; only the last step, from a level to a
//! probability, uses floating point. These figures judge samples and never make one.

use std::collections::BTreeMap;

use dashu_int::{IBig, UBig, ops::Gcd};
use dashu_ratio::RBig;

use crate::error::{Error, Result};
use crate::lattice::Spin;
use crate::law::{Beta, Critical, Law, Model};
use crate::number::Exact;

/// Sites of a system that is enumerated, at most.
pub const MOST_SITES: u32 = 24;

/// The exact distribution of a small law over all its configurations.
///
/// A configuration is a number whose bit i is 1 where site i is +1 (occupied), as in a packed
/// sample. Its weight is exp(-beta E), or z^(occupied sites); where it contradicts a held site or
/// the exclusion it is impossible. Each edge counts on its own, frozen neighbours like any other.
#[derive(Debug)]
pub struct Enumeration {
    weights: Weights,
    /// How many configurations have a level.
    levels: BTreeMap<i64, u64>,
    /// The level with the largest weight: the origin of all exponents.
    best: i64,
    /// The sum of all weights, in units of the weight of the best level.
    sum: f64,
}

/// The unnormalised law: a configuration has a level, and the weight exp(slope * level).
#[derive(Debug)]
struct Weights {
    sites: u32,
    /// Bits that held sites fix, and their values.
    held: (u32, u32),
    slope: f64,
    levels: Levels,
}

#[derive(Debug)]
enum Levels {
    /// Minus the energy, in units of 1/denominator.
    Ising {
        denominator: UBig,
        /// The pair of sites of each edge as bits, and its coupling.
        edges: Vec<(u32, i64)>,
        /// Field and frozen neighbours of each site.
        fields: Vec<i64>,
    },
    /// The number of occupied sites.
    LatticeGas {
        /// Pairs of sites of which one must be empty.
        edges: Vec<u32>,
        /// Sites beside an occupied boundary.
        empty: u32,
    },
}

impl Enumeration {
    /// Enumerates the configurations of `law`.
    ///
    /// # Errors
    /// [`crate::error::ErrorKind::TooLarge`] for more than [`MOST_SITES`] sites, or couplings and fields without a
    /// usable common denominator.
    pub fn new(law: &Law) -> Result<Self> {
        let sites = law.lattice().sites();
        if sites > MOST_SITES {
            return Err(Error::too_large("sites of a system to enumerate", sites, MOST_SITES));
        }
        let weights = Weights::of(law)?;
        let mut levels = BTreeMap::new();
        for configuration in 0..1 << sites {
            if let Some(level) = weights.level(configuration) {
                *levels.entry(level).or_insert(0) += 1;
            }
        }
        let end = if weights.slope < 0.0 {
            levels.first_key_value()
        } else {
            levels.last_key_value()
        };
        let Some((&best, _)) = end else {
            return Err(Error::conflict("no configuration is possible"));
        };
        let weight = |(&level, &count): (&i64, &u64)| count as f64 * weights.relative(level, best);
        let sum = levels.iter().map(weight).sum();
        Ok(Self {
            weights,
            levels,
            best,
            sum,
        })
    }

    /// The number of sites, held ones included.
    pub fn sites(&self) -> u32 {
        self.weights.sites
    }

    /// The logarithm of the sum of all weights.
    pub fn ln_partition(&self) -> f64 {
        self.weights.exponent(self.best) + ln(self.sum)
    }

    /// The probability of a configuration; 0 where it is impossible.
    pub fn probability(&self, configuration: u32) -> f64 {
        self.weights
            .level(configuration)
            .map_or(0.0, |level| self.of_level(level))
    }

    /// All possible configurations, increasing, with their probabilities.
    pub fn probabilities(&self) -> impl Iterator<Item = (u32, f64)> {
        (0..1 << self.weights.sites).filter_map(|configuration| {
            let level = self.weights.level(configuration)?;
            Some((configuration, self.of_level(level)))
        })
    }

    /// The distribution of anything that can be read off a configuration.
    pub fn distribution<K: Ord>(&self, read: impl Fn(u32) -> K) -> BTreeMap<K, f64> {
        let mut distribution = BTreeMap::new();
        for (configuration, probability) in self.probabilities() {
            *distribution.entry(read(configuration)).or_insert(0.0) += probability;
        }
        distribution
    }

    /// The distribution of `pair_sum`, the sum of J s s over the numbered edges; empty for a lattice gas.
    pub fn pair_sums(&self) -> BTreeMap<Exact, f64> {
        let Levels::Ising { denominator, edges, .. } = &self.weights.levels else {
            return BTreeMap::new();
        };
        let sums = self.distribution(|configuration| pair_sum(edges, configuration));
        let exact = |sum: i64| Exact::from_fraction(RBig::from_parts(IBig::from(sum), denominator.clone()));
        sums.into_iter()
            .map(|(sum, probability)| (exact(sum), probability))
            .collect()
    }

    /// How many configurations have an energy: the density of states, by increasing energy; empty for a
    /// lattice gas.
    pub fn states(&self) -> BTreeMap<Exact, u64> {
        let Levels::Ising { denominator, .. } = &self.weights.levels else {
            return BTreeMap::new();
        };
        let energy = |level: i64| Exact::from_fraction(RBig::from_parts(-IBig::from(level), denominator.clone()));
        self.levels
            .iter()
            .map(|(level, count)| (energy(*level), *count))
            .collect()
    }

    /// The mean energy, with field and frozen neighbours; `None` for a lattice gas.
    pub fn mean_energy(&self) -> Option<f64> {
        let Levels::Ising { denominator, .. } = &self.weights.levels else {
            return None;
        };
        let unit = float(&RBig::from_parts(IBig::ONE, denominator.clone()));
        let term = |(&level, &count): (&i64, &u64)| -(level as f64) * unit * count as f64 * self.of_level(level);
        Some(self.levels.iter().map(term).sum())
    }

    fn of_level(&self, level: i64) -> f64 {
        self.weights.relative(level, self.best) / self.sum
    }
}

impl Weights {
    fn of(law: &Law) -> Result<Self> {
        let lattice = law.lattice();
        let pairs: Vec<u32> = lattice.edges().map(|[a, b]| 1 << a | 1 << b).collect();
        let mut held = (0, 0);
        for (site, spin) in law.held().map_or(&[][..], |held| held.sites()) {
            held.0 |= 1 << site;
            held.1 |= u32::from(spin.bit()) << site;
        }
        let (slope, levels) = match law.model() {
            Model::LatticeGas { activity } => {
                let occupied = lattice.frozen().filter(|(_, spin)| spin.bit());
                let levels = Levels::LatticeGas {
                    edges: pairs,
                    empty: occupied.fold(0, |sites, (site, _)| sites | 1 << site),
                };
                (ln(float(activity.as_fraction())), levels)
            }
            Model::Ising { beta, coupling, field } => {
                let graph = lattice.graph();
                let listed = |common: &Option<Exact>, list: Option<&[Exact]>, count: usize| match common {
                    Some(number) => vec![number.clone(); count],
                    None => list.unwrap_or_default().to_vec(),
                };
                let couplings = graph.and_then(|graph| graph.couplings());
                let couplings = listed(coupling, couplings, pairs.len());
                let fields = graph.and_then(|graph| graph.fields());
                let mut fields: Vec<RBig> = listed(field, fields, lattice.sites() as usize)
                    .into_iter()
                    .map(|field| field.as_fraction().clone())
                    .collect();
                // only lattices with one coupling have frozen neighbours
                for ((site, spin), coupling) in lattice.frozen().zip(coupling.iter().cycle()) {
                    let coupling = coupling.as_fraction();
                    let field = &mut fields[site as usize];
                    *field = match spin {
                        Spin::Plus => &*field + coupling,
                        Spin::Minus => &*field - coupling,
                    };
                }
                let couplings = couplings.iter().map(Exact::as_fraction);
                let denominator = couplings.clone().chain(&fields).fold(UBig::ONE, |common, number| {
                    let shared = (&common).gcd(number.denominator());
                    common / shared * number.denominator()
                });
                let units = |number: &RBig| whole(&(number * RBig::from(denominator.clone())));
                let couplings = couplings.map(units).collect::<Result<Vec<_>>>()?;
                let fields = fields.iter().map(units).collect::<Result<Vec<_>>>()?;
                // no sum over any of these can overflow
                let sizes = couplings.iter().chain(&fields).map(|units| units.checked_abs());
                sizes
                    .reduce(|sum, size| sum?.checked_add(size?))
                    .flatten()
                    .ok_or_else(too_fine)?;
                let slope = number(beta) * float(&RBig::from_parts(IBig::ONE, denominator.clone()));
                let levels = Levels::Ising {
                    denominator,
                    edges: pairs.into_iter().zip(couplings).collect(),
                    fields,
                };
                (slope, levels)
            }
        };
        Ok(Self {
            sites: lattice.sites(),
            held,
            slope,
            levels,
        })
    }

    /// The level of a configuration, or `None` where it is impossible.
    fn level(&self, configuration: u32) -> Option<i64> {
        if configuration & self.held.0 != self.held.1 {
            return None;
        }
        match &self.levels {
            Levels::Ising { edges, fields, .. } => {
                let field = |(site, field): (usize, &i64)| if configuration >> site & 1 == 1 { *field } else { -field };
                Some(pair_sum(edges, configuration) + fields.iter().enumerate().map(field).sum::<i64>())
            }
            Levels::LatticeGas { edges, empty } => {
                let possible = configuration & empty == 0 && edges.iter().all(|pair| configuration & pair != *pair);
                possible.then(|| i64::from(configuration.count_ones()))
            }
        }
    }

    /// ln(weight). A level 0 has weight 1 whatever the slope, even at activity 0.
    fn exponent(&self, level: i64) -> f64 {
        if level == 0 { 0.0 } else { self.slope * level as f64 }
    }

    /// The weight of a level in units of the weight of another.
    fn relative(&self, level: i64, best: i64) -> f64 {
        exp(self.exponent(level - best))
    }
}

fn pair_sum(edges: &[(u32, i64)], configuration: u32) -> i64 {
    let term = |(pair, coupling): &(u32, i64)| match (configuration & pair).count_ones() {
        1 => -coupling,
        _ => *coupling,
    };
    edges.iter().map(term).sum()
}

fn whole(number: &RBig) -> Result<i64> {
    i64::try_from(number.numerator()).map_err(|_| too_fine())
}

fn too_fine() -> Error {
    let what = "bits of the common unit of couplings and fields";
    Error::too_large(what, "more than 63", 63)
}

/// What Kaufman's solution says of a square torus.
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct Torus {
    /// The logarithm of the partition function.
    pub ln_partition: f64,
    /// The mean energy of a site.
    pub energy_per_site: f64,
}

/// The Ising model without field on the `rows` x `columns` square torus, J = 1, at 0.01 <= `beta` <= 100.
///
/// With s = sinh 2 beta, m rows and n columns (B. Kaufman, Phys. Rev. 76, 1232 (1949); in the form of
/// A. E. Ferdinand and M. E. Fisher, Phys. Rev. 185, 832 (1969)):
///
/// Z = (2 s)^(mn/2) / 2 * (Z1 + Z2 + Z3 + Z4),
/// Z1 = prod 2 cosh(m g_(2r+1) / 2), Z2 = prod 2 sinh(m g_(2r+1) / 2),
/// Z3 = prod 2 cosh(m g_(2r) / 2), Z4 = prod 2 sinh(m g_(2r) / 2), r = 0 .. n-1,
///
/// cosh g_k = cosh 2 beta coth 2 beta - cos(pi k / n), and g_0 = 2 beta + ln tanh beta, which is
/// negative above the critical temperature. The energy is -d ln Z / d beta, term by term. An extent
/// of 2 has two edges between the same sites, as everywhere in this program.
///
/// # Errors
/// [`crate::error::ErrorKind::Value`] for an extent outside 2 ..= 4096, or `beta` outside its range, where digits
/// are lost.
pub fn kaufman(rows: u32, columns: u32, beta: f64) -> Result<Torus> {
    if rows.min(columns) < 2 || rows.max(columns) > 4096 {
        return Err(Error::value(format!("{rows} x {columns}"), "extents from 2 to 4096"));
    }
    if !(0.01..=100.0).contains(&beta) {
        return Err(Error::value(beta, "beta from 0.01 to 100"));
    }
    let half = f64::from(rows) / 2.0;
    let sites = f64::from(rows) * f64::from(columns);
    let (s, c) = ((2.0 * beta).sinh(), (2.0 * beta).cosh());
    // each product as the logarithm of its size and the derivative of that; Z4 without its factor r = 0
    let (mut z1, mut z2, mut z3, mut z4) = <([f64; 2], [f64; 2], [f64; 2], [f64; 2])>::default();
    let add = |product: &mut [f64; 2], ln_factor: f64, derivative: f64| {
        product[0] += ln_factor;
        product[1] += derivative;
    };
    for k in 1..2 * columns {
        // cosh g - 1 = (s - 1)^2 / s + 1 - cos(pi k / n), without cancellation near the critical point
        let sine = (std::f64::consts::PI * f64::from(k) / f64::from(2 * columns)).sin();
        let above = (s - 1.0) * ((s - 1.0) / s) + 2.0 * sine * sine;
        let g = 2.0 * (above / 2.0).sqrt().asinh();
        let slope = 2.0 * c * ((s - 1.0) / s) * ((s + 1.0) / s) / (above * (above + 2.0)).sqrt();
        let (x, dx) = (half * g, half * slope);
        let small = exp(-2.0 * x);
        let (cosh, sinh) = if k % 2 == 1 {
            (&mut z1, &mut z2)
        } else {
            (&mut z3, &mut z4)
        };
        add(cosh, x + small.ln_1p(), dx * (1.0 - small) / (1.0 + small));
        add(sinh, x + (-small).ln_1p(), dx * (1.0 + small) / (1.0 - small));
    }
    let g = 2.0 * beta + ln(beta.sinh() / beta.cosh());
    let (x, dx) = (half * g, half * (2.0 + 2.0 / s));
    let small = exp(-2.0 * x.abs());
    add(
        &mut z3,
        x.abs() + small.ln_1p(),
        dx * x.signum() * (1.0 - small) / (1.0 + small),
    );
    // 2 sinh x, which is 0 at the critical point, and its derivative, both in units of e^|x|
    z4[0] += x.abs();
    let (sinh, derivative) = (x.signum() * (1.0 - small), dx * (1.0 + small));

    let largest = [z1, z2, z3, z4]
        .iter()
        .fold(f64::NEG_INFINITY, |largest, z| largest.max(z[0]));
    let mut total = 0.0;
    let mut slope = 0.0;
    for (z, factor, derivative) in [(z1, 1.0, 0.0), (z2, 1.0, 0.0), (z3, 1.0, 0.0), (z4, sinh, derivative)] {
        let size = exp(z[0] - largest);
        total += size * factor;
        slope += size * (factor * z[1] + derivative);
    }
    let ln_s = 2.0 * beta + (-exp(-4.0 * beta)).ln_1p();
    Ok(Torus {
        ln_partition: sites / 2.0 * ln_s + largest + ln(total / 2.0),
        energy_per_site: -c / s - slope / total / sites,
    })
}

/// The value of beta; a closed form as the nearest floating-point numbers give it.
fn number(beta: &Beta) -> f64 {
    match beta {
        Beta::Number(number) => float(number.as_fraction()),
        Beta::Critical(Critical::Square) => ln(1.0 + 2f64.sqrt()) / 2.0,
        Beta::Critical(Critical::Triangular) => ln(3.0) / 4.0,
        Beta::Critical(Critical::Honeycomb) => ln(2.0 + 3f64.sqrt()) / 2.0,
    }
}

fn float(number: &RBig) -> f64 {
    number.to_f64().value()
}

#[expect(clippy::disallowed_methods, reason = "judges samples, never makes one")]
fn exp(number: f64) -> f64 {
    number.exp()
}

#[expect(clippy::disallowed_methods, reason = "judges samples, never makes one")]
fn ln(number: f64) -> f64 {
    number.ln()
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::sync::Arc;

    use crate::lattice::{Boundary, Graph, Kind, Lattice, Regular};
    use crate::law::Held;

    fn exact(text: &str) -> Exact {
        Exact::parse(text).unwrap()
    }

    fn regular(kind: Kind, extents: &[u64], word: Boundary) -> Lattice {
        Lattice::Regular(Regular::new(kind, extents.to_vec(), vec![word; extents.len()]).unwrap())
    }

    fn ising(lattice: Lattice, beta: &str, field: &str) -> Law {
        let model = Model::Ising {
            beta: Beta::Number(exact(beta)),
            coupling: Some(Exact::one()),
            field: Some(exact(field)),
        };
        Law::new(model, lattice, None).unwrap()
    }

    fn close(found: f64, expected: f64, relative: f64) {
        assert!(
            (found - expected).abs() <= relative * expected.abs(),
            "found {found:?}, expected {expected:?}"
        );
    }

    /// By hand: two sites with one edge J = 1/2, fields 1 and -1/3, beta = 2: the exponents 2 (J s s + h s)
    /// of --, +-, -+, ++ are -1/3, 5/3, -11/3, 7/3.
    #[test]
    fn two_sites_by_hand() {
        let graph = Graph::new(
            2,
            vec![[0, 1]],
            Some(vec![exact("1/2")]),
            Some(vec![exact("1"), exact("-1/3")]),
        );
        let model = Model::Ising {
            beta: Beta::Number(exact("2")),
            coupling: None,
            field: None,
        };
        let law = Law::new(model, Lattice::Graph(Arc::new(graph.unwrap())), None).unwrap();
        let exact = Enumeration::new(&law).unwrap();
        let weights = [-1.0 / 3.0, 5.0 / 3.0, -11.0 / 3.0, 7.0 / 3.0].map(exp);
        let sum: f64 = weights.iter().sum();
        close(exact.ln_partition(), ln(sum), 1e-14);
        for (configuration, weight) in weights.iter().enumerate() {
            close(exact.probability(configuration as u32), weight / sum, 1e-14);
        }
        let pairs = exact.pair_sums();
        close(
            pairs[&Exact::parse("1/2").unwrap()],
            (weights[0] + weights[3]) / sum,
            1e-14,
        );
        let states: Vec<String> = exact.states().keys().map(Exact::to_string).collect();
        assert_eq!(states, ["-7/6", "-5/6", "1/6", "11/6"]);
    }

    /// By hand: a chain of two free sites between a frozen + on the left and right; and held sites.
    #[test]
    fn frozen_and_held_sites_count() {
        let law = ising(regular(Kind::Hypercubic, &[2], Boundary::Plus), "1", "0");
        let exact = Enumeration::new(&law).unwrap();
        // energies of --, +-, -+, ++: 1, 1, 1, -3
        assert_eq!(exact.states().into_values().collect::<Vec<_>>(), [1, 3]);
        close(exact.probability(3), exp(3.0) / (exp(3.0) + 3.0 * exp(-1.0)), 1e-14);
        let held = Some(Arc::new(Held::new(vec![(1, Spin::Minus)]).unwrap()));
        let law = Law::new(law.model().clone(), law.lattice().clone(), held).unwrap();
        let exact = Enumeration::new(&law).unwrap();
        assert_eq!(exact.probabilities().collect::<Vec<_>>(), [(0, 0.5), (1, 0.5)]);
    }

    /// By hand: the independent sets of a square are 1 + 4 z + 2 z^2; beside occupied boundaries there is one.
    #[test]
    fn gas_by_hand() {
        let gas = |lattice, activity| {
            let activity = exact(activity);
            Enumeration::new(&Law::new(Model::LatticeGas { activity }, lattice, None).unwrap()).unwrap()
        };
        let square = || regular(Kind::Hypercubic, &[2, 2], Boundary::Free);
        let exact = gas(square(), "3");
        close(exact.ln_partition(), ln(1.0 + 4.0 * 3.0 + 2.0 * 9.0), 1e-14);
        close(exact.distribution(u32::count_ones)[&2], 18.0 / 31.0, 1e-14);
        let nothing = gas(square(), "0");
        assert_eq!(nothing.probabilities().next(), Some((0, 1.0)));
        assert_eq!((nothing.ln_partition(), nothing.mean_energy()), (0.0, None));
        let walled = gas(regular(Kind::Hypercubic, &[2, 2], Boundary::Plus), "3");
        assert_eq!(walled.probabilities().collect::<Vec<_>>(), [(0, 1.0)]);
    }

    #[test]
    fn extreme_parameters_stay_finite() {
        let chain = || regular(Kind::Hypercubic, &[3], Boundary::Periodic);
        for beta in ["1e300", "-1e300"] {
            let exact = Enumeration::new(&ising(chain(), beta, "0")).unwrap();
            close(
                exact.probabilities().map(|(_, probability)| probability).sum(),
                1.0,
                1e-14,
            );
        }
        let error = Enumeration::new(&ising(chain(), "1", "1/1000000000000000000000")).unwrap_err();
        assert!(error.to_string().contains("common unit"), "{error}");
        let large = regular(Kind::Hypercubic, &[5, 5], Boundary::Free);
        assert!(Enumeration::new(&ising(large, "1", "0")).is_err());
    }

    /// Two independent ways to one number, below, at and above the critical point, both orders of extents.
    #[test]
    fn kaufman_and_enumeration_agree() {
        for (rows, columns) in [(2, 2), (3, 3), (2, 5), (5, 2), (3, 4), (4, 4)] {
            for beta in ["0.05", "0.3", "0.44", "0.45", "1", "4"] {
                let extents = [u64::from(rows), u64::from(columns)];
                let law = ising(regular(Kind::Hypercubic, &extents, Boundary::Periodic), beta, "0");
                let exact = Enumeration::new(&law).unwrap();
                let torus = kaufman(rows, columns, beta.parse().unwrap()).unwrap();
                close(torus.ln_partition, exact.ln_partition(), 1e-13);
                let energy = exact.mean_energy().unwrap() / f64::from(rows * columns);
                close(torus.energy_per_site, energy, 1e-12);
            }
        }
        for (rows, beta) in [(1, 0.4), (4097, 0.4), (4, 0.0), (4, f64::NAN), (4, -0.4), (4, 101.0)] {
            assert!(kaufman(rows, 4, beta).is_err());
        }
    }

    /// The axes can be exchanged although the formula treats them differently; and at low temperature
    /// ln Z = 2 mn beta + ln 2, by hand.
    #[test]
    fn kaufman_is_stable_for_large_tori() {
        for beta in [0.01, 0.2, 0.440_686_793_509_771_5, 1.0, 100.0] {
            let (one, other) = (kaufman(32, 24, beta).unwrap(), kaufman(24, 32, beta).unwrap());
            close(one.energy_per_site, other.energy_per_site, 1e-10);
            close(one.ln_partition, other.ln_partition, 1e-12);
        }
        let cold = kaufman(32, 32, 100.0).unwrap();
        close(cold.energy_per_site, -2.0, 1e-14);
        close(cold.ln_partition, 2.0 * 1024.0 * 100.0 + ln(2.0), 1e-15);
    }
}
