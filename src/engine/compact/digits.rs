//! Sliced digits, lane by lane (`STREAM.md` §3).
//!
//! A word holds one digit of 64 lanes. The first eight digits of a whole group are turned into a byte a
//! lane, which decides most of them; the digits of the few others are picked one by one. They are looked
//! at before they are drawn: a group draws as many as its slowest lane needs.

use crate::engine::compact::rows::{BYTE, Cut, Cuts};
use crate::engine::compact::tap::Tap;
use crate::engine::word::Words;
use crate::stream::GROUP;

/// Lanes of a group that have neighbouring places.
const ROW: usize = GROUP / 8;

/// Where the byte of a lane stands after [`turn`].
pub(super) fn place(lane: usize) -> u16 {
    (lane % 8 * ROW + lane / 8) as u16
}

/// The digits of one group after the other.
pub(super) struct GroupDigits {
    words: Words,
    /// How many of them give the group one digit.
    width: usize,
    /// The first digits of each lane.
    bytes: [u8; GROUP],
    /// The counts of the cuts of a run.
    counts: [u32; GROUP],
    /// Digits that the slowest lane needs.
    digits: u32,
}

impl GroupDigits {
    /// Digits of no group.
    pub(super) fn new(words: Words) -> Self {
        Self {
            words,
            width: 0,
            bytes: [0; GROUP],
            counts: [0; GROUP],
            digits: 0,
        }
    }

    /// Turns to a group of so many lanes.
    pub(super) fn begin(&mut self, lanes: usize, tap: &mut Tap) {
        self.width = lanes.div_ceil(64);
        self.digits = 0;
        turn(tap.ahead(self.words, BYTE as usize * self.width), &mut self.bytes);
    }

    /// The counts of the cuts of the lanes at `places`.
    pub(super) fn cut(&mut self, cuts: &Cuts, places: &[u16], tap: &mut Tap) -> &[u32] {
        let mut most = self.digits;
        for (place, count) in places.iter().zip(&mut self.counts) {
            let place = usize::from(*place) % GROUP;
            let mut cut = cuts.by_byte(self.bytes[place]);
            if cut.is_open() {
                cut = look_further(cuts, self.bytes[place], place, self.width, self.words, tap);
            }
            most = most.max(cut.digits);
            *count = cut.count;
        }
        self.digits = most;
        &self.counts[..places.len()]
    }

    /// Draws what the group needs.
    pub(super) fn end(&self, tap: &mut Tap) {
        tap.draw(self.digits as usize * self.width);
    }
}

/// The cut of the lane at `place` of a group that draws `width` words a digit, from as many digits as it
/// takes; the first eight, which do not suffice, are `byte`.
#[cold]
#[inline(never)]
fn look_further(cuts: &Cuts, byte: u8, place: usize, width: usize, words: Words, tap: &mut Tap) -> Cut {
    let lane = place % ROW * 8 + place / ROW;
    let mut number = u128::from(byte) << (128 - BYTE);
    let mut digits = BYTE;
    let mut undecided = cuts.undecided(number, digits, cuts.all());
    loop {
        let next = &tap.ahead(words, (digits as usize + 1) * width)[digits as usize * width..];
        digits += 1;
        number |= u128::from(next[lane / 64] >> (lane % 64) & 1) << (128 - digits);
        undecided = cuts.undecided(number, digits, undecided);
        if let Some(cut) = cuts.decided(&undecided, digits) {
            return cut;
        }
    }
}

/// Turns the first eight digits of a group, the words of each digit side by side, into one byte a lane; the
/// first digit is its highest bit.
fn turn(words: &[u64], bytes: &mut [u8; GROUP]) {
    let width = words.len() / BYTE as usize;
    for part in 0..width {
        // eight words are eight squares of 8 x 8 bits, side by side; all are turned over their diagonal by
        // swaps of blocks of 4, 2 and 1 (Warren, Hacker's Delight, section 7-3, from memory)
        let mut rows = [0; BYTE as usize];
        for (row, word) in rows.iter_mut().rev().zip(words[part..].iter().step_by(width)) {
            *row = *word;
        }
        for (block, kept) in [
            (4, 0x0f0f_0f0f_0f0f_0f0f),
            (2, 0x3333_3333_3333_3333),
            (1, 0x5555_5555_5555_5555),
        ] {
            for row in (0..rows.len()).filter(|row| row & block == 0) {
                let swapped = (rows[row] >> block ^ rows[row + block]) & kept;
                rows[row] ^= swapped << block;
                rows[row + block] ^= swapped;
            }
        }
        for (row, lanes) in rows.iter().zip(bytes.chunks_exact_mut(ROW)) {
            lanes[8 * part..][..8].copy_from_slice(&u64::to_le_bytes(*row));
        }
    }
}
