//! What a bit-sliced sweep does, compiled from a random map: where the neighbours of 512 lanes stand,
//! which thresholds they ask, and how answers and neighbours make new values.
//!
//! States are kept in lane order, class after class. A neighbour of a lane is then a bit at some
//! distance from the lane's own place, and few distances occur in a group: each is one *term*, a
//! shifted window of the state under a mask. The terms of a group are sorted into *slots* so that a
//! lane has at most one neighbour in each slot; equal groups share one [`Pattern`]. Nothing here is
//! about a certain lattice: a map whose groups need too many terms is left to the compact engine.

use std::collections::BTreeMap;

use rayon::prelude::*;

use crate::engine::word::{Block, WORDS};
use crate::law::Digits;
use crate::random_map::RandomMap;
use crate::stream::{GROUP, STRIP};
use crate::threshold::Threshold;

/// Neighbours of a lane, at most.
pub const MOST_SLOTS: usize = 8;
/// Thresholds that are compared digit by digit, at most.
pub const MOST_COMPARISONS: usize = 17;
/// What a group costs beside its terms, and what a lane costs the compact engine, in terms: beyond, a
/// lane at a time is faster.
const TERMS_A_GROUP: usize = 32;
const TERMS_A_LANE: f64 = 0.5;
/// Groups whose patterns are found at a time, so that memory stays small and a bad case ends soon.
const GROUPS_AT_ONCE: usize = 64;
/// Patterns of one map together, at most: they must not outgrow the states.
const MOST_PATTERN_BYTES: usize = 1 << 26;
/// Neighbours for which the folded rule is compiled.
const FOLDED_SLOTS: [usize; 5] = [2, 3, 4, 6, 8];
/// Words before and behind the states of a class, where windows may reach; whole blocks, so that
/// groups lie where cache lines begin.
pub const MARGIN: usize = 2 * WORDS;

/// How answers and the number of pulling neighbours make a value. A neighbour pulls if it makes +1
/// likelier: by being +1 where the threshold grows with it, else by being -1.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Rule {
    /// Planes: "is the top digit 1", then one comparison for each pair of opposite local fields.
    Folded,
    /// Planes: the answer for 0, 1, 2, ... pulling neighbours.
    Ranked,
    /// One plane: the answer if no neighbour is occupied; with one, never +1.
    Exclusion,
}

/// A threshold that is compared digit by digit, and the digits after which equal leading digits
/// decide, because the rest of theta is zero.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Comparison {
    /// Folded comparisons are those above one half; each stands for its mirror too.
    pub theta: u128,
    /// For theta itself.
    pub ends: u32,
    /// For its mirror (folded only).
    pub mirror_ends: u32,
}

/// What a lane's answer for some number of pulling neighbours is made of.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Form {
    /// Always +1.
    One,
    /// U < 1/2 (folded only).
    Half,
    /// U < theta of that comparison.
    Below(usize),
    /// U < its mirror (folded only).
    Mirror(usize),
}

/// The neighbours of a group that stand at one distance.
#[derive(Clone, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub struct Term {
    /// The lanes that have one there.
    pub mask: Block,
    /// Whether the neighbours' class comes after the group's own.
    pub after: bool,
    /// Word offset of the window, beyond [`WORDS`] times the number of the group, in the states before
    /// (or after) those of the group's own class.
    pub word: isize,
    /// Bit offset in that word.
    pub shift: u64,
}

/// What equal groups share.
#[derive(Clone, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub struct Pattern {
    /// Lanes.
    pub lanes: usize,
    /// Terms, slot after slot.
    pub terms: Vec<Term>,
    /// Where the terms of each slot end.
    pub ends: [u32; MOST_SLOTS],
    /// Whether digits are drawn at all.
    pub draws: bool,
    /// Digits (after a folded one) before which a group of so many lanes is hardly ever decided.
    pub sure: usize,
    /// For each comparison the lanes that ask it.
    pub asks: Vec<Block>,
    /// For each comparison the lanes that ask its mirror (folded only).
    pub asks_mirror: Vec<Block>,
    /// The lanes with an answer for so many pulling neighbours, and what it is made of (ranked, exclusion).
    pub answers: Vec<(u32, Form, Block)>,
}

/// One class of a sweep.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Class {
    /// Lanes.
    pub lanes: usize,
    /// Where its states begin: the word of lane 0. A margin lies before and behind.
    pub start: usize,
    /// The pattern of each group.
    pub patterns: Vec<u32>,
}

impl Class {
    /// Groups.
    pub fn groups(&self) -> usize {
        self.patterns.len()
    }
}

/// A compiled random map.
#[derive(Debug)]
pub struct Program {
    /// How answers make values.
    pub rule: Rule,
    /// Whether top digits are folded: only thresholds above one half are compared.
    pub folded: bool,
    /// Whether a neighbour pulls by being -1.
    pub falling: bool,
    /// Slots: the largest number of neighbours.
    pub slots: usize,
    /// Thresholds compared digit by digit.
    pub comparisons: Vec<Comparison>,
    /// The digits of each comparison, place by place: all ones for a 1.
    pub digits: Vec<[u64; MOST_COMPARISONS]>,
    /// Whether equal leading digits decide some comparison after so many digits.
    pub endings: [bool; 129],
    /// The classes of a sweep.
    pub classes: Vec<Class>,
    /// Patterns of groups.
    pub patterns: Vec<Pattern>,
    /// Words of the states of one bound, margins included.
    pub words: usize,
}

/// The thresholds of the sites of one profile by the number of pulling neighbours.
type Ranks = Vec<Threshold>;

impl Program {
    /// The program of `map`, if it has sliced digits, not more neighbours and thresholds than are
    /// compiled for, and not too many different groups.
    pub fn new(map: &RandomMap) -> Option<Self> {
        Self::compile(map, f64::INFINITY)
    }

    /// The program of `map`, if it is faster than a lane at a time.
    pub fn if_fast(map: &RandomMap) -> Option<Self> {
        Self::compile(map, TERMS_A_LANE)
    }

    fn compile(map: &RandomMap, terms_a_lane: f64) -> Option<Self> {
        if map.digits() != Digits::Sliced {
            return None;
        }
        let ranks = ranks(map)?;
        let slots = ranks.iter().map(|ranks| ranks.len() - 1).max().unwrap_or(0);
        let falling = is_falling(map);
        let (comparisons, folded) = comparisons(&ranks);
        if slots > MOST_SLOTS || comparisons.len() > MOST_COMPARISONS {
            return None;
        }
        let rule = rule(&ranks, slots, folded, falling, &comparisons);
        let (mut classes, mut words) = (Vec::new(), 0);
        for class in map.classes() {
            let lanes = class.lanes() as usize;
            let groups = lanes.div_ceil(GROUP);
            classes.push(Class {
                lanes,
                start: words + MARGIN,
                patterns: vec![0; groups],
            });
            words += MARGIN + groups * WORDS + MARGIN;
        }
        let digit = |place: u32| {
            let mut digits = [0; MOST_COMPARISONS];
            for (digit, comparison) in digits.iter_mut().zip(&comparisons) {
                *digit = 0u64.wrapping_sub((comparison.theta >> (127 - place)) as u64 & 1);
            }
            digits
        };
        let digits = (0..128).map(digit).collect();
        let mut endings = [false; 129];
        for comparison in &comparisons {
            endings[comparison.ends as usize] = true;
            endings[comparison.mirror_ends as usize] = true;
        }
        let mut program = Self {
            rule,
            folded,
            falling,
            slots,
            comparisons,
            digits,
            endings,
            classes,
            patterns: Vec::new(),
            words,
        };
        program.find_patterns(map, &ranks, terms_a_lane)?;
        Some(program)
    }

    /// Slots to count neighbours in; the rule of exclusion counts none, every other one reads the first two.
    pub fn slots_to_count(&self) -> usize {
        match self.rule {
            Rule::Exclusion => 0,
            Rule::Folded | Rule::Ranked => self.slots.max(1),
        }
    }

    /// Strips of the largest class.
    pub fn strips(&self) -> usize {
        let groups = self.classes.iter().map(Class::groups).max();
        groups.unwrap_or(0).div_ceil(STRIP)
    }

    /// Blocks that hold the planes of one group.
    pub fn planes(&self) -> usize {
        match self.rule {
            Rule::Folded => 1 + self.comparisons.len(),
            Rule::Ranked => 1 + self.slots,
            Rule::Exclusion => 1,
        }
    }

    /// Blocks that hold the planes of one sweep.
    pub fn planes_of_sweep(&self) -> usize {
        self.planes() * self.classes.iter().map(Class::groups).sum::<usize>()
    }

    fn find_patterns(&mut self, map: &RandomMap, ranks: &[Ranks], terms_a_lane: f64) -> Option<()> {
        let mut known = BTreeMap::new();
        let (mut bytes, mut terms, mut lanes, mut groups_seen) = (0, 0, 0, 0);
        for number in 0..self.classes.len() {
            let groups = self.classes[number].groups();
            for first in (0..groups).step_by(GROUPS_AT_ONCE) {
                let found: Vec<Option<Pattern>> = (first..groups.min(first + GROUPS_AT_ONCE))
                    .into_par_iter()
                    .map(|group| self.pattern(map, ranks, number, group))
                    .collect();
                for (group, pattern) in (first..).zip(found) {
                    let pattern = pattern?;
                    lanes += pattern.lanes;
                    terms += pattern.terms.len();
                    groups_seen += 1;
                    let next = self.patterns.len();
                    let place = *known.entry(pattern).or_insert_with_key(|pattern| {
                        bytes += size_of::<Pattern>() + size_of::<Term>() * pattern.terms.len();
                        self.patterns.push(pattern.clone());
                        next
                    });
                    self.classes[number].patterns[group] = u32::try_from(place).ok()?;
                }
                let most = terms_a_lane * lanes as f64 + (TERMS_A_GROUP * groups_seen) as f64;
                if bytes > MOST_PATTERN_BYTES || terms as f64 > most {
                    return None;
                }
            }
        }
        Some(())
    }

    /// The pattern of one group.
    fn pattern(&self, map: &RandomMap, ranks: &[Ranks], number: usize, group: usize) -> Option<Pattern> {
        let first = group * GROUP;
        let class = &map.classes()[number];
        let sites = class.sites_from(u32::try_from(first).ok()?).take(GROUP);
        let mut places = Places::default();
        let mut profiles: Vec<(u32, Block)> = Vec::new();
        let mut lanes = 0;
        for (lane, site) in sites.enumerate() {
            lanes = lane + 1;
            let profile = map.profile(site);
            let at = profiles
                .iter()
                .position(|(known, _)| *known == profile)
                .unwrap_or_else(|| {
                    profiles.push((profile, Block::NONE));
                    profiles.len() - 1
                });
            profiles[at].1.0[lane / 64] |= 1 << (lane % 64);
            let mut own: [Option<Place>; MOST_SLOTS] = [None; MOST_SLOTS];
            for (edge, end) in map.ends(site).enumerate() {
                let mut classes = map.classes().iter().enumerate();
                let (class, far) = classes.find_map(|(far, class)| Some((far, class.lane(end.site)?)))?;
                let distance = i64::from(far) - (first + lane) as i64;
                let before = own[..edge].iter().flatten();
                let before = before.filter(|other| (other.class, other.distance) == (class, distance));
                let place = Place {
                    class,
                    distance,
                    before: before.count(),
                };
                own[edge] = Some(place);
                places.insert(place, edge, lane);
            }
        }
        let slots = into_slots(places.list, self.slots);
        let mut ends = [0; MOST_SLOTS];
        let mut terms = Vec::new();
        for (slot, end) in ends.iter_mut().enumerate() {
            for (place, mask) in slots.get(slot).into_iter().flatten() {
                terms.push(self.term(number, *place, *mask));
            }
            *end = u32::try_from(terms.len()).ok()?;
        }
        let mut pattern = Pattern {
            lanes,
            terms,
            ends,
            draws: false,
            sure: lanes.checked_ilog2().unwrap_or(0).saturating_sub(2) as usize,
            asks: vec![Block::NONE; self.comparisons.len()],
            asks_mirror: vec![Block::NONE; if self.folded { self.comparisons.len() } else { 0 }],
            answers: Vec::new(),
        };
        self.ask(ranks, &profiles, &mut pattern);
        Some(pattern)
    }

    fn term(&self, own: usize, place: Place, mask: Block) -> Term {
        let after = place.class > own;
        // the states after one's own begin behind the margin that follows them
        let origin = if after {
            let own = &self.classes[own];
            own.start + own.groups() * WORDS
        } else {
            0
        };
        Term {
            mask,
            after,
            word: (self.classes[place.class].start - origin) as isize + (place.distance >> 6) as isize,
            shift: (place.distance & 63) as u64,
        }
    }

    /// Which lanes ask what, and what their answers are made of.
    fn ask(&self, ranks: &[Ranks], profiles: &[(u32, Block)], pattern: &mut Pattern) {
        let mut answers = BTreeMap::new();
        for (profile, mask) in profiles {
            for (pulling, threshold) in ranks[*profile as usize].iter().enumerate() {
                pattern.draws |= is_drawn(*threshold);
                let Some(form) = self.form(*threshold) else { continue };
                match form {
                    Form::Below(at) => join(&mut pattern.asks[at], mask),
                    Form::Mirror(at) => join(&mut pattern.asks_mirror[at], mask),
                    Form::One | Form::Half => {}
                }
                if self.rule != Rule::Folded {
                    // exclusion has one answer, for all neighbours empty
                    let pulling = if self.rule == Rule::Exclusion {
                        0
                    } else {
                        pulling as u32
                    };
                    join(answers.entry((pulling, form)).or_insert(Block::NONE), mask);
                }
            }
        }
        pattern.answers = answers
            .into_iter()
            .map(|((pulling, form), mask)| (pulling, form, mask))
            .collect();
    }

    /// How an answer is made; `None` for one that is never +1.
    fn form(&self, threshold: Threshold) -> Option<Form> {
        let theta = match threshold {
            Threshold::Certain => return Some(Form::One),
            Threshold::Below(0) => return None,
            Threshold::Below(theta) => theta,
        };
        let place = |theta| self.comparisons.iter().position(|comparison| comparison.theta == theta);
        if !self.folded {
            return place(theta).map(Form::Below);
        }
        if theta == HALF {
            return Some(Form::Half);
        }
        place(theta)
            .map(Form::Below)
            .or_else(|| place(!theta).or_else(|| place(theta.wrapping_neg())).map(Form::Mirror))
    }
}

/// Where a neighbour stands: its class, its lane less the lane's own, and how many others of the same
/// lane stand there too.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
struct Place {
    class: usize,
    distance: i64,
    before: usize,
}

/// The places of a group's neighbours, with the lanes that have one there.
#[derive(Default)]
struct Places {
    list: Vec<(Place, Block)>,
    known: BTreeMap<Place, usize>,
    /// Where each edge of the lane before was found: mostly the next lane's is there too.
    last: [usize; MOST_SLOTS],
}

impl Places {
    fn insert(&mut self, place: Place, edge: usize, lane: usize) {
        let at = match self.list.get(self.last[edge]) {
            Some((known, _)) if *known == place => self.last[edge],
            _ => *self.known.entry(place).or_insert_with(|| {
                self.list.push((place, Block::NONE));
                self.list.len() - 1
            }),
        };
        self.last[edge] = at;
        self.list[at].1.0[lane / 64] |= 1 << (lane % 64);
    }
}

const HALF: u128 = 1 << 127;

fn join(block: &mut Block, other: &Block) {
    for (word, other) in block.0.iter_mut().zip(other.0) {
        *word |= other;
    }
}

/// Sorts places into slots in which no lane stands twice: large ones whole, what fits nowhere in parts.
fn into_slots(mut places: Vec<(Place, Block)>, slots: usize) -> Vec<Vec<(Place, Block)>> {
    let count = |mask: &Block| mask.0.iter().map(|word| word.count_ones()).sum::<u32>();
    places.sort_by_key(|(place, mask)| (std::cmp::Reverse(count(mask)), *place));
    let mut filled = vec![(Block::NONE, Vec::new()); slots];
    for (place, mut mask) in places {
        let free = |taken: &Block, mask: &Block| Block(std::array::from_fn(|at| mask.0[at] & !taken.0[at]));
        let whole = filled.iter_mut().find(|(taken, _)| free(taken, &mask) == mask);
        if let Some((taken, terms)) = whole {
            join(taken, &mask);
            terms.push((place, mask));
            continue;
        }
        for (taken, terms) in &mut filled {
            let part = free(taken, &mask);
            if part != Block::NONE {
                join(taken, &part);
                mask = free(&part, &mask);
                terms.push((place, part));
            }
        }
    }
    filled.into_iter().map(|(_, terms)| terms).collect()
}

/// Whether a lane that asks this waits for digits.
fn is_drawn(threshold: Threshold) -> bool {
    !threshold.is_decided(0, 0)
}

/// Whether neighbours pull by being -1; sliced digits mean one coupling, so the first edge speaks for all.
fn is_falling(map: &RandomMap) -> bool {
    let mut sites = map.classes().iter().flat_map(|class| class.sites());
    sites
        .find_map(|site| map.ends(site).next())
        .is_some_and(|end| !end.rising)
}

/// The thresholds of each profile by the number of pulling neighbours.
fn ranks(map: &RandomMap) -> Option<Vec<Ranks>> {
    let mut ranks = vec![Ranks::new(); map.profiles() as usize];
    for class in map.classes() {
        for site in class.sites() {
            let ranks = &mut ranks[map.profile(site) as usize];
            if !ranks.is_empty() {
                continue;
            }
            let moving = map.ends(site).count();
            if moving > MOST_SLOTS {
                return None;
            }
            for pulling in 0..=moving {
                let left = std::cell::Cell::new(pulling);
                let threshold = map.threshold(site, |end| {
                    let pulls = left.get() > 0;
                    left.set(left.get().saturating_sub(1));
                    pulls == end.rising
                });
                ranks.push(threshold);
            }
        }
    }
    for ranks in &mut ranks {
        if ranks.is_empty() {
            // a profile that no site with a lane has
            ranks.push(Threshold::IMPOSSIBLE);
        }
    }
    Some(ranks)
}

/// The thresholds to compare digit by digit, and whether they are folded: that is done where each
/// has its mirror, so that one comparison answers both.
fn comparisons(ranks: &[Ranks]) -> (Vec<Comparison>, bool) {
    let mut asked: Vec<u128> = ranks
        .iter()
        .flatten()
        .filter_map(|threshold| match threshold {
            Threshold::Below(theta) if *theta != 0 => Some(*theta),
            _ => None,
        })
        .collect();
    asked.sort_unstable();
    asked.dedup();
    let mirrors = |theta: u128| [!theta, theta.wrapping_neg()].map(|mirror| asked.binary_search(&mirror).is_ok());
    let folded = asked
        .iter()
        .all(|theta| *theta == HALF || mirrors(*theta) == [true, false] || mirrors(*theta) == [false, true]);
    let ends = |theta: u128| 128 - theta.trailing_zeros().min(128);
    let comparisons = asked
        .iter()
        .filter(|theta| !folded || **theta > HALF)
        .map(|theta| Comparison {
            theta: *theta,
            ends: ends(*theta),
            mirror_ends: if mirrors(*theta)[0] {
                ends(!*theta)
            } else {
                ends(*theta)
            },
        })
        .collect();
    (comparisons, folded)
}

fn rule(ranks: &[Ranks], slots: usize, folded: bool, falling: bool, comparisons: &[Comparison]) -> Rule {
    let never = |threshold: &Threshold| *threshold == Threshold::IMPOSSIBLE;
    if falling && ranks.iter().all(|ranks| ranks[..ranks.len() - 1].iter().all(never)) {
        return Rule::Exclusion;
    }
    // one profile, whose pairs are compared in the order of the ranks from the outside in
    let paired = |ranks: &Ranks| {
        let pairs = comparisons.len();
        ranks.len() == slots + 1
            && pairs == slots.div_ceil(2)
            && (slots % 2 == 1 || ranks[pairs] == Threshold::Below(HALF))
            && comparisons.iter().rev().enumerate().all(|(pair, comparison)| {
                let mirrors = [!comparison.theta, comparison.theta.wrapping_neg()].map(Threshold::Below);
                ranks[slots - pair] == Threshold::Below(comparison.theta) && mirrors.contains(&ranks[pair])
            })
    };
    if folded && FOLDED_SLOTS.contains(&slots) && ranks.len() == 1 && ranks.iter().all(paired) {
        Rule::Folded
    } else {
        Rule::Ranked
    }
}
