//! How much memory and disk a run takes.
//!
//! Bytes in the archive are those of the pilot's own samples and rows, compressed as an archive
//! compresses them, in proportion.

use crate::archive::container::Writer;
use crate::archive::layout;
use crate::archive::table::{Columns, Outcome, Row};
use crate::canonical;
use crate::engine::crew::{Choice, Settings};
use crate::error::Result;
use crate::observable::Observables;
use crate::plan::{Ensemble, Plan};
use crate::quantity::SampleIndex;
use crate::sample::{Sample, bytes_per_sample};
use crate::stream;

/// Bytes of README, record and other texts that every archive has, compressed; measured on small ones.
const TEXTS: f64 = 4096.0;

/// Bytes of the member headers and the small members that every ensemble has, compressed; likewise.
const MEMBERS: f64 = 1024.0;

/// Bytes that one sample adds to a tree: about two nodes, which do not compress.
const TREE: f64 = 64.0;

/// Bytes of a row whose sample is not known: mostly its hash.
const ROW: f64 = 64.0;

/// Bytes that a plan's archive has whatever is drawn.
pub(super) fn fixed_bytes(plan: &Plan) -> Result<f64> {
    let mut texts = vec![(layout::PLAN.to_string(), plan.text())];
    texts.push((layout::STREAM.to_string(), stream::TEXT.as_bytes()));
    texts.extend(
        plan.files()
            .iter()
            .map(|input| (layout::input(&input.name), &input.bytes[..])),
    );
    let mut bytes = TEXTS;
    for (name, text) in texts {
        bytes += compressed(&name, text)?;
    }
    Ok(bytes)
}

/// Bytes of an ensemble in the archive, as its pilot's samples compress; without one, as if none did.
pub(super) fn archive_bytes(ensemble: &Ensemble, pilot: &[Sample]) -> Result<f64> {
    let law = ensemble.law();
    let mut bytes = MEMBERS;
    if let Some(graph) = law.lattice().graph() {
        bytes += compressed(layout::GRAPH, &canonical::to_bytes(&graph.to_json())?)?;
    }
    let (mut states, mut rows) = (Vec::new(), Vec::new());
    let observables = Observables::new(law);
    let columns = Columns::new(observables.names())?;
    for (index, (sample, exact)) in (0..).zip(pilot.iter().filter_map(|sample| Some((sample, sample.exact()?)))) {
        states.extend_from_slice(exact.as_bytes());
        let values = observables.measure(exact);
        let row = Row {
            index: SampleIndex(index),
            outcome: Outcome::Exact {
                row: index,
                observables: values.iter().map(ToString::to_string).collect(),
            },
            depth: sample.depth,
            merged_at: sample.merged_at,
            hash: sample.hash(),
        };
        columns.write_row(&row, &mut rows)?;
    }
    let per_sample = if pilot.is_empty() {
        bytes_per_sample(law.lattice().sites()) as f64 + ROW
    } else {
        (compressed("states", &states)? + compressed("rows", &rows)?) / pilot.len() as f64
    };
    Ok(bytes + ensemble.samples() as f64 * (per_sample + TREE))
}

/// Bytes that a member with this content takes, compressed, beside those of an empty one.
fn compressed(name: &str, content: &[u8]) -> Result<f64> {
    let bytes = |content: &[u8]| -> Result<f64> {
        let mut archive = Writer::new(Vec::new())?;
        archive.add(name, content)?;
        Ok(archive.finish()?.len() as f64)
    };
    Ok(bytes(content)? - bytes(&[])?)
}

/// Bytes of memory that the program takes before it does anything, and for each row until the end; measured, as
/// the following ones.
const PROGRAM: f64 = 14.0 * MIB;
const KEPT_ROW: f64 = 190.0;
/// For each site of a regular lattice, once and for each thread.
const SITE: f64 = 0.5;
const SITE_OF_THREAD: f64 = 0.5;
/// For each site and thread of the plain engine.
const PLAIN_SITE: f64 = 200.0;
/// For each edge of a graph, whose file is read and written as well.
const EDGE: f64 = 500.0;
/// For each site and sweep of the random map that is kept.
const KEPT_SITE: f64 = 0.5;
const MIB: f64 = 1048576.0;

/// Bytes of memory of a run on so many threads, which works on `at_once` samples at a time and keeps random maps
/// for attempts of up to so many sweeps: about, as measured on one machine.
pub(super) fn memory(ensemble: &Ensemble, settings: &Settings, threads: usize, at_once: usize, sweeps: f64) -> f64 {
    let (lattice, threads) = (ensemble.law().lattice(), threads as f64);
    let sites = f64::from(lattice.sites());
    let samples = ensemble.samples() as f64;
    let work = match (lattice.graph(), settings.engine) {
        (Some(graph), _) => EDGE * graph.edges().len() as f64,
        (None, Choice::Plain) => PLAIN_SITE * sites * threads,
        (None, _) => {
            let kept = (KEPT_SITE * sites * sweeps * threads).min(settings.memory as f64);
            (SITE + SITE_OF_THREAD * threads) * sites + kept
        }
    };
    let block = samples.min(at_once as f64) * bytes_per_sample(lattice.sites()) as f64;
    PROGRAM + work + block + KEPT_ROW * samples
}
