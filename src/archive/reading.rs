//! An archive as its members mean it: record, laws, rows, tree nodes and samples by number.
//!
//! Only what is asked for is read. Nothing here judges: what does not parse is an error with its
//! member, what parses is handed on for `audit` to doubt.

use std::cell::RefCell;
use std::io::{self, BufReader, Read};
use std::path::{Path, PathBuf};
use std::sync::Arc;

use crate::archive::container::Archive;
use crate::archive::layout;
use crate::archive::npy::{self, Shape};
use crate::archive::table::{Columns, Row, Rows};
use crate::archive::wire::{self, Record};
use crate::canonical;
use crate::error::{Error, ErrorKind, Result};
use crate::lattice::Graph;
use crate::law::{Held, Law};
use crate::plan::Plan;
use crate::quantity::{Digest, EnsembleIndex, SampleIndex};
use crate::sample::bytes_per_sample;
use crate::tree;

/// The largest text member that is read whole.
const LARGEST_TEXT: u64 = 256 << 20;
/// Bytes fetched at once from a member that is read piece by piece.
const PIECE: usize = 1 << 20;

/// An opened archive.
pub struct Run {
    path: PathBuf,
    archive: RefCell<Archive>,
    record: Record,
    root: Digest,
}

impl Run {
    /// Opens the archive at `path` and reads its record.
    ///
    /// # Errors
    /// [`ErrorKind::Io`], [`ErrorKind::Damaged`], [`ErrorKind::Unsupported`], [`ErrorKind::Nothing`], with file and member.
    pub fn open(path: &Path) -> Result<Self> {
        let inside = |error: Error| error.in_file(path);
        let mut archive = Archive::open(path).map_err(inside)?;
        let text = archive.read(layout::RECORD, LARGEST_TEXT).map_err(inside)?;
        let record = Record::parse(&text)
            .map_err(|error| error.in_member(layout::RECORD))
            .map_err(inside)?;
        let run = Self {
            path: path.to_path_buf(),
            archive: RefCell::new(archive),
            record,
            root: Digest::of(&text),
        };
        run.refuse_unknown_members()?;
        Ok(run)
    }

    /// A later version may put science into members that this one does not know: it must not say yes to those.
    fn refuse_unknown_members(&self) -> Result<()> {
        let ensembles = self.record.ensembles.len();
        let names = self.names()?;
        match names.iter().find(|name| !layout::is_known(name, ensembles)) {
            None => Ok(()),
            Some(name) => Err(Error::from(ErrorKind::Unknown {
                thing: "member",
                found: name.clone(),
                allowed: "those of archive version 1, and attest/ behind the manifest".into(),
            })
            .in_member(name)
            .in_file(&self.path)),
        }
    }

    /// The file.
    pub fn path(&self) -> &Path {
        &self.path
    }

    /// The record.
    pub fn record(&self) -> &Record {
        &self.record
    }

    /// The SHA-256 of the record as it stands in the file.
    pub fn root(&self) -> Digest {
        self.root
    }

    /// How many zstd frames were decoded so far: a measure of the work done.
    pub fn frames_decoded(&self) -> u64 {
        self.archive.borrow().frames_decoded()
    }

    fn at<T>(&self, member: &str, result: Result<T>) -> Result<T> {
        result.map_err(|error| error.in_member(member).in_file(&self.path))
    }

    /// The size of a member, if there is one of that name.
    ///
    /// # Errors
    /// Those of the container, with the file.
    pub fn size(&self, member: &str) -> Result<Option<u64>> {
        let found = self
            .archive
            .borrow_mut()
            .find(member)
            .map_err(|error| error.in_file(&self.path))?;
        Ok(found.map(|member| member.size))
    }

    /// The size of a member that must be there.
    fn size_of(&self, member: &str) -> Result<u64> {
        let missing = || {
            Error::missing("the member", "it in the archive")
                .in_member(member)
                .in_file(&self.path)
        };
        self.size(member)?.ok_or_else(missing)
    }

    /// The names of all members, in order.
    ///
    /// # Errors
    /// Those of the container, with the file.
    pub fn names(&self) -> Result<Vec<String>> {
        let mut archive = self.archive.borrow_mut();
        let members = archive.members().map_err(|error| error.in_file(&self.path))?;
        Ok(members.iter().map(|member| member.name.clone()).collect())
    }

    /// A text member, whole.
    ///
    /// # Errors
    /// Those of the container, with file and member.
    pub fn text(&self, member: &str) -> Result<Vec<u8>> {
        self.at(member, self.archive.borrow_mut().read(member, LARGEST_TEXT))
    }

    /// Bytes of a member.
    ///
    /// # Errors
    /// Those of the container, with file and member.
    pub fn range(&self, member: &str, start: u64, length: u64) -> Result<Vec<u8>> {
        self.at(member, self.archive.borrow_mut().read_range(member, start, length))
    }

    /// A member piece by piece.
    ///
    /// # Errors
    /// [`ErrorKind::Missing`] if there is no such member.
    pub fn stream(&self, member: &str) -> Result<BufReader<MemberStream<'_>>> {
        let size = self.size_of(member)?;
        Ok(BufReader::with_capacity(
            PIECE,
            MemberStream {
                run: self,
                member: member.to_string(),
                at: 0,
                size,
            },
        ))
    }

    /// The record of an ensemble.
    ///
    /// # Errors
    /// [`ErrorKind::Value`] as a request if there is no such ensemble.
    pub fn ensemble(&self, ensemble: EnsembleIndex) -> Result<&wire::Ensemble> {
        let count = self.record.ensembles.len();
        self.record.ensembles.get(ensemble.0 as usize).ok_or_else(|| {
            Error::value(format!("ensemble {ensemble}"), format!("0 to {}", count - 1)).in_file(&self.path)
        })
    }

    /// The law of an ensemble, with the graph and the held sites that the archive carries for it.
    ///
    /// # Errors
    /// Those of [`Law::from_json`], with file, member and ensemble.
    pub fn law(&self, ensemble: EnsembleIndex) -> Result<Law> {
        let value = &self.ensemble(ensemble)?.law;
        let names_graph = value["lattice"]["kind"] == "graph";
        let graph = self.part(layout::in_ensemble(ensemble, layout::GRAPH), names_graph, |json| {
            let sites = value["lattice"]["sites"].as_u64();
            let sites = sites.ok_or_else(|| Error::conflict("a graph stands beside a law that names none"))?;
            Graph::from_json(json, sites)
        })?;
        let names_held = !value["held"].is_null();
        let held = self.part(layout::in_ensemble(ensemble, layout::HELD), names_held, Held::from_json)?;
        self.at(
            layout::RECORD,
            Law::from_json(value, graph, held).map_err(|error| error.at_ensemble(ensemble)),
        )
    }

    /// A part of a law. What the law does not name is no part of it: then the file is not read to its end to show
    /// that there is none, but a member that is listed is handed on all the same.
    fn part<T>(
        &self,
        member: String,
        is_named: bool,
        parse: impl Fn(&serde_json::Value) -> Result<T>,
    ) -> Result<Option<Arc<T>>> {
        let is_there = if is_named {
            self.size(&member)?.is_some()
        } else {
            let listed = self.archive.borrow_mut().lists(&member);
            listed.map_err(|error| error.in_file(&self.path))?
        };
        if !is_there {
            return Ok(None);
        }
        let text = self.text(&member)?;
        let value = canonical::parse_canonical(&text).and_then(|value| parse(&value));
        self.at(&member, value).map(|value| Some(Arc::new(value)))
    }

    /// The plan, with the files that it names as the archive carries them.
    ///
    /// # Errors
    /// Those of [`Plan::read`], as faults of the member.
    pub fn plan(&self) -> Result<Plan> {
        let text = self.text(layout::PLAN)?;
        let plan = Plan::read(&text, &mut |name| self.text(&layout::input(name)));
        self.at(layout::PLAN, plan)
    }

    /// The stored thresholds of an ensemble.
    ///
    /// # Errors
    /// [`ErrorKind::Unsupported`], [`ErrorKind::Syntax`], with the member.
    pub fn map(&self, ensemble: EnsembleIndex) -> Result<wire::Map> {
        let member = layout::in_ensemble(ensemble, layout::MAP);
        let text = self.text(&member)?;
        let map = wire::known_version(&text, "map", wire::MAP).and_then(|()| canonical::parse_canonical(&text));
        self.at(&member, map)
    }

    /// The row of one sample, found by bisection.
    ///
    /// # Errors
    /// [`ErrorKind::Value`] as a request if the sample was not planned; faults of the member otherwise.
    pub fn row(&self, ensemble: EnsembleIndex, sample: SampleIndex, columns: &Columns) -> Result<Row> {
        let planned = self.ensemble(ensemble)?.samples;
        if sample.0 >= planned {
            let error = Error::value(
                format!("sample {sample} of ensemble {ensemble}"),
                format!("0 to {}", planned - 1),
            );
            return Err(error.in_file(&self.path));
        }
        let member = layout::in_ensemble(ensemble, layout::TABLE);
        let size = self.size_of(&member)?;
        let row = columns.find_row(sample, size, |start, length| self.range(&member, start, length));
        let missing = || Error::missing("its line", format!("one for each of {planned} samples"));
        let row = row.and_then(|row| row.ok_or_else(missing));
        self.at(&member, row.map_err(|error| error.at_sample(sample)))
    }

    /// All rows of an ensemble in order, checked for gaps.
    ///
    /// # Errors
    /// As [`Run::stream`]; the rows carry their own.
    pub fn rows<'a>(
        &'a self,
        ensemble: EnsembleIndex,
        columns: &'a Columns,
    ) -> Result<impl Iterator<Item = Result<Row>> + 'a> {
        let member = layout::in_ensemble(ensemble, layout::TABLE);
        let rows: Rows<'a, _> = self.at(&member, columns.rows(self.stream(&member)?))?;
        Ok(rows.map(move |row| self.at(&member, row)))
    }

    /// The audit path of a sample, fetched node by node from `tree.bin`.
    ///
    /// # Errors
    /// A fault of the member if it is not as long as a tree of that many samples.
    pub fn audit_path(&self, ensemble: EnsembleIndex, sample: SampleIndex) -> Result<Vec<Digest>> {
        let planned = self.ensemble(ensemble)?.samples;
        let member = layout::in_ensemble(ensemble, layout::TREE);
        let nodes = tree::inclusion_nodes(planned, sample.0).unwrap_or_default();
        let fetch = |node| {
            let offset = tree::node_offset(planned, node).unwrap_or(u64::MAX);
            let bytes = self.range(&member, offset, 32)?;
            bytes
                .try_into()
                .map(Digest)
                .map_err(|_| Error::damaged("a tree node is cut short").in_member(&member))
        };
        let (found, expected) = (self.size_of(&member)?, tree::stored_len(planned).unwrap_or(u64::MAX));
        if found != expected {
            let fault = Error::damaged(format!("found {found} bytes, expected {expected}"));
            return self.at(&member, Err(fault));
        }
        nodes.into_iter().map(fetch).collect()
    }

    /// The stored bytes of exact samples `first` .. `first + count` of an ensemble, all in one member.
    ///
    /// # Errors
    /// A fault of the member if its header is not the one for its rows.
    pub fn samples(&self, ensemble: EnsembleIndex, sites: u32, first: u64, count: u64) -> Result<Vec<u8>> {
        let (member, row) = sample_place(ensemble, sites, first);
        let width = bytes_per_sample(sites) as u64;
        let size = self.size_of(&member)?;
        let header = self.range(&member, 0, size.min(npy::HEADER_BYTES))?;
        let shape = self.at(&member, Shape::parse(&header, size))?;
        if shape.row_bytes() != width || row + count > shape.rows() {
            let found = format!("{} rows of {} bytes", shape.rows(), shape.row_bytes());
            let expected = format!("at least {} rows of {width} bytes", row + count);
            return self.at(&member, Err(Error::value(found, expected)));
        }
        self.range(&member, npy::HEADER_BYTES + row * width, count * width)
    }

    /// The seal: the SHA-256 of the manifest as it stands in the file.
    ///
    /// # Errors
    /// As [`Run::text`].
    pub fn seal(&self) -> Result<Digest> {
        Ok(Digest::of(&self.text(layout::MANIFEST)?))
    }

    /// A JSON member of a known version.
    ///
    /// # Errors
    /// [`ErrorKind::Unsupported`], [`ErrorKind::Syntax`], with the member.
    pub fn json<T: serde::de::DeserializeOwned + serde::Serialize>(
        &self,
        member: &str,
        field: &str,
        version: &str,
    ) -> Result<T> {
        let text = self.text(member)?;
        self.at(
            member,
            wire::known_version(&text, field, version).and_then(|()| canonical::parse_canonical(&text)),
        )
    }
}

/// The member that holds exact sample `row` of an ensemble, and the row in it.
pub fn sample_place(ensemble: EnsembleIndex, sites: u32, row: u64) -> (String, u64) {
    let per_member = wire::rows_per_member(sites);
    let part = usize::try_from(row / per_member).unwrap_or(usize::MAX);
    (layout::in_ensemble(ensemble, &layout::samples(part)), row % per_member)
}

/// A member read from its start.
pub struct MemberStream<'a> {
    run: &'a Run,
    member: String,
    at: u64,
    size: u64,
}

impl Read for MemberStream<'_> {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        let length = (self.size - self.at).min(buffer.len() as u64);
        let piece = self
            .run
            .range(&self.member, self.at, length)
            .map_err(io::Error::other)?;
        buffer[..piece.len()].copy_from_slice(&piece);
        self.at += piece.len() as u64;
        Ok(piece.len())
    }
}
