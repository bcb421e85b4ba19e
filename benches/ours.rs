//! pastproof as a user gets it: engines through a crew, samples through `coupling::draw`.

use std::ops::Range;
use std::time::{Duration, Instant};

use pastproof::engine::crew::{Choice, Crew, Settings};
use pastproof::engine::word::Width;
use pastproof::engine::{Attempt, Engine, Stop, coupling};
use pastproof::law::Law;
use pastproof::random_map::RandomMap;
use pastproof::sample::{Configuration, Sample};
use pastproof::stream::Address;

use crate::Result;
use crate::measure::SLICE;
use crate::systems;

/// Deeper than anything here.
const DEPTH_LIMIT: u8 = 40;

/// Memory with which attempts of one sample share their maps.
pub const WITH_STORE: u64 = 1 << 30;

/// One thread and no memory: each attempt makes its map.
pub fn without_store() -> Settings {
    Settings {
        memory: 0,
        threads: Some(1),
        ..Settings::default()
    }
}

/// The same in words of a width.
pub fn at_width(width: Width) -> Settings {
    Settings {
        width: Some(width),
        ..without_store()
    }
}

/// The definition itself.
pub fn plain() -> Settings {
    Settings {
        engine: Choice::Plain,
        ..without_store()
    }
}

/// What a user gets, on so many threads.
pub fn as_given(threads: usize) -> Settings {
    Settings {
        memory: WITH_STORE,
        threads: Some(threads),
        ..Settings::default()
    }
}

/// A law with its random map.
pub struct Case {
    pub law: Law,
    pub map: RandomMap,
}

impl Case {
    pub fn new(law: Law) -> Result<Self> {
        let map = RandomMap::new(&law)?;
        Ok(Self { law, map })
    }

    pub fn address(&self, sample: u64) -> Address {
        systems::address(&self.law, sample)
    }
}

/// A crew on threads of its own.
pub struct Team<'a> {
    case: &'a Case,
    crew: Crew<'a>,
    pool: rayon::ThreadPool,
}

/// What was done, on the clock.
#[derive(Clone, Copy, Default)]
pub struct Work {
    /// Decisions of both bounds of a site, of all attempts.
    pub decisions: f64,
    pub time: Duration,
    pub samples: u32,
}

impl Work {
    /// Decisions a nanosecond.
    pub fn rate(self) -> f64 {
        self.decisions / self.time.as_nanos() as f64
    }
}

impl<'a> Team<'a> {
    pub fn new(case: &'a Case, settings: &Settings) -> Result<Self> {
        Ok(Self {
            case,
            crew: Crew::new(&case.map, settings),
            pool: settings.pool()?,
        })
    }

    /// Draws samples as `draw` does: the crew decides how its threads share them.
    pub fn draw(&self, samples: Range<u64>) -> Result<(Vec<Sample>, Work)> {
        let addresses: Vec<_> = samples.map(|sample| self.case.address(sample)).collect();
        let start = Instant::now();
        let drawn = self.pool.install(|| {
            self.crew.each(&addresses, |engine, address| {
                let mut counting = Counting { engine, sweeps: 0.0 };
                let sample = coupling::draw(&mut counting, address, 0, DEPTH_LIMIT, &Stop::default())?;
                Ok((sample, counting.sweeps))
            })
        })?;
        let time = start.elapsed();
        let sweeps: f64 = drawn.iter().map(|(_, sweeps)| sweeps).sum();
        let work = Work {
            decisions: sweeps * self.case.map.lanes() as f64,
            time,
            samples: drawn.len() as u32,
        };
        Ok((drawn.into_iter().map(|(sample, _)| sample).collect(), work))
    }

    /// One engine of the crew, for one thread.
    pub fn worker(&self) -> Worker<'_> {
        Worker {
            team: self,
            engine: self.crew.engine(),
            next: 0,
        }
    }
}

/// One engine of a crew with a clock beside it. It stays, as in a run of many samples, so that the memory of
/// its store is asked for once.
pub struct Worker<'t> {
    team: &'t Team<'t>,
    engine: Box<dyn Engine + 't>,
    /// The sample that is drawn next: none is drawn twice, for the engine may remember its map.
    next: u64,
}

impl Worker<'_> {
    /// Draws samples, `count` at most, until `time` is over; one at least.
    pub fn draw(&mut self, time: Duration, count: u32) -> Result<Work> {
        let mut work = Work::default();
        while work.samples == 0 || work.samples < count && work.time < time {
            let address = self.team.case.address(self.next);
            self.next += 1;
            let start = Instant::now();
            let mut counting = Counting {
                engine: self.engine.as_mut(),
                sweeps: 0.0,
            };
            coupling::draw(&mut counting, &address, 0, DEPTH_LIMIT, &Stop::default())?;
            work.time += start.elapsed();
            work.decisions += counting.sweeps * self.team.case.map.lanes() as f64;
            work.samples += 1;
        }
        Ok(work)
    }

    /// One attempt for sample 0, and how long it took.
    fn attempt(&mut self, depth: u8) -> Result<(Attempt, Duration)> {
        let address = self.team.case.address(0);
        let start = Instant::now();
        let attempt = self.engine.attempt(&address, depth, &Stop::default())?;
        Ok((attempt, start.elapsed()))
    }

    /// The longest attempt that ends with the bounds apart, or one as long as half a measurement. Once the
    /// bounds have met, one state is left to carry, which must not count as two.
    pub fn longest_apart(&mut self) -> Result<u8> {
        for depth in 0..DEPTH_LIMIT {
            let (attempt, time) = self.attempt(depth)?;
            if attempt.merged_at.is_some() {
                return depth.checked_sub(1).ok_or("the bounds meet in one sweep".into());
            }
            if time >= SLICE / 2 {
                return Ok(depth);
            }
        }
        Ok(DEPTH_LIMIT)
    }

    /// Decisions a nanosecond in single attempts.
    pub fn attempts(&mut self, depth: u8) -> Result<f64> {
        let mut work = Work::default();
        while work.time < SLICE {
            let (_, time) = self.attempt(depth)?;
            work.decisions += (1u64 << depth) as f64 * self.team.case.map.lanes() as f64;
            work.time += time;
        }
        Ok(work.rate())
    }
}

/// Counts sweeps on their way to an engine.
struct Counting<'e, 'a> {
    engine: &'e mut (dyn Engine + 'a),
    sweeps: f64,
}

impl Engine for Counting<'_, '_> {
    fn attempt(&mut self, address: &Address, depth: u8, stop: &Stop) -> pastproof::error::Result<Attempt> {
        self.sweeps += (1u64 << depth) as f64;
        self.engine.attempt(address, depth, stop)
    }

    fn bounds(&self) -> [Configuration; 2] {
        self.engine.bounds()
    }
}
