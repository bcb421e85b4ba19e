//! The shell around the library: the author's repository, machine, terminal and signals.
//!
//! Apart from the library, because only here git, the clock, the environment and the terminal may
//! be seen; the library cannot name this module, so no sample can depend on any of them.

/// Leaves a test out where a tool of the system is missing, unless `PASTPROOF_TEST_TOOLS=required` (as in CI).
#[cfg(test)]
macro_rules! needs {
    ($tool:literal) => {
        let there = std::process::Command::new($tool).arg("--version").output().is_ok();
        if !there {
            assert!(
                std::env::var_os("PASTPROOF_TEST_TOOLS").is_none(),
                "no {} on this machine",
                $tool
            );
            return;
        }
    };
}

mod args;
mod checkout;
mod drawing;
mod forecasting;
mod machine;
mod program;
mod signals;
mod terminal;
mod verdicts;

use std::process::ExitCode;

use clap::Parser;
use pastproof::audit::Conclusion;
use pastproof::engine::Stop;
use pastproof::error::{Class, ErrorKind, Result};

use self::args::{Arguments, Verb};
use self::terminal::{Output, Terminal};

/// How the program ends, with the numbers of the table in `schema/README.md`.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Exit {
    Done = 0,
    No = 1,
    Request = 2,
    Archive = 3,
    Machine = 4,
    Stopped = 5,
    Incomplete = 6,
}

impl From<Class> for Exit {
    fn from(class: Class) -> Self {
        match class {
            Class::Request => Self::Request,
            Class::Archive => Self::Archive,
            Class::Machine => Self::Machine,
            Class::Stopped => Self::Stopped,
        }
    }
}

impl From<Conclusion> for Exit {
    fn from(conclusion: Conclusion) -> Self {
        match conclusion {
            Conclusion::Holds => Self::Done,
            Conclusion::Fails => Self::No,
            Conclusion::Incomplete => Self::Incomplete,
        }
    }
}

/// Reads the arguments, does the deed, says how it ended.
pub fn main() -> ExitCode {
    let arguments = match Arguments::try_parse() {
        Ok(arguments) => arguments,
        Err(trouble) => return usage(&trouble),
    };
    let json = match &arguments.verb {
        Verb::Draw(args::Draw { json, .. })
        | Verb::Forecast(args::Forecast { json, .. })
        | Verb::Show(args::Show { json, .. })
        | Verb::Replay(args::Replay { json, .. })
        | Verb::Audit(args::Audit { json, .. }) => *json,
    };
    let terminal = Terminal::of_process(if json { Output::Json } else { Output::Text });
    let exit = dispatch(arguments.verb, &terminal).unwrap_or_else(|error| {
        terminal.error(&error);
        error.class().into()
    });
    ExitCode::from(exit as u8)
}

/// Help and version are answers; everything else that clap says is a wrong request.
fn usage(trouble: &clap::Error) -> ExitCode {
    let json = std::env::args_os().any(|argument| argument == "--json");
    if trouble.use_stderr() && json {
        let text = trouble.to_string();
        let what = text
            .lines()
            .next()
            .unwrap_or("")
            .trim_start_matches("error: ")
            .to_string();
        let terminal = Terminal::of_process(Output::Json);
        terminal.error(&ErrorKind::Flags { what }.into());
        return ExitCode::from(Exit::Request as u8);
    }
    // a closed pipe is no failure
    let _ = trouble.print();
    ExitCode::from(if trouble.use_stderr() {
        Exit::Request
    } else {
        Exit::Done
    } as u8)
}

fn dispatch(verb: Verb, terminal: &Terminal) -> Result<Exit> {
    let stop = Stop::at(signals::listen()?);
    match verb {
        Verb::Draw(request) => drawing::draw(&request, terminal, &stop),
        Verb::Forecast(request) => forecasting::forecast(&request, terminal, &stop),
        Verb::Show(request) => verdicts::show(&request, terminal),
        Verb::Replay(request) => verdicts::replay(&request, terminal, &stop),
        Verb::Audit(request) => verdicts::audit(&request, terminal),
    }
}
