//! What its neighbours can make of the threshold of a site, in small numbers.
//!
//! An end *lifts* if its value makes the threshold larger: +1 where the threshold rises with it, -1 where
//! it falls. The weights of the ends that lift add up to the *lift* of a site; its threshold grows with
//! the lift and depends on nothing else. Where digits are sliced, all weights are equal, so that the lift
//! is a number of ends: [`Cuts`] turns the digits of a lane into the number from which on it becomes +1.
//! Where digits are plain, [`Rows`] gives each end a *stride*, so that the strides of those that lift add
//! up to the row of the threshold in a table. Nothing here knows a state.

use std::collections::BTreeMap;
use std::ops::Range;

use crate::random_map::{End, RandomMap};
use crate::threshold::Threshold;

/// Rows that strides may lead to, at most: those of both bounds are summed in one number.
pub(super) const MOST_ROWS: usize = 1 << 15;

/// Digits that are looked up at once.
pub(super) const BYTE: u32 = 8;

/// The ends of `site` that can change its threshold.
pub(super) fn ends(map: &RandomMap, site: u32) -> impl Iterator<Item = End> + '_ {
    let matters = map.asked(site).len() > 1;
    map.ends(site).filter(move |end| matters && end.weight != 0)
}

/// Lifts of `site`, increasing, each with the threshold that holds from it on: every lift that can occur,
/// or for a lattice gas those that change anything.
fn lifts(map: &RandomMap, site: u32) -> Vec<(u128, Threshold)> {
    let table = map.table(site);
    let (Some((least, first)), Some((most, last))) = (table.first(), table.last()) else {
        return Vec::new();
    };
    if first == last {
        return vec![(0, *first)];
    }
    if map.is_gas() {
        // an end lifts by being empty, and all have to
        return vec![(0, *last), (ends(map, site).count() as u128, *first)];
    }
    // an end that turns changes the load by twice its weight
    let lift = |load: i128| (if first < last { load - least } else { most - load }).unsigned_abs() / 2;
    let mut lifts: Vec<_> = table.iter().map(|(load, theta)| (lift(*load), *theta)).collect();
    lifts.sort_unstable();
    lifts
}

/// What the digits of a lane decide.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) struct Cut {
    /// The least number of lifting ends with which it becomes +1.
    pub(super) count: u32,
    /// The least number of digits that decide all its thresholds; `u32::MAX` if those given do not.
    pub(super) digits: u32,
}

impl Cut {
    const OPEN: Self = Self {
        count: 0,
        digits: u32::MAX,
    };

    /// Whether it takes more digits.
    #[inline]
    pub(super) fn is_open(self) -> bool {
        self.digits == u32::MAX
    }
}

/// From digits to cuts, for sites that ask the same thresholds.
pub(super) struct Cuts {
    /// The thresholds below 2^128, increasing.
    asked: Vec<u128>,
    /// The cut of a U that as many of them do not exceed.
    counts: Vec<u32>,
    /// The cut by the first [`BYTE`] digits.
    by_byte: Box<[Cut; 1 << BYTE]>,
}

impl Cuts {
    /// The cuts of `site`.
    pub(super) fn new(map: &RandomMap, site: u32) -> Self {
        let lifts = lifts(map, site);
        let weight = ends(map, site).next().map_or(1, |end| end.weight.unsigned_abs());
        // no number of ends will do where no threshold is larger
        let count = |(lift, _): &(u128, Threshold)| u32::try_from(lift / weight).unwrap_or(u32::MAX);
        let larger = |theta| lifts.partition_point(|(_, other)| *other <= Threshold::Below(theta));
        let asked: Vec<u128> = map.asked(site).iter().filter_map(|theta| below(*theta)).collect();
        let first_larger = asked
            .iter()
            .map(|theta| lifts.get(larger(*theta)).map_or(u32::MAX, count));
        let counts = std::iter::once(0).chain(first_larger).collect();
        Self::of(asked, counts)
    }

    /// The cuts of these thresholds, with a count for each number of them that U may not fall below.
    pub(super) fn of(asked: Vec<u128>, counts: Vec<u32>) -> Self {
        let mut cuts = Self {
            asked,
            counts,
            by_byte: Box::new([Cut::OPEN; 1 << BYTE]),
        };
        for byte in 0..=u8::MAX {
            let digits = |count: u32| {
                (u128::from(byte) >> (BYTE - count))
                    .checked_shl(128 - count)
                    .unwrap_or(0)
            };
            let cut =
                (0..=BYTE).find_map(|count| cuts.decided(&cuts.undecided(digits(count), count, cuts.all()), count));
            cuts.by_byte[usize::from(byte)] = cut.unwrap_or(Cut::OPEN);
        }
        cuts
    }

    /// The cut by the first [`BYTE`] digits, if they decide.
    #[inline]
    pub(super) fn by_byte(&self, byte: u8) -> Cut {
        self.by_byte[usize::from(byte)]
    }

    /// The numbers of the thresholds.
    pub(super) fn all(&self) -> Range<usize> {
        0..self.asked.len()
    }

    /// The thresholds that `digits` digits leave undecided: those above the least U that begins so and not
    /// above the greatest (`STREAM.md` §3). The digits are the top ones of `number`, which has no others;
    /// fewer digits left only thresholds `among` these undecided.
    pub(super) fn undecided(&self, number: u128, digits: u32, among: Range<usize>) -> Range<usize> {
        let greatest = number | u128::MAX.checked_shr(digits).unwrap_or(0);
        let asked = &self.asked[among.clone()];
        let not_above = |number: u128| among.start + asked.partition_point(|theta| *theta <= number);
        not_above(number)..not_above(greatest)
    }

    /// The cut, if no threshold is left undecided after `digits` digits.
    pub(super) fn decided(&self, undecided: &Range<usize>, digits: u32) -> Option<Cut> {
        undecided.is_empty().then(|| Cut {
            count: self.counts[undecided.start],
            digits,
        })
    }
}

/// A threshold other than 2^128.
fn below(theta: Threshold) -> Option<u128> {
    match theta {
        Threshold::Below(theta) => Some(theta),
        Threshold::Certain => None,
    }
}

/// From the ends that lift to thresholds, for sites with equal surroundings.
#[derive(PartialEq, Eq, Debug)]
pub(super) struct Rows {
    /// The threshold of each row. Plain digits belong to Ising laws, where none is 2^128.
    pub(super) thresholds: Vec<u128>,
    /// What leads to a row.
    pub(super) strides: Strides,
}

/// How the row follows from the ends that lift.
#[derive(PartialEq, Eq, Debug)]
pub(super) enum Strides {
    /// It is their number.
    One,
    /// It is the sum of their strides, which stand beside their weights here.
    Listed(Vec<(u128, u16)>),
    /// It is the place of the lift in a list.
    Searched(List),
}

/// The weights of the ends of a site, and the lifts that they make.
#[derive(PartialEq, Eq, Debug)]
pub(super) struct List {
    /// Each weight once, increasing.
    pub(super) weights: Vec<u128>,
    /// The lifts, by row.
    pub(super) lifts: Vec<u128>,
}

impl Rows {
    /// The rows of `site`.
    pub(super) fn new(map: &RandomMap, site: u32) -> Self {
        let mut weights: BTreeMap<u128, usize> = BTreeMap::new();
        for end in ends(map, site) {
            *weights.entry(end.weight.unsigned_abs()).or_default() += 1;
        }
        let thetas = |(lift, theta)| (lift, below(theta).unwrap_or(u128::MAX));
        let (lifts, thresholds): (Vec<u128>, Vec<u128>) = lifts(map, site).into_iter().map(thetas).unzip();
        if weights.len() < 2 {
            return Self {
                thresholds,
                strides: Strides::One,
            };
        }
        // a row for each multiple of the common unit, or one for each choice of how many ends of each
        // weight lift: whichever are fewer, unless nearly all of them would stay empty
        let unit = weights.keys().fold(0, |unit, weight| gcd(unit, *weight));
        let multiples = lifts.last().map_or(1, |most| most / unit + 1);
        let choices = weights
            .values()
            .fold(1u128, |rows, ends| rows.saturating_mul(*ends as u128 + 1));
        let rows = multiples.min(choices);
        if rows > MOST_ROWS.min(64 + 8 * lifts.len()) as u128 {
            let weights = weights.into_keys().collect();
            return Self {
                thresholds,
                strides: Strides::Searched(List { weights, lifts }),
            };
        }
        let mut next = 1;
        let strides = weights.iter().map(|(weight, ends)| {
            let choice = next;
            next *= *ends as u128 + 1;
            (*weight, if multiples <= choices { weight / unit } else { choice })
        });
        let strides: Vec<(u128, u128)> = strides.collect();
        let lift = |row: u128| {
            if multiples <= choices {
                return row * unit;
            }
            let digits = strides.iter().rev().scan(row, |rest, (weight, stride)| {
                let lifting = *rest / stride;
                *rest %= stride;
                Some(lifting * weight)
            });
            digits.sum()
        };
        let threshold = |row| thresholds[lifts.partition_point(|other| *other < lift(row))];
        Self {
            thresholds: (0..rows).map(threshold).collect(),
            strides: Strides::Listed(
                strides
                    .iter()
                    .map(|(weight, stride)| (*weight, *stride as u16))
                    .collect(),
            ),
        }
    }
}

/// The greatest common divisor (Euclid).
fn gcd(a: u128, b: u128) -> u128 {
    if b == 0 { a } else { gcd(b, a % b) }
}
