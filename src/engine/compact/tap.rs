//! The words of one strip, some of them before they are drawn.
//!
//! Whoever must see digits to know how many of them are drawn looks ahead here, and then takes as many
//! as the definition says. The compact engine has its words from here alone.

use crate::engine::leap::Leap;
use crate::engine::word::{Kernel, Lanes, WORDS, Words, call};
use crate::stream::GROUP;

/// Words that can be looked at ahead, at most: 128 digits of a full group.
pub(super) const FARTHEST: usize = 128 * GROUP / 64;

/// The words of a strip in one epoch, in their order.
pub(super) struct Tap {
    leap: Leap,
    /// Words that lie open; those from `at` on are not drawn yet.
    open: Vec<[u64; WORDS]>,
    at: usize,
    drawn: u64,
}

impl Tap {
    /// A tap at the first word of `leap`.
    pub(super) fn new(leap: Leap) -> Self {
        Self {
            leap,
            open: Vec::with_capacity(FARTHEST / WORDS + 1),
            at: 0,
            drawn: 0,
        }
    }

    /// A tap before which these words lie open.
    #[cfg(test)]
    pub(super) fn holding(open: Vec<[u64; WORDS]>) -> Self {
        Self {
            open,
            ..Self::new(Leap::new([0; 2], 1))
        }
    }

    /// Begins anew, at the first word of `leap`.
    pub(super) fn refit(&mut self, leap: Leap) {
        self.leap = leap;
        self.open.clear();
        self.at = 0;
        self.drawn = 0;
    }

    /// The next `count` words, at most [`FARTHEST`]; they stay undrawn. `words` are always of one width.
    #[inline]
    pub(super) fn ahead(&mut self, words: Words, count: usize) -> &[u64] {
        if self.open.as_flattened().len() - self.at < count {
            self.pour(words, count);
        }
        &self.open.as_flattened()[self.at..][..count]
    }

    /// Draws `count` words that lie open.
    #[inline]
    pub(super) fn draw(&mut self, count: usize) {
        self.at += count;
        self.drawn += count as u64;
    }

    /// How many words were drawn.
    pub(super) fn drawn(&self) -> u64 {
        self.drawn
    }

    /// Opens words until `count` wait, or as many as were drawn so far: in a short epoch few are made in vain.
    #[inline(never)]
    fn pour(&mut self, words: Words, count: usize) {
        self.open.drain(..self.at / WORDS);
        self.at %= WORDS;
        let left = self.open.len();
        let drawn = usize::try_from(self.drawn).unwrap_or(FARTHEST).min(FARTHEST);
        let wanted = (self.at + count).div_ceil(WORDS).max(drawn / WORDS);
        self.open.resize(wanted, [0; WORDS]);
        let (leap, out) = (&mut self.leap, &mut self.open[left..]);
        call(words, Pour { leap, out });
    }
}

struct Pour<'a> {
    leap: &'a mut Leap,
    out: &'a mut [[u64; WORDS]],
}

impl Kernel for Pour<'_> {
    type Output = ();

    #[inline(always)]
    fn run<L: Lanes>(self) {
        for out in self.out {
            self.leap.next::<L>(WORDS).store(out);
        }
    }
}
