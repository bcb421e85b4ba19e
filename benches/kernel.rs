//! How fast samples are drawn, beside other programs and beside the goals that were set: `cargo bench`.
//!
//! ```text
//! cargo bench                      everything, about five minutes on an idle machine
//! cargo bench -- SECTION ...       only these: square laws threads critical graph
//! cargo bench -- --write           everything, and RESULTS.md anew
//! cargo bench -- --short           no clock: engines and widths agree, rivals are right, instructions are counted
//! cargo bench -- --short --renew   and benches/instructions.toml anew
//! ```
//!
//! Not a criterion program: foreign programs are measured in turn with ours, figures stand beside goals,
//! and one text serves the screen and `RESULTS.md`. No test depends on a time.

#![allow(clippy::print_stdout, clippy::print_stderr, reason = "a program for people")]

mod count;
mod measure;
mod ours;
mod report;
mod rivals;
mod sections;
mod short;
#[path = "../tests/law/systems.rs"]
#[allow(dead_code, reason = "laws in few words, shared with the tests")]
mod systems;
#[path = "../tests/spec/toml_json.rs"]
mod toml_json;

use std::error::Error;
use std::fs;
use std::path::Path;
use std::process::ExitCode;

use report::Report;
use sections::SECTIONS;

/// What can go wrong in a bench is told and not handled.
type Result<T> = std::result::Result<T, Box<dyn Error>>;

/// What is asked for.
#[derive(Default)]
struct Request {
    short: bool,
    renew: bool,
    write: bool,
    count: Option<String>,
    sections: Vec<String>,
}

impl Request {
    fn read(arguments: impl Iterator<Item = String>) -> Result<Self> {
        let mut request = Self::default();
        let mut arguments = arguments.peekable();
        while let Some(argument) = arguments.next() {
            match argument.as_str() {
                // what cargo adds
                "--bench" => {}
                "--short" => request.short = true,
                "--renew" => request.renew = true,
                "--write" => request.write = true,
                // the bench calls itself with this, see `count`
                "--count" => request.count = arguments.next(),
                name if SECTIONS.iter().any(|(section, _)| *section == name) => request.sections.push(argument),
                _ => return Err(format!("unknown: {argument}; benches/kernel.rs says what is known").into()),
            }
        }
        if request.renew && !request.short {
            return Err("--renew goes with --short".into());
        }
        if request.write && (request.short || !request.sections.is_empty()) {
            return Err("--write goes with all sections: RESULTS.md is one run".into());
        }
        Ok(request)
    }
}

fn main() -> ExitCode {
    match Request::read(std::env::args().skip(1)).and_then(|request| run(&request)) {
        Ok(()) => ExitCode::SUCCESS,
        Err(error) => {
            eprintln!("bench: {error}");
            ExitCode::FAILURE
        }
    }
}

fn run(request: &Request) -> Result<()> {
    if let Some(kernel) = &request.count {
        return count::counted(kernel);
    }
    if request.short {
        return short::run(request.renew);
    }
    let mut report = Report::new();
    report.open()?;
    let rivals = rivals::build()?;
    rivals::check(&mut report, &rivals)?;
    for (name, section) in SECTIONS {
        if request.sections.is_empty() || request.sections.iter().any(|wanted| wanted == name) {
            section(&mut report, &rivals)?;
        }
    }
    report.close();
    if request.write {
        fs::write(Path::new(env!("CARGO_MANIFEST_DIR")).join("RESULTS.md"), report.text())?;
    }
    Ok(())
}
