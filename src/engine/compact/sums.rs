//! The inner loops: what the neighbours of a lane add up to, in both bounds at once.

use crate::engine::compact::rows::{List, MOST_ROWS};

/// Bits of the lower bound's sum; that of the upper bound stands above them.
const BITS: u32 = 15;
/// The greatest sum of one bound.
const MOST: u32 = (1 << BITS) - 1;
const _: () = assert!(MOST_ROWS <= 1 << BITS);

/// Whether a slot lifts, one bit a bound, in two halves: where thresholds rise with its value, and where
/// they fall.
pub(super) type Lifts = [u16; 2];

const LOWER: u16 = 1;
const UPPER: u16 = 1 << BITS;

/// The lifts of a slot by the number of bounds in which it is +1: none, the upper one, or both.
pub(super) const LIFTS: [Lifts; 3] = [[0, LOWER | UPPER], [UPPER, UPPER], [LOWER | UPPER, 0]];

/// Tells what becomes of a lane.
pub(super) trait Decide {
    /// What is to be known of it.
    type Lane;

    /// In how many bounds it becomes +1, from the sums over its ends in the lower and in the upper one.
    fn plus(&self, lane: &Self::Lane, sums: [u32; 2]) -> usize;
}

/// The ends of lanes that are worked alike, all of the same degree.
pub(super) struct Ends<'p> {
    pub(super) degree: usize,
    /// Which half of [`Lifts`] each is, of all slots, lane by lane.
    pub(super) halves: &'p [u32],
    /// The stride of each, or the number of its weight; none where ends are only counted.
    pub(super) strides: &'p [u16],
}

/// No degree in particular.
const ANY: usize = usize::MAX;

/// Each function gives the `new` lifts of all `lanes`, from those of all slots as halves.
impl Ends<'_> {
    /// By the number of ends that lift.
    pub(super) fn count<D: Decide>(&self, lifts: &[u16], lanes: &[D::Lane], decide: &D, new: &mut [Lifts]) {
        match self.degree {
            0 => each(lanes, std::iter::repeat([0; 2]), decide, new),
            1 => self.count_of::<1, D>(lifts, lanes, decide, new),
            2 => self.count_of::<2, D>(lifts, lanes, decide, new),
            3 => self.count_of::<3, D>(lifts, lanes, decide, new),
            4 => self.count_of::<4, D>(lifts, lanes, decide, new),
            5 => self.count_of::<5, D>(lifts, lanes, decide, new),
            6 => self.count_of::<6, D>(lifts, lanes, decide, new),
            7 => self.count_of::<7, D>(lifts, lanes, decide, new),
            8 => self.count_of::<8, D>(lifts, lanes, decide, new),
            _ => {
                let part = |halves: &[u32]| apart(halves.iter().map(|half| u32::from(lifts[*half as usize])).sum());
                let sums = self.halves.chunks_exact(self.degree).map(|halves| {
                    let parts = halves.chunks(MOST as usize).map(part);
                    parts.fold([0; 2], |[lower, upper], more| [lower + more[0], upper + more[1]])
                });
                each(lanes, sums, decide, new);
            }
        }
    }

    /// [`Self::count`] for a degree that is known beforehand.
    #[inline(always)]
    fn count_of<const DEGREE: usize, D: Decide>(
        &self,
        lifts: &[u16],
        lanes: &[D::Lane],
        decide: &D,
        new: &mut [Lifts],
    ) {
        let lift = |half: &u32| u32::from(lifts[*half as usize]);
        let sums = self
            .halves
            .chunks_exact(DEGREE)
            .map(|halves| apart(halves.iter().map(lift).sum()));
        each(lanes, sums, decide, new);
    }

    /// By the sum of their strides, which is below [`MOST_ROWS`].
    pub(super) fn add_strides<D: Decide>(&self, lifts: &[u16], lanes: &[D::Lane], decide: &D, new: &mut [Lifts]) {
        match self.degree {
            2 => self.add_strides_of::<2, D>(lifts, lanes, decide, new),
            3 => self.add_strides_of::<3, D>(lifts, lanes, decide, new),
            4 => self.add_strides_of::<4, D>(lifts, lanes, decide, new),
            5 => self.add_strides_of::<5, D>(lifts, lanes, decide, new),
            6 => self.add_strides_of::<6, D>(lifts, lanes, decide, new),
            7 => self.add_strides_of::<7, D>(lifts, lanes, decide, new),
            8 => self.add_strides_of::<8, D>(lifts, lanes, decide, new),
            _ => self.add_strides_of::<ANY, D>(lifts, lanes, decide, new),
        }
    }

    /// [`Self::add_strides`] for a degree that is known beforehand, or [`ANY`].
    #[inline(always)]
    fn add_strides_of<const DEGREE: usize, D: Decide>(
        &self,
        lifts: &[u16],
        lanes: &[D::Lane],
        decide: &D,
        new: &mut [Lifts],
    ) {
        let degree = if DEGREE == ANY { self.degree } else { DEGREE };
        let ends = self.halves.chunks_exact(degree).zip(self.strides.chunks_exact(degree));
        let lift = |(half, stride): (&u32, &u16)| u32::from(lifts[*half as usize]) * u32::from(*stride);
        let sums = ends.map(|(halves, strides)| apart(halves.iter().zip(strides).map(lift).sum()));
        each(lanes, sums, decide, new);
    }

    /// By the place of the sum of their weights in `list`.
    pub(super) fn search<D: Decide>(
        &self,
        list: &List,
        lifts: &[u16],
        lanes: &[D::Lane],
        decide: &D,
        new: &mut [Lifts],
    ) {
        let ends = self
            .halves
            .chunks_exact(self.degree)
            .zip(self.strides.chunks_exact(self.degree));
        let sums = ends.map(|(halves, numbers)| {
            let mut sums = [0; 2];
            for (half, number) in halves.iter().zip(numbers) {
                let (lift, weight) = (lifts[*half as usize], list.weights[usize::from(*number)]);
                sums[0] += weight * u128::from(lift & LOWER);
                sums[1] += weight * u128::from(lift >> BITS);
            }
            sums.map(|sum| list.lifts.partition_point(|lift| *lift < sum) as u32)
        });
        each(lanes, sums, decide, new);
    }
}

#[inline(always)]
fn each<D: Decide>(lanes: &[D::Lane], sums: impl Iterator<Item = [u32; 2]>, decide: &D, new: &mut [Lifts]) {
    for ((new, lane), sums) in new.iter_mut().zip(lanes).zip(sums) {
        *new = LIFTS[decide.plus(lane, sums)];
    }
}

/// The sums of the two bounds.
#[inline(always)]
fn apart(sum: u32) -> [u32; 2] {
    [sum & MOST, sum >> BITS]
}
