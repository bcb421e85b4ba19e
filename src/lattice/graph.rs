//! Any other graph, as its files list it: sites, edges, and perhaps couplings and fields.

use serde_json::{Value, json};

use crate::error::{Error, ErrorKind, Result};
use crate::number::Exact;
use crate::quantity::{Digest, Hasher};

use super::{MOST_EDGES, MOST_SITES};

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
