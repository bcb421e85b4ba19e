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
#[derive(Clone)]
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

    /// The edges of a cell, in their order.
    fn steps(&self) -> impl Iterator<Item = Step> + Clone + use<> {
        let (kind, axes) = (self.kind, self.extents.len());
        let count = if kind == Kind::Hypercubic { axes } else { 3 };
        (0..count).map(move |number| match (kind, number) {
            (Kind::Hypercubic, axis) | (Kind::Triangular, axis @ 0..2) => Step {
                ends: [0, 0],
                axes: axis..axis + 1,
                way: Way::Up,
            },
            (Kind::Triangular, _) => Step {
                ends: [0, 0],
                axes: 0..2,
                way: Way::Up,
            },
            // a cell's A with its own B, with that one down axis 1, with that one down axis 0
            (Kind::Honeycomb, _) => Step {
                ends: [0, 1],
                axes: [0..0, 1..2, 0..1][number].clone(),
                way: Way::Down,
            },
        })
    }

    /// All edges in their numbered order.
    pub(super) fn edges(&self) -> impl Iterator<Item = [u32; 2]> + '_ {
        let width = sites_of_cell(self.kind);
        let steps = self.steps();
        (0..self.cells()).flat_map(move |cell| {
            steps.clone().filter_map(move |step| {
                let far = self.hop(cell, step.axes, step.way).ok()?;
                Some([cell * width + step.ends[0], far * width + step.ends[1]])
            })
        })
    }

    /// What `site` has at the other end of each of its edges, in the order of the steps of a cell, and what it has
    /// instead where an edge is absent.
    pub fn neighbours(&self, site: u32) -> impl Iterator<Item = Neighbour> + '_ {
        let width = sites_of_cell(self.kind);
        let (cell, own) = (site / width, site % width);
        self.steps().flat_map(move |step| {
            // the edge that leads from here, and the one that leads here
            let ends = [(0, 1, step.way), (1, 0, step.way.back())];
            ends.into_iter().filter_map(move |(near, far, way)| {
                if step.ends[near] != own {
                    return None;
                }
                match self.hop(cell, step.axes.clone(), way) {
                    Ok(cell) => Some(Neighbour::Site(cell * width + step.ends[far])),
                    Err(word) => word.frozen().map(Neighbour::Frozen),
                }
            })
        })
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

fn sites_of_cell(kind: Kind) -> u32 {
    if kind == Kind::Honeycomb { 2 } else { 1 }
}
