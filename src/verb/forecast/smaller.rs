//! The same law on smaller lattices, where a law itself takes longer than the pilot may.
//!
//! Two sizes whose bounds met give a power law of the coupling time in the extent, and that is drawn
//! out to the extent of the plan. At a critical point this is finite-size scaling with an exponent
//! near 2.2 (M. P. Nightingale, H. W. J. Blöte, Physical Review Letters 76, 4548 (1996), for the square
//! lattice; from memory). Away from it the coupling time grows like a logarithm once the lattice is
//! larger than the correlation length, so the power law promises too much. In an ordered phase it
//! grows exponentially, so the power law promises too little. Two signs tell: an exponent above
//! [`STEEP`], and bounds that stay apart far longer than those of a critical lattice of that extent.

use std::time::Duration;

use crate::engine::crew::Crew;
use crate::error::Result;
use crate::lattice::{Lattice, Regular};
use crate::law::Law;
use crate::random_map::RandomMap;
use crate::statistics::{Fit, power};

use super::trials::{Around, Trials};

/// A larger exponent than any critical point of these models has.
const STEEP: f64 = 3.0;

/// The coupling time at a critical point, as measured with this program: 2.3 L^2.17 sweeps for the square lattice with
/// L from 8 to 64, a little less for the triangular and the simple cubic one.
const CRITICAL: (f64, f64) = (2.3, 2.17);

/// So many times that is no chance, but another phase.
const FAR_LONGER: f64 = 30.0;

/// Axes shorter than this stay as they are, and none is made shorter than half of it.
const SHORT: u32 = 8;

/// Trials that must have met on a lattice for it to count.
const LEAST_MET: usize = 4;

/// What smaller lattices say.
#[derive(Clone, Debug, Default)]
pub struct Findings {
    /// What the largest two that were done say of the law itself.
    pub grown: Option<Smaller>,
    /// One on which no trial met, though a critical one would have: its extents and the deepest attempt.
    pub slow: Option<(Vec<u32>, u8)>,
}

/// What two smaller lattices say.
#[derive(Clone, Debug)]
pub struct Smaller {
    /// Their extents, the larger one last.
    pub extents: [Vec<u32>; 2],
    /// Fits at the extent of the plan: for its low, middle and high estimates.
    pub fits: [Fit; 3],
    /// The exponent of the coupling time in the extent.
    pub exponent: f64,
}

impl Smaller {
    /// Whether the coupling time grows faster than at a critical point.
    pub fn is_steep(&self) -> bool {
        self.exponent > STEEP
    }
}

/// Whether `law` has smaller versions.
pub fn exist(law: &Law) -> bool {
    reduced(law, 4).is_some()
}

/// The extents of `lattice` and the depth, if bounds that differ after 2^`failed` sweeps are those of a phase in which
/// they take longer than at a critical point.
pub fn slow(lattice: &Lattice, failed: u8) -> Option<(Vec<u32>, u8)> {
    let Lattice::Regular(regular) = lattice else {
        return None;
    };
    let critical = CRITICAL.0 * power(longest(regular), CRITICAL.1);
    let is_slow = 2f64.powi(i32::from(failed)) > FAR_LONGER * critical;
    is_slow.then(|| (regular.extents().to_vec(), failed))
}

fn longest(regular: &Regular) -> f64 {
    f64::from(regular.extents().iter().copied().max().unwrap_or(1))
}

/// Makes trials of `law` on smaller lattices, from the smallest up, until `end`.
///
/// # Errors
/// [`crate::error::ErrorKind::Stopped`] if somebody wants the command to end.
pub fn smaller(law: &Law, around: &Around<'_>, end: Duration) -> Result<Findings> {
    let mut findings = Findings::default();
    let sizes: Vec<_> = (1..32).map_while(|power| reduced(law, 1 << power)).collect();
    let mut done: Vec<(Regular, Fit)> = Vec::new();
    for (regular, law) in sizes.into_iter().rev() {
        let map = RandomMap::new(&law)?;
        let mut trials = Trials::default();
        let crew = Crew::new(&map, &around.settings);
        trials.go_on(&law, &crew, around, end)?;
        if trials.met() < LEAST_MET {
            let failed = trials.failed.filter(|_| trials.met() == 0);
            findings.slow = failed.and_then(|(failed, _)| slow(law.lattice(), failed));
            break;
        }
        done.extend(Fit::new(&trials.times, map.lanes()).map(|fit| (regular, fit)));
    }
    let (Lattice::Regular(whole), [.., (small, small_fit), (large, large_fit)]) = (law.lattice(), &done[..]) else {
        return Ok(findings);
    };
    let step = longest(large) / longest(small);
    let rest = longest(whole) / longest(large);
    let exponent = large_fit.exponent(small_fit, step);
    findings.grown = Some(Smaller {
        extents: [small, large].map(|regular| regular.extents().to_vec()),
        fits: [exponent.low, exponent.middle, exponent.high].map(|exponent| large_fit.grown(rest, exponent)),
        exponent: exponent.middle,
    });
    Ok(findings)
}

/// `law` with its long axes divided by `factor`, odd ones still odd and even ones even.
pub(super) fn reduced(law: &Law, factor: u32) -> Option<(Regular, Law)> {
    let Lattice::Regular(regular) = law.lattice() else {
        return None;
    };
    if law.held().is_some() {
        return None;
    }
    let extents = regular.extents().iter().map(|extent| {
        if *extent < SHORT {
            return Some(*extent);
        }
        let wanted = extent / factor;
        let same_parity = wanted + (wanted + extent) % 2;
        (same_parity >= SHORT / 2).then_some(same_parity)
    });
    let extents: Vec<u32> = extents.collect::<Option<_>>()?;
    let is_smaller = extents != regular.extents();
    let extents = extents.into_iter().map(u64::from).collect();
    let reduced = Regular::new(regular.kind(), extents, regular.boundary().to_vec()).ok()?;
    let law = Law::new(law.model().clone(), Lattice::Regular(reduced.clone()), None).ok()?;
    is_smaller.then_some((reduced, law))
}
