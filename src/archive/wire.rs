//! The JSON members of an archive, field by field as `schema/` describes them.
//!
//! These structs mirror the schemas and nothing else: a field that they do not know is refused, and
//! every member stands in canonical form (RFC 8785), so each record has one way to be written.

use serde::{Deserialize, Serialize};
use serde_json::Value;

use crate::canonical;
use crate::error::{Error, ErrorKind, Result};
use crate::law::{Digits, Law, Model};
use crate::number::Exact;
use crate::plan::STOPPING;
use crate::quantity::Digest;
use crate::random_map::RandomMap;
use crate::sample::{DEEPEST, bytes_per_sample};
use crate::stream;

/// The version word of `record.json`.
pub const RECORD: &str = "pastproof record 1";
/// The version word of `map.json`.
pub const MAP: &str = "pastproof map 1";
/// The version word of `provenance.json`.
pub const PROVENANCE: &str = "pastproof provenance 1";
/// The version word of `circumstances.json`.
pub const CIRCUMSTANCES: &str = "pastproof circumstances 1";
/// `record.json`: the science and nothing else. Its SHA-256 is the root.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Record {
    /// [`RECORD`].
    pub record: String,
    /// The definition of the random-map stream.
    pub stream: Definition,
    /// The seed of the run.
    pub seed: Digest,
    /// Where the seed comes from.
    pub seed_rule: Value,
    /// The digest of the plan without title and first depth.
    pub plan_digest: Digest,
    /// The ensembles, in the order of the plan.
    pub ensembles: Vec<Ensemble>,
}

/// A definition by name and by the digest of its text.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Definition {
    /// Its name.
    pub name: String,
    /// The SHA-256 of `STREAM.md`.
    pub sha256: Digest,
}

/// One ensemble of a record.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Ensemble {
    /// The law object (`STREAM.md` §10).
    pub law: Value,
    /// Its key.
    pub key: Digest,
    /// The parts of a sample.
    pub state: Vec<Part>,
    /// How many samples were planned; every index below is there.
    pub samples: u64,
    /// The depth limit.
    pub depth_limit: u8,
    /// When the ensemble was complete: [`STOPPING`].
    pub stopping: String,
    /// The root of the tree over the samples' leaves.
    pub samples_root: Digest,
}

/// One part of a sample.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Part {
    /// What it is: `spin` or `occupation`.
    pub name: String,
    /// The axes of its sites, slowest first.
    pub shape: Vec<u64>,
    /// The value of a bit 0 and of a bit 1.
    pub values: Vec<i64>,
    /// Bits a site.
    pub bits: u8,
}

/// `map.json`: the thresholds of the random map.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Map {
    /// [`MAP`].
    pub map: String,
    /// `site heat bath`.
    pub update: String,
    /// `sliced` or `plain`.
    pub digits: String,
    /// What the first number of each pair is: `local field` or `occupied neighbours`.
    pub argument: String,
    /// The lanes of each list of a sweep.
    pub lanes: Vec<u64>,
    /// The argument and floor(p 2^128), both as texts, by increasing argument.
    pub thresholds: Vec<(Exact, String)>,
}

/// `provenance.json`: which program, which checkout of the author.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Provenance {
    /// [`PROVENANCE`].
    pub provenance: String,
    /// The program that drew.
    pub program: Program,
    /// The author's repository around the plan, if there is one that can be read.
    pub repository: Option<Repository>,
    /// Why a repository that is there could not be read.
    pub repository_unreadable: Option<String>,
    /// An author's commitment; none in this version.
    pub commitment: Option<()>,
    /// A ledger of runs; none in this version.
    pub ledger: Option<()>,
}

/// The program that drew.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Program {
    /// Its name.
    pub name: String,
    /// Its version.
    pub version: String,
    /// The revision it was built from, if it was built from a checkout.
    pub revision: Option<Revision>,
    /// The SHA-256 of its Cargo.lock.
    pub cargo_lock: Option<Digest>,
    /// What `rustc -V` said.
    pub rustc: Option<String>,
}

/// A revision of the program's own source.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Revision {
    /// The commit.
    pub commit: String,
    /// Whether the tree was as committed.
    pub clean: bool,
}

/// The author's repository.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Repository {
    /// The commit; none before the first.
    pub commit: Option<String>,
    /// Whether the tree was as committed.
    pub clean: bool,
    /// The SHA-256 of the difference to the commit, if there is one.
    pub difference: Option<Digest>,
    /// The member that holds the difference, if it was asked for.
    pub patch: Option<String>,
    /// The remote address without credentials, if it was asked for.
    pub remote: Option<String>,
}

/// `circumstances.json`: what may differ between two runs that give the same samples.
#[derive(Clone, PartialEq, Eq, Debug, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Circumstances {
    /// [`CIRCUMSTANCES`].
    pub circumstances: String,
    /// Start of the run, RFC 3339, UTC.
    pub start: String,
    /// End of the run, RFC 3339, UTC.
    pub end: String,
    /// Operating system and processor family.
    pub platform: String,
    /// What the processor can do.
    pub cpu_features: Vec<String>,
    /// Threads used.
    pub threads: u64,
    /// Seconds of each ensemble, as decimals.
    pub seconds: Vec<String>,
}

impl Record {
    /// Reads `record.json`.
    ///
    /// # Errors
    /// [`ErrorKind::Unsupported`] for another version or definition, naming it;
    /// [`ErrorKind::Syntax`] for a text that is no such record in canonical form;
    /// [`ErrorKind::Nothing`] for a record without ensembles.
    pub fn parse(text: &[u8]) -> Result<Self> {
        known_version(text, "record", RECORD)?;
        let record: Self = canonical::parse_canonical(text)?;
        if record.stream != Definition::ours() {
            let Definition { name, sha256 } = &record.stream;
            let ours = Definition::ours();
            let what = format!(
                "stream definition {name:?} with SHA-256 {sha256}, known: {:?} with SHA-256 {}",
                ours.name, ours.sha256
            );
            return Err(ErrorKind::Unsupported { what }.into());
        }
        if record.ensembles.is_empty() {
            return Err(ErrorKind::Nothing {
                what: "the record has no ensemble".into(),
            }
            .into());
        }
        for (number, ensemble) in record.ensembles.iter().enumerate() {
            let at = |error: Error| error.at_field(format!("ensembles[{number}]"));
            if ensemble.samples == 0 {
                return Err(at(ErrorKind::Nothing {
                    what: "the ensemble has no sample".into(),
                }
                .into()));
            }
            if ensemble.stopping != STOPPING {
                let what = format!("stopping rule {:?}, known: {STOPPING:?}", ensemble.stopping);
                return Err(at(ErrorKind::Unsupported { what }.into()));
            }
            if ensemble.depth_limit > DEEPEST {
                return Err(at(Error::value(ensemble.depth_limit, "a depth limit of at most 62")));
            }
        }
        Ok(record)
    }
}

/// Refuses a JSON object whose version word is another one than `known`, before its fields are read.
///
/// # Errors
/// [`ErrorKind::Unsupported`], [`ErrorKind::Syntax`].
pub fn known_version(text: &[u8], field: &str, known: &str) -> Result<()> {
    let value = canonical::parse(text)?;
    match value.get(field).and_then(Value::as_str) {
        Some(version) if version == known => Ok(()),
        found => {
            let found = found.map_or_else(|| format!("no {field:?}"), |version| format!("{version:?}"));
            Err(ErrorKind::Unsupported {
                what: format!("found {found}, known: {known:?}"),
            }
            .into())
        }
    }
}

impl Definition {
    /// The definition that this program implements.
    pub fn ours() -> Self {
        Self {
            name: stream::NAME.into(),
            sha256: Digest::of(stream::TEXT.as_bytes()),
        }
    }
}

impl Part {
    /// The parts of the samples of `law`.
    pub fn of(law: &Law) -> Vec<Self> {
        let (name, values) = match law.model() {
            Model::Ising { .. } => ("spin", vec![-1, 1]),
            Model::LatticeGas { .. } => ("occupation", vec![0, 1]),
        };
        vec![Self {
            name: name.into(),
            shape: law.lattice().shape(),
            values,
            bits: 1,
        }]
    }
}

impl Map {
    /// What is stored of the map of `law`.
    pub fn of(law: &Law, map: &RandomMap) -> Self {
        let argument = match law.model() {
            Model::Ising { .. } => "local field",
            Model::LatticeGas { .. } => "occupied neighbours",
        };
        Self {
            map: MAP.into(),
            update: "site heat bath".into(),
            digits: match map.digits() {
                Digits::Sliced => "sliced".into(),
                Digits::Plain => "plain".into(),
            },
            argument: argument.into(),
            lanes: map.classes().iter().map(|class| class.lanes().into()).collect(),
            thresholds: map
                .thresholds()
                .iter()
                .map(|(load, theta)| (load.clone(), theta.to_string()))
                .collect(),
        }
    }
}

/// Uncompressed bytes of samples in one member, at most, unless one sample alone is larger.
const MEMBER_BYTES: usize = 4 << 20;

/// How many samples a sample member holds: cut at whole samples, by sample size alone.
pub fn rows_per_member(sites: u32) -> u64 {
    (MEMBER_BYTES / bytes_per_sample(sites)).max(1) as u64
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn sample_members_are_cut_by_sample_size_alone() {
        assert_eq!(rows_per_member(1), 4 << 20);
        assert_eq!(rows_per_member(256), (4 << 20) / 32);
        assert_eq!(rows_per_member(1 << 26), 1);
        assert!(bytes_per_sample(1 << 26) <= 64 << 20);
    }
}
