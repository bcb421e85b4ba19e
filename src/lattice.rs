//! Sites, edges and frozen neighbours of every lattice (`STREAM.md` §9).
//!
//! The numbering of sites and edges is part of the stream definition: it fixes which word decides
//! which site. A lattice that exists as a value is valid: constructors refuse the impossible ones.
//! Nothing here knows a temperature.

use std::{fmt, sync::Arc};

use serde_json::{Value, json};

use crate::error::{Error, ErrorKind, Result};
use crate::number::Exact;
use crate::quantity::{Digest, Hasher};

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

/// A regular lattice: a family, its extents, and one boundary word for each axis.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Regular {
    kind: Kind,
    extents: Vec<u32>,
    boundary: Vec<Boundary>,
}

/// A graph as its files say, with numbered sites and edges.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Graph {
    sites: u32,
    edges: Vec<[u32; 2]>,
    couplings: Option<Vec<Exact>>,
    fields: Option<Vec<Exact>>,
    /// Of the three lists; kept because every law of a grid names it.
    digest: Digest,
}

/// Where the sites of an ensemble lie.
#[derive(Clone, PartialEq, Eq, Debug)]
pub enum Lattice {
    /// A regular lattice.
    Regular(Regular),
    /// Any other graph.
    Graph(Arc<Graph>),
}

/// The edges of a lattice in their numbered order, and what stands where edges are absent.
#[derive(Clone, PartialEq, Eq, Debug, Default)]
pub struct Bonds {
    /// The two sites of each edge, by edge number.
    pub edges: Vec<[u32; 2]>,
    /// A site and the frozen neighbour that it has instead of an absent edge.
    pub frozen: Vec<(u32, Spin)>,
}

impl Regular {
    /// A lattice with these extents and one boundary word an axis.
    ///
    /// # Errors
    /// [`crate::error::ErrorKind::Value`] or [`crate::error::ErrorKind::TooLarge`], with the field.
    pub fn new(kind: Kind, extents: Vec<u64>, boundary: Vec<Boundary>) -> Result<Self> {
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
        let cell = if kind == Kind::Honeycomb { 2 } else { 1 };
        let sites = extents
            .iter()
            .try_fold(cell, |product: u64, &extent| product.checked_mul(extent));
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
        let extents = extents
            .into_iter()
            .map(|extent| u32::try_from(extent).unwrap_or(u32::MAX))
            .collect();
        Ok(Self {
            kind,
            extents,
            boundary,
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

    fn sites(&self) -> u32 {
        let cell = if self.kind == Kind::Honeycomb { 2 } else { 1 };
        self.extents.iter().product::<u32>() * cell
    }

    fn bonds(&self) -> Bonds {
        let mut bonds = Bonds::default();
        let mut coordinates = vec![0; self.extents.len()];
        for cell in 0..self.extents.iter().product::<u32>() {
            match self.kind {
                Kind::Hypercubic | Kind::Triangular => {
                    for axis in 0..self.extents.len() {
                        self.step(&mut bonds, &coordinates, &[(axis, 1)], |cell| cell, cell);
                    }
                    if self.kind == Kind::Triangular {
                        self.step(&mut bonds, &coordinates, &[(0, 1), (1, 1)], |cell| cell, cell);
                    }
                }
                Kind::Honeycomb => {
                    let (a, b) = (2 * cell, |cell| 2 * cell + 1);
                    bonds.edges.push([a, b(cell)]);
                    self.step(&mut bonds, &coordinates, &[(1, -1)], b, a);
                    self.step(&mut bonds, &coordinates, &[(0, -1)], b, a);
                }
            }
            self.advance(&mut coordinates);
        }
        bonds
    }

    /// The edge from site `from` to the cell reached by unit `moves` (axes in increasing number),
    /// or what stands at both its ends if it would wrap an axis that is not periodic.
    fn step(
        &self,
        bonds: &mut Bonds,
        coordinates: &[u32],
        moves: &[(usize, i64)],
        site: impl Fn(u32) -> u32,
        from: u32,
    ) {
        let mut target = coordinates.to_vec();
        let mut word = None;
        for &(axis, by) in moves {
            let extent = i64::from(self.extents[axis]);
            let moved = i64::from(coordinates[axis]) + by;
            if !(0..extent).contains(&moved) && self.boundary[axis] != Boundary::Periodic {
                word = word.or(Some(self.boundary[axis]));
            }
            target[axis] = u32::try_from(moved.rem_euclid(extent)).unwrap_or(0);
        }
        let to = site(
            target
                .iter()
                .zip(&self.extents)
                .fold(0, |cell, (at, extent)| cell * extent + at),
        );
        match word {
            None => bonds.edges.push([from, to]),
            Some(word) => bonds
                .frozen
                .extend(word.frozen().into_iter().flat_map(|spin| [(from, spin), (to, spin)])),
        }
    }

    /// The next cell in row-major order: the last coordinate runs fastest.
    fn advance(&self, coordinates: &mut [u32]) {
        for (coordinate, extent) in coordinates.iter_mut().zip(&self.extents).rev() {
            *coordinate += 1;
            if *coordinate < *extent {
                return;
            }
            *coordinate = 0;
        }
    }
}

impl Graph {
    /// A graph with edges numbered as listed; couplings and fields are listed for all or for none.
    ///
    /// # Errors
    /// [`crate::error::ErrorKind::Value`] for a self-loop, a site beyond the last, or lists of other
    /// lengths; [`crate::error::ErrorKind::TooLarge`].
    pub fn new(
        sites: u64,
        edges: Vec<[u32; 2]>,
        couplings: Option<Vec<Exact>>,
        fields: Option<Vec<Exact>>,
    ) -> Result<Self> {
        if sites == 0 {
            return Err(Error::value("no site", "at least one"));
        }
        if sites > MOST_SITES {
            return Err(Error::too_large("sites of the graph", sites, MOST_SITES));
        }
        if edges.len() as u64 > MOST_EDGES {
            return Err(Error::too_large("edges of the graph", edges.len(), MOST_EDGES));
        }
        for (number, [from, to]) in edges.iter().enumerate() {
            if from == to {
                return Err(Error::value(
                    format!("edge {number} from site {from} to itself"),
                    "two different sites",
                ));
            }
            if u64::from(*from.max(to)) >= sites {
                return Err(Error::value(
                    format!("edge {number} with site {}", from.max(to)),
                    format!("sites below {sites}"),
                ));
            }
        }
        let same = |what, listed: &Option<Vec<Exact>>, count: u64| match listed {
            Some(list) if list.len() as u64 != count => Err(Error::value(
                format!("{} {what}", list.len()),
                format!("{count}, one each"),
            )),
            _ => Ok(()),
        };
        same("couplings", &couplings, edges.len() as u64)?;
        same("fields", &fields, sites)?;
        let sites = u32::try_from(sites).unwrap_or(u32::MAX);
        let digest = digest_of_lists(&edges, couplings.as_deref(), fields.as_deref())?;
        Ok(Self {
            sites,
            edges,
            couplings,
            fields,
            digest,
        })
    }

    /// The number of sites.
    pub fn sites(&self) -> u32 {
        self.sites
    }

    /// The two sites of each edge.
    pub fn edges(&self) -> &[[u32; 2]] {
        &self.edges
    }

    /// The coupling of each edge, if they are listed.
    pub fn couplings(&self) -> Option<&[Exact]> {
        self.couplings.as_deref()
    }

    /// The field of each site, if they are listed.
    pub fn fields(&self) -> Option<&[Exact]> {
        self.fields.as_deref()
    }

    /// The object `{couplings, edges, fields}` of `STREAM.md` §10.
    pub fn to_json(&self) -> Value {
        json!({ "couplings": self.couplings, "edges": self.edges, "fields": self.fields })
    }

    /// The graph of an object `{couplings, edges, fields}`, which does not say how many sites there are.
    ///
    /// # Errors
    /// [`crate::error::ErrorKind::Syntax`] if it is no such object; otherwise as [`Graph::new`].
    pub fn from_json(value: &Value, sites: u64) -> Result<Self> {
        #[derive(serde::Deserialize)]
        #[serde(deny_unknown_fields)]
        struct Fields {
            couplings: Option<Vec<Exact>>,
            edges: Vec<[u32; 2]>,
            fields: Option<Vec<Exact>>,
        }
        let Fields {
            couplings,
            edges,
            fields,
        } = serde::Deserialize::deserialize(value).map_err(|error: serde_json::Error| {
            Error::from(ErrorKind::Syntax {
                format: "JSON",
                what: error.to_string(),
            })
        })?;
        Self::new(sites, edges, couplings, fields)
    }

    /// The SHA-256 of the canonical JSON of [`Graph::to_json`].
    ///
    /// # Errors
    /// None: it was computed when the graph was made.
    pub fn digest(&self) -> Result<Digest> {
        Ok(self.digest)
    }
}

/// The SHA-256 of the canonical JSON of `{couplings, edges, fields}` without building that JSON: the names stand in
/// order, site numbers and digits have one way to be written, so that plain compact JSON is canonical.
fn digest_of_lists(edges: &[[u32; 2]], couplings: Option<&[Exact]>, fields: Option<&[Exact]>) -> Result<Digest> {
    #[derive(serde::Serialize)]
    struct Lists<'a> {
        couplings: Option<&'a [Exact]>,
        edges: &'a [[u32; 2]],
        fields: Option<&'a [Exact]>,
    }
    let mut hasher = Hasher::default();
    let lists = Lists {
        couplings,
        edges,
        fields,
    };
    serde_json::to_writer(&mut hasher, &lists).map_err(|error| {
        Error::from(ErrorKind::SelfCheck {
            what: format!("digest of a graph: {error}"),
        })
    })?;
    Ok(hasher.finish())
}

impl Lattice {
    /// The number of sites.
    pub fn sites(&self) -> u32 {
        match self {
            Self::Regular(regular) => regular.sites(),
            Self::Graph(graph) => graph.sites,
        }
    }

    /// All edges, numbered, and all frozen neighbours.
    pub fn bonds(&self) -> Bonds {
        match self {
            Self::Regular(regular) => regular.bonds(),
            Self::Graph(graph) => Bonds {
                edges: graph.edges.clone(),
                frozen: Vec::new(),
            },
        }
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
                let mut shape: Vec<u64> = regular.extents.iter().copied().map(u64::from).collect();
                if regular.kind == Kind::Honeycomb {
                    shape.push(2);
                }
                shape
            }
            Self::Graph(graph) => vec![u64::from(graph.sites)],
        }
    }

    /// The `lattice` object of a law (`STREAM.md` §10).
    ///
    /// # Errors
    /// Those of [`Graph::digest`].
    pub fn to_json(&self) -> Result<Value> {
        Ok(match self {
            Self::Regular(regular) => json!({
                "kind": regular.kind.to_string(),
                "extents": regular.extents,
                "boundary": regular.boundary.iter().map(Boundary::to_string).collect::<Vec<_>>(),
            }),
            Self::Graph(graph) => json!({
                "kind": "graph", "sites": graph.sites, "edges": graph.edges.len(), "sha256": graph.digest()?,
            }),
        })
    }
}

impl fmt::Display for Lattice {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Regular(regular) => {
                let extents: Vec<_> = regular.extents.iter().map(u32::to_string).collect();
                let mut words: Vec<_> = regular.boundary.iter().map(Boundary::to_string).collect();
                words.dedup();
                write!(f, "{} {}, {}", regular.kind, extents.join(" x "), words.join(" and "))
            }
            Self::Graph(graph) => write!(f, "graph of {} sites and {} edges", graph.sites, graph.edges.len()),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn regular(kind: Kind, extents: &[u64], boundary: &[Boundary]) -> Result<Regular> {
        Regular::new(kind, extents.to_vec(), boundary.to_vec())
    }

    /// `STREAM.md` §9: a periodic axis of extent 2 has two parallel edges; counts by hand.
    #[test]
    fn edges_are_counted_and_ordered_as_defined() {
        use Boundary::{Free, Periodic, Plus};
        let square = regular(Kind::Hypercubic, &[2, 2], &[Periodic, Periodic])
            .unwrap()
            .bonds();
        assert_eq!(
            square.edges,
            [[0, 2], [0, 1], [1, 3], [1, 0], [2, 0], [2, 3], [3, 1], [3, 2]]
        );
        let chain = regular(Kind::Hypercubic, &[1], &[Plus]).unwrap().bonds();
        assert_eq!(
            (chain.edges.len(), chain.frozen),
            (0, vec![(0, Spin::Plus), (0, Spin::Plus)])
        );
        let diagonal = regular(Kind::Triangular, &[4, 4], &[Boundary::Minus, Plus])
            .unwrap()
            .bonds();
        assert_eq!(
            diagonal.edges.len(),
            33,
            "tests/vectors/stream1.json, triangular 4x4 minus and plus"
        );
        assert_eq!(
            diagonal.frozen.iter().filter(|(_, spin)| *spin == Spin::Minus).count(),
            16
        );
        assert_eq!(
            diagonal.frozen.iter().filter(|(_, spin)| *spin == Spin::Plus).count(),
            14
        );
        // STREAM.md §9 by hand: A of cell (0, 0) with B of the same cell, of (0, 2), of (1, 0)
        let comb = regular(Kind::Honeycomb, &[2, 3], &[Periodic, Periodic])
            .unwrap()
            .bonds();
        assert_eq!(comb.edges[..3], [[0, 1], [0, 5], [0, 7]]);
        let triangles = regular(Kind::Triangular, &[3, 3], &[Periodic, Periodic])
            .unwrap()
            .bonds();
        assert_eq!(triangles.edges[..3], [[0, 3], [0, 1], [0, 4]]);
        let comb = regular(Kind::Honeycomb, &[3, 4], &[Free, Plus]).unwrap().bonds();
        assert_eq!(
            comb.edges.len(),
            29,
            "tests/vectors/stream1.json, honeycomb 3x4 free and plus"
        );
        assert_eq!(comb.frozen.len(), 6);
    }

    /// `STREAM.md` §10: the digest is that of the canonical JSON, however it is computed.
    #[test]
    fn a_graph_has_the_digest_of_its_canonical_json() {
        let couplings = ["1/2", "-7/10", "3"].map(|text| Exact::parse(text).unwrap()).to_vec();
        let fields = vec![Exact::zero(); 70_000];
        let edges = vec![[0, 1], [69_999, 2], [1, 0]];
        for (couplings, fields) in [(Some(couplings), None), (None, Some(fields)), (None, None)] {
            let graph = Graph::new(70_000, edges.clone(), couplings, fields).unwrap();
            assert_eq!(
                graph.digest().unwrap(),
                crate::canonical::digest(&graph.to_json()).unwrap()
            );
        }
    }

    #[test]
    fn impossible_lattices_are_refused() {
        use Boundary::{Free, Periodic};
        assert!(regular(Kind::Hypercubic, &[], &[]).is_err());
        assert!(regular(Kind::Hypercubic, &[1], &[Periodic]).is_err());
        assert!(regular(Kind::Hypercubic, &[0], &[Free]).is_err());
        assert!(regular(Kind::Hypercubic, &[4, 4], &[Free]).is_err());
        assert!(regular(Kind::Triangular, &[4, 4, 4], &[Free; 3]).is_err());
        assert!(regular(Kind::Honeycomb, &[1, 4], &[Periodic; 2]).is_err());
        assert!(regular(Kind::Hypercubic, &[u64::MAX, 2], &[Free; 2]).is_err());
        assert!(regular(Kind::Hypercubic, &[1 << 14, 1 << 14], &[Free; 2]).is_err());
        assert!(Graph::new(0, vec![], None, None).is_err());
        assert!(Graph::new(2, vec![[1, 1]], None, None).is_err());
        assert!(Graph::new(2, vec![[0, 2]], None, None).is_err());
        assert!(Graph::new(2, vec![[0, 1]], Some(vec![]), None).is_err());
        assert!(Graph::new(2, vec![[0, 1]], None, Some(vec![Exact::zero()])).is_err());
    }
}
