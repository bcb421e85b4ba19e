//! Who does the work: the one table that chooses an engine for a law, and how threads share samples.
//!
//! The choice is automatic, can be forced, and is invisible in every result. Memory that engines
//! may use to keep parts of a random map is one budget for the whole crew.

use std::fmt;
use std::sync::Mutex;

use rayon::prelude::*;

use crate::engine::Engine;
use crate::engine::compact::{self, Compact};
use crate::engine::plain::Plain;
use crate::engine::sliced::program::Program;
use crate::engine::sliced::{Sliced, Strips};
use crate::engine::word::{Width, Words};
use crate::error::{Error, Result};
use crate::random_map::RandomMap;
use crate::sample::bytes_per_sample;

/// Which engine is wanted.
#[derive(Clone, Copy, PartialEq, Eq, Debug, Default)]
pub enum Choice {
    /// The fastest that knows the law.
    #[default]
    Automatic,
    /// The definition.
    Plain,
    /// Lane by lane, for any law.
    Compact,
    /// 512 lanes at a time, also where that is slow; lane by lane where it does not know the law.
    Sliced,
}

/// How a crew works; none of it changes a result.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Settings {
    /// Which engine.
    pub engine: Choice,
    /// The widest words to use; where it is not given, the widest of the machine.
    pub width: Option<Width>,
    /// Bytes that all engines together may use to keep parts of a random map.
    pub memory: u64,
    /// Threads; as many as the machine has where it is not given.
    pub threads: Option<usize>,
}

/// Bytes for kept parts of random maps, if nothing else is said.
pub const DEFAULT_MEMORY: u64 = 1 << 30;

impl Default for Settings {
    fn default() -> Self {
        Self {
            engine: Choice::Automatic,
            width: None,
            memory: DEFAULT_MEMORY,
            threads: None,
        }
    }
}

impl Settings {
    /// The pool of threads.
    ///
    /// # Errors
    /// [`crate::error::ErrorKind::Io`] if they cannot be started.
    pub fn pool(&self) -> Result<rayon::ThreadPool> {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(self.threads.unwrap_or(0));
        pool.build()
            .map_err(|error| Error::io("start threads", std::io::Error::other(error)))
    }
}

/// What an engine works from, made once for a law.
enum Compiled {
    Plain,
    Compact(Box<compact::Program>, Words),
    Sliced(Box<Program>, Words),
}

/// Engines for one law, as many as threads need.
pub struct Crew<'a> {
    map: &'a RandomMap,
    compiled: Compiled,
    memory: u64,
}

/// Samples, or strips of one sample: what threads share.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
enum Sharing {
    Samples,
    Strips,
}

/// Strips of one class, for each thread at least, that make it worthwhile to share one sample.
const STRIPS_A_THREAD: usize = 2;

/// Samples worked on before the next ones are begun: so many, or so many bytes of them, whichever is less, but some
/// for each thread.
const MOST_AT_ONCE: usize = 1024;
const LARGE_BLOCK: usize = 8 << 20;
const SAMPLES_A_THREAD: usize = 2;

impl<'a> Crew<'a> {
    /// A crew for `map`.
    pub fn new(map: &'a RandomMap, settings: &Settings) -> Self {
        let words = settings.width.and_then(Width::words).unwrap_or_else(Width::widest);
        let sliced = match settings.engine {
            Choice::Automatic => Program::if_fast(map),
            Choice::Sliced => Program::new(map),
            Choice::Plain | Choice::Compact => None,
        };
        let compiled = match (settings.engine, sliced) {
            (Choice::Plain, _) => Compiled::Plain,
            (_, Some(program)) => Compiled::Sliced(Box::new(program), words),
            (_, None) => Compiled::Compact(Box::new(compact::Program::new(map)), words),
        };
        Self {
            map,
            compiled,
            memory: settings.memory,
        }
    }

    /// One engine of the crew, with all of the memory.
    pub fn engine(&self) -> Box<dyn Engine + '_> {
        self.one_of(1, Strips::InTurn)
    }

    /// One of `count` engines, with its share of the memory.
    fn one_of(&self, count: usize, strips: Strips) -> Box<dyn Engine + '_> {
        let memory = self.memory / count as u64;
        match &self.compiled {
            Compiled::Plain => Box::new(Plain::new(self.map)),
            Compiled::Compact(program, words) => Box::new(Compact::new(program, *words)),
            Compiled::Sliced(program, words) => Box::new(Sliced::new(self.map, program, *words, strips, memory)),
        }
    }

    /// How many samples to hand to [`Crew::each`] at a time: enough that threads seldom wait for the last ones, and
    /// not more in memory than that takes.
    pub fn at_once(&self, threads: usize) -> usize {
        let large = LARGE_BLOCK / bytes_per_sample(self.map.sites());
        let enough = SAMPLES_A_THREAD * threads;
        large.min(MOST_AT_ONCE).max(enough).next_multiple_of(threads)
    }

    /// How so many samples are worked on by so many threads, in words.
    pub fn manner(&self, samples: u64, threads: usize) -> String {
        let side_by_side = match self.sharing_of_rest(threads) {
            Sharing::Samples => samples,
            Sharing::Strips => samples - samples % threads as u64,
        };
        let mut manner = self.to_string();
        if let Compiled::Sliced(..) = self.compiled {
            manner += &format!("; up to {} MiB for kept maps", self.memory >> 20);
        }
        if side_by_side > 0 {
            manner += &format!("; {} side by side", plural(side_by_side.min(threads as u64), "sample"));
        }
        if samples > side_by_side {
            let rest = plural(samples - side_by_side, "sample");
            manner += &format!("; {rest} by strips on {}", plural(threads as u64, "thread"));
        }
        manner
    }

    /// Does `work` for each of `items` on the threads of the pool that this is called in: side by
    /// side, and where fewer are left than threads and one sample is large, each on all threads.
    /// The results stand in the order of the items.
    ///
    /// # Errors
    /// Those of `work`.
    pub fn each<T: Sync, R: Send>(
        &self,
        items: &[T],
        work: impl Fn(&mut dyn Engine, &T) -> Result<R> + Sync,
    ) -> Result<Vec<R>> {
        let threads = rayon::current_num_threads();
        let whole = match self.sharing_of_rest(threads) {
            Sharing::Samples => items.len(),
            Sharing::Strips => items.len() - items.len() % threads,
        };
        let (side_by_side, rest) = items.split_at(whole);
        let mut results: Vec<R> = {
            let engines = threads.min(side_by_side.len()).max(1);
            let idle: Mutex<Vec<Box<dyn Engine + '_>>> = Mutex::default();
            let one = |item: &T| {
                let engine = idle.lock().ok().and_then(|mut idle| idle.pop());
                let mut engine = engine.unwrap_or_else(|| self.one_of(engines, Strips::InTurn));
                let result = work(engine.as_mut(), item);
                if let Ok(mut idle) = idle.lock() {
                    idle.push(engine);
                }
                result
            };
            side_by_side
                .par_iter()
                .with_max_len(1)
                .map(one)
                .collect::<Result<_>>()?
        };
        if !rest.is_empty() {
            let mut engine = self.one_of(1, Strips::SideBySide);
            for item in rest {
                results.push(work(engine.as_mut(), item)?);
            }
        }
        Ok(results)
    }

    /// What threads share when there are fewer samples than threads.
    fn sharing_of_rest(&self, threads: usize) -> Sharing {
        match &self.compiled {
            Compiled::Sliced(program, _) if threads > 1 && program.strips() >= STRIPS_A_THREAD * threads => {
                Sharing::Strips
            }
            _ => Sharing::Samples,
        }
    }
}

fn plural(count: u64, what: &str) -> String {
    format!("{count} {what}{}", if count == 1 { "" } else { "s" })
}

impl fmt::Display for Crew<'_> {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match &self.compiled {
            Compiled::Plain => write!(f, "plain engine"),
            Compiled::Compact(_, words) => write!(f, "compact engine, {}", words.width()),
            Compiled::Sliced(_, words) => write!(f, "bit-sliced engine, {}", words.width()),
        }
    }
}
