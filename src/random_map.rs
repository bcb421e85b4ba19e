//! The random map of the site laws: who is decided when, against which thresholds (`STREAM.md` §4).
//!
//! A [`RandomMap`] is everything that an engine needs beside the words: the colour classes in which
//! sites are decided, the far ends of each site's edges, and the table of thresholds. It is computed
//! from the law alone, with exact numbers, and its thresholds are what an archive stores.

use std::collections::{BTreeMap, BTreeSet};
use std::sync::Arc;

use dashu_int::{IBig, UBig, ops::Gcd};
use dashu_ratio::RBig;
use rayon::prelude::*;

use crate::error::{Error, Result};
use crate::lattice::Spin;
use crate::law::{Beta, Digits, Law, Model};
use crate::number::Exact;
use crate::threshold::{self, Threshold};

/// Distinct thresholds of one law, at most.
pub const MOST_THRESHOLDS: usize = 1 << 20;

/// Local fields are counted in units of a common fraction; they must fit with room to add.
const MOST_UNITS_BITS: usize = 120;

/// The far end of an edge of a site that is itself decided by the map.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct End {
    /// The neighbour.
    pub site: u32,
    /// What it adds to the site's load: `weight` where it is +1, `-weight` where it is -1
    /// (lattice gas: 1 where it is occupied).
    weight: i128,
    /// Whether the threshold grows with the neighbour's value.
    pub rising: bool,
}

/// What all sites with equal surroundings share.
#[derive(PartialEq, Eq, Debug)]
struct Profile {
    /// The load that field, frozen and held neighbours give.
    base: i128,
    /// Every load that can occur, increasing, with its threshold.
    table: Vec<(i128, Threshold)>,
    /// The distinct thresholds, increasing.
    asked: Vec<Threshold>,
}

/// The random map of a law.
#[derive(Debug)]
pub struct RandomMap {
    digits: Digits,
    gas: bool,
    classes: Vec<Vec<u32>>,
    held: Vec<(u32, Spin)>,
    sites: u32,
    first_end: Vec<u32>,
    ends: Vec<End>,
    profiles: Vec<Profile>,
    profile_of: Vec<u32>,
    thresholds: BTreeMap<Exact, Threshold>,
}

/// What a site sees, in numbers as typed: the key under which surroundings are shared.
#[derive(Clone, PartialEq, Eq, PartialOrd, Ord)]
struct Surroundings {
    field: u32,
    /// Net sum of frozen and held neighbours by coupling (for the gas: how many are occupied).
    fixed: Vec<(u32, i64)>,
    /// Edges to sites that move, by coupling.
    moving: Vec<(u32, u32)>,
}

impl RandomMap {
    /// The map of `law`.
    ///
    /// # Errors
    /// [`crate::error::ErrorKind::TooLarge`] for more than [`MOST_THRESHOLDS`] distinct thresholds, naming the site
    /// with most neighbours, or for couplings at one site without a usable common denominator.
    pub fn new(law: &Law) -> Result<Self> {
        let sites = law.lattice().sites();
        let count = sites as usize;
        let bonds = law.lattice().bonds();
        let held: Vec<(u32, Spin)> = law.held().map_or_else(Vec::new, |held| held.sites().to_vec());
        let mut held_at = vec![None; count];
        for (site, spin) in &held {
            held_at[*site as usize] = Some(*spin);
        }
        let numbers = Numbers::of(law);

        // far ends, edge by edge
        let mut degree = vec![0u32; count];
        for [a, b] in &bonds.edges {
            degree[*a as usize] += 1;
            degree[*b as usize] += 1;
        }
        let mut fixed: Vec<Vec<(u32, i64)>> = vec![
            Vec::new();
            if bonds.frozen.is_empty() && held.is_empty() {
                0
            } else {
                count
            }
        ];
        let moves = |site: u32| held_at[site as usize].is_none();
        let mut first_end = vec![0u32; count + 1];
        for site in 0..count {
            first_end[site + 1] = first_end[site] + degree[site];
        }
        let total = first_end[count] as usize;
        let mut neighbours = vec![(0u32, 0u32); total];
        let mut filled = first_end.clone();
        for (edge, [a, b]) in bonds.edges.iter().enumerate() {
            let coupling = numbers.coupling_of(edge);
            for (site, far) in [(*a, *b), (*b, *a)] {
                neighbours[filled[site as usize] as usize] = (far, coupling);
                filled[site as usize] += 1;
            }
        }
        for (site, spin) in &bonds.frozen {
            fixed[*site as usize].push((numbers.boundary_coupling(), numbers.value(*spin)));
        }

        // colour classes: greedy, over the sites that move
        let classes = colour(count, &moves, |site| {
            neighbours[first_end[site] as usize..first_end[site + 1] as usize]
                .iter()
                .map(|(far, _)| *far)
        });

        // surroundings, shared
        let mut known = BTreeMap::new();
        let mut list = Vec::new();
        let mut profile_of = vec![0u32; count];
        let mut kept_first = vec![0u32; count + 1];
        let mut ends = Vec::with_capacity(total);
        let mut links = Vec::with_capacity(total);
        for site in 0..count {
            kept_first[site + 1] = kept_first[site];
            if !moves(u32::try_from(site).unwrap_or(u32::MAX)) {
                continue;
            }
            let mut fixed = fixed.get_mut(site).map(std::mem::take).unwrap_or_default();
            let mut moving = BTreeMap::new();
            for (far, coupling) in &neighbours[first_end[site] as usize..first_end[site + 1] as usize] {
                match held_at[*far as usize] {
                    Some(spin) => fixed.push((*coupling, numbers.value(spin))),
                    None => {
                        *moving.entry(*coupling).or_insert(0) += 1;
                        ends.push(End {
                            site: *far,
                            weight: 0,
                            rising: numbers.rising(*coupling),
                        });
                        links.push(*coupling);
                        kept_first[site + 1] += 1;
                    }
                }
            }
            let mut net = BTreeMap::new();
            for (coupling, value) in fixed {
                *net.entry(coupling).or_insert(0) += value;
            }
            let surroundings = Surroundings {
                field: numbers.field_of(site),
                fixed: net.into_iter().filter(|(_, value)| *value != 0).collect(),
                moving: moving.into_iter().collect(),
            };
            let next = u32::try_from(list.len()).unwrap_or(u32::MAX);
            profile_of[site] = *known.entry(surroundings.clone()).or_insert_with(|| {
                list.push(surroundings);
                next
            });
        }
        drop(known);

        // tables
        let crowded = || {
            let site = (0..count)
                .max_by_key(|site| (degree[*site], std::cmp::Reverse(*site)))
                .unwrap_or(0);
            format!(
                "distinct thresholds of the law (site {site} has most neighbours: {})",
                degree[site]
            )
        };
        let mut all_loads = BTreeSet::new();
        let mut loads_of = Vec::with_capacity(list.len());
        for surroundings in &list {
            let loads = numbers.loads(surroundings).ok_or_else(|| too_many(&crowded()))?;
            all_loads.extend(loads.iter().cloned());
            if all_loads.len() > MOST_THRESHOLDS {
                return Err(too_many(&crowded()));
            }
            loads_of.push(loads);
        }
        let all_loads: Vec<Exact> = all_loads.into_iter().collect();
        let thresholds: BTreeMap<Exact, Threshold> = all_loads
            .into_par_iter()
            .map(|load| Ok((load.clone(), numbers.threshold(law, &load)?)))
            .collect::<Result<Vec<_>>>()?
            .into_iter()
            .collect();
        let mut profiles = Vec::with_capacity(list.len());
        let mut scales = Vec::with_capacity(list.len());
        for (surroundings, loads) in list.iter().zip(loads_of) {
            let scale = numbers.scale(surroundings);
            let fault = || {
                let what = "bits of the common unit of couplings and fields at one site";
                Error::too_large(what, format!("more than {MOST_UNITS_BITS}"), MOST_UNITS_BITS)
            };
            let units = |value: &Exact| in_units(value, &scale).ok_or_else(fault);
            let table = loads
                .iter()
                .map(|load| Ok((units(load)?, thresholds[load])))
                .collect::<Result<Vec<_>>>()?;
            let mut asked: Vec<Threshold> = table.iter().map(|(_, threshold)| *threshold).collect();
            asked.sort_unstable();
            asked.dedup();
            profiles.push(Profile {
                base: units(&numbers.base(surroundings))?,
                table,
                asked,
            });
            scales.push(
                numbers
                    .couplings
                    .iter()
                    .map(|value| in_units(value, &scale))
                    .collect::<Vec<_>>(),
            );
        }
        for site in 0..count {
            for at in kept_first[site] as usize..kept_first[site + 1] as usize {
                let scale = &scales[profile_of[site] as usize];
                ends[at].weight = if numbers.gas {
                    1
                } else {
                    scale[links[at] as usize].unwrap_or(0)
                };
            }
        }
        Ok(Self {
            digits: law.digits(),
            gas: numbers.gas,
            classes,
            held,
            sites,
            first_end: kept_first,
            ends,
            profiles,
            profile_of,
            thresholds,
        })
    }

    /// How digits are handed out.
    pub fn digits(&self) -> Digits {
        self.digits
    }

    /// The number of sites, held ones included.
    pub fn sites(&self) -> u32 {
        self.sites
    }

    /// The lists of a sweep: the colour classes, each by increasing site number.
    pub fn classes(&self) -> &[Vec<u32>] {
        &self.classes
    }

    /// The number of lanes of one sweep.
    pub fn lanes(&self) -> u64 {
        u64::from(self.sites) - self.held.len() as u64
    }

    /// The held sites with their values.
    pub fn held(&self) -> &[(u32, Spin)] {
        &self.held
    }

    /// The far ends of the edges of `site` that move.
    pub fn ends(&self, site: u32) -> &[End] {
        &self.ends[self.first_end[site as usize] as usize..self.first_end[site as usize + 1] as usize]
    }

    /// The distinct thresholds that `site` could ever be asked, increasing.
    pub fn asked(&self, site: u32) -> &[Threshold] {
        &self.profiles[self.profile_of[site as usize] as usize].asked
    }

    /// The threshold of `site` when the far end of each of its edges has the value that `far` gives.
    ///
    /// # Panics
    /// Never for a map made by [`RandomMap::new`]: its table holds every load that can occur.
    pub fn threshold(&self, site: u32, far: impl Fn(&End) -> bool) -> Threshold {
        let profile = &self.profiles[self.profile_of[site as usize] as usize];
        let ends = self.ends(site).iter();
        let load = if self.gas {
            (profile.base + ends.map(|end| i128::from(far(end))).sum::<i128>()).min(1)
        } else {
            profile.base
                + ends
                    .map(|end| if far(end) { end.weight } else { -end.weight })
                    .sum::<i128>()
        };
        let at = profile
            .table
            .binary_search_by_key(&load, |(load, _)| *load)
            .expect("a table holds every load");
        profile.table[at].1
    }

    /// Every local field that can occur in the law (lattice gas: 0 and 1, for no and any occupied neighbour),
    /// increasing, with its threshold.
    pub fn thresholds(&self) -> &BTreeMap<Exact, Threshold> {
        &self.thresholds
    }

    /// Whether flipping the meaning of some sites makes every threshold grow with every neighbour: then
    /// the bounds are the two extremal chains. Otherwise the law is frustrated and they only enclose
    /// the true states.
    pub fn is_ordered(&self) -> bool {
        let mut flipped: Vec<Option<bool>> = vec![None; self.sites as usize];
        let mut open = Vec::new();
        for start in 0..self.sites {
            if flipped[start as usize].is_some() {
                continue;
            }
            flipped[start as usize] = Some(false);
            open.push(start);
            while let Some(site) = open.pop() {
                let own = flipped[site as usize];
                for end in self.ends(site).iter().filter(|end| end.weight != 0) {
                    let wanted = own.map(|own| own == end.rising);
                    let far = &mut flipped[end.site as usize];
                    if far.is_none() {
                        *far = wanted;
                        open.push(end.site);
                    } else if *far != wanted {
                        return false;
                    }
                }
            }
        }
        true
    }

    /// An upper bound on how many neighbours one unknown site can make unknown in a sweep, for the
    /// worst site: the sum over its edges of the largest change of probability that the far end can
    /// make. Below 1 the bounds meet fast (contraction; Dobrushin 1970, from memory). A rough figure
    /// for advice before a run, never used in a sample.
    pub fn spread(&self) -> f64 {
        let unit = |threshold: Threshold| match threshold {
            Threshold::Below(theta) => theta as f64 / 2f64.powi(128),
            Threshold::Certain => 1.0,
        };
        let mut worst = vec![0f64; self.profiles.len()];
        let mut done = vec![false; self.profiles.len()];
        for site in 0..self.sites {
            // a held site has no ends, and its profile is not its own
            let number = self.profile_of[site as usize] as usize;
            if self.ends(site).is_empty() || std::mem::replace(&mut done[number], true) {
                continue;
            }
            let table = &self.profiles[number].table;
            let step = |weight: i128| {
                let apart = if self.gas { 1 } else { 2 * weight.abs() };
                let change = |(load, low): &(i128, Threshold)| {
                    let at = table.binary_search_by_key(&(load + apart), |(load, _)| *load).ok()?;
                    Some((unit(table[at].1) - unit(*low)).abs())
                };
                table.iter().filter_map(change).fold(0.0, f64::max)
            };
            let mut steps = BTreeMap::new();
            for end in self.ends(site) {
                worst[number] += *steps.entry(end.weight.abs()).or_insert_with(|| step(end.weight));
            }
        }
        worst.into_iter().fold(0.0, f64::max)
    }
}

fn too_many(what: &str) -> Error {
    Error::too_large(what, format!("more than {MOST_THRESHOLDS}"), MOST_THRESHOLDS)
}

/// Greedy colouring in increasing site number (`STREAM.md` §4).
fn colour<I: Iterator<Item = u32>>(
    count: usize,
    moves: &impl Fn(u32) -> bool,
    neighbours: impl Fn(usize) -> I,
) -> Vec<Vec<u32>> {
    const NONE: u32 = u32::MAX;
    let mut colour_of = vec![NONE; count];
    let mut taken_by = Vec::new();
    let mut classes: Vec<Vec<u32>> = Vec::new();
    for site in 0..count {
        let number = u32::try_from(site).unwrap_or(NONE);
        if !moves(number) {
            continue;
        }
        for far in neighbours(site).filter(|far| (*far as usize) < site) {
            if let Some(taken) = taken_by.get_mut(colour_of[far as usize] as usize) {
                *taken = number;
            }
        }
        let colour = taken_by
            .iter()
            .position(|taken| *taken != number)
            .unwrap_or(taken_by.len());
        if colour == taken_by.len() {
            taken_by.push(NONE);
            classes.push(Vec::new());
        }
        colour_of[site] = u32::try_from(colour).unwrap_or(NONE);
        classes[colour].push(number);
    }
    classes
}

/// The exact numbers of a law, by small numbers.
struct Numbers {
    gas: bool,
    beta_sign: i8,
    couplings: Vec<Exact>,
    coupling_of: Option<Vec<u32>>,
    fields: Vec<Exact>,
    field_of: Option<Vec<u32>>,
}

fn number_list(list: &[Exact]) -> (Vec<Exact>, Vec<u32>) {
    let mut known = BTreeMap::new();
    let mut values: Vec<Exact> = Vec::new();
    let numbers = list.iter().map(|value| {
        *known.entry(value).or_insert_with(|| {
            values.push(value.clone());
            u32::try_from(values.len() - 1).unwrap_or(u32::MAX)
        })
    });
    let numbers = numbers.collect();
    (values, numbers)
}

impl Numbers {
    fn of(law: &Law) -> Self {
        let graph: Option<&Arc<_>> = law.lattice().graph();
        let listed = |list: Option<&[Exact]>, common: Option<&Exact>| match list {
            Some(list) => {
                let (values, numbers) = number_list(list);
                (values, Some(numbers))
            }
            None => (vec![common.cloned().unwrap_or_else(Exact::zero)], None),
        };
        match law.model() {
            Model::Ising { beta, coupling, field } => {
                let (couplings, coupling_of) = listed(graph.and_then(|graph| graph.couplings()), coupling.as_ref());
                let (fields, field_of) = listed(graph.and_then(|graph| graph.fields()), field.as_ref());
                let beta_sign = match beta {
                    Beta::Number(beta) if beta.is_zero() => 0,
                    Beta::Number(beta) if beta.is_negative() => -1,
                    _ => 1,
                };
                Self {
                    gas: false,
                    beta_sign,
                    couplings,
                    coupling_of,
                    fields,
                    field_of,
                }
            }
            Model::LatticeGas { .. } => Self {
                gas: true,
                beta_sign: 1,
                couplings: vec![Exact::one()],
                coupling_of: None,
                fields: vec![Exact::zero()],
                field_of: None,
            },
        }
    }

    fn coupling_of(&self, edge: usize) -> u32 {
        self.coupling_of.as_ref().map_or(0, |numbers| numbers[edge])
    }

    fn field_of(&self, site: usize) -> u32 {
        self.field_of.as_ref().map_or(0, |numbers| numbers[site])
    }

    /// Fixed boundaries exist on regular lattices only, which have one coupling.
    fn boundary_coupling(&self) -> u32 {
        0
    }

    /// What a fixed neighbour adds, in couplings.
    fn value(&self, spin: Spin) -> i64 {
        if self.gas { i64::from(spin.bit()) } else { spin.value() }
    }

    /// Whether the threshold grows with the far end's value: for Ising where beta J > 0; never for the gas.
    fn rising(&self, coupling: u32) -> bool {
        let coupling = &self.couplings[coupling as usize];
        !self.gas && !coupling.is_zero() && (self.beta_sign < 0) == coupling.is_negative()
    }

    /// The load without the neighbours that move.
    fn base(&self, surroundings: &Surroundings) -> Exact {
        let sum = surroundings.fixed.iter().fold(
            self.fields[surroundings.field as usize].as_fraction().clone(),
            |sum, (coupling, net)| sum + self.couplings[*coupling as usize].as_fraction() * RBig::from(*net),
        );
        Exact::from_fraction(sum)
    }

    /// Every load that can occur there, increasing; `None` for more than a law may have.
    fn loads(&self, surroundings: &Surroundings) -> Option<Vec<Exact>> {
        let base = self.base(surroundings);
        if self.gas {
            let occupied = !base.is_zero();
            let mut loads = vec![Exact::from(i64::from(occupied))];
            if !occupied && !surroundings.moving.is_empty() {
                loads.push(Exact::one());
            }
            return Some(loads);
        }
        let mut loads = BTreeSet::from([base.as_fraction().clone()]);
        for (coupling, count) in &surroundings.moving {
            let coupling = self.couplings[*coupling as usize].as_fraction();
            if *count as usize > MOST_THRESHOLDS && !coupling.is_zero() {
                return None;
            }
            let count = i64::from(*count);
            let sums: Vec<RBig> = (0..=count)
                .map(|plus| coupling * RBig::from(2 * plus - count))
                .collect();
            let mut reached = BTreeSet::new();
            for load in &loads {
                for sum in &sums {
                    reached.insert(load + sum);
                    if reached.len() > MOST_THRESHOLDS {
                        return None;
                    }
                }
            }
            loads = reached;
        }
        Some(loads.into_iter().map(Exact::from_fraction).collect())
    }

    fn threshold(&self, law: &Law, load: &Exact) -> Result<Threshold> {
        match law.model() {
            Model::Ising { beta, .. } => Ok(threshold::ising(beta, load)),
            Model::LatticeGas { .. } if !load.is_zero() => Ok(Threshold::IMPOSSIBLE),
            Model::LatticeGas { activity } => threshold::lattice_gas(activity),
        }
    }

    /// The common denominator of all numbers at one site.
    fn scale(&self, surroundings: &Surroundings) -> UBig {
        let couplings = surroundings.fixed.iter().map(|(coupling, _)| *coupling);
        let couplings = couplings.chain(surroundings.moving.iter().map(|(coupling, _)| *coupling));
        let denominators = couplings.map(|coupling| self.couplings[coupling as usize].as_fraction().denominator());
        denominators.fold(
            self.fields[surroundings.field as usize]
                .as_fraction()
                .denominator()
                .clone(),
            |scale, next| {
                let common = (&scale).gcd(next);
                scale / common * next
            },
        )
    }
}

fn in_units(value: &Exact, scale: &UBig) -> Option<i128> {
    let units = value.as_fraction() * RBig::from(scale.clone());
    let whole: IBig = units.denominator().is_one().then(|| units.numerator().clone())?;
    let units = i128::try_from(&whole).ok()?;
    (units.unsigned_abs() >> MOST_UNITS_BITS == 0).then_some(units)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::lattice::{Boundary, Graph, Kind, Lattice, Regular};
    use crate::law::Held;

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
        let vectors: serde_json::Value = serde_json::from_str(include_str!("../tests/vectors/stream1.json")).unwrap();
        let cases = vectors["classes"].as_array().unwrap();
        for case in cases {
            let kind = Kind::from_word(case["lattice"]["kind"].as_str().unwrap()).unwrap();
            let extents: Vec<u64> = serde_json::from_value(case["lattice"]["extents"].clone()).unwrap();
            let boundary = vec![Boundary::Periodic; extents.len()];
            let law = ising(Lattice::Regular(Regular::new(kind, extents, boundary).unwrap()), false);
            let known: Vec<Vec<u32>> = serde_json::from_value(case["classes"].clone()).unwrap();
            assert_eq!(RandomMap::new(&law).unwrap().classes(), known);
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
        assert_eq!(double.ends(0).len(), 2);
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
}
