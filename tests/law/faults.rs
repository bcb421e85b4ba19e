//! Classic faults of coupling from the past, planted on purpose: the checks of `exactness` must see each.
//!
//! [`Variant`] is a second, compact engine. Without a fault it equals the plain engine bit for bit, so
//! that what the checks reject is the fault and nothing else.

use std::cmp::Reverse;

use pastproof::engine::{Attempt, Engine, Stop};
use pastproof::error::Result;
use pastproof::lattice::{Kind, Spin};
use pastproof::law::{Beta, Digits, Law, Model};
use pastproof::number::Exact;
use pastproof::quantity::{Digest, Seed};
use pastproof::random_map::{End, RandomMap};
use pastproof::sample::{Configuration, Sample};
use pastproof::stream::{Address, GROUP, STRIP, Words};
use pastproof::threshold::Threshold;

use crate::exactness::{PairChain, configurations_fit, energies_fit, levels, windows_fit, windows_of};
use crate::systems::{cycle, draw, draw_with, gas, graph, held, ising, regular};
use crate::values::{COUPLING_TIME, TORUS, lattice_named, parse, record};

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Fault {
    /// Each doubling draws new maps for the times that it had before.
    FreshRandomness,
    /// The state is read when the bounds first meet, not at time 0.
    StateAtCoalescence,
    /// Each threshold is 1 % too large.
    ThresholdsMoved,
    /// The bounds are taken as for a ferromagnet, whatever the signs.
    SignsIgnored,
    /// Of twice as many samples, the slower half is dropped.
    SlowerHalfDropped,
    /// Potts for Ising: beta is half as large.
    HalfBeta,
    /// The same the other way round.
    TwiceBeta,
}

/// The compact engine.
pub struct Variant<'a> {
    map: &'a RandomMap,
    lists: Vec<Vec<u32>>,
    fault: Option<Fault>,
    bounds: [Vec<bool>; 2],
}

impl<'a> Variant<'a> {
    pub fn new(map: &'a RandomMap, fault: Option<Fault>) -> Self {
        let lists = map.classes().iter().map(|class| class.sites().collect()).collect();
        Self {
            map,
            lists,
            fault,
            bounds: Default::default(),
        }
    }

    fn moved(&self, threshold: Threshold) -> Threshold {
        match threshold {
            Threshold::Below(theta) if self.fault == Some(Fault::ThresholdsMoved) => theta
                .checked_add(theta / 100)
                .map_or(Threshold::Certain, Threshold::Below),
            other => other,
        }
    }

    /// The numbers U of one group.
    fn numbers(&self, group: &[u32], words: &mut Words) -> Vec<u128> {
        if self.map.digits() == Digits::Plain {
            let mut number = || u128::from(words.next_word()) << 64 | u128::from(words.next_word());
            return group.iter().map(|_| number()).collect();
        }
        let mut numbers = vec![0; group.len()];
        for digit in 0.. {
            let decided = |(site, number): (&u32, &u128)| {
                let mut asked = self.map.asked(*site).iter();
                asked.all(|threshold| self.moved(*threshold).is_decided(*number, digit))
            };
            if group.iter().zip(&numbers).all(decided) {
                break;
            }
            for lanes in numbers.chunks_mut(64) {
                let word = words.next_word();
                for (lane, number) in lanes.iter_mut().enumerate() {
                    *number |= u128::from(word >> lane & 1) << 127 >> digit;
                }
            }
        }
        numbers
    }

    /// Carries any number of chains from time -2^depth to 0. `next` decides, with a site's number U, the
    /// site's value in each chain; `after` sees the chains after each sweep, with the time left, and may
    /// end the attempt. Gives the number of words drawn.
    pub fn carry<const CHAINS: usize>(
        &self,
        address: &Address,
        depth: u8,
        chains: &mut [Vec<bool>; CHAINS],
        next: impl Fn(&Self, &[Vec<bool>; CHAINS], u32, u128) -> [bool; CHAINS],
        mut after: impl FnMut(&[Vec<bool>; CHAINS], u64) -> bool,
    ) -> u64 {
        let mut address = *address;
        if self.fault == Some(Fault::FreshRandomness) {
            address.seed = Seed(Digest::of(&[depth]));
        }
        let (mut drawn, mut left) = (0, 1u64 << depth);
        for epoch in (0..=u32::from(depth)).rev() {
            let mut strips: Vec<Words> = Vec::new();
            for _ in 0..(1u64 << epoch) / 2 + u64::from(epoch == 0) {
                for list in &self.lists {
                    for (group, sites) in list.chunks(GROUP).enumerate() {
                        let strip = group / STRIP;
                        if strip == strips.len() {
                            strips.push(address.words(epoch, strip as u32));
                        }
                        for (site, number) in sites.iter().zip(self.numbers(sites, &mut strips[strip])) {
                            let values = next(self, chains, *site, number);
                            for (chain, value) in chains.iter_mut().zip(values) {
                                chain[*site as usize] = value;
                            }
                        }
                    }
                }
                left -= 1;
                if after(chains, left) {
                    return drawn;
                }
            }
            drawn += strips.iter().map(Words::drawn).sum::<u64>();
        }
        drawn
    }

    /// A site's values in the lower and the upper bound.
    pub fn bounds(&self, [lower, upper]: [&Vec<bool>; 2], site: u32, number: u128) -> [bool; 2] {
        let rising = |end: &End| end.rising || self.fault == Some(Fault::SignsIgnored);
        let value = |low: &Vec<bool>, high: &Vec<bool>| {
            let far = |end: &End| {
                if rising(end) {
                    low[end.site as usize]
                } else {
                    high[end.site as usize]
                }
            };
            self.moved(self.map.threshold(site, far)).is_above(number)
        };
        [value(lower, upper), value(upper, lower)]
    }

    /// The bounds at the start.
    pub fn start(&self) -> [Vec<bool>; 2] {
        [false, true].map(|value| {
            let mut bound = vec![value; self.map.sites() as usize];
            for (site, spin) in self.map.held() {
                bound[*site as usize] = spin.bit();
            }
            bound
        })
    }
}

impl Engine for Variant<'_> {
    fn attempt(&mut self, address: &Address, depth: u8, _: &Stop) -> Result<Attempt> {
        let mut chains = self.start();
        let mut merged_at = None;
        let words = self.carry(
            address,
            depth,
            &mut chains,
            |engine, [lower, upper], site, number| engine.bounds([lower, upper], site, number),
            |[lower, upper], left| {
                merged_at = (lower == upper).then(|| merged_at.unwrap_or(left));
                merged_at.is_some() && self.fault == Some(Fault::StateAtCoalescence)
            },
        );
        self.bounds = chains;
        Ok(Attempt { merged_at, words })
    }

    fn bounds(&self) -> [Configuration; 2] {
        self.bounds.each_ref().map(|bound| Configuration::pack(bound))
    }
}

fn draw_variant(law: &Law, fault: Option<Fault>, count: u64) -> Vec<Sample> {
    let map = RandomMap::new(law).unwrap();
    draw_with(|| Variant::new(&map, fault), law, count)
}

/// The samples of someone who means `law` and makes `fault`.
fn draw_faulty(law: &Law, fault: Fault, count: u64) -> Vec<Sample> {
    let beta_times = |factor: &str| {
        let Model::Ising {
            beta: Beta::Number(beta),
            coupling,
            field,
        } = law.model()
        else {
            panic!("a law without a number beta");
        };
        let factor = Exact::parse(factor).unwrap();
        let beta = Beta::Number(Exact::from_fraction(beta.as_fraction() * factor.as_fraction()));
        let model = Model::Ising {
            beta,
            coupling: coupling.clone(),
            field: field.clone(),
        };
        Law::new(model, law.lattice().clone(), law.held().cloned()).unwrap()
    };
    match fault {
        Fault::HalfBeta => draw(&beta_times("1/2"), count),
        Fault::TwiceBeta => draw(&beta_times("2"), count),
        Fault::SlowerHalfDropped => {
            let mut samples = draw(law, 2 * count);
            samples.sort_by_key(|sample| (sample.depth, Reverse(sample.merged_at)));
            samples.truncate(count as usize);
            samples
        }
        _ => draw_variant(law, Some(fault), count),
    }
}

const COUNT: u64 = 40_000;

/// 3 checks that must pass, and the same ones failing with each fault.
#[test]
fn faults_are_seen_in_the_configurations() {
    use Fault::{
        FreshRandomness, HalfBeta, SignsIgnored, SlowerHalfDropped, StateAtCoalescence, ThresholdsMoved, TwiceBeta,
    };
    let square = regular(Kind::Hypercubic, &[2, 2], "free");
    for (name, law, faults) in [
        (
            "square 2x2, free, field",
            ising(square, "0.4", "1/2"),
            [
                FreshRandomness,
                StateAtCoalescence,
                SlowerHalfDropped,
                ThresholdsMoved,
                HalfBeta,
                TwiceBeta,
            ]
            .as_slice(),
        ),
        (
            "triangle, frustrated",
            ising(graph(3, &cycle(3), "", ""), "-0.4", "0"),
            &[
                FreshRandomness,
                StateAtCoalescence,
                SlowerHalfDropped,
                HalfBeta,
                TwiceBeta,
            ],
        ),
        (
            "gas on a 5-cycle",
            gas(graph(5, &cycle(5), "", ""), "2"),
            &[FreshRandomness, StateAtCoalescence, SlowerHalfDropped, SignsIgnored],
        ),
    ] {
        configurations_fit(name, &law, &draw_variant(&law, None, COUNT)).must_pass();
        for fault in faults {
            let what = format!("{name}, {fault:?}");
            configurations_fit(&what, &law, &draw_faulty(&law, *fault, COUNT)).must_fail();
        }
    }
}

/// Faults in the coupling itself show in the depths. The published law at beta = 0.4, and the pair of bounds
/// of a frustrated triangle, whose samples hardly show ignored signs: 2 checks that must pass.
#[test]
fn faults_are_seen_in_the_depths() {
    use Fault::{FreshRandomness, HalfBeta, SignsIgnored, SlowerHalfDropped, ThresholdsMoved};
    let known = parse(COUPLING_TIME);
    let grid = &known["ising_heat_bath"][1];
    assert_eq!((&grid["graph"], &grid["beta"]), (&"3x3 grid".into(), &"0.4".into()));
    let triangle = PairChain::ising(&cycle(3), &[1.0; 3], -0.4, &[0, 1, 2]);
    for (name, law, windows, faults) in [
        (
            "3x3 grid",
            ising(lattice_named("3x3 grid"), "0.4", "0"),
            windows_of(grid),
            [FreshRandomness, SlowerHalfDropped, ThresholdsMoved, HalfBeta].as_slice(),
        ),
        (
            "triangle, frustrated",
            ising(graph(3, &cycle(3), "", ""), "-0.4", "0"),
            triangle.windows(20),
            &[FreshRandomness, SlowerHalfDropped, SignsIgnored, HalfBeta],
        ),
    ] {
        windows_fit(name, &windows, &draw_variant(&law, None, COUNT)).must_pass();
        for fault in faults {
            let what = format!("{name}, {fault:?}");
            windows_fit(&what, &windows, &draw_faulty(&law, *fault, COUNT)).must_fail();
        }
    }
}

/// A wrong law shows in the energies of a larger system too: 1 check that must pass. (Faults of the coupling
/// do not at this size: bounds that met long before time 0 forget why. Small systems are what shows them.)
#[test]
fn faults_are_seen_in_the_energies() {
    let known = parse(TORUS);
    let g = levels(&record(&known["density_of_states"], "lattice", "4x4 torus")["g"]);
    let law = ising(lattice_named("4x4 torus"), "0.3", "0");
    energies_fit("4x4 torus", &law, &[], "0.3", &g, &draw_variant(&law, None, 20_000)).must_pass();
    for fault in [Fault::ThresholdsMoved, Fault::HalfBeta] {
        let what = format!("4x4 torus, {fault:?}");
        energies_fit(&what, &law, &[], "0.3", &g, &draw_faulty(&law, fault, 20_000)).must_fail();
    }
}

/// Sliced and plain digits, several words a digit, held sites, bounds that cross over.
#[test]
fn the_compact_engine_without_a_fault_is_the_plain_engine() {
    let torus = |extent| regular(Kind::Hypercubic, &[extent, extent], "periodic");
    for (law, count) in [
        (ising(torus(3), "0.3", "0"), 1000),
        (ising(torus(24), "0.2", "1/10"), 20),
        (
            ising(graph(5, &cycle(5), "1 -1 2 1 1", "1/2 0 0 -1 1/3"), "0.3", "0"),
            1000,
        ),
        (ising(graph(3, &cycle(3), "", ""), "-0.4", "0"), 1000),
        (
            held(&ising(torus(4), "beta_c", "0"), &[(3, Spin::Plus), (9, Spin::Minus)]),
            200,
        ),
        (gas(graph(5, &cycle(5), "", ""), "2"), 1000),
    ] {
        let samples = draw(&law, count);
        assert!(samples == draw_variant(&law, None, count), "{}", law.lattice());
    }
}
