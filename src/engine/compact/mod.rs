//! The compact engine: any site law, lane by lane, in small numbers.
//!
//! Both bounds of a site share a number of 16 bits, so that one sum over its neighbours counts for both
//! bounds; what digits decide is then held against that sum. What can be known before the first sweep
//! stands in a [`Program`], which engines share. A sweep allocates nothing. Every result is that of the
//! plain engine, which is the definition.

mod digits;
mod program;
mod rows;
mod sums;
mod tap;

use crate::engine::Attempt;
use crate::engine::Engine;
use crate::engine::Stop;
use crate::engine::leap::Leap;
use crate::engine::word::Words;
use crate::error::Result;
use crate::law::Digits;
use crate::sample::Configuration;
use crate::stream::{Address, GROUP};

use digits::GroupDigits;
use program::{Group, Lane, Sum};
use sums::{Decide, LIFTS, Lifts};
use tap::Tap;

pub use program::Program;

/// Applies a random map by its program.
pub struct Compact<'a> {
    program: &'a Program,
    words: Words,
    /// Of each slot, one of [`LIFTS`].
    lifts: Vec<Lifts>,
    /// Of each strip.
    taps: Vec<Tap>,
    digits: GroupDigits,
    /// What becomes of a group.
    new: [Lifts; GROUP],
}

impl<'a> Compact<'a> {
    /// An engine for `program`.
    pub fn new(program: &'a Program, words: Words) -> Self {
        Self {
            program,
            words,
            lifts: vec![LIFTS[1]; program.site_of.len()],
            taps: Vec::new(),
            digits: GroupDigits::new(words),
            new: [LIFTS[1]; GROUP],
        }
    }

    /// One sweep; whether the bounds differ after it.
    fn sweep(&mut self) -> bool {
        let mut differ = false;
        for group in &self.program.groups {
            match self.program.digits {
                Digits::Sliced => self.decide_sliced(group),
                Digits::Plain => self.decide_plain(group),
            }
            let new = &self.new[..group.lanes];
            self.lifts[group.first..][..group.lanes].copy_from_slice(new);
            differ |= new.contains(&LIFTS[1]);
        }
        differ
    }

    /// Decides a group with sliced digits.
    fn decide_sliced(&mut self, group: &Group) {
        let (program, tap) = (self.program, &mut self.taps[group.strip]);
        let lifts = self.lifts.as_flattened();
        let mut new = &mut self.new[..];
        self.digits.begin(group.lanes, tap);
        for run in &program.runs[group.runs.clone()] {
            let (cuts, places) = (&program.cuts[run.table], &program.places[run.slots.clone()]);
            let counts = self.digits.cut(cuts, places, tap);
            let own;
            (own, new) = new.split_at_mut(counts.len());
            program.ends(run).count(lifts, counts, &ByCount, own);
        }
        self.digits.end(tap);
    }

    /// Decides a group with plain digits.
    fn decide_plain(&mut self, group: &Group) {
        let (program, tap) = (self.program, &mut self.taps[group.strip]);
        let lifts = self.lifts.as_flattened();
        let mut new = &mut self.new[..];
        let words = tap.ahead(self.words, 2 * group.lanes);
        for run in &program.runs[group.runs.clone()] {
            let (ends, lanes) = (program.ends(run), &program.lanes[run.slots.clone()]);
            let by_row = ByRow {
                words,
                high: &program.high,
                low: &program.low,
            };
            let own;
            (own, new) = new.split_at_mut(lanes.len());
            match run.sum {
                Sum::Count => ends.count(lifts, lanes, &by_row, own),
                Sum::Strides => ends.add_strides(lifts, lanes, &by_row, own),
                Sum::Weights => ends.search(&program.lists[run.table], lifts, lanes, &by_row, own),
            };
        }
        tap.draw(2 * group.lanes);
    }

    /// The sites of slots that are +1 in at least `least` bounds, and the held ones.
    fn bound(&self, least: usize) -> Configuration {
        let slots = self.program.site_of.iter().zip(&self.lifts);
        let plus = slots.filter(|(_, lifts)| LIFTS[least..].contains(lifts));
        let held = self.program.held_plus.iter();
        Configuration::of_plus(self.program.sites, plus.map(|(site, _)| *site).chain(held.copied()))
    }
}

impl Engine for Compact<'_> {
    fn attempt(&mut self, address: &Address, depth: u8, stop: &Stop) -> Result<Attempt> {
        self.lifts.fill(LIFTS[1]);
        let mut words = 0;
        let mut merged_at = None;
        let mut time_left = 1u64 << depth;
        for epoch in (0..=u32::from(depth)).rev() {
            for strip in 0..self.program.strips {
                let leap = Leap::new(address.seeding(epoch, strip), self.words.width().chains());
                match self.taps.get_mut(strip as usize) {
                    Some(tap) => tap.refit(leap),
                    None => self.taps.push(Tap::new(leap)),
                }
            }
            let sweeps = if epoch == 0 { 1 } else { 1u64 << (epoch - 1) };
            for _ in 0..sweeps {
                stop.check()?;
                let differ = self.sweep();
                time_left -= 1;
                // from then on both are one, at no more cost: they are summed and compared together
                if merged_at.is_none() && !differ {
                    merged_at = Some(time_left);
                }
            }
            words += self.taps.iter().map(Tap::drawn).sum::<u64>();
        }
        Ok(Attempt { merged_at, words })
    }

    fn bounds(&self) -> [Configuration; 2] {
        [self.bound(2), self.bound(1)]
    }
}

/// Decides lanes by the number of lifting ends from which on they become +1.
struct ByCount;

impl Decide for ByCount {
    type Lane = u32;

    #[inline(always)]
    fn plus(&self, count: &u32, [lower, upper]: [u32; 2]) -> usize {
        usize::from(lower >= *count) + usize::from(upper >= *count)
    }
}

/// Decides lanes by the thresholds of their rows.
struct ByRow<'a> {
    /// Two for each lane of the group.
    words: &'a [u64],
    high: &'a [u64],
    low: &'a [u64],
}

impl Decide for ByRow<'_> {
    type Lane = Lane;

    #[inline(always)]
    fn plus(&self, lane: &Lane, rows: [u32; 2]) -> usize {
        let word = 2 * usize::from(lane.number);
        let (number, rows) = (self.words[word], rows.map(|row| (lane.first_row + row) as usize));
        let [lower, upper] = rows.map(|row| self.high[row]);
        if number == lower || number == upper {
            return self.plus_by_all_digits(word, rows);
        }
        usize::from(number < lower) + usize::from(number < upper)
    }
}

impl ByRow<'_> {
    #[cold]
    #[inline(never)]
    fn plus_by_all_digits(&self, word: usize, rows: [usize; 2]) -> usize {
        let number = (self.words[word], self.words[word + 1]);
        let above = |row: &usize| number < (self.high[*row], self.low[*row]);
        rows.iter().filter(|row| above(row)).count()
    }
}

#[cfg(test)]
mod tests;
