//! What a site sees, and the thresholds that follow from it, in exact numbers.
//!
//! Sites that see the same share a [`Profile`]. Local fields are counted in units of a common fraction,
//! so that a sum of them is a sum of integers. Nothing here knows where a site lies.

use std::collections::{BTreeMap, BTreeSet};
use std::sync::Arc;

use dashu_int::{IBig, UBig, ops::Gcd};
use dashu_ratio::RBig;
use rayon::prelude::*;

use crate::error::{Error, Result};
use crate::lattice::Spin;
use crate::law::{Beta, Law, Model};
use crate::number::Exact;
use crate::threshold::{self, Threshold};

/// Distinct thresholds of one law, at most.
pub const MOST_THRESHOLDS: usize = 1 << 20;

/// Local fields are counted in units of a common fraction; they must fit with room to add.
const MOST_UNITS_BITS: usize = 120;

/// What all sites with equal surroundings share.
#[derive(Debug)]
pub(super) struct Profile {
    /// The load that field, frozen and held neighbours give.
    pub(super) base: i128,
    /// What the ends that move add, by coupling.
    pub(super) pulls: Vec<Pull>,
    /// Every load that can occur, increasing, with its threshold.
    pub(super) table: Vec<(i128, Threshold)>,
    /// The distinct thresholds, increasing.
    pub(super) asked: Vec<Threshold>,
}

/// What an end of an edge with a certain coupling adds.
#[derive(Clone, Copy, Debug)]
pub(super) struct Pull {
    pub(super) coupling: u32,
    /// How many such ends there are.
    pub(super) ends: u32,
    pub(super) weight: i128,
    pub(super) rising: bool,
}

/// What a site sees, in numbers as typed: the key under which surroundings are shared.
#[derive(Clone, PartialEq, Eq, PartialOrd, Ord, Default)]
pub(super) struct Surroundings {
    pub(super) field: u32,
    /// Net sum of frozen and held neighbours by coupling (for the gas: how many are occupied).
    pub(super) fixed: Vec<(u32, i64)>,
    /// Edges to sites that move, by coupling.
    pub(super) moving: Vec<(u32, u32)>,
}

impl Surroundings {
    /// Adds up what was listed edge by edge.
    pub(super) fn add_up(&mut self) {
        fn by_coupling<T: Copy + std::ops::AddAssign>(list: &mut Vec<(u32, T)>) {
            list.sort_unstable_by_key(|(coupling, _)| *coupling);
            list.dedup_by(|next, kept| {
                let same = next.0 == kept.0;
                if same {
                    kept.1 += next.1;
                }
                same
            });
        }
        by_coupling(&mut self.moving);
        by_coupling(&mut self.fixed);
        self.fixed.retain(|(_, value)| *value != 0);
    }
}

/// The profiles of all surroundings that a law has, and the threshold of every load that occurs in one of them.
/// `crowded` names, for an error, the site with most neighbours.
pub(super) fn profiles(
    law: &Law,
    numbers: &Numbers,
    list: &[Surroundings],
    crowded: impl Fn() -> String,
) -> Result<(Vec<Profile>, BTreeMap<Exact, Threshold>)> {
    let too_many = || {
        let what = format!("distinct thresholds of the law ({})", crowded());
        Error::too_large(what, format!("more than {MOST_THRESHOLDS}"), MOST_THRESHOLDS)
    };
    let mut all_loads = BTreeSet::new();
    let mut loads_of = Vec::with_capacity(list.len());
    for surroundings in list {
        let loads = numbers.loads(surroundings).ok_or_else(too_many)?;
        all_loads.extend(loads.iter().cloned());
        if all_loads.len() > MOST_THRESHOLDS {
            return Err(too_many());
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
    let profiles = list
        .iter()
        .zip(loads_of)
        .map(|(surroundings, loads)| numbers.profile(surroundings, &loads, &thresholds));
    Ok((profiles.collect::<Result<_>>()?, thresholds))
}

/// The exact numbers of a law, by small numbers.
pub(super) struct Numbers {
    pub(super) gas: bool,
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
    pub(super) fn of(law: &Law) -> Self {
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

    pub(super) fn coupling_of(&self, edge: usize) -> u32 {
        self.coupling_of.as_ref().map_or(0, |numbers| numbers[edge])
    }

    pub(super) fn field_of(&self, site: usize) -> u32 {
        self.field_of.as_ref().map_or(0, |numbers| numbers[site])
    }

    /// What a fixed neighbour adds, in couplings.
    pub(super) fn value(&self, spin: Spin) -> i64 {
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

    fn profile(
        &self,
        surroundings: &Surroundings,
        loads: &[Exact],
        thresholds: &BTreeMap<Exact, Threshold>,
    ) -> Result<Profile> {
        let scale = self.scale(surroundings);
        let units = |value: &Exact| {
            in_units(value, &scale).ok_or_else(|| {
                let what = "bits of the common unit of couplings and fields at one site";
                Error::too_large(what, format!("more than {MOST_UNITS_BITS}"), MOST_UNITS_BITS)
            })
        };
        let table = loads.iter().map(|load| Ok((units(load)?, thresholds[load])));
        let table = table.collect::<Result<Vec<_>>>()?;
        let mut asked: Vec<Threshold> = table.iter().map(|(_, threshold)| *threshold).collect();
        asked.sort_unstable();
        asked.dedup();
        let pulls = surroundings.moving.iter().map(|(coupling, ends)| {
            Ok(Pull {
                coupling: *coupling,
                ends: *ends,
                weight: if self.gas {
                    1
                } else {
                    units(&self.couplings[*coupling as usize])?
                },
                rising: self.rising(*coupling),
            })
        });
        Ok(Profile {
            base: units(&self.base(surroundings))?,
            pulls: pulls.collect::<Result<_>>()?,
            table,
            asked,
        })
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
