//! `forecast` on the command line: what a plan will take, in tables and in plain words.

use std::time::Instant;

use pastproof::clock::Clock;
use pastproof::engine::Stop;
use pastproof::error::{Error, Result};
use pastproof::plan::{Ensemble, Plan};
use pastproof::quantity::Digest;
use pastproof::statistics::Estimate;
use pastproof::verb::examine;
use pastproof::verb::forecast::{self, Basis, Figure, Forecast, NOT_SHOWN, Outlook};
use pastproof::verb::show;
use serde::Serialize;
use serde_json::{Value, json};

use super::Exit;
use super::args;
use super::drawing::{self, Shown, Watch};
use super::machine::Machine;
use super::terminal::{Align, Table, Terminal, Tone, Unit, wrapped};
use super::verdicts;

/// Makes a pilot of the plan and says what it found.
pub fn forecast(request: &args::Forecast, terminal: &Terminal, stop: &Stop) -> Result<Exit> {
    let watch = Watch(Instant::now());
    let plan = drawing::plan(request.plan.as_deref())?;
    let in_plan = |error: Error| match &request.plan {
        Some(path) => error.in_file(path),
        None => error,
    };
    examine::admit(&plan).map_err(in_plan)?;
    let mut settings = request.work.settings();
    // a pilot of more threads than the machine has would measure them standing in line
    settings.threads = settings.threads.min(Machine::this().threads).or(settings.threads);
    let piloting = forecast::Request {
        plan: &plan,
        settings,
        threads: request.work.threads,
        end: request.minutes,
    };
    let forecast = {
        let progress = Shown::new(terminal, request.minutes.as_secs(), Unit::Seconds, request.work.verbose);
        forecast::forecast(&piloting, &watch, &progress, stop).map_err(in_plan)?
    };
    let answer = Answer::new(&plan, &forecast, watch.elapsed().as_secs_f64())?;
    terminal.object(&answer)?;
    print(&plan, &forecast, &answer, terminal)?;
    if let (true, Some(path)) = (answer.advisable, &request.plan) {
        terminal.line(Tone::Plain, &format!("next: pastproof draw {}", path.display()))?;
    }
    Ok(if answer.advisable { Exit::Done } else { Exit::No })
}

/// The answer, as `schema/forecast.schema.json` describes it.
#[derive(Serialize)]
struct Answer {
    command: &'static str,
    title: String,
    advisable: bool,
    pilot_seconds: f64,
    pilot_threads: usize,
    threads: usize,
    ensembles: Vec<Expected>,
    core_hours: Value,
    wall_hours: Value,
    memory_bytes: u64,
    archive_bytes: u64,
    not_shown: &'static [&'static str],
}

#[derive(Serialize)]
struct Expected {
    ensemble: u32,
    law: Value,
    key: Digest,
    samples: u64,
    depth_limit: u8,
    first_depth: u8,
    basis: &'static str,
    trials: usize,
    met: usize,
    smaller: Option<Smaller>,
    coupling_time: Value,
    coupling_time_99: Option<u64>,
    core_hours: Value,
    wall_hours: Value,
    memory_bytes: u64,
    archive_bytes: u64,
    suggested_first_depth: Option<u8>,
    core_hours_then: Option<f64>,
    obstacles: Vec<Obstacle>,
}

#[derive(Serialize)]
struct Smaller {
    extents: [Vec<u32>; 2],
    exponent: f64,
}

#[derive(Serialize)]
struct Obstacle {
    code: &'static str,
    finding: String,
    advice: &'static str,
}

impl Answer {
    fn new(plan: &Plan, forecast: &Forecast, pilot_seconds: f64) -> Result<Self> {
        let ensembles = plan.ensembles().iter().zip(&forecast.ensembles);
        Ok(Self {
            command: "forecast",
            title: plan.title().to_string(),
            advisable: forecast.ensembles.iter().all(|outlook| outlook.obstacles.is_empty()),
            pilot_seconds: rounded(pilot_seconds),
            pilot_threads: forecast.pilot_threads,
            threads: forecast.threads,
            ensembles: ensembles
                .map(|(ensemble, outlook)| Expected::new(ensemble, outlook))
                .collect::<Result<_>>()?,
            core_hours: hours(forecast.core_seconds),
            wall_hours: hours(forecast.wall_seconds),
            memory_bytes: forecast.memory as u64,
            archive_bytes: forecast.archive as u64,
            not_shown: NOT_SHOWN,
        })
    }
}

impl Expected {
    fn new(ensemble: &Ensemble, outlook: &Outlook) -> Result<Self> {
        let (basis, smaller) = match &outlook.basis {
            Basis::Trials => ("trials", None),
            Basis::Smaller { extents, exponent } => {
                let (extents, exponent) = (extents.clone(), rounded(*exponent));
                ("smaller lattices", Some(Smaller { extents, exponent }))
            }
            Basis::Bounds => ("bounds", None),
            Basis::Nothing => ("nothing", None),
        };
        let obstacles = outlook.obstacles.iter().map(|obstacle| Obstacle {
            code: obstacle.code(),
            finding: obstacle.to_string(),
            advice: obstacle.advice(),
        });
        Ok(Self {
            ensemble: outlook.ensemble.0,
            law: ensemble.law().to_json()?,
            key: ensemble.key(),
            samples: ensemble.samples(),
            depth_limit: ensemble.depth_limit(),
            first_depth: ensemble.first_depth(),
            basis,
            trials: outlook.trials,
            met: outlook.met,
            smaller,
            coupling_time: figure(outlook.coupling_time, 1.0),
            coupling_time_99: outlook.coupling_time_99,
            core_hours: hours(outlook.core_seconds),
            wall_hours: hours(outlook.wall_seconds),
            memory_bytes: outlook.memory as u64,
            archive_bytes: outlook.archive as u64,
            suggested_first_depth: outlook.first_depth.map(|(depth, _)| depth),
            core_hours_then: outlook.first_depth.map(|(_, seconds)| rounded(seconds / HOUR)),
            obstacles: obstacles.collect(),
        })
    }
}

const HOUR: f64 = 3600.0;

fn hours(seconds: Figure) -> Value {
    figure(seconds, 1.0 / HOUR)
}

fn figure(figure: Figure, unit: f64) -> Value {
    match figure {
        Figure::About(Estimate { low, middle, high }) => {
            json!({ "low": rounded(low * unit), "middle": rounded(middle * unit), "high": rounded(high * unit) })
        }
        Figure::MoreThan(bound) => json!({ "more_than": rounded(bound * unit) }),
        Figure::Unknown => Value::Null,
    }
}

/// Four digits: more would say more than is known.
fn rounded(number: f64) -> f64 {
    format!("{number:.3e}").parse().unwrap_or(number)
}

fn print(plan: &Plan, forecast: &Forecast, answer: &Answer, terminal: &Terminal) -> Result<()> {
    let line = |text: &str| terminal.line(Tone::Plain, &wrapped("", text, 2));
    terminal.line(Tone::Strong, plan.title())?;
    line(&format!(
        "forecast from a pilot of {} on {}; no sample of the run was drawn",
        time(answer.pilot_seconds),
        threads(forecast.pilot_threads)
    ))?;
    let pairs: Vec<_> = plan.ensembles().iter().zip(&forecast.ensembles).collect();
    for stretch in pairs.chunk_by(|(before, _), (after, _)| drawing::heading(before) == drawing::heading(after)) {
        print_times(stretch, terminal)?;
    }
    line("\nsweeps: the expected coupling time; 99 %: the next one is at most that")?;
    line(&format!(
        "core: time of all cores together; wall: on {}, if nobody else uses them",
        threads(forecast.threads)
    ))?;
    let marks = [Mark::Extrapolated, Mark::Bound, Mark::Unknown];
    for mark in marks
        .iter()
        .filter(|mark| forecast.ensembles.iter().any(|one| Mark::of(&one.basis) == **mark))
    {
        line(&format!("{} {}", mark.sign(), mark.meaning()))?;
    }
    print_space(&pairs, terminal)?;
    let worst = forecast.ensembles.iter().map(|outlook| Mark::of(&outlook.basis)).max();
    let mark = worst.unwrap_or(Mark::None);
    line(&format!(
        "\nin all: {} core-hours ({}), wall time {}, memory {}, archive {}",
        marked(forecast.core_seconds, mark, |seconds| digits(seconds / HOUR)),
        marked(forecast.core_seconds, mark, time),
        marked(forecast.wall_seconds, mark, time),
        bytes(forecast.memory),
        bytes(forecast.archive)
    ))?;
    print_obstacles(&pairs, terminal)?;
    verdicts::print_not_shown(NOT_SHOWN, terminal)
}

/// How a number is marked that is not as good as others.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
enum Mark {
    None,
    Extrapolated,
    Bound,
    Unknown,
}

impl Mark {
    fn of(basis: &Basis) -> Self {
        match basis {
            Basis::Trials => Self::None,
            Basis::Smaller { .. } => Self::Extrapolated,
            Basis::Bounds => Self::Bound,
            Basis::Nothing => Self::Unknown,
        }
    }

    fn sign(self) -> &'static str {
        match self {
            Self::None => "",
            Self::Extrapolated => "~",
            Self::Bound => ">",
            Self::Unknown => "?",
        }
    }

    fn meaning(self) -> &'static str {
        match self {
            Self::None => "measured",
            Self::Extrapolated => "extrapolated from smaller lattices",
            Self::Bound => "a lower bound: no trial of the pilot met",
            Self::Unknown => "the pilot had no time for it",
        }
    }
}

/// How long ensembles of one model and one lattice take.
fn print_times(stretch: &[(&Ensemble, &Outlook)], terminal: &Terminal) -> Result<()> {
    let all: Vec<Vec<String>> = stretch.iter().map(|(ensemble, _)| parameters(ensemble)).collect();
    // the first parameter stands in its row, and so do others that vary
    let (common, varying): (Vec<usize>, Vec<usize>) =
        (0..all[0].len()).partition(|at| *at > 0 && all.iter().all(|one| one.get(*at) == all[0].get(*at)));
    let listed = |one: &[String], places: &[usize]| {
        let chosen: Vec<&str> = places
            .iter()
            .filter_map(|at| one.get(*at))
            .map(String::as_str)
            .collect();
        chosen.join(", ")
    };
    let mut table = Table::new(&[
        ("ensemble", Align::Right),
        ("sweeps", Align::Right),
        ("99 %", Align::Right),
        ("core", Align::Right),
        ("5 to 95 %", Align::Right),
        ("wall", Align::Right),
        ("parameters", Align::Left),
    ]);
    for ((_, outlook), one) in stretch.iter().zip(&all) {
        let (mark, within) = (Mark::of(&outlook.basis), outlook.coupling_time_99);
        let range = match outlook.core_seconds {
            Figure::About(Estimate { low, high, .. }) => range(low, high),
            _ => String::new(),
        };
        table.row([
            outlook.ensemble.to_string(),
            marked(outlook.coupling_time, mark, digits),
            within.map_or(String::new(), |time| format!("{}{}", mark.sign(), digits(time as f64))),
            marked(outlook.core_seconds, mark, time),
            range,
            marked(outlook.wall_seconds, mark, time),
            listed(one, &varying),
        ]);
    }
    let common = listed(&all[0], &common);
    let beside = if common.is_empty() { "" } else { "; " };
    terminal.line(
        Tone::Plain,
        &format!("\n{}{beside}{common}", drawing::heading(stretch[0].0)),
    )?;
    terminal.table(&table)
}

fn parameters(ensemble: &Ensemble) -> Vec<String> {
    let text = show::parameters(ensemble.law(), None);
    text.split(", ").map(str::to_string).collect()
}

/// How much room ensembles take, and where their attempts best begin.
fn print_space(pairs: &[(&Ensemble, &Outlook)], terminal: &Terminal) -> Result<()> {
    let mut table = Table::new(&[
        ("ensemble", Align::Right),
        ("samples", Align::Right),
        ("memory", Align::Right),
        ("archive", Align::Right),
        ("best first_depth", Align::Right),
        ("core then", Align::Right),
    ]);
    for (ensemble, outlook) in pairs {
        let (depth, then) = match outlook.first_depth {
            Some((depth, seconds)) => (depth.to_string(), time(seconds)),
            None => (String::new(), String::new()),
        };
        table.row([
            outlook.ensemble.to_string(),
            ensemble.samples().to_string(),
            bytes(outlook.memory),
            bytes(outlook.archive),
            depth,
            then,
        ]);
    }
    terminal.line(Tone::Plain, "")?;
    terminal.table(&table)
}

/// One finding an ensemble, and each advice once.
fn print_obstacles(pairs: &[(&Ensemble, &Outlook)], terminal: &Terminal) -> Result<()> {
    let against: Vec<_> = pairs
        .iter()
        .filter(|(_, outlook)| !outlook.obstacles.is_empty())
        .collect();
    if against.is_empty() {
        return print_approval(pairs, terminal);
    }
    let text = format!("\nnot advisable: {} of {} ensembles", against.len(), pairs.len());
    terminal.line(Tone::Bad, &text)?;
    let mut advice: Vec<&str> = Vec::new();
    for (ensemble, outlook) in against {
        let first = parameters(ensemble).swap_remove(0);
        for obstacle in &outlook.obstacles {
            let head = format!("ensemble {} ({first}): ", outlook.ensemble);
            terminal.line(Tone::Plain, &wrapped(&head, &obstacle.to_string(), 2))?;
            if !advice.contains(&obstacle.advice()) {
                advice.push(obstacle.advice());
            }
        }
    }
    for text in advice {
        terminal.line(Tone::Plain, &wrapped("\n", text, 0))?;
    }
    Ok(())
}

fn print_approval(pairs: &[(&Ensemble, &Outlook)], terminal: &Terminal) -> Result<()> {
    let unsure = |(_, outlook): &&(&Ensemble, &Outlook)| !matches!(outlook.basis, Basis::Trials);
    match pairs.iter().filter(unsure).count() {
        0 => terminal.line(Tone::Good, "\nadvisable, as far as the pilot can tell"),
        count => {
            let text = format!(
                "nothing was found against the plan; but for {count} of {} ensembles the time was too short for one \
                 trial to meet. More --minutes tell more.",
                pairs.len()
            );
            terminal.line(Tone::Strong, &wrapped("\n", &text, 0))
        }
    }
}

fn threads(count: usize) -> String {
    if count == 1 {
        "1 thread".into()
    } else {
        format!("{count} threads")
    }
}

/// A number with its mark; a sum that is a bound has one in any case.
fn marked(figure: Figure, mark: Mark, text: fn(f64) -> String) -> String {
    match figure {
        Figure::About(estimate) => format!("{}{}", mark.sign(), text(estimate.middle)),
        Figure::MoreThan(bound) => format!("> {}", text(bound)),
        Figure::Unknown => Mark::Unknown.sign().into(),
    }
}

/// Units of time, from the largest down, with the seconds that they have and from which they are used.
const UNITS: [(&str, f64, f64); 6] = [
    ("years", 365.25 * 24.0 * HOUR, 2.0 * 365.25 * 24.0 * HOUR),
    ("days", 24.0 * HOUR, 48.0 * HOUR),
    ("h", HOUR, 2.0 * HOUR),
    ("min", 60.0, 120.0),
    ("s", 1.0, 1.0),
    ("ms", 1e-3, 0.0),
];

fn unit(seconds: f64) -> (&'static str, f64) {
    let found = UNITS.iter().find(|(_, _, from)| seconds >= *from);
    found.map_or(("s", 1.0), |(name, unit, _)| (*name, *unit))
}

fn time(seconds: f64) -> String {
    let (name, unit) = unit(seconds);
    format!("{} {name}", digits(seconds / unit))
}

fn range(low: f64, high: f64) -> String {
    let ((from, unit), (to, _)) = (unit(low), self::unit(high));
    if from == to {
        format!("{} to {}", digits(low / unit), time(high))
    } else {
        format!("{} to {}", time(low), time(high))
    }
}

/// Two digits, and no zeros in their place up to a million.
fn digits(number: f64) -> String {
    let two = format!("{number:.1e}").parse().unwrap_or(number);
    match two {
        0.0 => "0".into(),
        small if small < 0.1 => format!("{small:.1e}"),
        small if small < 1.0 => format!("{small:.2}"),
        small if small < 10.0 => format!("{small:.1}"),
        middle if middle < 1e6 => format!("{middle:.0}"),
        large => format!("{large:.1e}"),
    }
}

fn bytes(count: f64) -> String {
    let units = [("GiB", 30), ("MiB", 20), ("KiB", 10)];
    let found = units.iter().find(|(_, power)| count >= 2f64.powi(*power));
    match found {
        Some((name, power)) => format!("{} {name}", digits(count / 2f64.powi(*power))),
        None => format!("{count:.0} B"),
    }
}
