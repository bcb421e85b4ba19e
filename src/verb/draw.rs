//! `draw`: from a plan and a seed to a sealed archive.
//!
//! Everything that can be refused is refused before the first sample. Samples are drawn side by
//! side and kept in order, so that nothing depends on the number of threads. The archive appears
//! under its name only when it is complete; until then nothing but unnamed spool files and one
//! temporary file beside the target exists. This module reads no clock: the caller's does.

use std::fs::File;
use std::io::{BufWriter, Read, Seek, SeekFrom, Write};
use std::ops::Range;
use std::path::{Path, PathBuf};
use std::time::Duration;

use crate::archive::container::Writer;
use crate::archive::layout;
use crate::archive::manifest::Manifest;
use crate::archive::npy::Shape;
use crate::archive::readme;
use crate::archive::table::{Columns, Outcome, Row};
use crate::archive::wire;
use crate::canonical;
use crate::clock::Clock;
use crate::engine::Engine;
use crate::engine::Stop;
use crate::engine::coupling;
use crate::engine::crew::{Crew, Settings};
use crate::error::{Error, ErrorKind, Result};
use crate::law::Law;
use crate::observable::Observables;
use crate::observer::Observer;
use crate::plan::{Ensemble, Plan, STOPPING};
use crate::quantity::{Digest, EnsembleIndex, SampleIndex, Seed};
use crate::random_map::RandomMap;
use crate::sample::bytes_per_sample;
use crate::stream;
use crate::stream::Address;
use crate::tree::{self, Tree};

/// What to do where the archive's name is taken.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Existing {
    /// Refuse, before any work.
    Refuse,
    /// Replace it, at the very end.
    Replace,
}

/// Everything a run needs.
pub struct Request<'a> {
    /// The plan.
    pub plan: &'a Plan,
    /// The seed that its rule gives.
    pub seed: Seed,
    /// The first attempt of every sample, whatever the plan says; it changes no sample.
    pub first_depth: Option<u8>,
    /// Where the archive goes.
    pub output: &'a Path,
    /// What to do if it is there.
    pub existing: Existing,
    /// Engine, threads and memory.
    pub settings: Settings,
    /// What `provenance.json` says.
    pub provenance: wire::Provenance,
    /// The author's difference, if it is to be stored as the member that the provenance names.
    pub patch: Option<&'a [u8]>,
    /// Operating system and processor family.
    pub platform: String,
    /// What the processor can do.
    pub cpu_features: Vec<String>,
}

/// What became of one ensemble.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Tally {
    /// Samples, unfinished ones included.
    pub samples: u64,
    /// Unfinished samples.
    pub unfinished: u64,
    /// The largest depth of a sample.
    pub deepest: u8,
    /// How long it took.
    pub time: Duration,
}

/// A sealed archive.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Sealed {
    /// Where it is.
    pub path: PathBuf,
    /// Its size in bytes.
    pub bytes: u64,
    /// SHA-256 of `record.json`.
    pub root: Digest,
    /// SHA-256 of `MANIFEST.sha256`.
    pub seal: Digest,
    /// One tally an ensemble.
    pub ensembles: Vec<Tally>,
}

/// Draws, seals and names the archive.
///
/// # Errors
/// [`ErrorKind::Exists`], [`ErrorKind::Io`], [`ErrorKind::Stopped`], and those of [`RandomMap::new`]. On any error
/// nothing is left behind and an existing file is as it was.
pub fn draw(request: &Request<'_>, clock: &dyn Clock, observer: &dyn Observer, stop: &Stop) -> Result<Sealed> {
    let output = request.output;
    let refuse = |error: Error| error.in_file(output);
    if request.existing == Existing::Refuse && output.symlink_metadata().is_ok() {
        return Err(refuse(ErrorKind::Exists.into()));
    }
    let folder = match output.parent() {
        Some(parent) if !parent.as_os_str().is_empty() => parent,
        _ => Path::new("."),
    };
    let spool = || Spool::new(folder).map_err(refuse);
    let (mut texts, mut samples) = (spool()?, spool()?);
    let pool = request.settings.pool()?;

    let start = clock.utc();
    let mut drawn = Vec::with_capacity(request.plan.ensembles().len());
    for (number, ensemble) in request.plan.numbered() {
        let begin = clock.elapsed();
        observer.begin(&format!("ensemble {number}"), ensemble.samples());
        let first_depth = request.first_depth.unwrap_or(ensemble.first_depth());
        let work = Work {
            seed: request.seed,
            first_depth,
            number,
            ensemble,
            settings: &request.settings,
            observer,
            stop,
        };
        let one = pool
            .install(|| work.draw(&mut texts, &mut samples))
            .map_err(|error| error.at_ensemble(number))?;
        drawn.push((one, clock.elapsed().saturating_sub(begin)));
    }

    let circumstances = wire::Circumstances {
        circumstances: wire::CIRCUMSTANCES.into(),
        start,
        end: clock.utc(),
        platform: request.platform.clone(),
        cpu_features: request.cpu_features.clone(),
        threads: pool.current_num_threads() as u64,
        seconds: drawn
            .iter()
            .map(|(_, time)| format!("{}.{:03}", time.as_secs(), time.subsec_millis()))
            .collect(),
    };
    let mut permissions = tempfile::Builder::new();
    #[cfg(unix)]
    permissions.permissions(std::os::unix::fs::PermissionsExt::from_mode(0o666));
    let mut file = permissions
        .tempfile_in(folder)
        .map_err(|error| refuse(Error::io("create", error)))?;
    let (root, seal) = write(
        request,
        &drawn,
        &circumstances,
        &mut texts,
        &mut samples,
        file.as_file_mut(),
    )
    .map_err(refuse)?;
    stop.check()?;
    let write_fault = |error| refuse(Error::io("write", error));
    file.as_file().sync_all().map_err(write_fault)?;
    let bytes = file.as_file().metadata().map_err(write_fault)?.len();
    match request.existing {
        Existing::Replace => file.persist(output),
        Existing::Refuse => file.persist_noclobber(output),
    }
    .map_err(|error| match error.error.kind() {
        std::io::ErrorKind::AlreadyExists => refuse(ErrorKind::Exists.into()),
        _ => refuse(Error::io("name the finished archive", error.error)),
    })?;
    File::open(folder)
        .and_then(|folder| folder.sync_all())
        .map_err(write_fault)?;
    let ensembles = drawn
        .into_iter()
        .map(|(one, time)| Tally { time, ..one.tally })
        .collect();
    Ok(Sealed {
        path: output.to_path_buf(),
        bytes,
        root,
        seal,
        ensembles,
    })
}

/// One ensemble as it lies in the spool files.
struct Drawn {
    tally: Tally,
    samples_root: Digest,
    map: Range<u64>,
    table: Range<u64>,
    tree: Range<u64>,
    samples: Range<u64>,
}

/// What drawing one ensemble needs.
struct Work<'a> {
    seed: Seed,
    first_depth: u8,
    number: EnsembleIndex,
    ensemble: &'a Ensemble,
    settings: &'a Settings,
    observer: &'a dyn Observer,
    stop: &'a Stop,
}

impl Work<'_> {
    fn draw(&self, texts: &mut Spool, samples: &mut Spool) -> Result<Drawn> {
        let law = self.ensemble.law();
        let map = RandomMap::new(law)?;
        let crew = Crew::new(&map, self.settings);
        let observables = Observables::new(law);
        let columns = Columns::new(observables.names())?;
        let key = law.key()?;
        let planned = self.ensemble.samples();
        let manner = crew.manner(planned, rayon::current_num_threads());
        self.observer.note(&format!("ensemble {}: {manner}", self.number));
        let block = crew.at_once(rayon::current_num_threads());

        let map_range = texts.append(&canonical::to_bytes(&wire::Map::of(law, &map))?)?;
        let table_start = texts.append(columns.first_line().as_bytes())?.start;
        let samples_start = samples.length;
        let mut leaves = Vec::with_capacity(usize::try_from(planned).unwrap_or(0));
        let mut tally = Tally {
            samples: planned,
            unfinished: 0,
            deepest: 0,
            time: Duration::ZERO,
        };
        let mut rows = 0;
        for first in (0..planned).step_by(block) {
            let indices = first..planned.min(first + block as u64);
            let draw_one = |engine: &mut dyn Engine, index: &u64| {
                let address = Address {
                    seed: self.seed,
                    key,
                    sample: SampleIndex(*index),
                };
                let sample = coupling::draw(
                    engine,
                    &address,
                    self.first_depth,
                    self.ensemble.depth_limit(),
                    self.stop,
                )?;
                let measured = sample.exact().map(|exact| observables.measure(exact));
                let measured = measured.map(|values| values.iter().map(ToString::to_string).collect());
                self.observer.advance(1);
                Ok((*index, sample, measured))
            };
            let drawn = crew.each(&indices.collect::<Vec<_>>(), draw_one)?;
            for (index, sample, measured) in drawn {
                let outcome = match measured {
                    Some(observables) => Outcome::Exact { row: rows, observables },
                    None => Outcome::Unfinished,
                };
                let (depth, merged_at, hash) = (sample.depth, sample.merged_at, sample.hash());
                let row = Row {
                    index: SampleIndex(index),
                    outcome,
                    depth,
                    merged_at,
                    hash,
                };
                leaves.push(tree::leaf_hash(&row.leaf()));
                let mut line = Vec::new();
                columns.write_row(&row, &mut line)?;
                texts.append(&line)?;
                tally.deepest = tally.deepest.max(sample.depth);
                match sample.exact() {
                    Some(exact) => {
                        samples.append(exact.as_bytes())?;
                        rows += 1;
                    }
                    None => tally.unfinished += 1,
                }
            }
        }
        let table_range = table_start..texts.length;
        let tree = Tree::from_leaf_hashes(leaves);
        let tree_start = texts.length;
        for node in tree.nodes() {
            texts.append(&node.0)?;
        }
        Ok(Drawn {
            tally,
            samples_root: tree.root(),
            map: map_range,
            table: table_range,
            tree: tree_start..texts.length,
            samples: samples_start..samples.length,
        })
    }
}

/// The record of a run: what its root is the digest of.
fn record(request: &Request<'_>, drawn: &[(Drawn, Duration)]) -> Result<wire::Record> {
    let ensembles = request.plan.ensembles().iter().zip(drawn).map(|(ensemble, (one, _))| {
        let law = ensemble.law();
        Ok(wire::Ensemble {
            law: law.to_json()?,
            key: law.key()?,
            state: wire::Part::of(law),
            samples: ensemble.samples(),
            depth_limit: ensemble.depth_limit(),
            stopping: STOPPING.into(),
            samples_root: one.samples_root,
        })
    });
    Ok(wire::Record {
        record: wire::RECORD.into(),
        stream: wire::Definition::ours(),
        seed: request.seed.0,
        seed_rule: request.plan.seed_rule().to_json(),
        plan_digest: request.plan.digest()?,
        ensembles: ensembles.collect::<Result<_>>()?,
    })
}

/// Writes all members in order; gives root and seal.
fn write(
    request: &Request<'_>,
    drawn: &[(Drawn, Duration)],
    circumstances: &wire::Circumstances,
    texts: &mut Spool,
    samples: &mut Spool,
    file: &mut File,
) -> Result<(Digest, Digest)> {
    let plan = request.plan;
    let record = record(request, drawn)?;
    let record_text = canonical::to_bytes(&record)?;
    let root = Digest::of(&record_text);
    let laws: Vec<Law> = plan.ensembles().iter().map(|ensemble| ensemble.law().clone()).collect();

    let mut archive = Sealing {
        archive: Writer::new(BufWriter::new(file))?,
        manifest: Manifest::default(),
    };
    archive.add(
        layout::README,
        readme::text(plan.title(), &record, root, plan.seed_rule(), &laws).as_bytes(),
    )?;
    archive.add(layout::PLAN, plan.text())?;
    for input in plan.files() {
        archive.add(&layout::input(&input.name), &input.bytes)?;
    }
    archive.add(layout::STREAM, stream::TEXT.as_bytes())?;
    archive.add(layout::RECORD, &record_text)?;
    archive.add(layout::PROVENANCE, &canonical::to_bytes(&request.provenance)?)?;
    if let Some(patch) = request.patch {
        archive.add(layout::PATCH, patch)?;
    }
    for ((number, ensemble), (one, _)) in plan.numbered().zip(drawn) {
        let law = ensemble.law();
        let name = |member: &str| layout::in_ensemble(number, member);
        let length = |range: &Range<u64>| range.end - range.start;
        archive.add_from(&name(layout::MAP), length(&one.map), texts.read(&one.map)?)?;
        if let Some(graph) = law.lattice().graph() {
            archive.add(&name(layout::GRAPH), &canonical::to_bytes(&graph.to_json())?)?;
            archive.add(
                &name(layout::SITES),
                layout::sites_text(ensemble.labels().map_or(&[][..], |labels| labels)).as_bytes(),
            )?;
        }
        if let Some(held) = law.held() {
            archive.add(&name(layout::HELD), &canonical::to_bytes(&held.to_json())?)?;
        }
        archive.add_from(&name(layout::TABLE), length(&one.table), texts.read(&one.table)?)?;
        archive.add_from(&name(layout::TREE), length(&one.tree), texts.read(&one.tree)?)?;
        let sample_bytes = bytes_per_sample(law.lattice().sites()) as u64;
        let rows = length(&one.samples) / sample_bytes;
        let per_member = wire::rows_per_member(law.lattice().sites());
        for (part, first) in (0..rows)
            .step_by(usize::try_from(per_member).unwrap_or(usize::MAX))
            .enumerate()
        {
            let part_rows = per_member.min(rows - first);
            let start = one.samples.start + first * sample_bytes;
            let range = start..start + part_rows * sample_bytes;
            let shape = Shape::new(part_rows, sample_bytes)?;
            let header = shape.header();
            let content = header.as_slice().chain(samples.read(&range)?);
            archive.add_from(&name(&layout::samples(part)), shape.file_bytes(), content)?;
        }
    }
    archive.add(layout::CIRCUMSTANCES, &canonical::to_bytes(circumstances)?)?;
    let seal = archive.finish()?;
    Ok((root, seal))
}

/// An archive that is being written, and the manifest of what it holds so far.
struct Sealing<W: Write> {
    archive: Writer<W>,
    manifest: Manifest,
}

impl<W: Write> Sealing<W> {
    fn add(&mut self, name: &str, content: &[u8]) -> Result<()> {
        let digest = self.archive.add(name, content)?;
        self.manifest.push(name, digest)
    }

    fn add_from(&mut self, name: &str, size: u64, content: impl Read) -> Result<()> {
        let digest = self.archive.add_from(name, size, content)?;
        self.manifest.push(name, digest)
    }

    /// Adds the manifest and ends the file; gives the seal.
    fn finish(mut self) -> Result<Digest> {
        let seal = self
            .archive
            .add(layout::MANIFEST, self.manifest.to_string().as_bytes())?;
        self.archive
            .finish()?
            .flush()
            .map_err(|error| Error::io("write", error))?;
        Ok(seal)
    }
}

/// A file without a name that bytes are appended to and read back from.
struct Spool {
    file: BufWriter<File>,
    length: u64,
}

impl Spool {
    fn new(folder: &Path) -> Result<Self> {
        let file = tempfile::tempfile_in(folder).map_err(|error| Error::io("create a spool file beside it", error))?;
        Ok(Self {
            file: BufWriter::new(file),
            length: 0,
        })
    }

    fn append(&mut self, bytes: &[u8]) -> Result<Range<u64>> {
        self.file
            .write_all(bytes)
            .map_err(|error| Error::io("write a spool file", error))?;
        let start = self.length;
        self.length += bytes.len() as u64;
        Ok(start..self.length)
    }

    fn read(&mut self, range: &Range<u64>) -> Result<impl Read> {
        let fault = |error| Error::io("read a spool file", error);
        self.file.seek(SeekFrom::Start(range.start)).map_err(fault)?;
        Ok(std::io::BufReader::with_capacity(1 << 16, self.file.get_ref()).take(range.end - range.start))
    }
}
