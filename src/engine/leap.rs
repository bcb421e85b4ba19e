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
/// States that scalar code steps at once.
pub const FEW: usize = 4;

/// Words made ahead; the first time fewer, because many generators give only some.
const AHEAD: usize = 512;
const FIRST: usize = 64;

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

const MANY_STEPS: (u128, u128) = leap(CHAINS);
const FEW_STEPS: (u128, u128) = leap(FEW);

/// The states of words that follow each other, stepped together.
#[derive(Clone)]
pub struct Chains {
    low: [u64; CHAINS],
    high: [u64; CHAINS],
    multiplier: u128,
    increment: u128,
}

impl Chains {
    /// `count` states, [`CHAINS`] or [`FEW`], from `state` on.
    fn new(mut state: u128, increment: u128, count: usize) -> Self {
        let (multiplier, sum) = if count == CHAINS { MANY_STEPS } else { FEW_STEPS };
        let mut chains = Self {
            low: [0; CHAINS],
            high: [0; CHAINS],
            multiplier,
            increment: increment.wrapping_mul(sum),
        };
        for (low, high) in chains.low.iter_mut().zip(&mut chains.high).take(count) {
            (*low, *high) = (state as u64, (state >> 64) as u64);
            state = state.wrapping_mul(u128::from(MULTIPLIER)).wrapping_add(increment);
        }
        chains
    }

    /// The multiplier of all steps at once.
    pub fn multiplier(&self) -> u128 {
        self.multiplier
    }

    /// The increment of all steps at once.
    pub fn increment(&self) -> u128 {
        self.increment
    }

    /// Low and high halves of the states.
    pub fn states(&mut self) -> (&mut [u64; CHAINS], &mut [u64; CHAINS]) {
        (&mut self.low, &mut self.high)
    }

    /// The next words, [`FEW`] at a time.
    #[inline(always)]
    pub fn fill(&mut self, out: &mut [u64]) {
        let mut states: [u128; FEW] =
            std::array::from_fn(|chain| u128::from(self.high[chain]) << 64 | u128::from(self.low[chain]));
        for row in out.chunks_exact_mut(FEW) {
            for (word, state) in row.iter_mut().zip(&mut states) {
                *word = output(*state);
                *state = state.wrapping_mul(self.multiplier).wrapping_add(self.increment);
            }
        }
        for (chain, state) in states.into_iter().enumerate() {
            (self.low[chain], self.high[chain]) = (state as u64, (state >> 64) as u64);
        }
    }
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

/// The words of one generator, in order. All its words must be asked for at one width.
#[derive(Clone)]
pub struct Leap {
    chains: Chains,
    /// Words that wait stand at `at .. end`; what was left over stands before the newly made ones.
    words: [u64; WORDS + AHEAD + WORDS],
    at: usize,
    end: usize,
    /// Words made so far.
    made: u64,
}

impl Leap {
    /// The words of the generator that is seeded with `state` and `stream`, for a width with so many chains.
    pub fn new([state, stream]: [u128; 2], chains: usize) -> Self {
        let increment = stream << 1 | 1;
        let state = state
            .wrapping_add(increment)
            .wrapping_mul(u128::from(MULTIPLIER))
            .wrapping_add(increment);
        Self {
            chains: Chains::new(state, increment, chains),
            words: [0; WORDS + AHEAD + WORDS],
            at: WORDS,
            end: WORDS,
            made: 0,
        }
    }

    /// How many words were handed out.
    pub fn drawn(&self) -> u64 {
        self.made - (self.end - self.at) as u64
    }

    /// The next `count` words (at most eight), followed by anything.
    #[inline(always)]
    pub fn next<L: Lanes>(&mut self, count: usize) -> L {
        if self.at + count > self.end {
            self.refill::<L>();
        }
        let words = self.words[self.at..].first_chunk();
        self.at += count;
        words.map_or_else(|| L::splat(0), L::load)
    }

    #[inline(always)]
    fn refill<L: Lanes>(&mut self) {
        let left = self.end - self.at;
        self.words.copy_within(self.at..self.end, WORDS - left);
        let count = if self.made == 0 { FIRST } else { AHEAD };
        L::fill(&mut self.chains, &mut self.words[WORDS..WORDS + count]);
        (self.at, self.end) = (WORDS - left, WORDS + count);
        self.made += count as u64;
    }
}
