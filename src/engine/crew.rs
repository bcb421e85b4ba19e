//! Who does the work: the one table that chooses an engine for a law, and how threads share samples.
//!
//! The choice is automatic, can be forced, and is invisible in every result. Memory that engines
//! may use to keep parts of a random map is one budget for the whole crew.

use std::fmt;
use std::sync::Mutex;

use rayon::prelude::*;

use crate::engine::Engine;
use crate::engine::plain::Plain;
use crate::error::{Error, Result};
use crate::random_map::RandomMap;

/// Which engine is wanted.
#[derive(Clone, Copy, PartialEq, Eq, Debug, Default)]
pub enum Choice {
    /// The fastest that knows the law.
    #[default]
    Automatic,
    /// The definition.
    Plain,
}

/// How a crew works; none of it changes a result.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Settings {
    /// Which engine.
    pub engine: Choice,
    /// Bytes that all engines together may use to keep parts of a random map.
    pub memory: u64,
    /// Threads; as many as the machine has where it is not given.
    pub threads: Option<usize>,
}

impl Default for Settings {
    fn default() -> Self {
        Self {
            engine: Choice::Automatic,
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

/// Bytes for kept parts of random maps, if nothing else is said.
pub const DEFAULT_MEMORY: u64 = 1 << 30;

/// Engines for one law, as many as threads need.
pub struct Crew<'a> {
    map: &'a RandomMap,
    settings: Settings,
    idle: Mutex<Vec<Box<dyn Engine + 'a>>>,
}

impl<'a> Crew<'a> {
    /// A crew for `map`.
    pub fn new(map: &'a RandomMap, settings: &Settings) -> Self {
        Self {
            map,
            settings: settings.clone(),
            idle: Mutex::new(Vec::new()),
        }
    }

    /// One engine of the crew.
    pub fn engine(&self) -> Box<dyn Engine + 'a> {
        Box::new(Plain::new(self.map))
    }

    /// Does `work` for each of `items` on the threads of the pool that this is called in. The results
    /// stand in the order of the items.
    ///
    /// # Errors
    /// Those of `work`.
    pub fn each<T: Sync, R: Send>(
        &self,
        items: &[T],
        work: impl Fn(&mut dyn Engine, &T) -> Result<R> + Sync,
    ) -> Result<Vec<R>> {
        let one = |item: &T| {
            let idle = self.idle.lock().ok().and_then(|mut idle| idle.pop());
            let mut engine = idle.unwrap_or_else(|| self.engine());
            let result = work(engine.as_mut(), item);
            if let Ok(mut idle) = self.idle.lock() {
                idle.push(engine);
            }
            result
        };
        items.par_iter().with_max_len(1).map(one).collect()
    }
}

impl fmt::Display for Crew<'_> {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{:?}", self.settings.engine)
    }
}
