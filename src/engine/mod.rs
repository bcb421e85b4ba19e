//! Engines: programs that apply the random map. All of them give the same samples.
//!
//! The contract is one function, [`Engine::attempt`]. What coupling from the past does with attempts
//! stands in `coupling` and knows no engine; the plain engine in `plain` is the definition, and
//! whatever is faster must agree with it bit for bit. Which one works on a law, and how threads
//! share the work, is decided in `crew` alone. Nothing here knows an archive.

pub mod compact;
pub mod coupling;
pub mod crew;
pub mod leap;
pub mod plain;
pub mod sliced;
#[cfg(test)]
mod tests;
pub mod word;

use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};

use crate::error::{ErrorKind, Result};
use crate::sample::Configuration;
use crate::stream::Address;

/// What one attempt gave (`STREAM.md` §6).
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Attempt {
    /// The largest m such that the bounds are equal at all times -m .. 0; `None` if they differ at time 0.
    pub merged_at: Option<u64>,
    /// How many words were drawn.
    pub words: u64,
}

/// A program that makes attempts for one law, one after the other. What it keeps between attempts
/// (parts of the random map, buffers) may save work and never changes a result.
pub trait Engine: Send {
    /// Starts both bounds at time -2^`depth` and applies epochs `depth` .. 0.
    ///
    /// # Errors
    /// [`ErrorKind::Stopped`] when asked to stop.
    fn attempt(&mut self, address: &Address, depth: u8, stop: &Stop) -> Result<Attempt>;

    /// The lower and the upper bound at time 0 of the last attempt that came to its end.
    fn bounds(&self) -> [Configuration; 2];
}

impl<E: Engine + ?Sized> Engine for Box<E> {
    fn attempt(&mut self, address: &Address, depth: u8, stop: &Stop) -> Result<Attempt> {
        (**self).attempt(address, depth, stop)
    }

    fn bounds(&self) -> [Configuration; 2] {
        (**self).bounds()
    }
}

/// A request to stop, seen within one sweep.
#[derive(Clone, Debug, Default)]
pub struct Stop(Arc<AtomicBool>);

impl Stop {
    /// Stops once `flag` is set.
    pub fn at(flag: Arc<AtomicBool>) -> Self {
        Self(flag)
    }

    /// Goes on, or ends with an error.
    ///
    /// # Errors
    /// [`ErrorKind::Stopped`] once a stop was requested.
    pub fn check(&self) -> Result<()> {
        if self.0.load(Ordering::Relaxed) {
            Err(ErrorKind::Stopped.into())
        } else {
            Ok(())
        }
    }
}
