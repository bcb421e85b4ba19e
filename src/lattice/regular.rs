//! The regular lattices: sites, edges and boundaries from coordinates alone, nothing listed (`STREAM.md` §9).

use std::ops::Range;

use crate::error::{self, Error};

use super::{Boundary, Kind, MOST_AXES, MOST_EDGES, MOST_SITES, Neighbour};

/// A regular lattice: a family, its extents, and one boundary word for each axis.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Regular {
    kind: Kind,
    extents: Vec<u32>,
    boundary: Vec<Boundary>,
    /// How far the number of a cell moves with each coordinate.
    strides: Vec<u32>,
}

/// The edge that each cell has of one sort: from its first end in the cell to its second one in the cell reached by
/// moving one way along each of some axes.
struct Step {
    ends: [u32; 2],
    axes: Range<usize>,
    way: Way,
}

/// To larger or to smaller coordinates.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Way {
    Up,
    Down,
}

impl Way {
    fn back(self) -> Self {
        match self {
            Self::Up => Self::Down,
            Self::Down => Self::Up,
        }
    }
}

impl Regular {
    /// A lattice with these extents and one boundary word an axis.
    ///
    /// # Errors
    /// [`crate::error::ErrorKind::Value`] or [`crate::error::ErrorKind::TooLarge`], with the field.
    pub fn new(kind: Kind, extents: Vec<u64>, boundary: Vec<Boundary>) -> error::Result<Self> {
        let axes = extents.len();
        match kind {
            Kind::Hypercubic if !(1..=MOST_AXES).contains(&axes) => {
                return Err(Error::value(format!("{axes} extents"), format!("1 to {MOST_AXES}")).at_field("extents"));
            }
            Kind::Triangular | Kind::Honeycomb if axes != 2 => {
                return Err(
                    Error::value(format!("{axes} extents"), format!("2 for a {kind} lattice")).at_field("extents"),
                );
            }
            _ => {}
        }
        if boundary.len() != axes {
            let expected = format!("one for each of {axes} axes");
            return Err(Error::value(format!("{} boundary words", boundary.len()), expected).at_field("boundary"));
        }
        for (axis, (&extent, &word)) in extents.iter().zip(&boundary).enumerate() {
            let least = if word == Boundary::Periodic { 2 } else { 1 };
            if extent < least {
                let expected = format!("at least {least} on a {word} axis");
                return Err(Error::value(format!("extent {extent} on axis {axis}"), expected).at_field("extents"));
            }
        }
        let sites = extents
            .iter()
            .try_fold(sites_of_cell(kind).into(), |product: u64, &extent| {
                product.checked_mul(extent)
            });
        let per_site = match kind {
            Kind::Hypercubic => axes as u64,
            Kind::Triangular => 3,
            Kind::Honeycomb => 2,
        };
        let too_many = |what, found: Option<u64>, limit| {
            let found = found.map_or_else(|| "more than 2^64".to_string(), |count| count.to_string());
            Err(Error::too_large(what, found, limit).at_field("extents"))
        };
        match sites {
            Some(sites) if sites <= MOST_SITES => {
                if sites * per_site > MOST_EDGES {
                    return too_many("edges of the lattice", Some(sites * per_site), MOST_EDGES);
                }
            }
            _ => return too_many("sites of the lattice", sites, MOST_SITES),
        }
        let extents: Vec<u32> = extents
            .into_iter()
            .map(|extent| u32::try_from(extent).unwrap_or(u32::MAX))
            .collect();
        let strides = (1..=axes).map(|axis| extents[axis..].iter().product()).collect();
        Ok(Self {
            kind,
            extents,
            boundary,
            strides,
        })
    }

    /// The family.
    pub fn kind(&self) -> Kind {
        self.kind
    }

    /// The extents, one an axis.
    pub fn extents(&self) -> &[u32] {
        &self.extents
    }

    /// The boundary words, one an axis.
    pub fn boundary(&self) -> &[Boundary] {
        &self.boundary
    }

    pub(super) fn sites(&self) -> u32 {
        self.cells() * sites_of_cell(self.kind)
    }

    fn cells(&self) -> u32 {
        self.extents.iter().product()
    }

    /// How many edges a cell has.
    fn steps(&self) -> usize {
        if self.kind == Kind::Hypercubic {
            self.extents.len()
        } else {
            3
        }
    }

    /// The edges of a cell, in their order.
    fn step(&self, number: usize) -> Step {
        let (ends, axes, way) = match (self.kind, number) {
            (Kind::Hypercubic, axis) | (Kind::Triangular, axis @ 0..2) => ([0, 0], axis..axis + 1, Way::Up),
            (Kind::Triangular, _) => ([0, 0], 0..2, Way::Up),
            // a cell's A with its own B, with that one down axis 1, with that one down axis 0
            (Kind::Honeycomb, 0) => ([0, 1], 0..0, Way::Down),
            (Kind::Honeycomb, number) => ([0, 1], 2 - number..3 - number, Way::Down),
        };
        Step { ends, axes, way }
    }

    /// All edges in their numbered order.
    pub(super) fn edges(&self) -> impl Iterator<Item = [u32; 2]> + '_ {
        let width = sites_of_cell(self.kind);
        (0..self.cells()).flat_map(move |cell| {
            (0..self.steps()).filter_map(move |number| {
                let step = self.step(number);
                let far = self.hop(cell, step.axes, step.way).ok()?;
                Some([cell * width + step.ends[0], far * width + step.ends[1]])
            })
        })
    }

    /// What `site` has at the other end of each of its edges, in the order of the edges of a cell, and what it has
    /// instead where an edge is absent.
    pub fn neighbours(&self, site: u32) -> Neighbours<'_> {
        let width = sites_of_cell(self.kind);
        Neighbours {
            regular: self,
            cell: site / width,
            own: site % width,
            next: 0,
        }
    }

    /// The cell one step away along all of `axes`; for an edge that would wrap an axis that is not periodic, the
    /// word of the first such axis.
    #[inline]
    fn hop(&self, cell: u32, axes: Range<usize>, way: Way) -> Result<u32, Boundary> {
        let (mut target, mut word) = (cell, None);
        for axis in axes {
            let (extent, stride) = (self.extents[axis], self.strides[axis]);
            let at = cell / stride % extent;
            let across = (extent - 1) * stride;
            let wraps = at == if way == Way::Up { extent - 1 } else { 0 };
            if wraps && self.boundary[axis] != Boundary::Periodic {
                word = word.or(Some(self.boundary[axis]));
            }
            target = match (way, wraps) {
                (Way::Up, false) => target + stride,
                (Way::Up, true) => target - across,
                (Way::Down, false) => target - stride,
                (Way::Down, true) => target + across,
            };
        }
        word.map_or(Ok(target), Err)
    }
}

/// The neighbours of a site of a regular lattice.
#[derive(Clone, Debug)]
pub struct Neighbours<'a> {
    regular: &'a Regular,
    cell: u32,
    /// Which site of the cell.
    own: u32,
    /// Each edge of a cell leads away from a site and, that of another cell, to it.
    next: usize,
}

impl Iterator for Neighbours<'_> {
    type Item = Neighbour;

    fn next(&mut self) -> Option<Neighbour> {
        while self.next < 2 * self.regular.steps() {
            let (step, near) = (self.regular.step(self.next / 2), self.next % 2);
            self.next += 1;
            if step.ends[near] != self.own {
                continue;
            }
            let way = if near == 0 { step.way } else { step.way.back() };
            match self.regular.hop(self.cell, step.axes, way) {
                Ok(cell) => {
                    let site = cell * sites_of_cell(self.regular.kind) + step.ends[1 - near];
                    return Some(Neighbour::Site(site));
                }
                Err(word) => {
                    if let Some(spin) = word.frozen() {
                        return Some(Neighbour::Frozen(spin));
                    }
                }
            }
        }
        None
    }
}

fn sites_of_cell(kind: Kind) -> u32 {
    if kind == Kind::Honeycomb { 2 } else { 1 }
}
