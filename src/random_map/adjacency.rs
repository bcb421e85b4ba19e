//! Who is at the far end of each edge of a site: from coordinates on a regular lattice, from a list on a graph.

use std::ops::Range;
use std::sync::Arc;

use crate::lattice::{Graph, Lattice, Neighbour, Neighbours, Regular};

use super::labels::Labels;

/// The edges of each site.
#[derive(Debug)]
pub(super) enum Adjacency {
    /// All with coupling number 0: what stands at a boundary too has the one coupling of the law.
    Regular(Regular),
    /// Site by site, in the order of the edges.
    Listed {
        /// Where the ends of each site begin, and the last ones end.
        first: Vec<u32>,
        far: Vec<u32>,
        /// The number of the coupling, end by end.
        coupling: Labels,
    },
}

impl Adjacency {
    /// The edges of `lattice`; `coupling` gives the number of the coupling of each edge of a graph.
    pub(super) fn of(lattice: &Lattice, coupling: impl Fn(usize) -> u32) -> Self {
        match lattice {
            Lattice::Regular(regular) => Self::Regular(regular.clone()),
            Lattice::Graph(graph) => Self::of_graph(graph, coupling),
        }
    }

    fn of_graph(graph: &Arc<Graph>, coupling_of: impl Fn(usize) -> u32) -> Self {
        let mut first = vec![0; graph.sites() as usize + 1];
        for site in graph.edges().as_flattened() {
            first[*site as usize + 1] += 1;
        }
        for site in 1..first.len() {
            first[site] += first[site - 1];
        }
        let mut filled = first.clone();
        let mut far = vec![0; 2 * graph.edges().len()];
        let mut coupling = Labels::new(far.len());
        for (edge, [a, b]) in graph.edges().iter().enumerate() {
            for (near, other) in [(*a, *b), (*b, *a)] {
                let at = filled[near as usize] as usize;
                far[at] = other;
                coupling.set(at, coupling_of(edge));
                filled[near as usize] += 1;
            }
        }
        Self::Listed { first, far, coupling }
    }

    /// The far ends of the edges of `site`, frozen ones included, each with the number of its coupling.
    pub(super) fn neighbours(&self, site: u32) -> FarEnds<'_> {
        match self {
            Self::Regular(regular) => FarEnds::Regular(regular.neighbours(site)),
            Self::Listed { first, far, coupling } => FarEnds::Listed {
                ends: first[site as usize] as usize..first[site as usize + 1] as usize,
                far,
                coupling,
            },
        }
    }
}

/// The far ends of the edges of one site.
pub(super) enum FarEnds<'a> {
    Regular(Neighbours<'a>),
    Listed {
        ends: Range<usize>,
        far: &'a [u32],
        coupling: &'a Labels,
    },
}

impl Iterator for FarEnds<'_> {
    type Item = (Neighbour, u32);

    fn next(&mut self) -> Option<(Neighbour, u32)> {
        match self {
            Self::Regular(neighbours) => Some((neighbours.next()?, 0)),
            Self::Listed { ends, far, coupling } => {
                let at = ends.next()?;
                Some((Neighbour::Site(far[at]), coupling.get(at)))
            }
        }
    }
}
