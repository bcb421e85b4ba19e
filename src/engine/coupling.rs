//! Coupling from the past (Propp and Wilson 1996) over attempts, for any engine (`STREAM.md` §6).
//!
//! Maps are never redrawn: an attempt of another depth applies the same epochs again. The state is
//! read at time 0 and nowhere else. No attempt is cut short because it takes long; only the depth
//! limit, fixed before the run, ends a sample, and that sample is then recorded as unfinished.

use crate::engine::Attempt;
use crate::engine::Engine;
use crate::engine::Stop;
use crate::error::Result;
use crate::sample::{Configuration, Outcome, Sample};
use crate::stream::Address;

/// Draws the sample at `address`, making the first attempt at `first_depth`. Neither the sample nor
/// its depth depends on `first_depth`.
///
/// # Errors
/// [`crate::error::ErrorKind::Stopped`] when asked to stop.
pub fn draw(
    engine: &mut dyn Engine,
    address: &Address,
    first_depth: u8,
    depth_limit: u8,
    stop: &Stop,
) -> Result<Sample> {
    let mut depth = first_depth.min(depth_limit);
    let mut attempt = engine.attempt(address, depth, stop)?;
    if attempt.merged_at.is_some() {
        let mut bounds = engine.bounds();
        while depth > 0 {
            let smaller = engine.attempt(address, depth - 1, stop)?;
            if smaller.merged_at.is_none() {
                break;
            }
            (depth, attempt, bounds) = (depth - 1, smaller, engine.bounds());
        }
        return Ok(finish(depth, attempt, bounds));
    }
    while attempt.merged_at.is_none() && depth < depth_limit {
        depth += 1;
        attempt = engine.attempt(address, depth, stop)?;
    }
    Ok(finish(depth, attempt, engine.bounds()))
}

/// The sample that the deciding attempt gives.
fn finish(depth: u8, attempt: Attempt, [lower, upper]: [Configuration; 2]) -> Sample {
    let Attempt { merged_at, words } = attempt;
    match merged_at {
        Some(merged_at) => Sample {
            outcome: Outcome::Exact(lower),
            depth,
            merged_at,
            words,
        },
        None => Sample {
            outcome: Outcome::Unfinished { lower, upper },
            depth,
            merged_at: 0,
            words,
        },
    }
}

/// How far a redraw goes in showing that the recorded depth is the least one.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Proof {
    /// The attempt before the recorded depth is made too and must fail.
    Full,
    /// Only the attempt at the recorded depth is made.
    Fast,
}

/// Draws the sample again from its recorded depth: the attempt at `depth`, and for [`Proof::Full`]
/// the one before it. Returns the sample as that attempt gives it, and whether the smaller attempt
/// met although the recorded depth says that it did not.
///
/// # Errors
/// [`crate::error::ErrorKind::Stopped`] when asked to stop.
pub fn redraw(
    engine: &mut dyn Engine,
    address: &Address,
    depth: u8,
    proof: Proof,
    stop: &Stop,
) -> Result<(Sample, bool)> {
    let attempt = engine.attempt(address, depth, stop)?;
    let bounds = engine.bounds();
    let met = attempt.merged_at.is_some();
    let smaller_met = match proof {
        Proof::Full if met && depth > 0 => engine.attempt(address, depth - 1, stop)?.merged_at.is_some(),
        _ => false,
    };
    Ok((finish(depth, attempt, bounds), smaller_met))
}
