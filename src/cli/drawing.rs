//! `draw` on the command line: plan file to archive, with everything a person should see on the way.

use std::path::{Path, PathBuf};
use std::time::{Duration, Instant};

use pastproof::archive::layout;
use pastproof::archive::reading::Run;
use pastproof::archive::wire;
use pastproof::audit::seal::{self, Anchors};
use pastproof::audit::{Check, Conclusion, replay};
use pastproof::clock::Clock;
use pastproof::engine::Stop;
use pastproof::engine::coupling::Proof;
use pastproof::engine::crew::Settings;
use pastproof::error::{Error, ErrorKind, Result};
use pastproof::observer::Observer;
use pastproof::plan::{self, Plan, slug};
use pastproof::quantity::{Digest, Seed};
use pastproof::verb::draw::{self, Existing, Sealed};
use pastproof::verb::examine::{self, examine};
use pastproof::verb::show;
use serde::Serialize;
use serde_json::Value;

use super::Exit;
use super::args;
use super::checkout::{self, Found};
use super::machine::{self, Machine};
use super::program::Program;
use super::terminal::{Align, Progress, Table, Terminal, Tone, Unit, wrapped};
use super::verdicts;

/// The plan that is drawn where none is named.
const EXAMPLE: &str = include_str!("../../examples/larkmoor.toml");
/// The largest plan, and the largest file that a plan may name.
const LARGEST_PLAN: u64 = 1 << 20;
const LARGEST_INPUT: u64 = 256 << 20;

/// Draws, seals, reads back.
pub fn draw(request: &args::Draw, terminal: &Terminal, stop: &Stop) -> Result<Exit> {
    let plan = plan(request.plan.as_deref())?;
    let found = request.plan.as_deref().map_or(Found::Nowhere, checkout::find);
    let output = request
        .output
        .clone()
        .unwrap_or_else(|| PathBuf::from(format!("{}.tar.zst", slug(plan.title()))));
    let existing = if request.force {
        Existing::Replace
    } else {
        Existing::Refuse
    };
    if existing == Existing::Refuse && output.symlink_metadata().is_ok() {
        return Err(Error::from(ErrorKind::Exists).in_file(&output));
    }
    let in_plan = |error: Error| match &request.plan {
        Some(path) => error.in_file(path),
        None => error,
    };
    if request.require_clean {
        found.require_clean().map_err(in_plan)?;
    }
    let (repository, patch) = repository(&found, request.with_source).map_err(in_plan)?;
    let repository_unreadable = match &found {
        Found::Unreadable(trouble) => {
            terminal.note(
                Tone::Plain,
                &format!(
                    "note: the repository around the plan could not be read: {}",
                    trouble.message
                ),
            );
            Some(trouble.reason.to_string())
        }
        _ => None,
    };
    let cautions = examine(&plan, stop).map_err(in_plan)?;
    for caution in &cautions {
        terminal.note(
            Tone::Strong,
            &wrapped(&format!("caution: ensemble {}: ", caution.ensemble), &caution.what, 2),
        );
    }
    let seed = match plan.seed_rule().seed() {
        Some(seed) => seed,
        None => entropy()?,
    };
    let machine = Machine::this();
    let drawing = draw::Request {
        plan: &plan,
        seed,
        first_depth: request.first_depth,
        output: &output,
        existing,
        settings: request.work.settings(),
        provenance: wire::Provenance {
            provenance: wire::PROVENANCE.into(),
            program: program(),
            repository,
            repository_unreadable,
            commitment: None,
            ledger: None,
        },
        patch,
        platform: format!("{} {}", machine.system, machine.architecture),
        cpu_features: machine.features.iter().map(ToString::to_string).collect(),
    };
    let total = plan.ensembles().iter().map(|ensemble| ensemble.samples()).sum();
    let sealed = {
        let progress = Shown::new(terminal, total, Unit::Samples, request.work.verbose);
        draw::draw(&drawing, &Watch(Instant::now()), &progress, stop)?
    };
    let answer = Answer::new(
        &plan,
        seed,
        &sealed,
        cautions,
        request.plan.is_none(),
        &drawing.settings,
        stop,
    )?;
    answer.print(&plan, &sealed, terminal)?;
    Ok(match answer.conclusion {
        Conclusion::Fails => Exit::Machine,
        other => other.into(),
    })
}

/// Progress of any task that counts samples.
pub struct Shown<'a> {
    progress: Progress<'a>,
    /// Where it is said how parts are worked on, if that is wanted.
    notes: Option<&'a Terminal>,
}

impl<'a> Shown<'a> {
    /// Progress over `total` pieces on `terminal`.
    pub fn new(terminal: &'a Terminal, total: u64, unit: Unit, verbose: bool) -> Self {
        Self {
            progress: terminal.progress(total, unit),
            notes: verbose.then_some(terminal),
        }
    }
}

impl Observer for Shown<'_> {
    fn begin(&self, part: &str, _pieces: u64) {
        self.progress.ensemble(part);
    }

    fn advance(&self, pieces: u64) {
        self.progress.advance(pieces);
    }

    fn note(&self, manner: &str) {
        if let Some(terminal) = self.notes {
            terminal.note(Tone::Plain, manner);
        }
    }
}

/// The program's clock; its time begins when it is made.
pub struct Watch(pub Instant);

impl Clock for Watch {
    fn utc(&self) -> String {
        machine::now()
    }

    fn elapsed(&self) -> Duration {
        self.0.elapsed()
    }

    fn busy(&self) -> Duration {
        machine::busy().unwrap_or_else(|| self.0.elapsed())
    }
}

/// The plan at `path`, or the embedded example.
pub fn plan(path: Option<&Path>) -> Result<Plan> {
    path.map_or_else(example, read_plan)
}

fn example() -> Result<Plan> {
    Plan::read(EXAMPLE.as_bytes(), &mut |name| {
        Err(Error::missing(name, "no file: the embedded example names none"))
    })
}

fn read_plan(path: &Path) -> Result<Plan> {
    let folder = path.parent().unwrap_or(Path::new(""));
    let text = read(path, LARGEST_PLAN)?;
    Plan::read(&text, &mut |name| read(&folder.join(name), LARGEST_INPUT)).map_err(|error| error.in_file(path))
}

/// A whole file of a bounded size; the size is checked before it is read and while it is.
fn read(path: &Path, largest: u64) -> Result<Vec<u8>> {
    use std::io::Read;
    let fault = |action, error| Error::io(action, error).in_file(path);
    let file = std::fs::File::open(path).map_err(|error| match error.kind() {
        std::io::ErrorKind::NotFound => Error::missing("this file", "one to read").in_file(path),
        _ => fault("open", error),
    })?;
    let mut text = Vec::new();
    file.take(largest + 1)
        .read_to_end(&mut text)
        .map_err(|error| fault("read", error))?;
    if text.len() as u64 > largest {
        return Err(Error::too_large("bytes of the file", format!("more than {largest}"), largest).in_file(path));
    }
    Ok(text)
}

/// 32 bytes of system entropy.
fn entropy() -> Result<Seed> {
    let mut bytes = [0; 32];
    getrandom::fill(&mut bytes)
        .map_err(|error| Error::io("draw a seed from system entropy", std::io::Error::other(error)))?;
    Ok(Seed(Digest(bytes)))
}

fn program() -> wire::Program {
    let program = Program::this();
    wire::Program {
        name: "pastproof".into(),
        version: program.version.into(),
        revision: program.source.map(|source| wire::Revision {
            commit: source.commit.into(),
            clean: source.clean,
        }),
        cargo_lock: program.lock,
        rustc: program.rustc.map(ToString::to_string),
    }
}

/// The author's repository as it is recorded, and the difference if it is to be stored.
fn repository(found: &Found, with_source: bool) -> Result<(Option<wire::Repository>, Option<&[u8]>)> {
    if with_source {
        found.require_checkout()?;
    }
    let Found::Checkout(checkout) = found else {
        return Ok((None, None));
    };
    let patch = if with_source && !checkout.is_clean() {
        Some(checkout.patch()?)
    } else {
        None
    };
    let repository = wire::Repository {
        commit: checkout.commit.clone(),
        clean: checkout.is_clean(),
        difference: checkout.difference.as_ref().map(|difference| difference.digest),
        patch: patch.map(|_| layout::PATCH.to_string()),
        remote: if with_source { checkout.origin.clone() } else { None },
    };
    Ok((Some(repository), patch))
}

/// What ensembles of one table have in common.
pub fn heading(ensemble: &plan::Ensemble) -> String {
    format!("{}: {}", ensemble.law().word(), ensemble.law().lattice())
}

/// The answer of `draw`, as `schema/draw.schema.json` describes it.
#[derive(Serialize)]
struct Answer {
    command: &'static str,
    archive: String,
    bytes: u64,
    title: String,
    root: Digest,
    seal: Digest,
    seed: Digest,
    seed_rule: Value,
    seed_chosen_by_a_person: bool,
    ensembles: Vec<Drawn>,
    cautions: Vec<Caution>,
    checks: Vec<Check>,
    replayed: u64,
    conclusion: Conclusion,
    not_shown: Vec<&'static str>,
}

#[derive(Serialize)]
struct Drawn {
    ensemble: usize,
    law: Value,
    key: Digest,
    samples: u64,
    unfinished: u64,
    deepest: u8,
    seconds: String,
}

#[derive(Serialize)]
struct Caution {
    ensemble: u32,
    what: String,
}

impl Answer {
    /// Reads the archive back and audits it; the embedded example is also replayed.
    fn new(
        plan: &Plan,
        seed: Seed,
        sealed: &Sealed,
        cautions: Vec<examine::Caution>,
        replays: bool,
        settings: &Settings,
        stop: &Stop,
    ) -> Result<Self> {
        let anchors = Anchors {
            root: Some(sealed.root),
            seal: Some(sealed.seal),
        };
        let audit = seal::audit(&sealed.path, anchors, &pastproof::observer::Silent)?;
        let (mut checks, mut conclusion, mut replayed) = (audit.checks, audit.conclusion, 0);
        if replays {
            let run = Run::open(&sealed.path)?;
            let report = replay::replay(
                &run,
                replay::Which::All,
                Proof::Full,
                settings,
                &pastproof::observer::Silent,
                stop,
            )?;
            replayed = report.replayed;
            checks.extend(report.checks);
            if report.conclusion == Conclusion::Fails {
                conclusion = Conclusion::Fails;
            }
        }
        let ensembles =
            plan.ensembles()
                .iter()
                .zip(&sealed.ensembles)
                .enumerate()
                .map(|(number, (ensemble, tally))| {
                    Ok(Drawn {
                        ensemble: number,
                        law: ensemble.law().to_json()?,
                        key: ensemble.law().key()?,
                        samples: tally.samples,
                        unfinished: tally.unfinished,
                        deepest: tally.deepest,
                        seconds: format!("{:.3}", tally.time.as_secs_f64()),
                    })
                });
        Ok(Self {
            command: "draw",
            archive: sealed.path.display().to_string(),
            bytes: sealed.bytes,
            title: plan.title().to_string(),
            root: sealed.root,
            seal: sealed.seal,
            seed: seed.0,
            seed_rule: plan.seed_rule().to_json(),
            seed_chosen_by_a_person: plan.seed_rule().chosen_by_a_person(),
            ensembles: ensembles.collect::<Result<_>>()?,
            cautions: cautions
                .into_iter()
                .map(|caution| Caution {
                    ensemble: caution.ensemble.0,
                    what: caution.what,
                })
                .collect(),
            checks,
            replayed,
            conclusion,
            not_shown: if replays {
                // the last one sends the reader to an audit, which was just made
                replay::NOT_SHOWN[..replay::NOT_SHOWN.len() - 1].to_vec()
            } else {
                seal::NOT_SHOWN.to_vec()
            },
        })
    }

    /// A table for each stretch of ensembles with one model and one lattice.
    fn print_ensembles(&self, plan: &Plan, terminal: &Terminal) -> Result<()> {
        let pairs: Vec<_> = self.ensembles.iter().zip(plan.ensembles()).collect();
        for stretch in pairs.chunk_by(|(_, before), (_, after)| heading(before) == heading(after)) {
            let mut table = Table::new(&[
                ("ensemble", Align::Right),
                ("samples", Align::Right),
                ("unfinished", Align::Right),
                ("deepest", Align::Right),
                ("seconds", Align::Right),
                ("parameters", Align::Left),
            ]);
            for (drawn, ensemble) in stretch {
                table.row([
                    drawn.ensemble.to_string(),
                    drawn.samples.to_string(),
                    drawn.unfinished.to_string(),
                    drawn.deepest.to_string(),
                    drawn.seconds.clone(),
                    show::parameters(ensemble.law(), None),
                ]);
            }
            if let Some((_, first)) = stretch.first() {
                terminal.line(Tone::Plain, &format!("\n{}", heading(first)))?;
            }
            terminal.table(&table)?;
        }
        terminal.line(
            Tone::Plain,
            "deepest: the longest-running sample was begun 2^deepest sweeps in the past",
        )
    }

    fn print(&self, plan: &Plan, sealed: &Sealed, terminal: &Terminal) -> Result<()> {
        terminal.object(self)?;
        terminal.line(Tone::Strong, &self.title)?;
        terminal.line(
            Tone::Plain,
            &format!(
                "seed {}\n{}",
                self.seed,
                wrapped("  ", &plan.seed_rule().to_string(), 2)
            ),
        )?;
        self.print_ensembles(plan, terminal)?;
        let unfinished: u64 = self.ensembles.iter().map(|drawn| drawn.unfinished).sum();
        if unfinished > 0 {
            let are = if unfinished == 1 { "sample is" } else { "samples are" };
            let text = format!(
                "{unfinished} {are} unfinished: recorded and counted, not dropped. The exact ones alone are a biased \
                 set. Raise depth_limit and draw with the same seed: finished samples stay the same."
            );
            terminal.line(Tone::Bad, &wrapped("\n", &text, 0))?;
        }
        terminal.line(
            Tone::Plain,
            &format!("\nsealed {} ({} bytes)", sealed.path.display(), self.bytes),
        )?;
        terminal.line(
            Tone::Plain,
            &format!(
                "root {}\nseal {}\n  print both: the root names the run (plan, seed, definition), the seal this file\n",
                self.root, self.seal
            ),
        )?;
        verdicts::print_faults(&self.checks, terminal)?;
        let replayed = if self.replayed > 0 {
            format!(", all {} samples drawn again and compared", self.replayed)
        } else {
            String::new()
        };
        match self.conclusion {
            Conclusion::Fails => terminal.line(
                Tone::Bad,
                "read back and audited: A CHECK FAILS; do not use this archive",
            )?,
            _ => terminal.line(
                Tone::Good,
                &wrapped(
                    "",
                    &format!("read back and audited{replayed}: {} checks hold", self.checks.len()),
                    2,
                ),
            )?,
        }
        verdicts::print_not_shown(&self.not_shown, terminal)?;
        terminal.line(
            Tone::Plain,
            &format!("next: pastproof replay {} 0/0", sealed.path.display()),
        )
    }
}
