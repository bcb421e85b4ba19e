//! The plain engine: `STREAM.md` §2 to §6 written down as they stand. It is the definition.
//!
//! Clarity is its only virtue: one site after the other, whole numbers, no tricks. It is never
//! optimised; every other engine is held to it.

use crate::engine::Attempt;
use crate::engine::Engine;
use crate::engine::Stop;
use crate::error::Result;
use crate::law::Digits;
use crate::random_map::{End, RandomMap};
use crate::sample::Configuration;
use crate::stream::{Address, GROUP, STRIP, Words};

/// Applies a random map site by site.
pub struct Plain<'a> {
    map: &'a RandomMap,
    /// The lists of a sweep.
    lists: Vec<Vec<u32>>,
    /// Where the ends of each site begin, and the last ones end.
    first: Vec<usize>,
    ends: Vec<End>,
    lower: Vec<bool>,
    upper: Vec<bool>,
}

impl<'a> Plain<'a> {
    /// The plain engine of `map`.
    pub fn new(map: &'a RandomMap) -> Self {
        let (mut first, mut ends) = (vec![0], Vec::new());
        for site in 0..map.sites() {
            ends.extend(map.ends(site));
            first.push(ends.len());
        }
        let lists = map.classes().iter().map(|class| class.sites().collect()).collect();
        Self {
            map,
            lists,
            first,
            ends,
            lower: Vec::new(),
            upper: Vec::new(),
        }
    }

    /// The numbers U of a group of lanes, each with the digits that were handed out on top.
    fn numbers(&self, lanes: &[u32], words: &mut Words) -> Vec<u128> {
        match self.map.digits() {
            Digits::Plain => lanes
                .iter()
                .map(|_| u128::from(words.next_word()) << 64 | u128::from(words.next_word()))
                .collect(),
            Digits::Sliced => {
                let mut numbers = vec![0u128; lanes.len()];
                let mut digits = 0;
                while !lanes
                    .iter()
                    .zip(&numbers)
                    .all(|(site, number)| self.is_decided(*site, *number, digits))
                {
                    for part in numbers.chunks_mut(64) {
                        let word = words.next_word();
                        for (lane, number) in part.iter_mut().enumerate() {
                            *number |= u128::from(word >> lane & 1) << (127 - digits);
                        }
                    }
                    digits += 1;
                }
                numbers
            }
        }
    }

    /// Whether `digits` digits of `number` decide every threshold that `site` could be asked.
    fn is_decided(&self, site: u32, number: u128, digits: u32) -> bool {
        self.map
            .asked(site)
            .iter()
            .all(|threshold| threshold.is_decided(number, digits))
    }

    /// What `site` becomes with `number` when the far end of each of its edges has the value that `far` gives.
    fn becomes_plus(&self, site: u32, number: u128, far: impl Fn(&End) -> bool) -> bool {
        let ends = &self.ends[self.first[site as usize]..self.first[site as usize + 1]];
        self.map
            .threshold_among(site, ends.iter().copied(), far)
            .is_above(number)
    }

    /// One sweep: every lane of every class decided once, in both bounds.
    fn sweep(&self, strips: &mut Vec<Words>, address: &Address, epoch: u32, lower: &mut [bool], upper: &mut [bool]) {
        for list in &self.lists {
            for (group, lanes) in list.chunks(GROUP).enumerate() {
                let strip = group / STRIP;
                if strip == strips.len() {
                    strips.push(address.words(epoch, u32::try_from(strip).unwrap_or(u32::MAX)));
                }
                let numbers = self.numbers(lanes, &mut strips[strip]);
                for (&site, number) in lanes.iter().zip(numbers) {
                    let smallest = |end: &End| bound(end.rising, lower, upper)[end.site as usize];
                    let largest = |end: &End| bound(end.rising, upper, lower)[end.site as usize];
                    let both = [
                        self.becomes_plus(site, number, smallest),
                        self.becomes_plus(site, number, largest),
                    ];
                    [lower[site as usize], upper[site as usize]] = both;
                }
            }
        }
    }
}

/// The bound of a neighbour that pulls the threshold the wished way: `with` where the threshold
/// grows with the neighbour, else `against`.
fn bound<'b>(rising: bool, with: &'b [bool], against: &'b [bool]) -> &'b [bool] {
    if rising { with } else { against }
}

impl Engine for Plain<'_> {
    fn attempt(&mut self, address: &Address, depth: u8, stop: &Stop) -> Result<Attempt> {
        let sites = self.map.sites() as usize;
        let mut lower = vec![false; sites];
        let mut upper = vec![true; sites];
        for (site, spin) in self.map.held() {
            lower[*site as usize] = spin.bit();
            upper[*site as usize] = spin.bit();
        }
        let mut words = 0;
        let mut merged_at = None;
        let mut time_left = 1u64 << depth;
        for epoch in (0..=u32::from(depth)).rev() {
            let mut strips = Vec::new();
            let sweeps = if epoch == 0 { 1 } else { 1u64 << (epoch - 1) };
            for _ in 0..sweeps {
                stop.check()?;
                self.sweep(&mut strips, address, epoch, &mut lower, &mut upper);
                time_left -= 1;
                if merged_at.is_none() && lower == upper {
                    merged_at = Some(time_left);
                }
            }
            words += strips.iter().map(Words::drawn).sum::<u64>();
        }
        (self.lower, self.upper) = (lower, upper);
        Ok(Attempt { merged_at, words })
    }

    fn bounds(&self) -> [Configuration; 2] {
        [Configuration::pack(&self.lower), Configuration::pack(&self.upper)]
    }
}
