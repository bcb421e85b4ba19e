//! The two kernels of a bit-sliced sweep: digits to answers, and answers and neighbours to values.
//!
//! Both work on groups of one strip, with whatever words [`crate::engine::word::call`] gives them,
//! and everything they call is inlined into that call. [`decide`] is the only user of the generator
//! and never sees a state; [`update`] never sees a generator.

use std::ops::Range;

use crate::engine::leap::Leap;
use crate::engine::sliced::program::{Class, Form, MOST_COMPARISONS, MOST_SLOTS, Pattern, Program, Rule, Term};
use crate::engine::word::{Block, Kernel, Lanes, WORDS, Words, call};

/// Draws the digits of `groups` of a class and leaves their planes, group after group.
pub fn decide(
    words: Words,
    program: &Program,
    class: &Class,
    groups: Range<usize>,
    leap: &mut Leap,
    planes: &mut [Block],
) {
    let classes = std::slice::from_ref(class);
    decide_lists(words, program, classes, groups, leap, planes);
}

/// Draws the digits of whole sweeps of a program of one strip and leaves their planes.
pub fn decide_sweeps(words: Words, program: &Program, leap: &mut Leap, planes: &mut [Block]) {
    decide_lists(words, program, &program.classes, 0..usize::MAX, leap, planes);
}

/// Draws the digits of `groups` of each class in turn, over and over until all planes are filled.
fn decide_lists(
    words: Words,
    program: &Program,
    classes: &[Class],
    groups: Range<usize>,
    leap: &mut Leap,
    planes: &mut [Block],
) {
    macro_rules! at_least {
        ($($count:literal)*) => {
            match program.comparisons.len() {
                $(..=$count => call(words, Decide::<$count> { program, classes, groups, leap, planes }),)*
                _ => unreachable!("a program has at most {MOST_COMPARISONS} comparisons"),
            }
        };
    }
    at_least!(0 1 2 3 4 5 7 9 13 17)
}

/// [`Pattern::sure`] of a group of 512 lanes, and digits that nearly always suffice for it.
const FULL_SURE: usize = 7;
const FULL_MOST: usize = 16;

struct Decide<'a, const C: usize> {
    program: &'a Program,
    classes: &'a [Class],
    groups: Range<usize>,
    leap: &'a mut Leap,
    planes: &'a mut [Block],
}

impl<const C: usize> Kernel for Decide<'_, C> {
    type Output = ();

    #[inline(always)]
    fn run<L: Lanes>(self) {
        let mut planes = self.planes.chunks_exact_mut(self.program.planes());
        while planes.len() > 0 {
            for class in self.classes {
                let end = self.groups.end.min(class.groups());
                for (pattern, planes) in class.patterns[self.groups.start..end].iter().zip(&mut planes) {
                    let pattern = &self.program.patterns[*pattern as usize];
                    let answers = digits::<L, C>(self.program, pattern, self.leap);
                    answers.write(self.program, pattern, planes);
                }
            }
        }
    }
}

/// What the digits of a group came to.
struct Answers<L, const C: usize> {
    /// U < 1/2 (folded only).
    half: L,
    /// U < theta; folded: what is left of U, or of its complement where U < 1/2, is below what is left of theta.
    below: [L; C],
}

/// Digit after digit until every lane has decided all that it could be asked (`STREAM.md` §3).
///
/// Folded, a lane with U < 1/2 compares the complement of U: with complemented digits its mirror
/// becomes theta, and U < mirror becomes "not complement < theta".
#[inline(always)]
fn digits<L: Lanes, const C: usize>(program: &Program, pattern: &Pattern, leap: &mut Leap) -> Answers<L, C> {
    let (none, all) = (L::splat(0), L::splat(u64::MAX));
    let mut answers = Answers {
        half: none,
        below: [none; C],
    };
    if !pattern.draws {
        return answers;
    }
    let count = pattern.lanes.div_ceil(64);
    let mut race = Race {
        equal: [none; C],
        below: [none; C],
        turn: all,
    };
    let asks = |list: &[Block], at: usize| list.get(at).map_or(none, |block| L::load(&block.0));
    let mut place = 0;
    if program.folded {
        race.turn = leap.next::<L>(count);
        place = 1;
        for (at, equal) in race.equal.iter_mut().enumerate() {
            *equal = race
                .turn
                .select(asks(&pattern.asks, at), asks(&pattern.asks_mirror, at));
        }
    } else {
        for (at, equal) in race.equal.iter_mut().enumerate() {
            *equal = asks(&pattern.asks, at);
        }
    }
    // Ahead of the answer to "is the group decided?", which would come too late for each digit: a group
    // is hardly ever decided within its first digits, and a full one hardly ever after many. What is
    // compared once a lane is decided changes nothing; in the rare other cases start again.
    let mut ahead = race;
    if pattern.sure == FULL_SURE {
        leap.make_ready::<L>(FULL_MOST * WORDS);
        for digits in 0..FULL_SURE {
            ahead.digit(program, place + digits, leap.glance(digits * WORDS));
        }
        let sure = !ahead.is_over();
        let mut digits_drawn = FULL_SURE;
        for digits in FULL_SURE..FULL_MOST {
            digits_drawn += usize::from(!ahead.is_over());
            ahead.digit(program, place + digits, leap.glance(digits * WORDS));
        }
        if sure && ahead.is_over() {
            leap.skip(digits_drawn * WORDS);
            race = ahead;
        }
    } else {
        leap.make_ready::<L>(pattern.sure * count);
        for digits in 0..pattern.sure {
            ahead.digit(program, place + digits, leap.glance(digits * count));
        }
        if !ahead.is_over() {
            leap.skip(pattern.sure * count);
            place += pattern.sure;
            race = ahead;
        }
    }
    while !race.is_over() {
        let word = leap.next::<L>(count);
        race.digit(program, place, word);
        place += 1;
    }
    answers.half = if program.folded { all.without(race.turn) } else { none };
    answers.below = race.below;
    answers
}

/// The comparisons of a group as far as they are.
#[derive(Clone, Copy)]
struct Race<L, const C: usize> {
    /// Lanes whose digits so far equal those of theta.
    equal: [L; C],
    /// Lanes below theta, where the digits differ.
    below: [L; C],
    /// Lanes that compare U itself, not its complement.
    turn: L,
}

impl<L: Lanes, const C: usize> Race<L, C> {
    #[inline(always)]
    fn is_over(&self) -> bool {
        let mut open = L::splat(0);
        for equal in self.equal {
            open = open.or(equal);
        }
        open.is_none()
    }

    /// One more digit of each lane, the one at `place`.
    #[inline(always)]
    fn digit(&mut self, program: &Program, place: usize, word: L) {
        let opposite = word.xor(self.turn);
        let bits = &program.digits[place];
        for ((equal, below), bit) in self.equal.iter_mut().zip(&mut self.below).zip(bits) {
            // at the first digit that differs, U is below theta exactly if its digit is 0
            *below = equal.select(opposite, *below);
            *equal = equal.and_xor(opposite, L::splat(*bit));
        }
        if program.endings[place + 1] {
            self.end(program, place + 1);
        }
    }

    /// Equal leading digits decide where the rest of theta (or of its mirror) is zero.
    #[inline(always)]
    fn end(&mut self, program: &Program, digits: usize) {
        let itself = if program.folded { self.turn } else { L::splat(u64::MAX) };
        for (equal, comparison) in self.equal.iter_mut().zip(&program.comparisons) {
            if comparison.ends as usize == digits {
                *equal = equal.without(itself);
            }
            if comparison.mirror_ends as usize == digits {
                *equal = equal.and(itself);
            }
        }
    }
}

impl<L: Lanes, const C: usize> Answers<L, C> {
    #[inline(always)]
    fn write(self, program: &Program, pattern: &Pattern, planes: &mut [Block]) {
        if program.rule == Rule::Folded {
            self.half.store(&mut planes[0].0);
            for (plane, below) in planes[1..].iter_mut().zip(self.below) {
                below.store(&mut plane.0);
            }
            return;
        }
        for plane in planes.iter_mut() {
            *plane = Block::NONE;
        }
        // a copy to be indexed, so that the comparisons above stay in registers
        let mut kept = [Block::NONE; C];
        for (kept, below) in kept.iter_mut().zip(self.below) {
            below.store(&mut kept.0);
        }
        let all = L::splat(u64::MAX);
        for (pulling, form, lanes) in &pattern.answers {
            let value = match form {
                Form::One => all,
                Form::Half => self.half,
                Form::Below(at) => L::load(&kept[*at].0).or(self.half),
                Form::Mirror(at) => self.half.without(L::load(&kept[*at].0)),
            };
            let plane = &mut planes[*pulling as usize].0;
            L::load(plane).or_and(value, L::load(&lanes.0)).store(plane);
        }
    }
}

/// The states of one bound before and behind those of the class that is updated.
#[derive(Clone, Copy)]
pub struct Sides<'a> {
    /// Before.
    pub before: &'a [u64],
    /// Behind.
    pub after: &'a [u64],
}

impl<'a> Sides<'a> {
    /// The states around `own`, and those in it.
    pub fn around(states: &'a mut [u64], own: Range<usize>) -> (Self, &'a mut [u64]) {
        let (before, rest) = states.split_at_mut(own.start);
        let (own, after) = rest.split_at_mut(own.end - own.start);
        (Self { before, after }, own)
    }

    /// The neighbours of a group that a term names.
    #[inline(always)]
    fn window<L: Lanes>(&self, term: &Term, group: usize) -> L {
        let words = if term.after { self.after } else { self.before };
        let at = (term.word + (group * WORDS) as isize) as usize;
        let words: &[u64; WORDS + 1] = words[at..].first_chunk().expect("margins hold every window");
        if term.shift == 0 {
            let (words, _) = words.split_first_chunk().expect("a window holds a block");
            L::load(words)
        } else {
            L::window(words, term.shift)
        }
    }
}

/// Groups to update: new values of both bounds, or of the lower one alone once they have met.
pub struct Update<'a> {
    /// What to do.
    pub program: &'a Program,
    /// The class.
    pub class: &'a Class,
    /// Which of its groups.
    pub groups: Range<usize>,
    /// Their planes.
    pub planes: &'a [Block],
    /// The neighbours' lower bounds.
    pub lower: Sides<'a>,
    /// The neighbours' upper bounds; `None` once the bounds have met.
    pub upper: Option<Sides<'a>>,
    /// The lower bounds of those groups.
    pub own_lower: &'a mut [u64],
    /// Their upper bounds.
    pub own_upper: &'a mut [u64],
}

/// Whole sweeps to make, by a program of one strip.
pub struct Sweeps<'a> {
    /// What to do.
    pub program: &'a Program,
    /// Planes of the sweeps.
    pub planes: &'a [Block],
    /// The lower bounds.
    pub lower: &'a mut [u64],
    /// The upper bounds.
    pub upper: &'a mut [u64],
    /// Whether the bounds have met before.
    pub met: bool,
}

/// Runs a kernel for the neighbours of a program: 0 stands for the rule of exclusion, which does not count them.
macro_rules! compiled {
    ($kernel:ident($work:expr), $words:expr, $program:expr, $both:expr, $($slots:literal)*) => {
        match ($program.slots_to_count(), $program.falling, $both) {
            $((..=$slots, false, false) => call($words, $kernel::<$slots, false, false>($work)),
            (..=$slots, false, true) => call($words, $kernel::<$slots, false, true>($work)),
            (..=$slots, true, false) => call($words, $kernel::<$slots, true, false>($work)),
            (..=$slots, true, true) => call($words, $kernel::<$slots, true, true>($work)),)*
            _ => unreachable!("a program has at most {MOST_SLOTS} slots"),
        }
    };
}

/// Updates groups; says whether their bounds differ.
pub fn update(words: Words, work: Update<'_>) -> bool {
    compiled!(Groups(work), words, work.program, work.upper.is_some(), 0 2 3 4 6 8)
}

/// Makes sweeps until all are made or the bounds meet; gives the number of sweeps made, and whether the
/// bounds are equal.
pub fn sweep(words: Words, work: Sweeps<'_>) -> (usize, bool) {
    compiled!(Sweeping(work), words, work.program, !work.met, 0 2 3 4 6 8)
}

struct Groups<'a, const SLOTS: usize, const FALLING: bool, const BOTH: bool>(Update<'a>);

impl<const SLOTS: usize, const FALLING: bool, const BOTH: bool> Kernel for Groups<'_, SLOTS, FALLING, BOTH> {
    type Output = bool;

    #[inline(always)]
    fn run<L: Lanes>(self) -> bool {
        !update_groups::<L, SLOTS, FALLING, BOTH>(self.0).is_none()
    }
}

struct Sweeping<'a, const SLOTS: usize, const FALLING: bool, const BOTH: bool>(Sweeps<'a>);

impl<const SLOTS: usize, const FALLING: bool, const BOTH: bool> Kernel for Sweeping<'_, SLOTS, FALLING, BOTH> {
    type Output = (usize, bool);

    #[inline(always)]
    fn run<L: Lanes>(self) -> (usize, bool) {
        let work = self.0;
        let mut made = 0;
        for mut planes in work.planes.chunks_exact(work.program.planes_of_sweep()) {
            let mut differ = L::splat(0);
            for class in &work.program.classes {
                let own = class.start..class.start + class.groups() * WORDS;
                let (lower, own_lower) = Sides::around(work.lower, own.clone());
                let (upper, own_upper) = Sides::around(work.upper, own);
                let (now, later) = planes.split_at(class.groups() * work.program.planes());
                planes = later;
                differ = differ.or(update_groups::<L, SLOTS, FALLING, BOTH>(Update {
                    program: work.program,
                    class,
                    groups: 0..class.groups(),
                    planes: now,
                    lower,
                    upper: BOTH.then_some(upper),
                    own_lower,
                    own_upper,
                }));
            }
            made += 1;
            if BOTH && differ.is_none() {
                return (made, true);
            }
        }
        (made, work.met)
    }
}

/// New values of groups; gives the lanes whose bounds differ, in any group.
#[inline(always)]
fn update_groups<L: Lanes, const SLOTS: usize, const FALLING: bool, const BOTH: bool>(work: Update<'_>) -> L {
    let upper = work.upper.unwrap_or(work.lower);
    // what pulls the lower bound up at least, and the upper one at most
    let (least, most) = if FALLING {
        (upper, work.lower)
    } else {
        (work.lower, upper)
    };
    let rule = work.program.rule;
    let mut differ = L::splat(0);
    let planes = work.planes.chunks_exact(work.program.planes());
    let own = work
        .own_lower
        .chunks_exact_mut(WORDS)
        .zip(work.own_upper.chunks_exact_mut(WORDS));
    for ((group, planes), (own_lower, own_upper)) in work.groups.zip(planes).zip(own) {
        let pattern = &work.program.patterns[work.class.patterns[group] as usize];
        let [low, high] = if SLOTS == 0 {
            let plane = L::load(&planes[0].0);
            [
                plane.without(occupied(&least, &pattern.terms, group)),
                if BOTH {
                    plane.without(occupied(&most, &pattern.terms, group))
                } else {
                    plane
                },
            ]
        } else {
            let [reached_least, reached_most] = reached::<L, SLOTS, FALLING, BOTH>(pattern, group, &least, &most);
            [value(rule, planes, &reached_least), value(rule, planes, &reached_most)]
        };
        low.store(own_lower.try_into().expect("chunks are as long as a block"));
        if BOTH {
            high.store(own_upper.try_into().expect("chunks are as long as a block"));
            differ = differ.or(low.xor(high));
        }
    }
    differ
}

/// For both bounds, the lanes where more than 0, 1, 2, ... neighbours pull.
#[inline(always)]
fn reached<L: Lanes, const SLOTS: usize, const FALLING: bool, const BOTH: bool>(
    pattern: &Pattern,
    group: usize,
    least: &Sides<'_>,
    most: &Sides<'_>,
) -> [[L; SLOTS]; 2] {
    // what pulls in each slot, then how many slots pull: two loops, so that the second, whose length
    // is known to the compiler, works in registers
    let mut pulls = [[L::splat(0); 2]; SLOTS];
    let mut first = 0;
    for (pulls, end) in pulls.iter_mut().zip(pattern.ends) {
        let [mut pull_least, mut pull_most] = [L::splat(0); 2];
        for term in &pattern.terms[first..end as usize] {
            let mask = L::load(&term.mask.0);
            pull_least = pull::<L, FALLING>(pull_least, least.window(term, group), mask);
            if BOTH {
                pull_most = pull::<L, FALLING>(pull_most, most.window(term, group), mask);
            }
        }
        first = end as usize;
        *pulls = [pull_least, pull_most];
    }
    let mut reached = [[L::splat(0); SLOTS]; 2];
    for (slot, [pull_least, pull_most]) in pulls.into_iter().enumerate() {
        count(&mut reached[0], slot, pull_least);
        if BOTH {
            count(&mut reached[1], slot, pull_most);
        }
    }
    reached
}

/// The lanes of a group that have an occupied neighbour.
#[inline(always)]
fn occupied<L: Lanes>(bound: &Sides<'_>, terms: &[Term], group: usize) -> L {
    let mut occupied = L::splat(0);
    for term in terms {
        occupied = occupied.or_and(bound.window(term, group), L::load(&term.mask.0));
    }
    occupied
}

/// The lanes of `mask` whose neighbour pulls, and those of `into`.
#[inline(always)]
fn pull<L: Lanes, const FALLING: bool>(into: L, neighbours: L, mask: L) -> L {
    if FALLING {
        into.or(mask.without(neighbours))
    } else {
        into.or_and(neighbours, mask)
    }
}

/// One more neighbour, after `before` others: where it pulls, one more level is reached.
#[inline(always)]
fn count<L: Lanes, const SLOTS: usize>(reached: &mut [L; SLOTS], before: usize, pull: L) {
    for level in (1..=before).rev() {
        reached[level] = reached[level].or_and(reached[level - 1], pull);
    }
    reached[0] = reached[0].or(pull);
}

/// The new values, from the planes of a group and the levels that its neighbours reach.
#[inline(always)]
fn value<L: Lanes, const SLOTS: usize>(rule: Rule, planes: &[Block], reached: &[L; SLOTS]) -> L {
    if rule == Rule::Folded {
        // one plane for each pair of ranks, the innermost first
        let pairs = SLOTS.div_ceil(2);
        let half = L::load(&planes[0].0);
        // U < 1/2: below the thresholds of all ranks from the middle on, and of outer ones by comparison
        let mut low = reached[pairs - 1];
        let mut high = L::splat(0);
        for pair in 0..pairs {
            let below = L::load(&planes[pairs - pair].0);
            low = if pair == 0 {
                low.or(L::splat(u64::MAX).without(below))
            } else {
                low.or(reached[pair - 1].without(below))
            };
            high = high.or_and(reached[SLOTS - 1 - pair], below);
        }
        return half.select(low, high);
    }
    let mut value = L::load(&planes[0].0);
    for (reached, plane) in reached.iter().zip(&planes[1..]) {
        value = value.or_and(*reached, L::load(&plane.0));
    }
    value
}
