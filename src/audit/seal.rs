//! `audit`: a whole archive against itself, every byte of it, without drawing.
//!
//! First the container is walked from its first byte to its last, without the index: structure,
//! order, and the digest of every member. Then the members are held against each other: manifest,
//! plan and record, laws and keys, thresholds, rows, sample bytes, trees, observables. What only a
//! redraw could show is said not to be shown.

use std::collections::{BTreeMap, BTreeSet};
use std::io::{self, Read};
use std::path::Path;

use crate::archive::container::{Archive, IndexState};
use crate::archive::layout;
use crate::archive::manifest::Manifest;
use crate::archive::npy::Shape;
use crate::archive::reading::{Run, sample_place};
use crate::archive::table::{Outcome, Row};
use crate::archive::wire;
use crate::audit::ensemble::{Checked, check_parameters};
use crate::audit::{Check, Conclusion, Fault, conclude, count};
use crate::error::{Error, Result};
use crate::observer::Observer;
use crate::plan::{Plan, SeedRule};
use crate::quantity::{Digest, EnsembleIndex, Hasher, Seed};
use crate::sample::{Configuration, bytes_per_sample};
use crate::tree::{self, Tree};

/// Rows compared before the next ones are read.
const BLOCK: u64 = 4096;

/// What an audit found.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Report {
    /// The SHA-256 of the record.
    pub root: Digest,
    /// The SHA-256 of the manifest.
    pub seal: Digest,
    /// The seed, as recorded.
    pub seed: Seed,
    /// Where it comes from, as recorded.
    pub seed_rule: SeedRule,
    /// Samples planned over all ensembles.
    pub samples: u64,
    /// Samples recorded as unfinished: ensemble and index of the first hundred, and how many.
    pub unfinished: u64,
    /// The first of them.
    pub unfinished_first: Vec<(u32, u64)>,
    /// Members that follow the manifest: outside the seal, not examined.
    pub attested: Vec<String>,
    /// The checks.
    pub checks: Vec<Check>,
    /// What they come to.
    pub conclusion: Conclusion,
    /// Whether a root or seal from outside was compared.
    pub anchored: bool,
}

/// What an audit does not show, in words.
pub const NOT_SHOWN: [&str; 4] = [
    "that the samples follow from seed, law and definition: see replay, which draws them again",
    "the hashes of unfinished samples, whose bounds are not stored: see replay",
    "that the seed was not one of many tried, or that the law is the right one for a scientific question",
    "who made the archive, and when",
];

/// Roots and seals from outside, such as those that a paper prints.
#[derive(Clone, Copy, Default, PartialEq, Eq, Debug)]
pub struct Anchors {
    /// The root.
    pub root: Option<Digest>,
    /// The seal.
    pub seal: Option<Digest>,
}

/// Unfinished samples that are listed.
const LISTED: usize = 100;

/// Audits the archive at `path`.
///
/// # Errors
/// Whatever makes the archive unreadable: a fault that leaves nothing to compare is an error, not a finding.
pub fn audit(path: &Path, anchors: Anchors, observer: &dyn Observer) -> Result<Report> {
    let walked = Walked::new(path, observer)?;
    let run = Run::open(path)?;
    let seal = run.seal()?;
    let plan = run.plan()?;
    let seed = Seed(run.record().seed);
    let seed_rule = SeedRule::from_json(&run.record().seed_rule, seed)
        .map_err(|error| error.in_member(layout::RECORD).in_file(run.path()))?;
    let mut checks = vec![walked.container(), check_manifest(&run, &walked)?];
    checks.push(check_anchor("root", run.root(), anchors.root));
    checks.push(check_anchor("seal", seal, anchors.seal));
    checks.push(check_records(&run)?);

    let numbers: Vec<_> = (0..).map(EnsembleIndex).take(run.record().ensembles.len()).collect();
    let mut meaning = Meaning::new();
    check_parameters(&run, &plan, &numbers, &mut meaning.parameters)?;
    let mut members = Vec::new();
    for number in numbers {
        let checked = Checked::new(&run, number, &mut meaning.keys, &mut meaning.thresholds)?;
        meaning.thresholds_seen += checked.map.thresholds().len() as u64;
        observer.begin(&format!("ensemble {number}"), checked.record.samples);
        let exact = meaning.ensemble(&run, &plan, &checked, observer)?;
        members.extend(members_of(&checked, exact));
    }
    checks.insert(2, check_layout(&run, &plan, &walked, members)?);
    let (samples, unfinished, unfinished_first) = (
        meaning.samples_seen,
        meaning.unfinished,
        std::mem::take(&mut meaning.unfinished_first),
    );
    checks.extend(meaning.into_list(run.record().ensembles.len()));
    let conclusion = conclude(&checks, unfinished);
    let attested = walked
        .names()
        .filter(|name| name.starts_with(layout::ATTEST))
        .map(str::to_string)
        .collect();
    let anchored = anchors.root.is_some() || anchors.seal.is_some();
    Ok(Report {
        root: run.root(),
        seal,
        seed,
        seed_rule,
        samples,
        unfinished,
        unfinished_first,
        attested,
        checks,
        conclusion,
        anchored,
    })
}

/// The container from first to last byte.
struct Walked {
    members: Vec<(String, u64, Digest)>,
    index: IndexState,
}

impl Walked {
    fn new(path: &Path, observer: &dyn Observer) -> Result<Self> {
        let mut archive = Archive::open(path).map_err(|error| error.in_file(path))?;
        let mut members = Vec::new();
        observer.begin("container", 0);
        let walk = archive.walk(|member, content| {
            let mut hasher = Hasher::default();
            let length =
                io::copy(content, &mut hasher).map_err(|error| Error::io("read", error).in_member(&member.name))?;
            members.push((member.name.clone(), length, hasher.finish()));
            Ok(())
        });
        walk.map_err(|error| error.in_file(path))?;
        Ok(Self {
            members,
            index: archive.index_state().unwrap_or(IndexState::Absent),
        })
    }

    fn names(&self) -> impl Iterator<Item = &str> {
        self.members.iter().map(|(name, _, _)| name.as_str())
    }

    fn container(&self) -> Check {
        let mut check = Check::new("container");
        let bytes: u64 = self.members.iter().map(|(_, size, _)| size).sum();
        let index = match self.index {
            IndexState::Agrees => "the index agrees",
            IndexState::Absent => "there is no index",
            IndexState::Disagrees => "the index does not agree",
        };
        check.examined = format!(
            "{} members, {bytes} bytes, from first to last; {index}",
            self.members.len()
        );
        check.expect(self.index != IndexState::Disagrees, || {
            Fault::new("the index of offsets lies about the members")
        });
        check
    }
}

fn check_manifest(run: &Run, walked: &Walked) -> Result<Check> {
    let mut check = Check::new("manifest");
    let text = run.text(layout::MANIFEST)?;
    let listed = Manifest::parse(&text).map_err(|error| error.in_member(layout::MANIFEST).in_file(run.path()))?;
    let above = walked
        .members
        .iter()
        .take_while(|(name, _, _)| name != layout::MANIFEST);
    let mut found: BTreeMap<&str, Digest> = above.map(|(name, _, digest)| (name.as_str(), *digest)).collect();
    check.examined = format!("SHA-256 of {} members listed, every byte read", listed.lines().len());
    for (name, digest) in listed.lines() {
        match found.remove(name.as_str()) {
            None => check.fault(Fault::new("listed, but not there above the manifest").in_member(name)),
            Some(actual) => check.expect(actual == *digest, || {
                Fault::new(format!("listed with SHA-256 {digest}, found {actual}")).in_member(name)
            }),
        }
    }
    for name in found.keys() {
        check.fault(Fault::new("stands above the manifest, but is not listed").in_member(name));
    }
    if check.fault_count == 0 {
        let displaced = walked
            .names()
            .zip(listed.lines())
            .find(|(name, (line, _))| name != line);
        if let Some((name, (line, _))) = displaced {
            let what = format!("the lines stand in another order than the members: found {line}, expected {name}");
            check.fault(Fault::new(what).in_member(layout::MANIFEST));
        }
    }
    Ok(check)
}

/// The members that an ensemble must have, in order.
fn members_of(checked: &Checked<'_>, exact: u64) -> Vec<String> {
    let law = &checked.law;
    let mut names = vec![layout::MAP.to_string()];
    if law.lattice().graph().is_some() {
        names.extend([layout::GRAPH, layout::SITES].map(str::to_string));
    }
    if law.held().is_some() {
        names.push(layout::HELD.to_string());
    }
    names.extend([layout::TABLE, layout::TREE].map(str::to_string));
    let parts = exact.div_ceil(wire::rows_per_member(law.lattice().sites()));
    names.extend((0..parts).map(|part| layout::samples(usize::try_from(part).unwrap_or(usize::MAX))));
    names
        .iter()
        .map(|name| layout::in_ensemble(checked.number, name))
        .collect()
}

/// The members found against those that an archive of this plan and record must have, in order.
fn check_layout(run: &Run, plan: &Plan, walked: &Walked, ensembles: Vec<String>) -> Result<Check> {
    let mut expected = vec![layout::README.to_string(), layout::PLAN.to_string()];
    expected.extend(plan.files().iter().map(|input| layout::input(&input.name)));
    expected.extend([layout::STREAM, layout::RECORD, layout::PROVENANCE].map(str::to_string));
    let provenance: wire::Provenance = run.json(layout::PROVENANCE, "provenance", wire::PROVENANCE)?;
    expected.extend(provenance.repository.and_then(|repository| repository.patch));
    expected.extend(ensembles);
    expected.extend([layout::CIRCUMSTANCES, layout::MANIFEST].map(str::to_string));

    let mut check = Check::new("layout");
    let found: Vec<&str> = walked.names().collect();
    check.examined = format!("{} members in their order, none unknown", found.len());
    let attested = |name: &str| name.starts_with(layout::ATTEST);
    let (known, there): (BTreeSet<&str>, BTreeSet<&str>) = (
        expected.iter().map(String::as_str).collect(),
        found.iter().copied().collect(),
    );
    for name in there.iter().filter(|name| !attested(name) && !known.contains(*name)) {
        check.fault(Fault::new("unknown member").in_member(name));
    }
    for name in known.difference(&there) {
        check.fault(Fault::new("the member is missing").in_member(name));
    }
    if check.fault_count == 0 {
        let displaced = found
            .iter()
            .zip(&expected)
            .find(|(found, expected)| *found != *expected);
        if let Some((found, expected)) = displaced {
            check.fault(Fault::new(format!("found {found}, expected {expected} in that place")));
        }
    }
    Ok(check)
}

fn check_anchor(id: &'static str, found: Digest, expected: Option<Digest>) -> Check {
    let Some(expected) = expected else {
        return Check::not_examined(id, format!("no {id} from outside was given"));
    };
    let mut check = Check::new(id);
    check.examined = "compared with the one from outside".into();
    check.expect(found == expected, || {
        Fault::new(format!("found {found}, expected {expected}"))
    });
    check
}

/// The members that must be what their own text or the record says.
fn check_records(run: &Run) -> Result<Check> {
    let mut check = Check::new("definition");
    let text = run.text(layout::STREAM)?;
    let digest = Digest::of(&text);
    check.examined = format!(
        "STREAM.md is the text of {:?}; the README shows the root; provenance and circumstances are well formed",
        run.record().stream.name
    );
    check.expect(digest == run.record().stream.sha256, || {
        Fault::new(format!(
            "SHA-256 {digest}, the record names {}",
            run.record().stream.sha256
        ))
        .in_member(layout::STREAM)
    });
    // a missing README is a fault of the layout
    if run.size(layout::README)?.is_some() {
        let root = run.root().to_string();
        let readme = run.text(layout::README)?;
        let shown = readme.windows(root.len()).any(|part| part == root.as_bytes());
        check.expect(shown, || {
            Fault::new(format!("does not show the root {root}")).in_member(layout::README)
        });
    }
    let circumstances: wire::Circumstances = run.json(layout::CIRCUMSTANCES, "circumstances", wire::CIRCUMSTANCES)?;
    check.expect(circumstances.seconds.len() == run.record().ensembles.len(), || {
        Fault::new(format!(
            "times of {} ensembles, {} recorded",
            circumstances.seconds.len(),
            run.record().ensembles.len()
        ))
        .in_member(layout::CIRCUMSTANCES)
    });
    let provenance: wire::Provenance = run.json(layout::PROVENANCE, "provenance", wire::PROVENANCE)?;
    if let Some(wire::Repository {
        patch: Some(member),
        difference: Some(expected),
        ..
    }) = provenance.repository
    {
        let found = Digest::of(&run.text(&member)?);
        check.expect(found == expected, || {
            Fault::new(format!("SHA-256 {found}, the provenance names {expected}")).in_member(&member)
        });
    }
    Ok(check)
}

/// What the members mean, held against each other.
struct Meaning {
    parameters: Check,
    keys: Check,
    thresholds: Check,
    inputs: Check,
    indices: Check,
    hashes: Check,
    tree: Check,
    observables: Check,
    support: Check,
    thresholds_seen: u64,
    samples_seen: u64,
    exact_seen: u64,
    unfinished: u64,
    unfinished_first: Vec<(u32, u64)>,
}

impl Meaning {
    fn new() -> Self {
        Self {
            parameters: Check::new("parameters"),
            keys: Check::new("keys"),
            thresholds: Check::new("thresholds"),
            inputs: Check::new("inputs"),
            indices: Check::new("indices"),
            hashes: Check::new("hashes"),
            tree: Check::new("tree"),
            observables: Check::new("observables"),
            support: Check::new("support"),
            thresholds_seen: 0,
            samples_seen: 0,
            exact_seen: 0,
            unfinished: 0,
            unfinished_first: Vec::new(),
        }
    }

    fn into_list(mut self, ensembles: usize) -> Vec<Check> {
        let (samples, exact, unfinished) = (self.samples_seen, self.exact_seen, self.unfinished);
        self.keys.examined = format!("{} recomputed from the laws", count(ensembles as u64, "key"));
        self.thresholds.examined = format!(
            "{} recomputed from the parameters",
            count(self.thresholds_seen, "threshold")
        );
        self.inputs.examined = "graphs, site labels and held sites are what the plan's files say".into();
        self.indices.examined = format!(
            "{}: every planned index once, in order; {exact} exact and stored, {unfinished} unfinished",
            count(samples, "row")
        );
        self.hashes.examined = format!("{} recomputed from the stored bytes", count(exact, "hash"));
        self.tree.examined = format!(
            "{} over {} recomputed, every node compared",
            count(ensembles as u64, "tree"),
            count(samples, "row")
        );
        self.observables.examined = format!("{} recomputed from the stored bytes", count(exact, "row"));
        self.support.examined = format!("{}: held values kept, none of weight zero", count(exact, "sample"));
        vec![
            self.parameters,
            self.keys,
            self.thresholds,
            self.inputs,
            self.indices,
            self.hashes,
            self.tree,
            self.observables,
            self.support,
        ]
    }

    /// Everything about one ensemble; gives how many of its samples are exact.
    fn ensemble(&mut self, run: &Run, plan: &Plan, checked: &Checked<'_>, observer: &dyn Observer) -> Result<u64> {
        let number = checked.number;
        let name = |member: &str| layout::in_ensemble(number, member);
        self.check_inputs(run, plan, checked)?;
        let columns = &checked.columns;
        let mut rows = run.rows(number, columns)?;
        let mut leaves = Vec::new();
        let (mut exact, mut seen) = (0, 0u64);
        loop {
            let block = rows
                .by_ref()
                .take(usize::try_from(BLOCK).unwrap_or(usize::MAX))
                .collect::<Result<Vec<Row>>>()?;
            if block.is_empty() {
                break;
            }
            observer.advance(block.len() as u64);
            for row in &block {
                leaves.push(tree::leaf_hash(&row.leaf()));
                self.check_row(checked, row);
                if row.exact_row().is_none() {
                    self.unfinished += 1;
                    if self.unfinished_first.len() < LISTED {
                        self.unfinished_first.push((number.0, row.index.0));
                    }
                }
            }
            seen += block.len() as u64;
            exact = self.check_samples(run, checked, &block, exact)?;
        }
        self.check_lengths(run, checked, exact)?;
        self.samples_seen += seen;
        self.exact_seen += exact;
        let planned = checked.record.samples;
        self.indices.expect(seen == planned, || {
            Fault::new(format!("{seen} rows, {planned} samples planned"))
                .in_member(&name(layout::TABLE))
                .at_ensemble(number)
        });
        let tree = Tree::from_leaf_hashes(leaves);
        self.tree.expect(tree.root() == checked.record.samples_root, || {
            let what = format!(
                "the rows give root {}, recorded {}",
                tree.root(),
                checked.record.samples_root
            );
            Fault::new(what).in_member(&name(layout::TABLE)).at_ensemble(number)
        });
        let mut stored = run.stream(&name(layout::TREE))?;
        let mut differs = run.size(&name(layout::TREE))? != tree::stored_len(seen);
        for node in tree.nodes() {
            let mut bytes = [0; 32];
            if differs || stored.read_exact(&mut bytes).is_err() || bytes != node.0 {
                differs = true;
                break;
            }
        }
        self.tree.expect(!differs, || {
            Fault::new("the stored nodes are not those of the rows")
                .in_member(&name(layout::TREE))
                .at_ensemble(number)
        });
        Ok(exact)
    }

    /// Graph, labels and held sites of the ensemble against the plan's own files.
    fn check_inputs(&mut self, run: &Run, plan: &Plan, checked: &Checked<'_>) -> Result<()> {
        let number = checked.number;
        let Some(planned) = plan.ensembles().get(number.0 as usize) else {
            return Ok(());
        };
        if checked.law.lattice().graph().is_some() {
            let member = layout::in_ensemble(number, layout::SITES);
            let stored = run.text(&member)?;
            self.inputs.expect(
                stored == layout::sites_text(planned.labels().map_or(&[][..], |labels| labels)).as_bytes(),
                || {
                    Fault::new("the labels are not those of the plan's files")
                        .in_member(&member)
                        .at_ensemble(number)
                },
            );
        }
        let same = planned.law().lattice() == checked.law.lattice() && planned.law().held() == checked.law.held();
        self.inputs.expect(same, || {
            Fault::new("lattice or held sites are not those of the plan's files")
                .in_member(layout::PLAN)
                .at_ensemble(number)
        });
        Ok(())
    }

    /// The sample members hold the `exact` samples of the rows and nothing more.
    fn check_lengths(&mut self, run: &Run, checked: &Checked<'_>, exact: u64) -> Result<()> {
        let sites = checked.law.lattice().sites();
        let per_member = wire::rows_per_member(sites);
        for part in 0..exact.div_ceil(per_member) {
            let first = part * per_member;
            let (member, _) = sample_place(checked.number, sites, first);
            let rows = per_member.min(exact - first);
            let expected = Shape::new(rows, bytes_per_sample(sites) as u64)?.file_bytes();
            let found = run.size(&member)?.unwrap_or(0);
            self.indices.expect(found == expected, || {
                Fault::new(format!(
                    "found {found} bytes, expected {expected} for {rows} exact samples"
                ))
                .in_member(&member)
                .at_ensemble(checked.number)
            });
        }
        Ok(())
    }

    /// What a row may say whatever the sample is.
    fn check_row(&mut self, checked: &Checked<'_>, row: &Row) {
        let limit = checked.record.depth_limit;
        let possible = match row.outcome {
            Outcome::Exact { .. } => row.depth <= limit,
            Outcome::Unfinished => row.depth == limit && row.merged_at == 0,
        };
        self.indices.expect(possible, || {
            let what = format!(
                "depth {} with merged_at {} cannot be under depth limit {limit}",
                row.depth, row.merged_at
            );
            Fault::new(what)
                .in_member(&layout::in_ensemble(checked.number, layout::TABLE))
                .at_ensemble(checked.number)
                .at_sample(row.index)
        });
    }

    /// The stored samples of a block of rows; `first` is the number of exact samples before it.
    fn check_samples(&mut self, run: &Run, checked: &Checked<'_>, block: &[Row], first: u64) -> Result<u64> {
        let sites = checked.law.lattice().sites();
        let width = bytes_per_sample(sites);
        let exact: Vec<&Row> = block.iter().filter(|row| row.exact_row().is_some()).collect();
        let mut at = 0;
        while at < exact.len() {
            let row = first + at as u64;
            let (member, place) = sample_place(checked.number, sites, row);
            let here = (wire::rows_per_member(sites) - place).min((exact.len() - at) as u64);
            let bytes = run.samples(checked.number, sites, row, here)?;
            for (row, bytes) in exact[at..].iter().zip(bytes.chunks_exact(width)) {
                let fault = |what: String| {
                    Fault::new(what)
                        .in_member(&member)
                        .at_ensemble(checked.number)
                        .at_sample(row.index)
                };
                let hash = Digest::of(bytes);
                self.hashes.expect(hash == row.hash, || {
                    fault(format!("recorded hash {}, the stored bytes give {hash}", row.hash))
                });
                let Some(sample) = Configuration::from_bytes(sites, bytes) else {
                    self.support.fault(fault(format!(
                        "the stored bytes are not {sites} packed sites padded with zeros"
                    )));
                    continue;
                };
                let measured = checked.observables.measure(&sample);
                for (name, (found, expected)) in checked
                    .observables
                    .names()
                    .iter()
                    .zip(row.observables().iter().zip(measured))
                {
                    self.observables.expect(*found == expected.to_string(), || {
                        fault(format!("{name}: recorded {found}, the stored bytes give {expected}"))
                    });
                }
                if let Some(what) = checked.law.weight_zero(&sample) {
                    self.support.fault(fault(what));
                }
            }
            at += usize::try_from(here).unwrap_or(usize::MAX);
        }
        Ok(first + exact.len() as u64)
    }
}
