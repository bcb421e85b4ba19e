//! Digits where samples hardly ever lead: U agrees with a threshold in many of them.

use super::*;
use crate::engine::compact::rows::Cuts;
use crate::engine::word::{WORDS, Width};
use crate::threshold::Threshold;

/// Thresholds with few digits, with all, and close together.
const ASKED: [&[u128]; 6] = [
    &[0],
    &[1 << 127],
    &[0, 3 << 126],
    &[1 << 126, 1 << 127, 3 << 126, u128::MAX],
    &[
        0x5a5a << 112,
        (0x5a5a << 112) + 1,
        (0x5a5a << 112) + (1 << 117),
        0x5b << 120,
    ],
    &[1, 2, 3, u128::MAX - 1, u128::MAX],
];

/// The first digits of a number, without the others.
fn first(number: u128, digits: u32) -> u128 {
    number & !u128::MAX.checked_shr(digits).unwrap_or(0)
}

/// `Threshold::is_decided` is `STREAM.md` §3 as it stands.
#[test]
fn digits_decide_when_the_definition_says_so() {
    for asked in ASKED {
        let cuts = Cuts::of(asked.to_vec(), (0..=asked.len() as u32).collect());
        let is_decided = |number: u128, digits| {
            asked
                .iter()
                .all(|theta| Threshold::Below(*theta).is_decided(number, digits))
        };
        let rank = |number: u128| asked.iter().filter(|theta| **theta <= number).count() as u32;
        let check = |number: u128, digits| {
            let undecided = cuts.undecided(number, digits, cuts.all());
            let cut = cuts.decided(&undecided, digits);
            assert_eq!(cut.is_some(), is_decided(number, digits), "{number:x}, {digits}");
            assert!(cut.is_none_or(|cut| (cut.count, cut.digits) == (rank(number), digits)));
        };
        check(0, 0);
        for digits in 1..=11 {
            (0..1u128 << digits).for_each(|number| check(number << (128 - digits), digits));
        }
        // beside each threshold
        for theta in asked {
            for digits in 1..=128 {
                let step = 1 << (128 - digits);
                let own = first(*theta, digits);
                for number in [own.wrapping_sub(step), own, own.wrapping_add(step)] {
                    check(number, digits);
                }
            }
        }
        for byte in 0..=255u8 {
            let number = u128::from(byte) << 120;
            let least = (0..=8).find(|digits| is_decided(first(number, *digits), *digits));
            let cut = cuts.by_byte(byte);
            assert_eq!(least, (!cut.is_open()).then_some(cut.digits), "{byte:x}");
            assert!(cut.is_open() || cut.count == rank(number), "{byte:x}");
        }
    }
}

/// Lanes that follow a threshold for a while, up to all of its digits, against U put together digit by digit.
#[test]
fn a_group_draws_what_its_slowest_lane_needs() {
    let words = Width::widest();
    for (asked, lanes, follows) in [
        (ASKED[0], 100usize, 0),
        (ASKED[1], 512, 1),
        (ASKED[3], 70, 20),
        (ASKED[4], 300, 128),
        (ASKED[4], 64, 40),
        (ASKED[5], 1, 128),
        (ASKED[5], 130, 127),
    ] {
        let width = lanes.div_ceil(64);
        let mut numbers = vec![0; lanes];
        for (lane, number) in numbers.iter_mut().enumerate() {
            let theta = asked[lane % asked.len()];
            let same = if lane == lanes / 2 { follows } else { lane as u32 % 10 };
            *number =
                theta ^ u128::MAX.checked_shr(same).unwrap_or(0) & (0x1234_5678_9abc_def1 * (lane as u128 + 1)) << 60;
        }
        let mut open = vec![[0; WORDS]; 128];
        for digit in 0..128 {
            for (lane, number) in numbers.iter().enumerate() {
                open.as_flattened_mut()[digit * width + lane / 64] |=
                    ((number >> (127 - digit) & 1) as u64) << (lane % 64);
            }
        }
        let is_decided = |number: &u128, digits: u32| {
            let known = first(*number, digits);
            asked
                .iter()
                .all(|theta| Threshold::Below(*theta).is_decided(known, digits))
        };
        let needed = (0..=128)
            .find(|digits| numbers.iter().all(|number| is_decided(number, *digits)))
            .unwrap();

        let cuts = Cuts::of(asked.to_vec(), (0..=asked.len() as u32).collect());
        let places: Vec<u16> = (0..lanes).map(digits::place).collect();
        let mut tap = Tap::holding(open);
        let mut group = GroupDigits::new(words);
        group.begin(lanes, &mut tap);
        let counts = group.cut(&cuts, &places, &mut tap).to_vec();
        group.end(&mut tap);
        let ranks: Vec<_> = numbers
            .iter()
            .map(|number| asked.iter().filter(|theta| *theta <= number).count() as u32)
            .collect();
        assert_eq!(counts, ranks);
        assert_eq!(tap.drawn(), u64::from(needed) * width as u64);
    }
}

/// U and a threshold with equal first halves: the second halves decide.
#[test]
fn the_second_word_decides_where_the_first_is_equal() {
    let lane = Lane {
        number: 1,
        first_row: 1,
    };
    let thresholds: [u128; 4] = [0, (5 << 64) + 7, (5 << 64) + 9, 6 << 64];
    let halves = thresholds.map(|theta| [(theta >> 64) as u64, theta as u64]);
    let (high, low) = (halves.map(|half| half[0]), halves.map(|half| half[1]));
    for number in [
        (4 << 64) + 8,
        (5 << 64) + 6,
        (5 << 64) + 7,
        (5 << 64) + 8,
        (5 << 64) + 9,
        6 << 64,
        (6 << 64) + 1u128,
    ] {
        let words = [3, 3, (number >> 64) as u64, number as u64];
        for rows in [[0, 0], [0, 1], [0, 2], [1, 2]] {
            let by_row = ByRow {
                words: &words,
                high: &high,
                low: &low,
            };
            let known = rows
                .iter()
                .filter(|row| number < thresholds[**row as usize + 1])
                .count();
            assert_eq!(by_row.plus(&lane, rows), known);
        }
    }
}
