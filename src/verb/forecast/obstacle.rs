//! Why an ensemble is not advisable, and what to do instead, in words.
//!
//! The finding is that of one ensemble; the advice is the same for all with the same obstacle.

use std::fmt;

use crate::plan::Ensemble;
use crate::random_map::Doubt;
use crate::sample::DEEPEST;
use crate::statistics::Fit;

use super::Pilot;

/// Unfinished samples that may be expected of an ensemble before it is called not advisable, and those that a
/// suggested limit leaves.
const MANY_UNFINISHED: f64 = 0.5;
const FEW_UNFINISHED: f64 = 0.01;

/// A reason against an ensemble as it is planned.
#[derive(Clone, PartialEq, Debug)]
pub enum Obstacle {
    /// It lies below the critical temperature and no trial met.
    Cold {
        /// The deepest attempt that failed.
        failed: u8,
    },
    /// It is frustrated and no trial met.
    Frustrated {
        /// The deepest attempt that failed.
        failed: u8,
        /// Sites at which its bounds differed.
        apart: u64,
        /// Sites that change.
        sites: u64,
    },
    /// Bounds stay apart longer than at a critical point, here or on a smaller lattice.
    Slow {
        /// Its extents.
        extents: Vec<u32>,
        /// The deepest attempt that failed.
        failed: u8,
    },
    /// Coupling times grow faster with the lattice than at a critical point.
    Steep {
        /// The exponent in the extent.
        exponent: f64,
    },
    /// Samples will be unfinished.
    DepthLimit {
        /// The limit.
        limit: u8,
        /// How many, as expected; none if no trial met and all that is known is that the limit is too low.
        unfinished: Option<f64>,
        /// Of how many.
        samples: u64,
        /// A limit that is enough, if one is known.
        enough: Option<u8>,
    },
}

/// What stands against `ensemble`, after its pilot.
pub(super) fn of(ensemble: &Ensemble, pilot: &Pilot<'_>, fit: Option<&Fit>) -> Vec<Obstacle> {
    let (limit, samples) = (ensemble.depth_limit(), ensemble.samples());
    let mut found = Vec::new();
    if let (None, Some((failed, apart))) = (fit, pilot.trials.failed) {
        found.extend(pilot.doubt.map(|doubt| match doubt {
            Doubt::Cold => Obstacle::Cold { failed },
            Doubt::Frustrated => Obstacle::Frustrated {
                failed,
                apart,
                sites: pilot.lanes,
            },
        }));
        if failed >= limit {
            found.push(Obstacle::DepthLimit {
                limit,
                unfinished: None,
                samples,
                enough: None,
            });
        }
    }
    if pilot.trials.met() == 0 {
        let slow = pilot
            .slow
            .clone()
            .map(|(extents, failed)| Obstacle::Slow { extents, failed });
        let steep = pilot.smaller.as_ref().filter(|smaller| smaller.is_steep());
        let steep = steep.map(|smaller| Obstacle::Steep {
            exponent: smaller.exponent,
        });
        found.extend(slow.or(steep));
    }
    if let Some(fit) = fit {
        let unfinished = |depth: u8| samples as f64 * fit.beyond(1 << depth);
        if unfinished(limit) >= MANY_UNFINISHED {
            found.push(Obstacle::DepthLimit {
                limit,
                unfinished: Some(unfinished(limit)),
                samples,
                enough: (limit..=DEEPEST).find(|depth| unfinished(*depth) < FEW_UNFINISHED),
            });
        }
    }
    found
}

impl Obstacle {
    /// The word that stands for it in JSON.
    pub fn code(&self) -> &'static str {
        match self {
            Self::Cold { .. } => "cold",
            Self::Frustrated { .. } => "frustrated",
            Self::Slow { .. } => "slow",
            Self::Steep { .. } => "steep",
            Self::DepthLimit { .. } => "depth_limit",
        }
    }
}

impl Obstacle {
    /// What to do instead.
    pub fn advice(&self) -> &'static str {
        match self {
            Self::Cold { .. } => {
                "below the critical temperature the sweeps that heat bath of sites needs grow exponentially with the \
                 lattice. Raise the temperature, or take a much smaller lattice. Heat bath of bonds, in the \
                 random-cluster representation, suits low temperatures; this version does not draw by it."
            }
            Self::Frustrated { .. } => {
                "the bounds of a frustrated law only enclose its true states, and may never meet. Raise the \
                 temperature (weaker couplings, a lower activity), hold more sites, or take a smaller system. The \
                 random-cluster representation is no way around this."
            }
            Self::Slow { .. } | Self::Steep { .. } => {
                "so it is in an ordered phase, where the sweeps that heat bath of sites needs grow exponentially with \
                 the lattice. Raise the temperature (lower the activity), or take a smaller lattice."
            }
            Self::DepthLimit { .. } => {
                "unfinished samples are recorded, never dropped, and the others alone are a biased set. Raise \
                 depth_limit."
            }
        }
    }
}

impl fmt::Display for Obstacle {
    /// What was found.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Cold { failed } => write!(
                f,
                "it lies below the critical temperature, and the pilot's bounds had not met after 2^{failed} sweeps"
            ),
            Self::Frustrated { failed, apart, sites } => write!(
                f,
                "it is frustrated, and after 2^{failed} sweeps the pilot's bounds were still apart at {apart} of \
                 {sites} sites"
            ),
            Self::Slow { extents, failed } => {
                let extents: Vec<String> = extents.iter().map(ToString::to_string).collect();
                write!(
                    f,
                    "on {} the pilot's bounds had not met after 2^{failed} sweeps, many times what a critical lattice \
                     of that extent takes",
                    extents.join(" x ")
                )
            }
            Self::Steep { exponent } => write!(
                f,
                "coupling times grow with the extent to the power {exponent:.1}, faster than at a critical point"
            ),
            Self::DepthLimit {
                limit,
                unfinished,
                samples,
                enough,
            } => {
                match unfinished {
                    Some(count) => write!(f, "about {count:.0} of {samples} samples would be unfinished")?,
                    None => write!(f, "none of the pilot's trials met")?,
                }
                write!(f, " at depth_limit = {limit}")?;
                match enough {
                    Some(enough) => write!(f, ", none at {enough}"),
                    None => Ok(()),
                }
            }
        }
    }
}
