//! What is refused, and what is warned of, before the first sample of a plan is drawn.
//!
//! A law is refused for its size here, so that no run fails for it later. A law whose bounds may not
//! meet is never refused: the depth limit decides, and its unfinished samples are recorded. But its
//! author is told beforehand.

use crate::engine::Stop;
use crate::engine::crew::{Crew, Settings};
use crate::error::{Error, Result};
use crate::plan::{Ensemble, Plan};
use crate::quantity::{Digest, EnsembleIndex, SampleIndex, Seed};
use crate::random_map::{Doubt, RandomMap};
use crate::sample::bytes_per_sample;
use crate::stream::Address;

/// Bytes of all packed samples of a run, at most.
const MOST_BYTES: u64 = 1 << 42;

/// Lanes decided in trials over a whole plan, at most: a few seconds.
const TRIAL_LANES: u64 = 1 << 24;

/// Sweeps of one trial, as a power of two, at most.
const TRIAL_DEPTH: u8 = 10;

/// A caution before a run: which ensemble may not finish, and why.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Caution {
    /// The ensemble.
    pub ensemble: EnsembleIndex,
    /// Why, and what will happen.
    pub what: String,
}

/// Refuses a plan whose samples are more than an archive may hold, before any work.
///
/// # Errors
/// [`crate::error::ErrorKind::TooLarge`], with line and ensemble.
pub fn admit(plan: &Plan) -> Result<()> {
    let mut bytes = 0;
    for (number, ensemble) in plan.numbered() {
        bytes += bytes_per_sample(ensemble.law().lattice().sites()) as u64 * ensemble.samples();
        if bytes > MOST_BYTES {
            let error = Error::too_large("bytes of all samples so far", bytes, MOST_BYTES).at_field("samples");
            return Err(error.at_line(ensemble.line()).at_ensemble(number));
        }
    }
    Ok(())
}

/// Checks every law of `plan` before any work, and says where the bounds cannot be expected to meet.
///
/// # Errors
/// Those of [`admit`] and of [`RandomMap::new`], with line and ensemble;
/// [`crate::error::ErrorKind::Stopped`].
pub fn examine(plan: &Plan, stop: &Stop) -> Result<Vec<Caution>> {
    admit(plan)?;
    let (mut cautions, mut lanes_left) = (Vec::new(), TRIAL_LANES);
    for (number, ensemble) in plan.numbered() {
        let at = |error: Error| error.at_line(ensemble.line()).at_ensemble(number);
        let map = RandomMap::new(ensemble.law()).map_err(at)?;
        if let Some(what) = caution(ensemble, &map, &mut lanes_left, stop)? {
            cautions.push(Caution { ensemble: number, what });
        }
    }
    Ok(cautions)
}

/// Why the bounds of this law may not meet, if there is a reason.
fn caution(ensemble: &Ensemble, map: &RandomMap, lanes_left: &mut u64, stop: &Stop) -> Result<Option<String>> {
    let limit = ensemble.depth_limit();
    let end = format!("a sample that has not met after 2^{limit} sweeps is recorded as unfinished, never dropped");
    match Doubt::of(ensemble.law(), map) {
        None => return Ok(None),
        Some(Doubt::Cold) => {
            return Ok(Some(format!(
                "below the critical temperature the bounds meet only after very many sweeps; {end}"
            )));
        }
        Some(Doubt::Frustrated) => {}
    }
    let depth = (0..=TRIAL_DEPTH.min(limit))
        .rev()
        .find(|depth| map.lanes() << depth <= *lanes_left / 2);
    let Some(depth) = depth else {
        return Ok(Some(format!(
            "the law is frustrated, so the bounds may never meet; {end}"
        )));
    };
    *lanes_left -= map.lanes() << depth;
    // a trial of its own: neither its seed nor its words are those of the run
    let address = Address {
        seed: Seed(Digest([0; 32])),
        key: ensemble.key(),
        sample: SampleIndex(0),
    };
    let crew = Crew::new(map, &Settings::default());
    let mut engine = crew.engine();
    let trial = engine.attempt(&address, depth, stop)?;
    if trial.merged_at.is_some() {
        return Ok(None);
    }
    let [lower, upper] = engine.bounds();
    let apart = (0..map.sites())
        .filter(|site| lower.is_plus(*site) != upper.is_plus(*site))
        .count();
    Ok(Some(format!(
        "the law is frustrated, so the bounds may never meet: in a trial of 2^{depth} sweeps they stayed apart at \
         {apart} of {} sites; {end}",
        map.lanes()
    )))
}
