//! Sites, edges and frozen neighbours of every lattice (`STREAM.md` §9).
//!
//! The numbering of sites and edges is part of the stream definition: it fixes which word decides
//! which site. A lattice that exists as a value is valid: constructors refuse the impossible ones.
//! Only a graph lists its edges; those of a regular lattice follow from coordinates. Nothing here
//! knows a temperature.

mod graph;
mod regular;

use std::{fmt, sync::Arc};

use serde_json::{Value, json};

use crate::error::Result;

pub use graph::Graph;
pub use regular::{Neighbours, Regular};

/// Sites of one lattice, at most.
pub const MOST_SITES: u64 = 1 << 26;
/// Edges of one lattice, at most.
pub const MOST_EDGES: u64 = 1 << 28;
/// Axes of one lattice, at most.
pub const MOST_AXES: usize = 32;

/// The two values of a site: down or up for Ising, empty or occupied for the lattice gas.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Spin {
    /// -1, or empty.
    Minus,
    /// +1, or occupied.
    Plus,
}

impl Spin {
    /// -1 or +1.
    pub fn value(self) -> i64 {
        match self {
            Self::Minus => -1,
            Self::Plus => 1,
        }
    }

    /// The spin whose value is -1 or +1.
    pub fn from_value(value: i64) -> Option<Self> {
        match value {
            -1 => Some(Self::Minus),
            1 => Some(Self::Plus),
            _ => None,
        }
    }

    /// The spin of a bit: 1 for +1.
    pub fn from_bit(bit: bool) -> Self {
        if bit { Self::Plus } else { Self::Minus }
    }

    /// Its bit: 1 for +1.
    pub fn bit(self) -> bool {
        self == Self::Plus
    }
}

/// What stands where a lattice axis ends.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Boundary {
    /// The axis closes on itself.
    Periodic,
    /// Nothing: the edges that would wrap are absent.
    Free,
    /// A frozen +1 (occupied) neighbour at each end of an absent edge.
    Plus,
    /// A frozen -1 (empty) neighbour at each end of an absent edge.
    Minus,
}

/// The words of a plan and of a law for each boundary.
const BOUNDARY_WORDS: [(&str, Boundary); 4] = [
    ("periodic", Boundary::Periodic),
    ("free", Boundary::Free),
    ("plus", Boundary::Plus),
    ("minus", Boundary::Minus),
];

impl Boundary {
    /// The boundary that `word` names.
    pub fn from_word(word: &str) -> Option<Self> {
        BOUNDARY_WORDS
            .iter()
            .find(|(name, _)| *name == word)
            .map(|(_, boundary)| *boundary)
    }

    /// The frozen neighbour of a site where an edge is absent.
    fn frozen(self) -> Option<Spin> {
        match self {
            Self::Plus => Some(Spin::Plus),
            Self::Minus => Some(Spin::Minus),
            Self::Periodic | Self::Free => None,
        }
    }
}

impl fmt::Display for Boundary {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(
            BOUNDARY_WORDS
                .iter()
                .find(|(_, boundary)| boundary == self)
                .map_or("", |(name, _)| name),
        )
    }
}

/// The families of regular lattices.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Kind {
    /// A chain, square, cubic ... lattice: any number of axes.
    Hypercubic,
    /// Square with one diagonal: six neighbours.
    Triangular,
    /// Two sites a cell: three neighbours.
    Honeycomb,
}

/// The words of a plan and of a law for each family.
const KIND_WORDS: [(&str, Kind); 3] = [
    ("hypercubic", Kind::Hypercubic),
    ("triangular", Kind::Triangular),
    ("honeycomb", Kind::Honeycomb),
];

impl Kind {
    /// The family that `word` names.
    pub fn from_word(word: &str) -> Option<Self> {
        KIND_WORDS.iter().find(|(name, _)| *name == word).map(|(_, kind)| *kind)
    }
}

impl fmt::Display for Kind {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(
            KIND_WORDS
                .iter()
                .find(|(_, kind)| kind == self)
                .map_or("", |(name, _)| name),
        )
    }
}

/// Where the sites of an ensemble lie.
#[derive(Clone, PartialEq, Eq, Debug)]
pub enum Lattice {
    /// A regular lattice.
    Regular(Regular),
    /// Any other graph.
    Graph(Arc<Graph>),
}

/// What a site has at the far end of an edge, or instead of one.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Neighbour {
    /// Another site.
    Site(u32),
    /// A frozen value at a boundary.
    Frozen(Spin),
}

impl Lattice {
    /// The number of sites.
    pub fn sites(&self) -> u32 {
        match self {
            Self::Regular(regular) => regular.sites(),
            Self::Graph(graph) => graph.sites(),
        }
    }

    /// All edges in their numbered order.
    pub fn edges(&self) -> impl Iterator<Item = [u32; 2]> + '_ {
        let (regular, graph) = match self {
            Self::Regular(regular) => (Some(regular.edges()), None),
            Self::Graph(graph) => (None, Some(graph.edges().iter().copied())),
        };
        regular.into_iter().flatten().chain(graph.into_iter().flatten())
    }

    /// Each site that has a frozen neighbour, once for each of them.
    pub fn frozen(&self) -> impl Iterator<Item = (u32, Spin)> + '_ {
        let regular = match self {
            Self::Regular(regular) if regular.boundary().iter().any(|word| word.frozen().is_some()) => Some(regular),
            _ => None,
        };
        regular.into_iter().flat_map(|regular| {
            (0..regular.sites()).flat_map(|site| {
                let neighbours = regular.neighbours(site);
                neighbours.filter_map(move |neighbour| match neighbour {
                    Neighbour::Frozen(spin) => Some((site, spin)),
                    Neighbour::Site(_) => None,
                })
            })
        })
    }

    /// The graph, if it is one.
    pub fn graph(&self) -> Option<&Arc<Graph>> {
        match self {
            Self::Regular(_) => None,
            Self::Graph(graph) => Some(graph),
        }
    }

    /// The axes along which the sites of a sample are laid out, slowest first.
    pub fn shape(&self) -> Vec<u64> {
        match self {
            Self::Regular(regular) => {
                let mut shape: Vec<u64> = regular.extents().iter().copied().map(u64::from).collect();
                if regular.kind() == Kind::Honeycomb {
                    shape.push(2);
                }
                shape
            }
            Self::Graph(graph) => vec![u64::from(graph.sites())],
        }
    }

    /// The `lattice` object of a law (`STREAM.md` §10).
    ///
    /// # Errors
    /// Those of [`Graph::digest`].
    pub fn to_json(&self) -> Result<Value> {
        Ok(match self {
            Self::Regular(regular) => json!({
                "kind": regular.kind().to_string(),
                "extents": regular.extents(),
                "boundary": regular.boundary().iter().map(Boundary::to_string).collect::<Vec<_>>(),
            }),
            Self::Graph(graph) => json!({
                "kind": "graph", "sites": graph.sites(), "edges": graph.edges().len(), "sha256": graph.digest()?,
            }),
        })
    }
}

impl fmt::Display for Lattice {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Regular(regular) => {
                let extents: Vec<_> = regular.extents().iter().map(u32::to_string).collect();
                let mut words: Vec<_> = regular.boundary().iter().map(Boundary::to_string).collect();
                words.dedup();
                write!(f, "{} {}, {}", regular.kind(), extents.join(" x "), words.join(" and "))
            }
            Self::Graph(graph) => write!(f, "graph of {} sites and {} edges", graph.sites(), graph.edges().len()),
        }
    }
}
#[cfg(test)]
mod tests;
