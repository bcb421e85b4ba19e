//! What lies below the fast engines, against its definition: operations on lanes at every width of this
//! machine, the generator read ahead, and digits compared a group at a time.
//!
//! Small enough for an interpreter that finds undefined behaviour (`.ci/run long`).

use crate::engine::leap::Leap;
use crate::engine::sliced::kernel::decide;
use crate::engine::sliced::program::{Program, Rule};
use crate::engine::word::{Block, Kernel, Lanes, WORDS, Width, Words, call};
use crate::lattice::{Boundary, Kind, Lattice, Regular};
use crate::law::{Beta, Law, Model};
use crate::number::Exact;
use crate::quantity::{Digest, SampleIndex, Seed};
use crate::random_map::RandomMap;
use crate::stream::Address;
use crate::threshold::Threshold;

fn widths() -> Vec<Words> {
    Width::here().filter_map(Width::words).collect()
}

fn address() -> Address {
    Address {
        seed: Seed(Digest::of(b"Larkmoor, below the engines")),
        key: Digest::of(b"no law"),
        sample: SampleIndex(3),
    }
}

/// Blocks of arbitrary bits.
fn blocks(count: usize) -> Vec<[u64; WORDS]> {
    let mut words = address().words(0, 0);
    (0..count).map(|_| std::array::from_fn(|_| words.next_word())).collect()
}

/// Every operation on three blocks.
struct Operations<'a>(&'a [[u64; WORDS]]);

impl Kernel for Operations<'_> {
    type Output = (Vec<[u64; WORDS]>, [bool; 2]);

    #[inline(always)]
    fn run<L: Lanes>(self) -> Self::Output {
        let [a, b, c] = [0, 1, 2].map(|at| L::load(&self.0[at]));
        let results = [
            a.and(b),
            a.or(b),
            a.xor(b),
            a.without(b),
            a.select(b, c),
            a.or_and(b, c),
            a.and_xor(b, c),
            L::splat(u64::MAX),
            L::splat(0),
        ];
        let stored = results.map(|result| {
            let mut block = [0; WORDS];
            result.store(&mut block);
            block
        });
        (stored.to_vec(), [a.is_none(), L::splat(0).is_none()])
    }
}

#[test]
fn operations_work_lane_by_lane() {
    let blocks = blocks(3);
    let [a, b, c] = [0, 1, 2].map(|at| blocks[at]);
    let each = |work: fn(u64, u64, u64) -> u64| -> [u64; WORDS] { std::array::from_fn(|at| work(a[at], b[at], c[at])) };
    let expected = [
        each(|a, b, _| a & b),
        each(|a, b, _| a | b),
        each(|a, b, _| a ^ b),
        each(|a, b, _| a & !b),
        each(|a, b, c| (a & b) | (!a & c)),
        each(|a, b, c| a | (b & c)),
        each(|a, b, c| a & (b ^ c)),
        [u64::MAX; WORDS],
        [0; WORDS],
    ];
    for words in widths() {
        let (found, none) = call(words, Operations(&blocks));
        assert_eq!(found, expected, "{}", words.width());
        assert_eq!(none, [false, true]);
        // one lane is enough to be found
        for lane in [0, 63, 64, 300, 511] {
            let mut one = [[0; WORDS]; 3];
            one[0][lane / 64] = 1 << (lane % 64);
            assert_eq!(call(words, Operations(&one)).1, [false, true], "lane {lane}");
        }
    }
}

struct Window<'a>(&'a [u64; WORDS + 1], u64);

impl Kernel for Window<'_> {
    type Output = [u64; WORDS];

    #[inline(always)]
    fn run<L: Lanes>(self) -> [u64; WORDS] {
        let mut block = [0; WORDS];
        L::window(self.0, self.1).store(&mut block);
        block
    }
}

#[test]
fn a_window_begins_at_any_bit() {
    let mut words = address().words(1, 0);
    let bits: [u64; WORDS + 1] = std::array::from_fn(|_| words.next_word());
    for shift in 0..64u64 {
        let wide = |at: usize| u128::from(bits[at + 1]) << 64 | u128::from(bits[at]);
        let expected: [u64; WORDS] = std::array::from_fn(|at| (wide(at) >> shift) as u64);
        for words in widths() {
            assert_eq!(
                call(words, Window(&bits, shift)),
                expected,
                "{} shift {shift}",
                words.width()
            );
        }
    }
}

/// Asks for blocks of `count` words, some of them seen before they are handed out.
struct Reading<'a> {
    leap: &'a mut Leap,
    counts: &'a [usize],
}

impl Kernel for Reading<'_> {
    type Output = Vec<u64>;

    #[inline(always)]
    fn run<L: Lanes>(self) -> Vec<u64> {
        let mut read = Vec::new();
        for (number, count) in self.counts.iter().enumerate() {
            let mut block = [0; WORDS];
            if number % 3 == 0 {
                self.leap.make_ready::<L>(4 * count);
                self.leap.glance::<L>(3 * count).store(&mut block);
                let third = block;
                for _ in 0..4 {
                    self.leap.next::<L>(*count).store(&mut block);
                    read.extend(&block[..*count]);
                }
                assert_eq!(block[..*count], third[..*count], "what was seen is what is handed out");
            } else {
                self.leap.next::<L>(*count).store(&mut block);
                read.extend(&block[..*count]);
            }
        }
        read
    }
}

/// Against `rand_pcg`, word for word, over several fillings of the buffer.
#[test]
fn words_read_ahead_are_the_words_of_the_stream() {
    let patterns: [&[usize]; 4] = [&[8], &[1], &[3, 8, 5, 1, 7, 2], &[7, 7, 8]];
    for words in widths() {
        for (strip, pattern) in (0..).zip(patterns) {
            let counts: Vec<usize> = pattern.iter().copied().cycle().take(400).collect();
            let mut leap = Leap::new(address().seeding(2, strip), words.width().chains());
            let read = call(
                words,
                Reading {
                    leap: &mut leap,
                    counts: &counts,
                },
            );
            let mut plain = address().words(2, strip);
            let expected: Vec<u64> = (0..read.len()).map(|_| plain.next_word()).collect();
            assert!(read == expected, "{} strip {strip}", words.width());
            assert_eq!(leap.drawn(), plain.drawn());
        }
    }
}

/// A ring with `sites` sites: two classes, every lane with two neighbours.
fn ring(model: Model, sites: u64) -> Law {
    let lattice = Regular::new(Kind::Hypercubic, vec![sites], vec![Boundary::Periodic]).unwrap();
    Law::new(model, Lattice::Regular(lattice), None).unwrap()
}

fn ising(beta: &str, field: &str) -> Model {
    let number = |text| Exact::parse(text).unwrap();
    Model::Ising {
        beta: Beta::Number(number(beta)),
        coupling: Some(Exact::one()),
        field: Some(number(field)),
    }
}

/// Numbers U that stay undecided for long, or to the last digit: each threshold, its mirrors and their neighbours.
fn numbers(thresholds: &[u128]) -> Vec<u128> {
    let mut numbers = vec![0, 1, u128::MAX, u128::MAX - 1, 1 << 127, (1 << 127) - 1];
    for theta in thresholds {
        for near in [*theta, !theta, theta.wrapping_neg()] {
            numbers.extend([
                near,
                near.wrapping_sub(1),
                near.wrapping_add(1),
                near ^ 1 << 100,
                near ^ 1 << 64,
            ]);
        }
    }
    numbers
}

/// Digits compared a group at a time against `STREAM.md` §3 a lane at a time, on numbers that chance would never give:
/// the same words drawn, and the same answer for every number of neighbours that pull.
#[test]
fn digits_decide_as_the_definition_says() {
    let gas = |activity: &str| Model::LatticeGas {
        activity: Exact::parse(activity).unwrap(),
    };
    let models = [
        ising("0.3", "0"),
        ising("-0.3", "0"),
        ising("0.3", "1/2"),
        ising("0", "0"),
        ising("0.2", "-2"),
        ising("30", "0"),
        ising("44", "1"),
        gas("1"),
        gas("3"),
        gas("1/3"),
        gas("0"),
    ];
    let mut rules = Vec::new();
    for model in models {
        let law = ring(model, 128);
        let map = RandomMap::new(&law).unwrap();
        let program = Program::new(&map).unwrap();
        rules.push((program.rule, program.folded));
        let thetas: Vec<u128> = map
            .asked(0)
            .iter()
            .filter_map(|threshold| match threshold {
                Threshold::Below(theta) => Some(*theta),
                Threshold::Certain => None,
            })
            .collect();
        let numbers = numbers(&thetas);
        for first in 0..numbers.len() {
            let lanes: Vec<u128> = (0..64)
                .map(|lane| numbers[(first + lane * 7) % numbers.len()])
                .collect();
            // one word a digit, most significant digit first
            let digit = |place: u32| {
                (0..64)
                    .map(|lane| ((lanes[lane] >> (127 - place)) as u64 & 1) << lane)
                    .sum()
            };
            let digits: Vec<u64> = (0..128).map(digit).collect();
            let decided = |count| {
                let asked = map.asked(0);
                let sure = |number: &u128| asked.iter().all(|threshold| threshold.is_decided(*number, count));
                lanes.iter().all(sure)
            };
            let expected = (0..=128).find(|count| decided(*count)).unwrap();
            for words in widths() {
                let mut leap = Leap::holding(&digits);
                let mut planes = vec![Block::NONE; program.planes()];
                decide(words, &program, &program.classes[0], 0..1, &mut leap, &mut planes);
                assert_eq!(leap.drawn(), u64::from(expected), "{law:?} {} digits", words.width());
                for (lane, number) in lanes.iter().enumerate() {
                    for pulling in 0..=2usize {
                        let left = std::cell::Cell::new(pulling);
                        let threshold = map.threshold(0, |end| {
                            let pulls = left.get() > 0;
                            left.set(left.get().saturating_sub(1));
                            pulls == end.rising
                        });
                        let found = answer(&program, &planes, pulling, lane);
                        assert_eq!(
                            found,
                            threshold.is_above(*number),
                            "{law:?} U = {number:x}, {pulling} pull"
                        );
                    }
                }
            }
        }
    }
    rules.sort_by_key(|rule| format!("{rule:?}"));
    rules.dedup();
    assert_eq!(
        rules.len(),
        5,
        "every rule, folded and not (the folded one always is): {rules:?}"
    );
}

/// The answer in the planes of a group with two neighbours a lane, if so many of them pull.
fn answer(program: &Program, planes: &[Block], pulling: usize, lane: usize) -> bool {
    let bit = |plane: usize| planes[plane].0[lane / 64] >> (lane % 64) & 1 == 1;
    match program.rule {
        Rule::Folded => match (pulling, bit(0)) {
            // bit 0: U < 1/2; bit 1: the comparison with the threshold above, mirrored below
            (0, half) => half && !bit(1),
            (1, half) => half,
            (_, half) => half || bit(1),
        },
        Rule::Ranked => (0..=pulling).any(bit),
        Rule::Exclusion => pulling == 2 && bit(0),
    }
}
