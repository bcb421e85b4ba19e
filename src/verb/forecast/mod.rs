//! `forecast`: what a plan will take, from a pilot on that very plan.
//!
//! The pilot makes trials of every ensemble (`trials`) with seeds of its own, for a time that is set
//! beforehand and shared among them; `statistics` says what the coupling times found mean for all
//! others. Where not one trial ends in time, smaller lattices are tried (`smaller`), and where that is
//! no help either the numbers are lower bounds; which is which is always said. Nothing is written,
//! and no sample of the run is drawn. This module reads no clock: the caller's does.

mod obstacle;
mod smaller;
mod space;
mod trials;

pub use self::obstacle::Obstacle;

use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::time::Duration;

use crate::clock::Clock;
use crate::engine::Stop;
use crate::engine::crew::{Crew, Settings};
use crate::error::{Error, Result};
use crate::observer::Observer;
use crate::plan::{Ensemble, Plan};
use crate::quantity::{Digest, EnsembleIndex, Seed};
use crate::random_map::{Doubt, RandomMap};
use crate::sample::DEEPEST;
use crate::statistics::{Estimate, Fit, Law};

use self::smaller::{Findings, Smaller};
use self::trials::{Around, Prices, Trials, Turn};

/// What a forecast does not show.
pub const NOT_SHOWN: &[&str] = &[
    "how long the run's own samples take: the pilot's were others, and single ones take much longer than most",
    "times on another machine, or on this one when it is busier",
    "that coupling times have the assumed law: the largest of independent geometric times (README.md)",
];

/// How long a pilot looks at a law of which it is doubtful that its bounds meet.
const SHORT_LOOK: Duration = Duration::from_secs(2);

/// How often the watch is looked at.
const BLINK: Duration = Duration::from_millis(20);

/// What a forecast needs.
pub struct Request<'a> {
    /// The plan.
    pub plan: &'a Plan,
    /// Engine, threads and memory of the pilot.
    pub settings: Settings,
    /// The threads that the run will have; those of the pilot where it is not given.
    pub threads: Option<usize>,
    /// When the pilot ends, as the clock counts.
    pub end: Duration,
}

/// What is expected of a whole plan.
#[derive(Clone, PartialEq, Debug)]
pub struct Forecast {
    /// The threads that wall times are for.
    pub threads: usize,
    /// The threads of the pilot.
    pub pilot_threads: usize,
    /// One outlook an ensemble.
    pub ensembles: Vec<Outlook>,
    /// All core time, in seconds.
    pub core_seconds: Figure,
    /// All wall time, in seconds.
    pub wall_seconds: Figure,
    /// The largest memory, in bytes.
    pub memory: f64,
    /// The archive, in bytes.
    pub archive: f64,
}

/// What is expected of one ensemble.
#[derive(Clone, PartialEq, Debug)]
pub struct Outlook {
    /// Which.
    pub ensemble: EnsembleIndex,
    /// Where the numbers come from.
    pub basis: Basis,
    /// Trials at its own lattice, and those of them whose bounds met.
    pub trials: usize,
    /// See `trials`.
    pub met: usize,
    /// The expected coupling time, in sweeps.
    pub coupling_time: Figure,
    /// A further coupling time is at most this with probability 99 %, the pilot's own uncertainty included.
    pub coupling_time_99: Option<u64>,
    /// Core time of all its samples, in seconds.
    pub core_seconds: Figure,
    /// Wall time of all its samples, in seconds.
    pub wall_seconds: Figure,
    /// Memory, in bytes.
    pub memory: f64,
    /// Its part of the archive, in bytes.
    pub archive: f64,
    /// The first depth with the least core time, and that time in seconds.
    pub first_depth: Option<(u8, f64)>,
    /// Why it is not advisable.
    pub obstacles: Vec<Obstacle>,
}

/// Where the numbers of an outlook come from.
#[derive(Clone, PartialEq, Debug)]
pub enum Basis {
    /// Trials of the law itself.
    Trials,
    /// Speed from the law itself, coupling times from two smaller lattices.
    Smaller {
        /// Their extents.
        extents: [Vec<u32>; 2],
        /// The exponent of the coupling time in the extent.
        exponent: f64,
    },
    /// No trial met: lower bounds.
    Bounds,
    /// There was no time for a trial.
    Nothing,
}

/// A number that is estimated, or only bounded, or unknown.
#[derive(Clone, Copy, PartialEq, Debug)]
pub enum Figure {
    /// As estimated.
    About(Estimate),
    /// More than that.
    MoreThan(f64),
    /// Not known at all.
    Unknown,
}

impl Figure {
    /// The number itself or its lower bound; 0 if unknown.
    pub fn at_least(self) -> f64 {
        match self {
            Self::About(estimate) => estimate.middle,
            Self::MoreThan(bound) => bound,
            Self::Unknown => 0.0,
        }
    }

    fn scaled(self, factor: f64) -> Self {
        match self {
            Self::About(Estimate { low, middle, high }) => Self::About(Estimate {
                low: low * factor,
                middle: middle * factor,
                high: high * factor,
            }),
            Self::MoreThan(bound) => Self::MoreThan(bound * factor),
            Self::Unknown => Self::Unknown,
        }
    }

    /// A bound as soon as one part is less than estimated.
    fn sum(parts: impl Iterator<Item = Self>) -> Self {
        let none = Self::About(Estimate {
            low: 0.0,
            middle: 0.0,
            high: 0.0,
        });
        parts.fold(none, |sum, part| match (sum, part) {
            (Self::About(sum), Self::About(part)) => Self::About(Estimate {
                low: sum.low + part.low,
                middle: sum.middle + part.middle,
                high: sum.high + part.high,
            }),
            (sum, part) => Self::MoreThan(sum.at_least() + part.at_least()),
        })
    }
}

/// Makes a pilot and says what is to be expected.
///
/// # Errors
/// [`crate::error::ErrorKind::Stopped`], and those of [`RandomMap::new`] with line and ensemble.
pub fn forecast(request: &Request<'_>, clock: &dyn Clock, observer: &dyn Observer, stop: &Stop) -> Result<Forecast> {
    let pool = request.settings.pool()?;
    let up = Arc::new(AtomicBool::new(false));
    let over = AtomicBool::new(false);
    let (pilot_threads, mut settings) = (pool.current_num_threads(), request.settings.clone());
    let threads = request.threads.unwrap_or(pilot_threads);
    // each engine of the pilot has as much memory as one of the run
    settings.memory = settings.memory / threads.max(pilot_threads) as u64 * pilot_threads as u64;
    let around = Around {
        clock,
        stop,
        halt: &Stop::at(Arc::clone(&up)),
        observer,
        seed: pilot_seed(request.plan)?,
        settings,
        threads,
    };
    let begin = clock.elapsed();
    let watch = || {
        let mut told = 0;
        while !over.load(Ordering::Relaxed) {
            let now = clock.elapsed();
            if now >= request.end || stop.check().is_err() {
                up.store(true, Ordering::Relaxed);
            }
            let seconds = now.saturating_sub(begin).as_secs();
            if seconds > told {
                observer.advance(seconds - told);
                told = seconds;
            }
            std::thread::park_timeout(BLINK);
        }
    };
    std::thread::scope(|scope| {
        let watcher = scope.spawn(watch);
        let outcome = pool.install(|| pilot(request, &around));
        over.store(true, Ordering::Relaxed);
        watcher.thread().unpark();
        outcome
    })
}

/// A seed that no run of the plan can have: whatever rule gives the run's, its text is part of what is hashed.
fn pilot_seed(plan: &Plan) -> Result<Seed> {
    let text = format!("pastproof forecast: pilot of the plan {}", plan.digest()?);
    Ok(Seed(Digest::of(text.as_bytes())))
}

/// Shares the time among the ensembles and sums up.
fn pilot(request: &Request<'_>, around: &Around<'_>) -> Result<Forecast> {
    let (now, plan) = (|| around.clock.elapsed(), request.plan);
    let mut pilots: Vec<Pilot<'_>> = plan
        .numbered()
        .map(|(number, ensemble)| Pilot::new(number, ensemble))
        .collect();
    // what small systems leave of their share goes to the larger ones, and at the end once more to all
    pilots.sort_by_key(|pilot| pilot.ensemble.law().lattice().sites());
    let whole = request.end.saturating_sub(now());
    loop {
        let begin = now();
        let mut waiting = pilots.iter().filter(|pilot| !pilot.is_settled).count();
        for pilot in pilots.iter_mut().filter(|pilot| !pilot.is_settled) {
            let left = request.end.saturating_sub(now());
            let share = left / u32::try_from(waiting).unwrap_or(u32::MAX);
            waiting -= 1;
            if !left.is_zero() {
                around.observer.begin(&format!("ensemble {}", pilot.number), 0);
                pilot
                    .go_on(around, share)
                    .map_err(|error: Error| error.at_line(pilot.ensemble.line()).at_ensemble(pilot.number))?;
            }
            around.stop.check()?;
        }
        if now().saturating_sub(begin) < whole / 50 || now() >= request.end {
            break;
        }
    }
    pilots.sort_by_key(|pilot| pilot.number);
    let outlooks = pilots
        .iter()
        .map(|pilot| pilot.outlook(&request.settings, around.threads));
    let ensembles: Vec<Outlook> = outlooks.collect::<Result<_>>()?;
    Ok(Forecast {
        threads: around.threads,
        pilot_threads: rayon::current_num_threads(),
        core_seconds: Figure::sum(ensembles.iter().map(|outlook| outlook.core_seconds)),
        wall_seconds: Figure::sum(ensembles.iter().map(|outlook| outlook.wall_seconds)),
        memory: ensembles.iter().map(|outlook| outlook.memory).fold(0.0, f64::max),
        archive: space::fixed_bytes(plan)? + ensembles.iter().map(|outlook| outlook.archive).sum::<f64>(),
        ensembles,
    })
}

/// What is known of one ensemble so far.
struct Pilot<'a> {
    number: EnsembleIndex,
    ensemble: &'a Ensemble,
    trials: Trials,
    /// What smaller lattices say, and one on which bounds stay apart longer than at a critical point.
    smaller: Option<Smaller>,
    slow: Option<(Vec<u32>, u8)>,
    doubt: Option<Doubt>,
    lanes: u64,
    /// Seconds to make the map.
    setup: f64,
    /// Samples that a run works on at a time.
    at_once: usize,
    /// No more time is worth spending on it.
    is_settled: bool,
}

impl<'a> Pilot<'a> {
    fn new(number: EnsembleIndex, ensemble: &'a Ensemble) -> Self {
        Self {
            number,
            ensemble,
            trials: Trials::default(),
            smaller: None,
            slow: None,
            doubt: None,
            lanes: 1,
            setup: 0.0,
            at_once: 1,
            is_settled: false,
        }
    }

    /// Makes trials for about as long as `share`.
    fn go_on(&mut self, around: &Around<'_>, share: Duration) -> Result<()> {
        let law = self.ensemble.law();
        let begin = around.clock.elapsed();
        let end = begin + share;
        let map = RandomMap::new(law)?;
        self.setup = around.clock.elapsed().saturating_sub(begin).as_secs_f64();
        self.lanes = map.lanes();
        self.doubt = Doubt::of(law, &map);
        let crew = Crew::new(&map, &around.settings);
        if self.trials.times.is_empty() {
            let manner = crew.manner(self.ensemble.samples(), rayon::current_num_threads());
            around.observer.note(&format!("ensemble {}: {manner}", self.number));
        }
        self.at_once = crew.at_once(around.threads);
        // as long as none has met, half of the time is kept for smaller lattices
        let first_end = match self.doubt {
            Some(_) => end.min(around.clock.elapsed() + SHORT_LOOK),
            None if smaller::exist(law) => begin + share / 2,
            None => end,
        };
        self.trials.go_on(law, &crew, around, first_end)?;
        if self.trials.met() > 0 {
            self.trials.go_on(law, &crew, around, end)?;
            self.is_settled = self.trials.is_enough();
        } else if self.doubt.is_some() {
            self.is_settled = true;
        } else if let Some((failed, _)) = self.trials.failed {
            self.slow = smaller::slow(law.lattice(), failed);
            if self.slow.is_none() {
                drop(crew);
                let Findings { grown, slow } = smaller::smaller(law, around, end)?;
                self.smaller = grown.or(self.smaller.take());
                self.slow = slow;
            }
            self.is_settled = self.slow.is_some();
        }
        Ok(())
    }

    fn outlook(&self, settings: &Settings, threads: usize) -> Result<Outlook> {
        let (ensemble, trials, prices) = (self.ensemble, &self.trials, &self.trials.prices);
        let samples = ensemble.samples() as f64;
        let limit = ensemble.depth_limit();
        let first_depth = ensemble.first_depth().min(limit);
        let (basis, fits) = match (Fit::new(&trials.times, self.lanes), &self.smaller) {
            (Some(fit), _) => (Basis::Trials, Some([fit.clone(), fit.clone(), fit])),
            (None, Some(smaller)) if !trials.times.is_empty() => (
                Basis::Smaller {
                    extents: smaller.extents.clone(),
                    exponent: smaller.exponent,
                },
                Some(smaller.fits.clone()),
            ),
            _ if trials.times.is_empty() => (Basis::Nothing, None),
            _ => (Basis::Bounds, None),
        };
        // the audit at the end of a run reads all samples once more
        let beside = |seconds: f64| samples * (seconds + 2.0 * trials.finishing()) + self.setup;
        let wall = (ensemble.samples().div_ceil(threads as u64)) as f64 / samples;
        let mut outlook = Outlook {
            ensemble: self.number,
            basis,
            trials: trials.times.len(),
            met: trials.met(),
            coupling_time: Figure::Unknown,
            coupling_time_99: None,
            core_seconds: Figure::Unknown,
            wall_seconds: Figure::Unknown,
            memory: 0.0,
            archive: space::archive_bytes(ensemble, &trials.samples)?,
            first_depth: None,
            obstacles: obstacle::of(ensemble, self, fits.as_ref().map(|[_, middle, _]| middle)),
        };
        if let Some([low, middle, high]) = &fits {
            let estimate = |quantity: &dyn Fn(&Law) -> f64| {
                Figure::About(Estimate {
                    low: low.estimate(quantity).low,
                    middle: middle.estimate(quantity).middle,
                    high: high.estimate(quantity).high,
                })
            };
            let core =
                |first_depth: u8| estimate(&|law| beside(seconds(prices, first_depth, limit, |time| law.beyond(time))));
            outlook.coupling_time = estimate(&Law::mean);
            outlook.coupling_time_99 = Some(middle.quantile(0.99));
            outlook.core_seconds = core(first_depth);
            let beyond: Vec<f64> = (0..=DEEPEST).map(|depth| middle.beyond(1 << depth)).collect();
            let price = |first| seconds(prices, first, limit, |time: u64| beyond[time.ilog2() as usize]);
            let best = (0..=limit).min_by(|one, other| price(*one).total_cmp(&price(*other)));
            outlook.first_depth = best.map(|depth| (depth, core(depth).at_least()));
        } else if let Some((failed, _)) = trials.failed {
            outlook.coupling_time = Figure::MoreThan((1u64 << failed) as f64);
            // a draw makes at least the attempts that failed here
            let spent = seconds(prices, first_depth, limit.min(failed), |_| 1.0);
            outlook.core_seconds = Figure::MoreThan(beside(spent));
        }
        outlook.wall_seconds = outlook.core_seconds.scaled(wall);
        let sweeps = outlook
            .coupling_time_99
            .map_or(f64::INFINITY, |time| time.next_power_of_two() as f64);
        outlook.memory = space::memory(ensemble, settings, threads, self.at_once, sweeps);
        Ok(outlook)
    }
}

/// Seconds that the attempts of one draw are expected to take: each attempt's price, times the probability that
/// it is made (see `engine::coupling`), which `beyond` gives as P(T > t).
fn seconds(prices: &Prices, first_depth: u8, limit: u8, beyond: impl Fn(u64) -> f64) -> f64 {
    const NEVER: f64 = 1e-12;
    let longer = (first_depth..limit).map(|failed| (beyond(1 << failed), Turn::Longer, failed + 1));
    let shorter = (1..=first_depth)
        .rev()
        .map(|met| (1.0 - beyond(1 << met), Turn::Shorter, met - 1));
    let expected = |(probability, turn, depth)| probability * prices.seconds(turn, depth);
    let likely = |attempt: &(f64, Turn, u8)| attempt.0 > NEVER;
    prices.seconds(Turn::First, first_depth)
        + longer.take_while(likely).map(expected).sum::<f64>()
        + shorter.take_while(likely).map(expected).sum::<f64>()
}

#[cfg(test)]
mod tests;
