//! A random map, laid out in the order in which a sweep works.
//!
//! Each lane has a *slot*: class by class, group by group, and within a group sorted into *runs* of lanes
//! that are worked alike. All lanes of a group are decided at once, so their order is free; which digits
//! are a lane's own follows from its number in the group, which is kept. Held sites have no slot: what
//! they do is in the thresholds. Nothing here changes once it is made.

use std::ops::Range;

use crate::engine::compact::digits;
use crate::engine::compact::rows::{Cuts, List, Rows, Strides, ends};
use crate::engine::compact::sums::Ends;
use crate::law::Digits;
use crate::random_map::{Class, End, RandomMap};
use crate::stream::{GROUP, STRIP};

/// What the compact engine keeps of a random map; one serves any number of engines.
pub struct Program {
    pub(super) digits: Digits,
    pub(super) sites: u32,
    /// The held sites that are +1.
    pub(super) held_plus: Vec<u32>,
    /// Strips of the longest list.
    pub(super) strips: u32,
    pub(super) groups: Vec<Group>,
    pub(super) runs: Vec<Run>,
    /// The site of each slot.
    pub(super) site_of: Vec<u32>,
    /// The ends of each slot: twice the far slot, and one more where the threshold falls with its value.
    ends: Vec<u32>,
    /// Plain digits: the stride of each end, or the number of its weight in a list.
    strides: Vec<u16>,
    /// Sliced digits: the place of each slot's own.
    pub(super) places: Vec<u16>,
    /// Sliced digits: the tables that runs name.
    pub(super) cuts: Vec<Cuts>,
    /// Plain digits: the lane of each slot.
    pub(super) lanes: Vec<Lane>,
    /// Plain digits: the first 64 digits of the threshold of each row.
    pub(super) high: Vec<u64>,
    /// Plain digits: the other 64.
    pub(super) low: Vec<u64>,
    /// Plain digits: the tables that runs name.
    pub(super) lists: Vec<List>,
}

/// A group of lanes.
pub(super) struct Group {
    pub(super) strip: usize,
    /// Its first slot.
    pub(super) first: usize,
    pub(super) lanes: usize,
    pub(super) runs: Range<usize>,
}

/// Lanes of a group that are worked alike.
pub(super) struct Run {
    pub(super) slots: Range<usize>,
    /// Ends of each lane.
    degree: usize,
    /// Where those of the first lane begin.
    first_end: usize,
    pub(super) sum: Sum,
    /// The number of its cuts, or of its list.
    pub(super) table: usize,
}

/// What the ends that lift add up to.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub(super) enum Sum {
    /// Their number: what a cut is about, or the row.
    Count,
    /// Their strides: the row.
    Strides,
    /// Their weights, whose place in a list is the row.
    Weights,
}

/// A lane with plain digits.
pub(super) struct Lane {
    /// Its number in its group.
    pub(super) number: u16,
    /// The first of its rows.
    pub(super) first_row: u32,
}

/// What sites with equal surroundings share.
struct Shape {
    degree: usize,
    sum: Sum,
    table: usize,
    /// What stands for each weight in `Program::strides`.
    strides: Vec<(u128, u16)>,
    first_row: u32,
}

impl Shape {
    /// Lanes of which this is equal are worked alike.
    fn way(&self) -> (Sum, usize, usize) {
        (self.sum, self.table, self.degree)
    }

    fn stride(&self, weight: i128) -> u16 {
        let at = self
            .strides
            .binary_search_by_key(&weight.unsigned_abs(), |(weight, _)| *weight);
        at.map_or(1, |at| self.strides[at].1)
    }
}

impl Program {
    /// The program of `map`.
    pub fn new(map: &RandomMap) -> Self {
        let held_plus = map.held().iter().filter(|(_, spin)| spin.bit());
        let mut program = Self {
            digits: map.digits(),
            sites: map.sites(),
            held_plus: held_plus.map(|(site, _)| *site).collect(),
            strips: 0,
            groups: Vec::new(),
            runs: Vec::new(),
            site_of: Vec::new(),
            ends: Vec::new(),
            strides: Vec::new(),
            places: Vec::new(),
            cuts: Vec::new(),
            lanes: Vec::new(),
            high: Vec::new(),
            low: Vec::new(),
            lists: Vec::new(),
        };
        let mut examples = vec![0; map.profiles() as usize];
        for site in map.classes().iter().flat_map(Class::sites) {
            examples[map.profile(site) as usize] = site;
        }
        let shapes: Vec<Shape> = examples.into_iter().map(|site| program.shape(map, site)).collect();
        let shape_of = |site: u32| &shapes[map.profile(site) as usize];
        for class in map.classes() {
            let list: Vec<u32> = class.sites().collect();
            for (number, lanes) in list.chunks(GROUP).enumerate() {
                program.add_group(number / STRIP, lanes, shape_of);
            }
        }
        program.add_ends(map, shape_of);
        program
    }

    /// The ends of a run.
    pub(super) fn ends(&self, run: &Run) -> Ends<'_> {
        let own = run.first_end..run.first_end + run.slots.len() * run.degree;
        Ends {
            degree: run.degree,
            strides: self.strides.get(own.clone()).unwrap_or(&[]),
            halves: &self.ends[own],
        }
    }

    /// The shape of sites like `site`.
    fn shape(&mut self, map: &RandomMap, site: u32) -> Shape {
        let mut shape = Shape {
            degree: ends(map, site).count(),
            sum: Sum::Count,
            table: 0,
            strides: Vec::new(),
            first_row: self.high.len() as u32,
        };
        if self.digits == Digits::Sliced {
            shape.table = self.cuts.len();
            self.cuts.push(Cuts::new(map, site));
            return shape;
        }
        let rows = Rows::new(map, site);
        for theta in rows.thresholds {
            self.high.push((theta >> 64) as u64);
            self.low.push(theta as u64);
        }
        match rows.strides {
            Strides::One => {}
            Strides::Listed(strides) => {
                shape.sum = Sum::Strides;
                shape.strides = strides;
            }
            Strides::Searched(list) => {
                shape.sum = Sum::Weights;
                shape.table = self.lists.len();
                // n different weights make more than n^2/2 different lifts, so there are few
                shape.strides = list.weights.iter().copied().zip(0..).collect();
                self.lists.push(list);
            }
        }
        shape
    }

    /// Gives slots to the lanes of a group.
    fn add_group<'s>(&mut self, strip: usize, lanes: &[u32], shape_of: impl Fn(u32) -> &'s Shape) {
        let way = |lane: &usize| shape_of(lanes[*lane]).way();
        let mut order: Vec<usize> = (0..lanes.len()).collect();
        order.sort_by_key(way);
        let (first, first_run) = (self.site_of.len(), self.runs.len());
        for run in order.chunk_by(|one, next| way(one) == way(next)) {
            let (sum, table, degree) = way(&run[0]);
            let first = self.site_of.len();
            self.site_of.extend(run.iter().map(|lane| lanes[*lane]));
            self.runs.push(Run {
                slots: first..self.site_of.len(),
                degree,
                first_end: 0,
                sum,
                table,
            });
        }
        match self.digits {
            Digits::Sliced => self.places.extend(order.iter().map(|lane| digits::place(*lane))),
            Digits::Plain => self.lanes.extend(order.iter().map(|lane| Lane {
                number: *lane as u16,
                first_row: shape_of(lanes[*lane]).first_row,
            })),
        }
        self.groups.push(Group {
            strip,
            first,
            lanes: lanes.len(),
            runs: first_run..self.runs.len(),
        });
        self.strips = self.strips.max(strip as u32 + 1);
    }

    /// Lists the ends of all slots, once every free site has one.
    fn add_ends<'s>(&mut self, map: &RandomMap, shape_of: impl Fn(u32) -> &'s Shape) {
        let mut slot_of = vec![0; self.sites as usize];
        for (site, slot) in self.site_of.iter().zip(0u32..) {
            slot_of[*site as usize] = slot;
        }
        for run in &mut self.runs {
            run.first_end = self.ends.len();
            for site in &self.site_of[run.slots.clone()] {
                let half = |end: End| 2 * slot_of[end.site as usize] + u32::from(!end.rising);
                self.ends.extend(ends(map, *site).map(half));
                if self.digits == Digits::Plain {
                    let shape = shape_of(*site);
                    self.strides
                        .extend(ends(map, *site).map(|end| shape.stride(end.weight)));
                }
            }
        }
    }
}
