//! The words of the command line: text to requests. Touches no disk.

use std::path::PathBuf;
use std::time::Duration;

use clap::{Args, Parser, Subcommand};
use pastproof::engine::crew::{Choice, Settings};
use pastproof::quantity::{Digest, EnsembleIndex, SampleIndex};

/// Exact samples of lattice and graph models, sealed so that anyone can redraw them bit for bit.
#[derive(Parser, Debug)]
#[command(name = "pastproof", version, arg_required_else_help = true, after_help = EXITS)]
pub struct Arguments {
    #[command(subcommand)]
    pub verb: Verb,
}

const EXITS: &str = "\
Exit codes:
  0  done; for replay and audit: everything examined holds
  1  the answer is no: a check failed, or a forecast advises against the plan
  2  the request is wrong: flags or plan
  3  the archive cannot be read: damaged, not supported, or nothing in it
  4  the machine failed: input or output, space, memory
  5  stopped on request
  6  everything examined holds, but samples are unfinished";

#[derive(Subcommand, Debug)]
pub enum Verb {
    /// Draw the samples that a plan asks for and seal them in an archive
    #[command(after_help = "\
Example:
  pastproof draw plan.toml -o film.tar.zst
A plan is a TOML file, described in README.md; without one an embedded example
is drawn. The archive is read back and audited before the command ends.")]
    Draw(Draw),
    /// Say what a plan will take, from a short pilot on that very plan
    #[command(after_help = "\
Example:
  pastproof forecast plan.toml --minutes 5 --threads 64
Nothing is written and no sample of the run is drawn. Exit code 1 means that some
ensemble is not advisable as it is planned.")]
    Forecast(Forecast),
    /// Show what an archive holds: laws, counts, seed, root and seal
    #[command(after_help = "\
Example:
  pastproof show film.tar.zst")]
    Show(Show),
    /// Draw stored samples again and compare them bit for bit
    #[command(override_usage = "pastproof replay [OPTIONS] <ARCHIVE> <ENSEMBLE/SAMPLE | --all>")]
    #[command(after_help = "\
Example:
  pastproof replay film.tar.zst 2/17    sample 17 of ensemble 2, from 0
  pastproof replay film.tar.zst --all
Each sample is drawn again from the depth that is recorded for it, and from one
depth less, where it must fail (--fast leaves that out).")]
    Replay(Replay),
    /// Check every byte and hash of an archive, and that no sample is missing
    #[command(after_help = "\
Example:
  pastproof audit film.tar.zst --root 64_DIGITS_FROM_THE_PAPER
Give the root or the seal that the paper prints: without one, an archive that a
forger made anew from end to end would pass. Samples are not drawn again: that
is what replay does.")]
    Audit(Audit),
}

#[derive(Args, Debug)]
pub struct Draw {
    /// The plan (TOML); without it an embedded example is drawn
    pub plan: Option<PathBuf>,
    /// Archive to write [default: the plan's title, here]
    #[arg(short, long, value_name = "FILE")]
    pub output: Option<PathBuf>,
    #[command(flatten)]
    pub work: Work,
    /// First try 2^K sweeps; changes no sample, only time
    #[arg(long, value_name = "K", value_parser = clap::value_parser!(u8).range(0..=62))]
    pub first_depth: Option<u8>,
    /// Replace an archive of that name
    #[arg(long)]
    pub force: bool,
    /// Store your uncommitted changes and remote address
    #[arg(long)]
    pub with_source: bool,
    /// Refuse to draw where your repository is not clean
    #[arg(long)]
    pub require_clean: bool,
    /// Answer in JSON (schema/draw.schema.json)
    #[arg(long)]
    pub json: bool,
}

#[derive(Args, Debug)]
pub struct Forecast {
    /// The plan (TOML); without it the embedded example is taken
    pub plan: Option<PathBuf>,
    /// The pilot ends after so long; 0.1 is six seconds
    #[arg(long, value_name = "M", value_parser = minutes, default_value = "1")]
    pub minutes: Duration,
    #[command(flatten)]
    pub work: Work,
    /// Answer in JSON (schema/forecast.schema.json)
    #[arg(long)]
    pub json: bool,
}

/// How the work is done; none of it changes a result.
#[derive(Args, Debug)]
pub struct Work {
    /// Threads [default: as many as the machine has]
    #[arg(long, value_name = "N", value_parser = threads)]
    pub threads: Option<usize>,
    /// Engine: plain is the definition, and slow
    #[arg(long, value_name = "NAME", value_parser = choice, default_value = "automatic")]
    pub engine: Choice,
    /// Memory for kept maps, as in 512MiB or 4GiB
    #[arg(long, value_name = "SIZE", value_parser = size, default_value = "1GiB")]
    pub memory: u64,
    /// Say which engine works, and how threads share the work
    #[arg(long)]
    pub verbose: bool,
}

impl Work {
    /// As the library wants it.
    pub fn settings(&self) -> Settings {
        Settings {
            engine: self.engine,
            width: None,
            memory: self.memory,
            threads: self.threads,
        }
    }
}

#[derive(Args, Debug)]
pub struct Show {
    /// The archive
    pub archive: PathBuf,
    /// Answer in JSON (schema/show.schema.json)
    #[arg(long)]
    pub json: bool,
}

#[derive(Args, Debug)]
pub struct Replay {
    /// The archive
    pub archive: PathBuf,
    /// One sample: ensemble/sample, both counted from 0
    #[arg(value_name = "ENSEMBLE/SAMPLE", value_parser = address, required_unless_present = "all", conflicts_with = "all")]
    pub sample: Option<(EnsembleIndex, SampleIndex)>,
    /// Every sample
    #[arg(long)]
    pub all: bool,
    /// Skip the shorter attempt, which must fail
    #[arg(long)]
    pub fast: bool,
    #[command(flatten)]
    pub work: Work,
    /// Answer in JSON (schema/replay.schema.json)
    #[arg(long)]
    pub json: bool,
}

#[derive(Args, Debug)]
pub struct Audit {
    /// The archive
    pub archive: PathBuf,
    /// The root that the paper prints: SHA-256 of record.json
    #[arg(long, value_name = "HEX", value_parser = digest)]
    pub root: Option<Digest>,
    /// The seal that the paper prints: SHA-256 of MANIFEST.sha256
    #[arg(long, value_name = "HEX", value_parser = digest)]
    pub seal: Option<Digest>,
    /// Answer in JSON (schema/audit.schema.json)
    #[arg(long)]
    pub json: bool,
}

fn threads(text: &str) -> Result<usize, String> {
    match text.parse() {
        Ok(count @ 1..=1024) => Ok(count),
        _ => Err("expected 1 to 1024".into()),
    }
}

/// At most a week.
fn minutes(text: &str) -> Result<Duration, String> {
    match text.parse::<f64>() {
        Ok(minutes) if minutes > 0.0 && minutes <= 10_080.0 => Ok(Duration::from_secs_f64(60.0 * minutes)),
        _ => Err("expected a number above 0, at most 10080".into()),
    }
}

fn choice(text: &str) -> Result<Choice, String> {
    match text {
        "automatic" => Ok(Choice::Automatic),
        "plain" => Ok(Choice::Plain),
        _ => Err("expected automatic or plain".into()),
    }
}

/// A size in bytes with a binary prefix (IEC 80000-13).
fn size(text: &str) -> Result<u64, String> {
    let units = [("GiB", 30), ("MiB", 20), ("KiB", 10), ("B", 0)];
    let parsed = units.iter().find_map(|(unit, power)| {
        let count: u64 = text.strip_suffix(unit)?.trim_end().parse().ok()?;
        count.checked_mul(1 << power)
    });
    parsed
        .or_else(|| (text == "0").then_some(0))
        .ok_or_else(|| "expected a size such as 512MiB or 4GiB".into())
}

fn address(text: &str) -> Result<(EnsembleIndex, SampleIndex), String> {
    let parsed = text.split_once('/').and_then(|(ensemble, sample)| {
        Some((EnsembleIndex(ensemble.parse().ok()?), SampleIndex(sample.parse().ok()?)))
    });
    parsed.ok_or_else(|| "expected ensemble/sample, such as 2/417".into())
}

fn digest(text: &str) -> Result<Digest, String> {
    Digest::parse(&text.to_ascii_lowercase()).ok_or_else(|| "expected 64 hexadecimal digits".into())
}
