//! Trials of one law: how many sweeps its bounds take to meet, and how long attempts last.
//!
//! A trial is an attempt at a depth that was chosen before. It begins 2^depth sweeps in the past with
//! maps that nothing else used, so the time from its start to the meeting of the bounds is
//! distributed as the coupling time from the past is (Propp and Wilson 1996, from memory): the same
//! independent maps, numbered the other way round. If the bounds do not meet, the coupling time is
//! known to be longer, and counts as that. The first trials of a law do not know what depth is wanted
//! and try longer and longer pasts, as a draw does; of these one knows between which two powers of
//! two the coupling time lies.
//!
//! Whether another attempt is made depends on the time that is left and on how long attempts of that
//! depth take, never on what an attempt under way has found: slow samples are not dropped.

use std::collections::BTreeMap;
use std::time::Duration;

use crate::clock::Clock;
use crate::engine::Attempt;
use crate::engine::Engine;
use crate::engine::Stop;
use crate::engine::crew::{Crew, Settings};
use crate::error::{ErrorKind, Result};
use crate::law::Law;
use crate::observable::Observables;
use crate::observer::Observer;
use crate::quantity::{Digest, SampleIndex, Seed};
use crate::sample::{DEEPEST, Outcome, Sample};
use crate::statistics::Known;
use crate::stream::Address;

/// Exactly known coupling times that are enough: their mean is known to an eighth or better.
const ENOUGH: usize = 64;

/// Trials side by side, at least: so many are judged before the depth is chosen anew.
const BATCH: usize = 8;

/// Bytes of samples that are kept to see how they compress.
const KEPT_BYTES: usize = 1 << 20;

/// The world around a pilot.
pub struct Around<'a> {
    /// Tells the time.
    pub clock: &'a dyn Clock,
    /// Set when somebody wants the command to end.
    pub stop: &'a Stop,
    /// Set when that is so, or when the time is up.
    pub halt: &'a Stop,
    /// Told what is worked on.
    pub observer: &'a dyn Observer,
    /// The seed of the pilot, which is not the run's.
    pub seed: Seed,
    /// Engine, memory and threads of the pilot.
    pub settings: Settings,
    /// The threads of the run.
    pub threads: usize,
}

/// How an attempt of a draw comes about: kept parts of the random map make later ones cheaper.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Turn {
    /// It is the first one.
    First,
    /// The one before was shorter and failed.
    Longer,
    /// The one before was longer and met.
    Shorter,
}

/// What attempts cost, in seconds of one thread.
#[derive(Clone, Debug, Default)]
pub struct Prices(BTreeMap<Turn, BTreeMap<u8, Vec<f64>>>);

impl Prices {
    pub(super) fn add(&mut self, turn: Turn, depth: u8, seconds: f64) {
        let prices = self.0.entry(turn).or_default().entry(depth).or_default();
        // in order, for the median
        prices.insert(prices.partition_point(|price| *price < seconds), seconds);
    }

    /// Whether an attempt of this kind was measured.
    fn has(&self, turn: Turn) -> bool {
        self.0.contains_key(&turn)
    }

    /// The price of an attempt: the median of those measured, or in proportion to the sweeps from the nearest depth
    /// that was measured; 0 if none was. (The mean would let one first use of memory, or one interruption, count.)
    pub fn seconds(&self, turn: Turn, depth: u8) -> f64 {
        let measured = self.0.get(&turn).or_else(|| self.0.values().next());
        let nearest = measured.and_then(|depths| depths.iter().min_by_key(|(known, _)| known.abs_diff(depth)));
        nearest.map_or(0.0, |(known, prices)| {
            prices[prices.len() / 2] * 2f64.powi(i32::from(depth) - i32::from(*known))
        })
    }
}

/// What trials of one law have shown so far.
#[derive(Clone, Debug, Default)]
pub struct Trials {
    /// Coupling times, as far as they are known.
    pub times: Vec<Known>,
    /// What attempts cost.
    pub prices: Prices,
    /// A few samples.
    pub samples: Vec<Sample>,
    /// The deepest attempt that failed, and at how many sites its bounds differed.
    pub failed: Option<(u8, u64)>,
    /// Seconds for hash and observables of a sample: sum and number.
    finishing: (f64, f64),
    /// Seconds of attempts by the clock, and those that they had a processor.
    passed: (f64, f64),
    kept_bytes: usize,
    /// The depth that nearly every trial needs less than, once it can be guessed.
    aim: Option<u8>,
    /// Whether enough trials went the way of a draw, from one sweep on, to know what that costs.
    is_priced: bool,
    /// The number of the next trial.
    next: u64,
}

/// What a trial is to do.
#[derive(Clone, Copy)]
struct Task {
    number: u64,
    first_depth: u8,
    aim: Aim,
}

/// When a trial is over whose first attempt failed or met.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Aim {
    /// It goes on to longer pasts until its bounds meet.
    Meeting,
    /// It is over.
    One,
    /// It is over, but a shorter attempt is made for its price.
    OneAndShorter,
}

/// Seconds of an attempt.
#[derive(Clone, Copy)]
struct Spent {
    /// Those that it had a processor: its price.
    busy: f64,
    /// Those by the clock.
    passed: f64,
}

/// What one trial gave.
#[derive(Default)]
struct Trial {
    time: Option<Known>,
    attempts: Vec<(Turn, u8, Spent)>,
    sample: Option<Sample>,
    finishing: f64,
    failed: Option<(u8, u64)>,
}

impl Trials {
    /// Whether as much is known as is worth its time.
    pub fn is_enough(&self) -> bool {
        let exact = |time: &&Known| matches!(time, Known::Exactly(_));
        self.times.iter().filter(exact).count() >= ENOUGH
    }

    /// Trials whose bounds met.
    pub fn met(&self) -> usize {
        let met = |time: &&Known| !matches!(time, Known::Beyond(_));
        self.times.iter().filter(met).count()
    }

    /// Seconds for hash and observables of one sample.
    pub fn finishing(&self) -> f64 {
        self.finishing.0 / self.finishing.1.max(1.0)
    }

    /// Makes trials on the threads of the pool that this is called in, until enough is known or no further one
    /// is over by `end`: one on each thread, for so the attempts of a run go on, and so they must be timed.
    ///
    /// # Errors
    /// [`ErrorKind::Stopped`] if somebody wants the command to end.
    pub fn go_on(&mut self, law: &Law, crew: &Crew<'_>, around: &Around<'_>, end: Duration) -> Result<()> {
        let making = Making {
            key: law.key()?,
            observables: Observables::new(law),
            around,
            end,
        };
        loop {
            around.stop.check()?;
            let tasks = self.next_tasks(end.saturating_sub(around.clock.elapsed()).as_secs_f64());
            let trials = crew.each(&tasks, |engine, task| making.trial(engine, *task))?;
            if trials.iter().all(|trial| trial.attempts.is_empty()) {
                return around.stop.check();
            }
            self.next += tasks.len() as u64;
            for trial in &trials {
                self.add(trial);
            }
            self.take_aim(&tasks, &trials);
        }
    }

    /// The next trials that there is time for; none if there is no need.
    fn next_tasks(&self, seconds: f64) -> Vec<Task> {
        if self.is_enough() || seconds <= 0.0 {
            return Vec::new();
        }
        // by the clock an attempt takes longer where others use the machine too
        let lag = if self.passed.1 > 0.0 {
            self.passed.0 / self.passed.1
        } else {
            1.0
        };
        let price = |depth: u8| lag * self.prices.seconds(Turn::First, depth);
        let threads = rayon::current_num_threads();
        let most = threads * BATCH.div_ceil(threads);
        let (depth, count, aim) = match self.aim {
            None => (self.failed.map_or(0, |(depth, _)| depth + 1), threads, Aim::Meeting),
            // once more what a draw does, now that its price is known: all attempts of nearly every one have
            // together no more sweeps than one to the aim
            Some(aim) if !self.is_priced && price(aim) * ((most / threads) as f64) < seconds / 2.0 => {
                (0, most, Aim::Meeting)
            }
            Some(aim) => {
                let depth = if price(aim) < seconds { aim } else { aim - 1 };
                let rounds = ((most / threads) as f64).min(seconds / price(depth));
                let priced = self.prices.has(Turn::Shorter);
                let aim = if priced { Aim::One } else { Aim::OneAndShorter };
                (depth, threads * rounds as usize, aim)
            }
        };
        if depth > DEEPEST || price(depth) >= seconds {
            return Vec::new();
        }
        let task = |number| Task {
            number: self.next + number,
            first_depth: depth,
            aim: match aim {
                Aim::OneAndShorter if number > 0 => Aim::One,
                aim => aim,
            },
        };
        (0..count as u64).map(task).collect()
    }

    /// Chooses the depth of the next trials by those that are over: twice the deepest of the first ones, and
    /// more if one in four fails.
    fn take_aim(&mut self, tasks: &[Task], trials: &[Trial]) {
        if self.aim.is_some() && tasks.iter().all(|task| task.aim == Aim::Meeting) {
            self.is_priced = true;
            return;
        }
        let deepest = trials
            .iter()
            .filter_map(|trial| trial.sample.as_ref())
            .map(|sample| sample.depth)
            .max();
        let failed = trials.iter().filter(|trial| trial.failed.is_some()).count();
        self.aim = match self.aim {
            None => deepest.map(|depth| (depth + 1).min(DEEPEST)),
            Some(aim) if failed * 4 > tasks.len() => Some((tasks[0].first_depth + 1).max(aim).min(DEEPEST)),
            aim => aim,
        };
    }

    fn add(&mut self, trial: &Trial) {
        for (turn, depth, spent) in &trial.attempts {
            self.prices.add(*turn, *depth, spent.busy);
            self.passed.0 += spent.passed;
            self.passed.1 += spent.busy;
        }
        self.times.extend(trial.time);
        self.failed = self.failed.max(trial.failed);
        if let Some(sample) = &trial.sample {
            self.finishing.0 += trial.finishing;
            self.finishing.1 += 1.0;
            let bytes = sample.exact().map_or(0, |exact| exact.as_bytes().len());
            if self.samples.is_empty() || self.kept_bytes + bytes <= KEPT_BYTES {
                self.kept_bytes += bytes;
                self.samples.push(sample.clone());
            }
        }
    }
}

/// What all trials of one batch share.
struct Making<'a> {
    key: Digest,
    observables: Observables,
    around: &'a Around<'a>,
    end: Duration,
}

impl Making<'_> {
    fn trial(&self, engine: &mut dyn Engine, task: Task) -> Result<Trial> {
        let address = Address {
            seed: self.around.seed,
            key: self.key,
            sample: SampleIndex(task.number),
        };
        let mut trial = Trial::default();
        let (mut depth, mut turn) = (task.first_depth, Turn::First);
        while let Some((attempt, spent)) = self.timed(|| engine.attempt(&address, depth, self.around.halt))? {
            trial.attempts.push((turn, depth, spent));
            let sweeps = 1u64 << depth;
            if let Some(merged_at) = attempt.merged_at {
                trial.time = Some(match turn {
                    Turn::First => Known::Exactly(sweeps - merged_at),
                    _ => Known::Within {
                        above: sweeps / 2,
                        up_to: sweeps,
                    },
                });
                let (sample, seconds) = self.finish(engine, depth, attempt);
                (trial.sample, trial.finishing) = (Some(sample), seconds);
                if task.aim == Aim::OneAndShorter && depth > 0 {
                    let shorter = self.timed(|| engine.attempt(&address, depth - 1, self.around.halt))?;
                    let spent = shorter.map(|(_, spent)| (Turn::Shorter, depth - 1, spent));
                    trial.attempts.extend(spent);
                }
                return Ok(trial);
            }
            trial.time = Some(Known::Beyond(sweeps));
            let next_ends = self.around.clock.elapsed() + Duration::from_secs_f64(2.0 * spent.passed);
            if task.aim != Aim::Meeting || depth == DEEPEST || next_ends > self.end {
                break;
            }
            (depth, turn) = (depth + 1, Turn::Longer);
        }
        if let Some((_, failed, _)) = trial.attempts.last() {
            let [lower, upper] = engine.bounds();
            let apart = (0..lower.sites()).filter(|site| lower.is_plus(*site) != upper.is_plus(*site));
            trial.failed = Some((*failed, apart.count() as u64));
        }
        Ok(trial)
    }

    /// The sample of an attempt that met, and the seconds for what a draw does with one.
    fn finish(&self, engine: &dyn Engine, depth: u8, attempt: Attempt) -> (Sample, f64) {
        let begin = self.around.clock.busy();
        let [exact, _] = engine.bounds();
        let _ = self.observables.measure(&exact);
        let sample = Sample {
            outcome: Outcome::Exact(exact),
            depth,
            merged_at: attempt.merged_at.unwrap_or(0),
            words: attempt.words,
        };
        let _ = sample.hash();
        (sample, self.around.clock.busy().saturating_sub(begin).as_secs_f64())
    }

    /// What `attempt` gives and what it took; nothing if the time was up before its end.
    fn timed(&self, attempt: impl FnOnce() -> Result<Attempt>) -> Result<Option<(Attempt, Spent)>> {
        let clock = self.around.clock;
        let begin = (clock.elapsed(), clock.busy());
        match attempt() {
            Ok(attempt) => {
                let spent = Spent {
                    busy: clock.busy().saturating_sub(begin.1).as_secs_f64(),
                    passed: clock.elapsed().saturating_sub(begin.0).as_secs_f64(),
                };
                Ok(Some((attempt, spent)))
            }
            Err(error) if matches!(error.kind(), ErrorKind::Stopped) => self.around.stop.check().map(|()| None),
            Err(error) => Err(error),
        }
    }
}
