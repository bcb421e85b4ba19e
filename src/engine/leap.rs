//! The words of one generator, many at a time (`STREAM.md` §1): the same words in the same order.
//!
//! The generator is an affine map modulo 2^128, so n steps are one affine map too (Brown 1994,
//! "Random number generation with arbitrary strides", from memory). [`Chains`] holds the states of
//! n words in a row and steps them all by n; [`Leap`] hands the words out. How many words were
//! drawn counts what was handed out, never what was made ahead.

use crate::engine::word::{Lanes, WORDS};

/// The multiplier of PCG64-DXSM.
pub const MULTIPLIER: u64 = 0xda94_2042_e4dd_58b5;
/// States that vectors step at once.
pub const CHAINS: usize = 32;
/// States that scalar code steps at once: as many as its registers hold.
const FEW: usize = 2;

/// Words made ahead; the first time fewer, because many generators give only some.
const AHEAD: usize = 1024;
const FIRST: usize = 128;
/// Words that may be left over when more are made.
const LEFT: usize = 128;

/// The affine map of n steps: the multiplier, and what the increment is multiplied by.
const fn leap(steps: usize) -> (u128, u128) {
    let (mut power, mut sum, mut step) = (1u128, 0u128, 0);
    while step < steps {
        sum = sum.wrapping_mul(MULTIPLIER as u128).wrapping_add(1);
        power = power.wrapping_mul(MULTIPLIER as u128);
        step += 1;
    }
    (power, sum)
}

const VECTOR_STEP: (u128, u128) = leap(CHAINS);
const LONG_RUN: (u128, u128) = leap(AHEAD / FEW);
const SHORT_RUN: (u128, u128) = leap(FIRST / FEW);

/// The states of the next [`CHAINS`] words, or of the next word alone.
#[derive(Clone)]
pub struct Chains {
    low: [u64; CHAINS],
    high: [u64; CHAINS],
    increment: u128,
}

impl Chains {
    /// `count` states from `state` on: [`CHAINS`] for vectors, 1 for scalar code.
    pub fn new(mut state: u128, increment: u128, count: usize) -> Self {
        let mut chains = Self {
            low: [0; CHAINS],
            high: [0; CHAINS],
            increment,
        };
        for (low, high) in chains.low.iter_mut().zip(&mut chains.high).take(count) {
            (*low, *high) = (state as u64, (state >> 64) as u64);
            state = step(state, increment);
        }
        chains
    }

    /// Low and high halves of all states, and the multiplier and the increment of as many steps.
    pub fn vectors(&mut self) -> ([&mut [u64; CHAINS]; 2], [u128; 2]) {
        let (multiplier, sum) = VECTOR_STEP;
        let step = [multiplier, self.increment.wrapping_mul(sum)];
        ([&mut self.low, &mut self.high], step)
    }

    /// The next words, as many as are made ahead, in a few runs side by side.
    #[inline(always)]
    pub fn fill(&mut self, out: &mut [u64]) {
        let run = out.len() / FEW;
        let (power, sum) = if run == AHEAD / FEW { LONG_RUN } else { SHORT_RUN };
        let mut states = [u128::from(self.high[0]) << 64 | u128::from(self.low[0]); FEW];
        for chain in 1..FEW {
            let jump = self.increment.wrapping_mul(sum);
            states[chain] = states[chain - 1].wrapping_mul(power).wrapping_add(jump);
        }
        let (first, second) = out.split_at_mut(run);
        for (first, second) in first.iter_mut().zip(second) {
            (*first, *second) = (output(states[0]), output(states[1]));
            states = states.map(|state| step(state, self.increment));
        }
        let next = states[FEW - 1];
        (self.low[0], self.high[0]) = (next as u64, (next >> 64) as u64);
    }
}

#[inline(always)]
fn step(state: u128, increment: u128) -> u128 {
    state.wrapping_mul(u128::from(MULTIPLIER)).wrapping_add(increment)
}

/// DXSM: the word of a state.
#[inline(always)]
fn output(state: u128) -> u64 {
    let (mut high, low) = ((state >> 64) as u64, state as u64);
    high ^= high >> 32;
    high = high.wrapping_mul(MULTIPLIER);
    high ^= high >> 48;
    high.wrapping_mul(low | 1)
}

/// Words made ahead, with room for a block before and behind.
#[derive(Clone)]
#[repr(align(64))]
struct Buffer([u64; LEFT + AHEAD + WORDS]);

/// The words of one generator, in order. All its words must be asked for at one width.
#[derive(Clone)]
pub struct Leap {
    /// Words that wait stand at `at .. end`; what was left over stands before the newly made ones.
    words: Buffer,
    chains: Chains,
    at: usize,
    end: usize,
    /// Words made so far.
    made: u64,
}

impl Leap {
    /// The words of the generator that is seeded with `state` and `stream`, for a width with so many chains.
    pub fn new([state, stream]: [u128; 2], chains: usize) -> Self {
        let increment = stream << 1 | 1;
        let state = step(state.wrapping_add(increment), increment);
        Self {
            chains: Chains::new(state, increment, chains),
            words: Buffer([0; LEFT + AHEAD + WORDS]),
            at: LEFT,
            end: LEFT,
            made: 0,
        }
    }

    /// These words, and no others.
    #[cfg(test)]
    pub fn holding(words: &[u64]) -> Self {
        let mut leap = Self::new([0, 0], 1);
        leap.words.0[LEFT..LEFT + words.len()].copy_from_slice(words);
        leap.end = LEFT + words.len();
        leap.made = words.len() as u64;
        leap
    }

    /// How many words were handed out.
    pub fn drawn(&self) -> u64 {
        self.made - (self.end - self.at) as u64
    }

    /// The next `count` words (at most eight), followed by anything.
    #[inline(always)]
    pub fn next<L: Lanes>(&mut self, count: usize) -> L {
        self.make_ready::<L>(count);
        let words = self.glance(0);
        self.skip(count);
        words
    }

    /// Makes sure that `count` words wait: not more than may be left over.
    #[inline(always)]
    pub fn make_ready<L: Lanes>(&mut self, count: usize) {
        if self.at + count > self.end {
            self.refill::<L>();
        }
    }

    /// Words that wait, from the one at `offset` on, followed by anything; none is handed out.
    #[inline(always)]
    pub fn glance<L: Lanes>(&self, offset: usize) -> L {
        let words = self.words.0[self.at + offset..].first_chunk();
        words.map_or_else(|| L::splat(0), L::load)
    }

    /// Hands out `count` words that were made ready.
    #[inline(always)]
    pub fn skip(&mut self, count: usize) {
        self.at += count;
    }

    #[inline(always)]
    fn refill<L: Lanes>(&mut self) {
        let left = self.end - self.at;
        // always as many as there is room for: a copy of known length
        let last: [u64; LEFT] = std::array::from_fn(|at| self.words.0[self.end - LEFT + at]);
        self.words.0[..LEFT].copy_from_slice(&last);
        let count = if self.made == 0 { FIRST } else { AHEAD };
        L::fill(&mut self.chains, &mut self.words.0[LEFT..LEFT + count]);
        (self.at, self.end) = (LEFT - left, LEFT + count);
        self.made += count as u64;
    }
}
