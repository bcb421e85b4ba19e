//! The bit-sliced engine: 512 lanes at a time, both bounds one bit a site, for laws with one coupling
//! and one field (or one activity) on lattices whose neighbours stand at few distances.
//!
//! States are kept in lane order ([`program`]); a sweep takes each class strip by strip, makes the
//! planes of a few groups ([`kernel::decide`]) or finds them in the [`store`], and makes new values
//! from them ([`kernel::update`]). Strips of one class do not depend on each other, so one large
//! sample can be shared by threads, strip by strip.

pub mod kernel;
pub mod program;
pub mod store;

use std::ops::Range;

use rayon::prelude::*;

use crate::engine::Attempt;
use crate::engine::Engine;
use crate::engine::Stop;
use crate::engine::leap::Leap;
use crate::engine::sliced::kernel::{Sides, Sweeps, Update, decide, decide_sweeps, sweep, update};
use crate::engine::sliced::program::Program;
use crate::engine::sliced::store::Store;
use crate::engine::word::{Block, WORDS, Words};
use crate::error::Result;
use crate::random_map::RandomMap;
use crate::sample::Configuration;
use crate::stream::{Address, STRIP};

/// Groups whose planes are made before they are used: they stay in the nearest cache.
const BATCH: usize = 16;

/// Blocks of planes of the sweeps that a small system makes at a time: they stay in that cache too.
const TOGETHER: usize = 96;

/// How strips are worked on.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Strips {
    /// One after the other.
    InTurn,
    /// Side by side, on the threads of the pool that the engine is called in.
    SideBySide,
}

/// Applies a compiled random map.
pub struct Sliced<'a> {
    map: &'a RandomMap,
    program: &'a Program,
    words: Words,
    strips: Strips,
    bounds: Bounds,
    store: Store,
    /// Planes that are used at once and not kept: one batch for each strip.
    batches: Vec<Block>,
    /// Sweeps that a small system makes at a time; 0 for a large one.
    together: u64,
}

/// Both bounds in lane order; the upper one is out of date once they have met.
struct Bounds {
    lower: States,
    upper: States,
    met: bool,
}

/// One bound, from the beginning of a cache line on.
struct States {
    words: Vec<u64>,
    first: usize,
}

impl States {
    fn new(words: usize) -> Self {
        let words = vec![0; words + WORDS];
        let first = words.as_ptr().align_offset(size_of::<Block>()).min(WORDS);
        Self { words, first }
    }

    fn all(&self) -> &[u64] {
        &self.words[self.first..]
    }

    fn all_mut(&mut self) -> &mut [u64] {
        &mut self.words[self.first..]
    }
}

/// Where the planes of a class or of a strip come from.
enum Planes<'a, G: ?Sized> {
    /// They were kept.
    Kept(&'a [Block]),
    /// They are made, and kept here.
    Keep(&'a mut G, &'a mut [Block]),
    /// They are made batch by batch, here.
    Pass(&'a mut G, &'a mut [Block]),
}

/// One strip of a class.
struct Strip<'a> {
    groups: Range<usize>,
    planes: Planes<'a, Leap>,
    lower: &'a mut [u64],
    upper: &'a mut [u64],
}

/// The lower and the upper bounds of a strip.
type OwnBounds<'a> = (&'a mut [u64], &'a mut [u64]);

impl<'a> Strip<'a> {
    /// From its number in the class, its bounds, and its planes.
    fn new((number, (bounds, planes)): (usize, (OwnBounds<'a>, Planes<'a, Leap>))) -> Self {
        let (lower, upper) = bounds;
        let first = number * STRIP;
        Self {
            groups: first..first + lower.len() / WORDS,
            planes,
            lower,
            upper,
        }
    }
}

impl<'a> Sliced<'a> {
    /// An engine for `map` by its `program`, which may keep planes in so many bytes.
    pub fn new(map: &'a RandomMap, program: &'a Program, words: Words, strips: Strips, bytes: u64) -> Self {
        Self {
            map,
            program,
            words,
            strips,
            bounds: Bounds {
                lower: States::new(program.words),
                upper: States::new(program.words),
                met: false,
            },
            store: Store::new(bytes),
            batches: vec![Block::NONE; (program.strips() * BATCH * program.planes()).max(TOGETHER)],
            together: TOGETHER.checked_div(program.planes_of_sweep()).unwrap_or(0) as u64,
        }
    }

    /// Applies one epoch; `swept` is told how many more sweeps are made, and
    /// whether the bounds are equal after the last of them: it ends where they become so. Gives the words
    /// that its generators gave.
    fn epoch(&mut self, address: &Address, epoch: u8, stop: &Stop, mut swept: impl FnMut(usize, bool)) -> Result<u64> {
        let (program, size) = (self.program, self.program.planes_of_sweep());
        let sweeps = if epoch == 0 { 1 } else { 1u64 << (epoch - 1) };
        let (kept, allowed) = self.store.epoch(usize::from(epoch), size);
        let mut leaps = std::mem::take(&mut kept.leaps);
        if leaps.is_empty() {
            let seeding = |strip| address.seeding(u32::from(epoch), u32::try_from(strip).unwrap_or(u32::MAX));
            leaps.extend((0..program.strips()).map(|strip| Leap::new(seeding(strip), self.words.width().chains())));
        }
        // the generators as they are after the kept sweeps, once sweeps are made that are not kept
        let mut at_kept = None;
        let mut sweep = 0;
        while sweep < sweeps {
            if let Err(stopped) = stop.check() {
                self.store.forget();
                return Err(stopped);
            }
            let start = usize::try_from(sweep).unwrap_or(usize::MAX).saturating_mul(size);
            let is_kept = start < kept.planes.len();
            let keeps = !is_kept && sweep < allowed;
            // a small system makes several sweeps of one kind at a time
            let end = match (is_kept, keeps) {
                (true, _) => (kept.planes.len() / size) as u64,
                (_, true) => sweeps.min(allowed),
                _ => sweeps,
            };
            let count = self.together.min(end - sweep).max(1);
            let blocks = count as usize * size;
            if keeps {
                let all = usize::try_from(end).unwrap_or(usize::MAX).saturating_mul(size);
                kept.planes.reserve_exact(all.saturating_sub(kept.planes.len()));
                kept.planes.resize(start + blocks, Block::NONE);
            } else if !is_kept && at_kept.is_none() && !kept.planes.is_empty() {
                at_kept = Some(leaps.clone());
            }
            if self.together > 0 {
                let planes = if is_kept || keeps {
                    &mut kept.planes[start..start + blocks]
                } else {
                    &mut self.batches[..blocks]
                };
                if !is_kept {
                    decide_sweeps(self.words, program, &mut leaps[0], planes);
                }
                self.bounds.sweep(program, self.words, planes, &mut swept);
            } else {
                let mut place = start;
                let mut differ = false;
                for number in 0..program.classes.len() {
                    let end = place + program.classes[number].groups() * program.planes();
                    let planes = if is_kept {
                        Planes::Kept(&kept.planes[place..end])
                    } else if keeps {
                        Planes::Keep(&mut leaps[..], &mut kept.planes[place..end])
                    } else {
                        Planes::Pass(&mut leaps[..], &mut self.batches[..])
                    };
                    differ |= self.bounds.update(program, number, self.words, self.strips, planes);
                    place = end;
                }
                self.bounds.met |= !differ;
                swept(1, self.bounds.met);
            }
            sweep += count;
        }
        let words = leaps.iter().map(Leap::drawn).sum();
        if !kept.planes.is_empty() {
            kept.leaps = at_kept.unwrap_or(leaps);
        }
        Ok(words)
    }

    fn configuration(&self, states: &[u64]) -> Configuration {
        let classes = self.map.classes().iter().zip(&self.program.classes);
        let plus = classes.flat_map(|(sites, class)| {
            let states = &states[class.start..];
            let lanes = sites.sites().enumerate();
            lanes.filter(|(lane, _)| states[lane / 64] >> (lane % 64) & 1 == 1)
        });
        let held = self.map.held().iter().filter(|(_, spin)| spin.bit());
        Configuration::of_plus(
            self.map.sites(),
            plus.map(|(_, site)| site).chain(held.map(|(site, _)| *site)),
        )
    }
}

impl Bounds {
    /// Makes as many sweeps as there are planes for, by a program of one strip.
    fn sweep(&mut self, program: &Program, words: Words, mut planes: &[Block], mut swept: impl FnMut(usize, bool)) {
        while !planes.is_empty() {
            let work = Sweeps {
                program,
                planes,
                lower: self.lower.all_mut(),
                upper: self.upper.all_mut(),
                met: self.met,
            };
            let (made, met) = sweep(words, work);
            self.met = met;
            swept(made, met);
            planes = &planes[made * program.planes_of_sweep()..];
        }
    }

    /// Updates one class; says whether its bounds differ.
    fn update(
        &mut self,
        program: &Program,
        number: usize,
        words: Words,
        strips: Strips,
        planes: Planes<'_, [Leap]>,
    ) -> bool {
        let class = &program.classes[number];
        let size = program.planes();
        let own = class.start..class.start + class.groups() * WORDS;
        let (lower, own_lower) = Sides::around(self.lower.all_mut(), own.clone());
        let (upper, own_upper) = Sides::around(self.upper.all_mut(), own);
        let upper = (!self.met).then_some(upper);
        let work = |strip: Strip<'_>| {
            let mut differ = false;
            let mut update = |groups: Range<usize>, planes: &[Block]| {
                let first = strip.groups.start;
                let place = (groups.start - first) * WORDS..(groups.end - first) * WORDS;
                differ |= update(
                    words,
                    Update {
                        program,
                        class,
                        groups,
                        planes,
                        lower,
                        upper,
                        own_lower: &mut strip.lower[place.clone()],
                        own_upper: &mut strip.upper[place],
                    },
                );
            };
            match strip.planes {
                Planes::Kept(planes) => update(strip.groups.clone(), planes),
                Planes::Keep(leap, planes) => {
                    for (batch, planes) in planes.chunks_mut(BATCH * size).enumerate() {
                        let first = strip.groups.start + batch * BATCH;
                        let groups = first..first + planes.len() / size;
                        decide(words, program, class, groups.clone(), leap, planes);
                        update(groups, planes);
                    }
                }
                Planes::Pass(leap, planes) => {
                    for first in strip.groups.clone().step_by(BATCH) {
                        let groups = first..strip.groups.end.min(first + BATCH);
                        let planes = &mut planes[..groups.len() * size];
                        decide(words, program, class, groups.clone(), leap, planes);
                        update(groups, planes);
                    }
                }
            }
            differ
        };
        let own = own_lower
            .chunks_mut(STRIP * WORDS)
            .zip(own_upper.chunks_mut(STRIP * WORDS));
        match planes {
            Planes::Kept(planes) => {
                let planes = planes.chunks(STRIP * size).map(Planes::Kept);
                strips.each(own.zip(planes).enumerate().map(Strip::new), work)
            }
            Planes::Keep(leaps, planes) => {
                let planes = leaps.iter_mut().zip(planes.chunks_mut(STRIP * size));
                let planes = planes.map(|(leap, planes)| Planes::Keep(leap, planes));
                strips.each(own.zip(planes).enumerate().map(Strip::new), work)
            }
            Planes::Pass(leaps, batches) => {
                let planes = leaps.iter_mut().zip(batches.chunks_mut(BATCH * size));
                let planes = planes.map(|(leap, planes)| Planes::Pass(leap, planes));
                strips.each(own.zip(planes).enumerate().map(Strip::new), work)
            }
        }
    }
}

impl Strips {
    /// Does `work` on each strip; says whether any said so.
    fn each<'s>(self, strips: impl Iterator<Item = Strip<'s>>, work: impl Fn(Strip<'s>) -> bool + Sync + Send) -> bool {
        match self {
            Self::InTurn => strips.fold(false, |any, strip| work(strip) | any),
            Self::SideBySide => {
                let strips: Vec<Strip<'s>> = strips.collect();
                strips.into_par_iter().map(work).reduce(|| false, |any, one| any | one)
            }
        }
    }
}

impl Engine for Sliced<'_> {
    fn attempt(&mut self, address: &Address, depth: u8, stop: &Stop) -> Result<Attempt> {
        self.store.turn_to(address);
        self.bounds.lower.words.fill(0);
        self.bounds.upper.words.fill(u64::MAX);
        self.bounds.met = false;
        let (mut words, mut merged_at, mut left) = (0, None, 1u64 << depth);
        for epoch in (0..=depth).rev() {
            words += self.epoch(address, epoch, stop, |sweeps, met| {
                left -= sweeps as u64;
                if met && merged_at.is_none() {
                    merged_at = Some(left);
                }
            })?;
        }
        Ok(Attempt { merged_at, words })
    }

    fn bounds(&self) -> [Configuration; 2] {
        let lower = self.configuration(self.bounds.lower.all());
        let upper = if self.bounds.met {
            lower.clone()
        } else {
            self.configuration(self.bounds.upper.all())
        };
        [lower, upper]
    }
}
