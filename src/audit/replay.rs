//! `replay`: draws stored samples again, from the archive alone, and compares bit for bit.
//!
//! Keys are recomputed from the laws and thresholds from the parameters; a sample is tied to the
//! root through its leaf and audit path; then it is drawn with both bounds: the attempt of the
//! recorded depth must meet and the one before it must not. Each kind of difference is a check of
//! its own, so that a reader sees what is wrong: parameters, keys, thresholds, tree, depths, samples,
//! hashes, observables.

use crate::archive::layout;
use crate::archive::reading::{Run, sample_place};
use crate::archive::table::{Outcome as Recorded, Row};
use crate::audit::ensemble::{Checked, check_parameters};
use crate::audit::{Answer, Check, Conclusion, Fault, conclude, count};
use crate::engine::Engine;
use crate::engine::Stop;
use crate::engine::coupling::{self, Proof};
use crate::engine::crew::{Crew, Settings};
use crate::error::Result;
use crate::observer::Observer;
use crate::quantity::{Digest, EnsembleIndex, SampleIndex, Seed};
use crate::sample::{Configuration, Outcome, Sample};
use crate::stream::Address;
use crate::tree;

/// Which samples to draw again.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Which {
    /// One sample.
    One(EnsembleIndex, SampleIndex),
    /// Every sample.
    All,
}

/// What a replay found.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Report {
    /// The SHA-256 of the record.
    pub root: Digest,
    /// Samples drawn again and compared.
    pub replayed: u64,
    /// Those among them that are recorded as unfinished.
    pub unfinished: u64,
    /// Whether each least depth was shown by a failing smaller attempt.
    pub proof: Proof,
    /// The checks.
    pub checks: Vec<Check>,
    /// What they come to.
    pub conclusion: Conclusion,
    /// The hash and depth of the sample, if one was asked for.
    pub sample: Option<Row>,
}

/// What a replay does not show, in words.
pub const NOT_SHOWN: [&str; 4] = [
    "that the seed was not one of many tried",
    "that the law is the right one for a scientific question, or that the generator behaves as ideal digits would",
    "that this is the file that its author published: compare the root with the printed one",
    "anything about members that a replay does not read (README, STREAM.md, manifest, provenance, circumstances, attest): see audit",
];

/// The checks of a replay.
struct Checks {
    parameters: Check,
    keys: Check,
    thresholds: Check,
    tree: Check,
    depths: Check,
    samples: Check,
    hashes: Check,
    observables: Check,
}

impl Checks {
    fn new() -> Self {
        Self {
            parameters: Check::new("parameters"),
            keys: Check::new("keys"),
            thresholds: Check::new("thresholds"),
            tree: Check::new("tree"),
            depths: Check::new("depths"),
            samples: Check::new("samples"),
            hashes: Check::new("hashes"),
            observables: Check::new("observables"),
        }
    }

    fn into_list(self) -> Vec<Check> {
        vec![
            self.parameters,
            self.keys,
            self.thresholds,
            self.tree,
            self.depths,
            self.samples,
            self.hashes,
            self.observables,
        ]
    }
}

/// Draws samples of `run` again.
///
/// # Errors
/// Whatever makes the archive unreadable, a request for a sample that was not planned, or a stop.
pub fn replay(
    run: &Run,
    which: Which,
    proof: Proof,
    settings: &Settings,
    observer: &dyn Observer,
    stop: &Stop,
) -> Result<Report> {
    let redraw = Redraw {
        pool: settings.pool()?,
        seed: Seed(run.record().seed),
        proof,
        observer,
        stop,
    };
    let mut checks = Checks::new();
    let ensembles = match which {
        Which::One(ensemble, _) => {
            run.ensemble(ensemble)?;
            vec![ensemble]
        }
        Which::All => (0..).map(EnsembleIndex).take(run.record().ensembles.len()).collect(),
    };
    check_parameters(run, &run.plan()?, &ensembles, &mut checks.parameters)?;
    let (mut replayed, mut unfinished, mut shown, mut thresholds) = (0, 0, None, 0);
    for ensemble in &ensembles {
        let checked = Checked::new(run, *ensemble, &mut checks.keys, &mut checks.thresholds)?;
        thresholds += checked.map.thresholds().len();
        let columns = &checked.columns;
        let crew = Crew::new(&checked.map, settings);
        let asked = match which {
            Which::One(..) => 1,
            Which::All => checked.record.samples,
        };
        let manner = crew.manner(asked, redraw.pool.current_num_threads());
        observer.note(&format!("ensemble {ensemble}: {manner}"));
        match which {
            Which::One(_, sample) => {
                let row = run.row(*ensemble, sample, columns)?;
                redraw.block(run, &checked, &crew, std::slice::from_ref(&row), &mut checks)?;
                replayed += 1;
                unfinished += u64::from(row.exact_row().is_none());
                shown = Some(row);
            }
            Which::All => {
                let planned = checked.record.samples;
                observer.begin(&format!("ensemble {ensemble}"), planned);
                let mut rows = run.rows(*ensemble, columns)?;
                let block = crew.at_once(redraw.pool.current_num_threads());
                let mut seen = 0;
                loop {
                    let block = rows.by_ref().take(block).collect::<Result<Vec<_>>>()?;
                    if block.is_empty() {
                        break;
                    }
                    seen += block.len() as u64;
                    if seen > planned {
                        break;
                    }
                    redraw.block(run, &checked, &crew, &block, &mut checks)?;
                    replayed += block.len() as u64;
                    unfinished += block.iter().filter(|row| row.exact_row().is_none()).count() as u64;
                }
                checks.tree.expect(seen == planned, || {
                    Fault::new(format!(
                        "{planned} samples planned, the table holds {}",
                        if seen > planned {
                            "more".into()
                        } else {
                            seen.to_string()
                        }
                    ))
                    .in_member(&layout::in_ensemble(*ensemble, layout::TABLE))
                    .at_ensemble(*ensemble)
                });
            }
        }
    }
    let exact = replayed - unfinished;
    checks.keys.examined = format!("{} recomputed from the laws", count(ensembles.len() as u64, "key"));
    checks.thresholds.examined = format!(
        "{} recomputed from the parameters",
        count(thresholds as u64, "threshold")
    );
    checks.tree.examined = format!("{} followed from leaf to root", count(replayed, "sample"));
    checks.depths.examined = match proof {
        Proof::Full => format!(
            "{}: the attempt at the recorded depth ends as recorded, the one before it fails",
            count(replayed, "sample")
        ),
        Proof::Fast => format!(
            "{}: the attempt at the recorded depth ends as recorded; that no smaller one meets was not examined",
            count(replayed, "sample")
        ),
    };
    checks.samples.examined = format!(
        "{} compared bit for bit with what was drawn again",
        count(exact, "exact sample")
    );
    if exact == 0 && checks.samples.answer == Answer::Holds {
        checks.samples = Check::not_examined("samples", "no exact sample among those replayed");
        checks.observables = Check::not_examined("observables", "no exact sample among those replayed");
    } else {
        checks.observables.examined = format!("{} recomputed from what was drawn again", count(exact, "row"));
    }
    checks.hashes.examined = format!("{} recomputed from what was drawn again", count(replayed, "hash"));
    let checks = checks.into_list();
    let conclusion = conclude(&checks, unfinished);
    Ok(Report {
        root: run.root(),
        replayed,
        unfinished,
        proof,
        checks,
        conclusion,
        sample: shown,
    })
}

/// How samples are drawn again.
struct Redraw<'a> {
    pool: rayon::ThreadPool,
    seed: Seed,
    proof: Proof,
    observer: &'a dyn Observer,
    stop: &'a Stop,
}

impl Redraw<'_> {
    /// Replays rows side by side; the faults stand in the order of the rows.
    fn block(
        &self,
        run: &Run,
        checked: &Checked<'_>,
        crew: &Crew<'_>,
        rows: &[Row],
        checks: &mut Checks,
    ) -> Result<()> {
        let sites = checked.law.lattice().sites();
        let mut stored = Vec::with_capacity(rows.len());
        for row in rows {
            let path = run.audit_path(checked.number, row.index)?;
            let leaf = tree::leaf_hash(&row.leaf());
            let (size, root) = (checked.record.samples, checked.record.samples_root);
            checks
                .tree
                .expect(tree::verify_inclusion(leaf, row.index.0, size, &path, root), || {
                    Fault::new("its row and the stored nodes do not lead to the recorded root of the samples")
                        .in_member(&layout::in_ensemble(checked.number, layout::TREE))
                        .at_ensemble(checked.number)
                        .at_sample(row.index)
                });
            stored.push(
                row.exact_row()
                    .map(|number| run.samples(checked.number, sites, number, 1))
                    .transpose()?,
            );
        }
        let (key, limit) = (checked.key, checked.record.depth_limit);
        let one = |engine: &mut dyn Engine, row: &Row| {
            if row.depth > limit {
                return Ok(None);
            }
            let address = Address {
                seed: self.seed,
                key,
                sample: row.index,
            };
            let redrawn = coupling::redraw(engine, &address, row.depth, self.proof, self.stop)?;
            self.observer.advance(1);
            Ok(Some(redrawn))
        };
        let redrawn = self.pool.install(|| crew.each(rows, one))?;
        for ((row, bytes), redrawn) in rows.iter().zip(stored).zip(redrawn) {
            compare(checked, row, bytes.as_deref(), redrawn, checks);
        }
        Ok(())
    }
}

/// Compares one stored sample with what was drawn again.
fn compare(
    checked: &Checked<'_>,
    row: &Row,
    stored: Option<&[u8]>,
    redrawn: Option<(Sample, bool)>,
    checks: &mut Checks,
) {
    let sites = checked.law.lattice().sites();
    let table = layout::in_ensemble(checked.number, layout::TABLE);
    let at = |member: &str, what: String| {
        Fault::new(what)
            .in_member(member)
            .at_ensemble(checked.number)
            .at_sample(row.index)
    };
    let limit = checked.record.depth_limit;
    let Some((sample, smaller_met)) = redrawn else {
        checks.depths.fault(at(
            &table,
            format!(
                "found depth {}, at most {limit} is allowed; it was not drawn",
                row.depth
            ),
        ));
        return;
    };
    match (&sample.outcome, &row.outcome) {
        (Outcome::Exact(_), Recorded::Exact { .. }) => {
            checks.depths.expect(!smaller_met, || {
                at(
                    &table,
                    format!(
                        "recorded depth {}, but the attempt at {} meets",
                        row.depth,
                        row.depth - 1
                    ),
                )
            });
            checks.depths.expect(sample.merged_at == row.merged_at, || {
                at(
                    &table,
                    format!("recorded merged_at {}, drawn again {}", row.merged_at, sample.merged_at),
                )
            });
        }
        (Outcome::Unfinished { .. }, Recorded::Unfinished) => {
            let ends = row.depth == limit && row.merged_at == 0;
            checks.depths.expect(ends, || {
                at(
                    &table,
                    format!(
                        "unfinished with depth {} and merged_at {}, expected {limit} and 0",
                        row.depth, row.merged_at
                    ),
                )
            });
        }
        (Outcome::Exact(_), Recorded::Unfinished) => {
            checks.depths.fault(at(
                &table,
                format!("recorded as unfinished, but the attempt at depth {} meets", row.depth),
            ));
        }
        (Outcome::Unfinished { .. }, Recorded::Exact { .. }) => {
            checks.depths.fault(at(
                &table,
                format!(
                    "recorded as exact at depth {}, but that attempt does not meet",
                    row.depth
                ),
            ));
        }
    }
    let hash = sample.hash();
    checks.hashes.expect(hash == row.hash, || {
        at(&table, format!("recorded hash {}, drawn again {hash}", row.hash))
    });
    if let (Some(bytes), Some(number)) = (stored, row.exact_row()) {
        let (member, _) = sample_place(checked.number, sites, number);
        match (Configuration::from_bytes(sites, bytes), sample.exact()) {
            (None, _) => checks.samples.fault(at(
                &member,
                format!(
                    "the {} stored bytes are not {} packed sites padded with zeros",
                    bytes.len(),
                    sites
                ),
            )),
            (Some(found), Some(exact)) => {
                if let Some(site) = found.first_difference(exact) {
                    let differing = (0..sites)
                        .filter(|site| found.is_plus(*site) != exact.is_plus(*site))
                        .count();
                    checks.samples.fault(at(
                        &member,
                        format!("{differing} of {sites} sites differ, the first is site {site}"),
                    ));
                }
            }
            (Some(_), None) => checks.samples.fault(at(
                &member,
                "a sample is stored, but none was drawn at that depth".into(),
            )),
        }
    }
    if let Some(exact) = sample.exact().filter(|_| row.exact_row().is_some()) {
        for (name, (found, expected)) in checked
            .observables
            .names()
            .iter()
            .zip(row.observables().iter().zip(checked.observables.measure(exact)))
        {
            checks.observables.expect(*found == expected.to_string(), || {
                at(&table, format!("{name}: recorded {found}, drawn again {expected}"))
            });
        }
    }
}
