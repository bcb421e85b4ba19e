//! What the bench says: tables and goals, one text for the screen and for `RESULTS.md`.

use std::fmt;
use std::fs;
use std::process::Command;

use chrono::Utc;

use crate::Result;
use crate::measure::Figure;

/// A Markdown table, aligned so that it can be read as it stands.
pub struct Table {
    title: String,
    heads: Vec<String>,
    rows: Vec<Vec<String>>,
}

impl Table {
    pub fn new(title: &str, heads: &[impl ToString]) -> Self {
        Self {
            title: title.into(),
            heads: heads.iter().map(ToString::to_string).collect(),
            rows: Vec::new(),
        }
    }

    pub fn row(&mut self, cells: impl IntoIterator<Item = String>) {
        self.rows.push(cells.into_iter().collect());
    }
}

impl fmt::Display for Table {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let widths: Vec<usize> = (0..self.heads.len())
            .map(|column| {
                let cells = self.rows.iter().map(|row| &row[column]).chain([&self.heads[column]]);
                cells.map(|cell| cell.chars().count()).max().unwrap_or(0).max(2)
            })
            .collect();
        let line = |f: &mut fmt::Formatter<'_>, cells: &[String]| {
            for (column, (cell, width)) in cells.iter().zip(&widths).enumerate() {
                match column {
                    0 => write!(f, "| {cell:<width$} |")?,
                    _ => write!(f, " {cell:>width$} |")?,
                }
            }
            writeln!(f)
        };
        writeln!(f, "## {}\n", self.title)?;
        line(f, &self.heads)?;
        for (column, width) in widths.iter().enumerate() {
            match column {
                0 => write!(f, "| {} |", "-".repeat(*width))?,
                _ => write!(f, " {}: |", "-".repeat(width - 1))?,
            }
        }
        writeln!(f)?;
        self.rows.iter().try_for_each(|row| line(f, row))
    }
}

/// A goal that was set for a figure.
#[derive(Clone, Copy)]
pub enum Goal {
    AtLeast(f64),
    Below(f64),
}

/// Collects what is said and counts goals.
pub struct Report {
    text: String,
    goals: usize,
    missed: usize,
    spreads: Vec<f64>,
}

impl Report {
    pub fn new() -> Self {
        Self {
            text: String::new(),
            goals: 0,
            missed: 0,
            spreads: Vec::new(),
        }
    }

    /// Prints at once, and keeps for the file.
    pub fn say(&mut self, what: impl fmt::Display) {
        println!("{what}");
        self.text += &format!("{what}\n");
    }

    /// A rate as a cell.
    pub fn rate(&mut self, figure: Figure) -> String {
        self.spreads.push(figure.spread());
        number(figure.best)
    }

    /// The ratio of a figure to its goal, 1 or more where it is reached.
    pub fn goal(&mut self, figure: f64, goal: Goal) -> String {
        let ratio = match goal {
            Goal::AtLeast(least) => figure / least,
            Goal::Below(most) => most / figure,
        };
        self.goals += 1;
        self.missed += usize::from(ratio < 1.0);
        format!("{ratio:.2}")
    }

    /// How to read it all, and the machine.
    pub fn open(&mut self) -> Result<()> {
        self.say("# Results\n");
        self.say(
            "Written by `cargo bench -- --write`; `benches/kernel.rs` says how each figure is taken. Rates are \
             decisions a\nnanosecond: one decision sets both bounds of one site. Beside a figure with a goal stands \
             its ratio to it, 1.00 or\nmore where it is reached. Each rate is the best of three, taken in turn with \
             those it is compared with.\n",
        );
        self.say("## Machine\n");
        let commit = match env!("PASTPROOF_BUILD_TREE") {
            "clean" => env!("PASTPROOF_BUILD_COMMIT").to_string(),
            _ => format!("{}, changed", env!("PASTPROOF_BUILD_COMMIT")),
        };
        let threads = std::thread::available_parallelism()?;
        let lines = [
            ("processor", processor()),
            ("hardware threads", threads.to_string()),
            ("system", format!("{} {}", std::env::consts::OS, std::env::consts::ARCH)),
            ("rustc", env!("PASTPROOF_BUILD_RUSTC").to_string()),
            ("cc", first_line("cc", "--version")?),
            ("commit", commit),
            ("date", Utc::now().format("%Y-%m-%d").to_string()),
        ];
        for (what, value) in lines {
            self.say(format!("- {what}: {value}"));
        }
        self.say("");
        Ok(())
    }

    /// How many goals are reached, and how quiet the machine was.
    pub fn close(&mut self) {
        self.spreads.sort_by(f64::total_cmp);
        let percent = |spread: Option<&f64>| spread.map_or(0.0, |spread| spread * 100.0);
        let median = percent(self.spreads.get(self.spreads.len() / 2));
        let largest = percent(self.spreads.last());
        let (reached, goals) = (self.goals - self.missed, self.goals);
        self.say(format!(
            "{reached} of {goals} goals reached. Between the worst and the best of three repeats lay {median:.0} % in \
             the median,\n{largest:.0} % at most: on a quiet machine a few."
        ));
    }

    pub fn text(&self) -> &str {
        &self.text
    }
}

/// Three significant digits.
pub fn number(value: f64) -> String {
    match value {
        100.0.. => format!("{value:.0}"),
        10.0.. => format!("{value:.1}"),
        1.0.. => format!("{value:.2}"),
        _ => format!("{value:.3}"),
    }
}

fn processor() -> String {
    let known = fs::read_to_string("/proc/cpuinfo").unwrap_or_default();
    let model = known.lines().find(|line| line.starts_with("model name"));
    let name = model.and_then(|line| line.split_once(": "));
    name.map_or("unknown".into(), |(_, name)| name.to_string())
}

fn first_line(program: &str, argument: &str) -> Result<String> {
    let output = Command::new(program).arg(argument).output()?;
    let said = String::from_utf8(output.stdout)?;
    Ok(said.lines().next().unwrap_or_default().to_string())
}
