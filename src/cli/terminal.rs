//! The only file that prints: what the program tells a person, or another program.
//!
//! Apart, so that one place knows whether anybody watches and how output can fail. In text mode,
//! answers go to standard output and notes to standard error; in JSON mode, standard output holds
//! one object and nothing else. A reader that closes standard output early is no failure: what
//! follows is dropped and the work goes on to its end, so that no file is lost for a closed pager.
//! Control characters in a text (a stranger's archive may hold any) are made visible.

mod lines;
mod progress;
mod table;

pub use self::lines::wrapped;
pub use self::progress::{Progress, Unit};
pub use self::table::{Align, Table};

use std::ffi::OsStr;
use std::fmt::Write as _;
use std::io::{self, IsTerminal as _, Write};
use std::sync::{Mutex, MutexGuard, PoisonError};

use pastproof::error::{Error, ErrorKind, Result};
use serde::Serialize;

/// For whom standard output is.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Output {
    /// For a person: lines and tables.
    Text,
    /// For a program: one JSON object.
    Json,
}

/// How a text is set off where colours are shown. The words alone must say it too.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Tone {
    /// As it is.
    Plain,
    /// Bold.
    Strong,
    /// Green: a yes.
    Good,
    /// Red: a no or an error.
    Bad,
}

/// What a stream can show.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
struct Shows {
    terminal: bool,
    colours: bool,
}

struct Stream {
    writer: Box<dyn Write + Send>,
    shows: Shows,
}

struct Streams {
    out: Stream,
    err: Stream,
    /// The reader of `out` has gone.
    closed: bool,
    /// The one JSON object has been written.
    answered: bool,
    /// The bar on the terminal; it is lifted while something else is written.
    bar: Option<indicatif::ProgressBar>,
}

/// Both output streams of the program.
pub struct Terminal {
    output: Output,
    streams: Mutex<Streams>,
}

impl Terminal {
    /// The streams of this process.
    pub fn of_process(output: Output) -> Self {
        let (no_colour, term) = (std::env::var_os("NO_COLOR"), std::env::var_os("TERM"));
        let stream = |writer, terminal| Stream {
            writer,
            shows: shows(terminal, no_colour.as_deref(), term.as_deref()),
        };
        Self::of(
            output,
            stream(Box::new(io::stdout()), io::stdout().is_terminal()),
            stream(Box::new(io::stderr()), io::stderr().is_terminal()),
        )
    }

    fn of(output: Output, out: Stream, err: Stream) -> Self {
        let streams = Streams {
            out,
            err,
            closed: false,
            answered: false,
            bar: None,
        };
        Self {
            output,
            streams: Mutex::new(streams),
        }
    }

    /// Writes a line of the answer; in JSON mode nothing, for the object says it.
    ///
    /// # Errors
    /// [`ErrorKind::Io`] if standard output takes it not, though somebody reads.
    pub fn line(&self, tone: Tone, text: &str) -> Result<()> {
        match self.output {
            Output::Text => self.streams().answer(tone, text),
            Output::Json => Ok(()),
        }
    }

    /// Writes a table of the answer; in JSON mode nothing.
    ///
    /// # Errors
    /// As [`Terminal::line`].
    pub fn table(&self, table: &Table) -> Result<()> {
        self.line(Tone::Plain, &table.to_string())
    }

    /// Writes the one object of JSON mode; in text mode nothing.
    ///
    /// # Errors
    /// As [`Terminal::line`]; [`ErrorKind::SelfCheck`] at a second object or if it cannot be
    /// written as JSON.
    pub fn object<T: Serialize>(&self, object: &T) -> Result<()> {
        if self.output == Output::Text {
            return Ok(());
        }
        let fault = |what: String| Error::from(ErrorKind::SelfCheck { what });
        let text = serde_json::to_string(object).map_err(|error| fault(format!("an answer is not JSON: {error}")))?;
        let mut streams = self.streams();
        if streams.answered {
            return Err(fault("a second JSON object for one answer".to_string()));
        }
        streams.answered = true;
        streams.answer(Tone::Plain, &text)
    }

    /// Writes a line beside the answer, to standard error. Where that fails, nobody can be told.
    pub fn note(&self, tone: Tone, text: &str) {
        self.streams().aside(tone, text);
    }

    /// Writes an error to standard error, and in JSON mode as the object, unless there is one.
    pub fn error(&self, error: &Error) {
        let mut streams = self.streams();
        streams.aside(Tone::Bad, &format!("pastproof: {error}"));
        if let Some(help) = error.help() {
            streams.aside(Tone::Plain, &format!("help: {help}"));
        }
        drop(streams);
        if self.output == Output::Json && !self.streams().answered {
            let fault = Fault {
                code: error.code(),
                message: error.to_string(),
                help: error.help(),
            };
            // the exit code tells of the error already
            let _ = self.object(&Answer { error: fault });
        }
    }

    /// Starts to show how far a task of so many units is.
    pub fn progress(&self, total: u64, unit: Unit) -> Progress<'_> {
        let terminal = self.streams().err.shows.terminal;
        let progress = Progress::new(self, total, unit, terminal);
        self.streams().bar = progress.bar().cloned();
        progress
    }

    fn progress_ended(&self) {
        self.streams().bar = None;
    }

    fn streams(&self) -> MutexGuard<'_, Streams> {
        self.streams.lock().unwrap_or_else(PoisonError::into_inner)
    }
}

#[derive(Serialize)]
struct Answer {
    error: Fault,
}

#[derive(Serialize)]
struct Fault {
    code: &'static str,
    message: String,
    help: Option<&'static str>,
}

impl Streams {
    fn answer(&mut self, tone: Tone, text: &str) -> Result<()> {
        if self.closed {
            return Ok(());
        }
        let out = &mut self.out;
        match lifted(self.bar.as_ref(), || out.write(tone, text)) {
            Err(gone) if gone.kind() == io::ErrorKind::BrokenPipe => self.closed = true,
            other => other.map_err(|refusal| Error::io("write to standard output", refusal))?,
        }
        Ok(())
    }

    fn aside(&mut self, tone: Tone, text: &str) {
        let err = &mut self.err;
        let _ = lifted(self.bar.as_ref(), || err.write(tone, text));
    }
}

fn lifted<T>(bar: Option<&indicatif::ProgressBar>, write: impl FnOnce() -> T) -> T {
    match bar {
        Some(bar) => bar.suspend(write),
        None => write(),
    }
}

impl Stream {
    /// Writes whole lines at once and does not hold them back.
    fn write(&mut self, tone: Tone, text: &str) -> io::Result<()> {
        let mut line = painted(self.shows.colours, tone, &visible(text));
        line.push('\n');
        self.writer.write_all(line.as_bytes())?;
        self.writer.flush()
    }
}

/// Colours only for a person who has not refused them (<https://no-color.org>).
fn shows(terminal: bool, no_colour: Option<&OsStr>, term: Option<&OsStr>) -> Shows {
    let refused = no_colour.is_some_and(|value| !value.is_empty()) || term.is_some_and(|term| term == "dumb");
    Shows {
        terminal,
        colours: terminal && !refused,
    }
}

fn painted(colours: bool, tone: Tone, text: &str) -> String {
    // ECMA-48, select graphic rendition
    match tone {
        _ if !colours => text.to_string(),
        Tone::Plain => text.to_string(),
        Tone::Strong => format!("\x1b[1m{text}\x1b[0m"),
        Tone::Good => format!("\x1b[32m{text}\x1b[0m"),
        Tone::Bad => format!("\x1b[31m{text}\x1b[0m"),
    }
}

/// `text` with everything that steers a terminal, or turns the order of letters, written out.
fn visible(text: &str) -> String {
    let mut shown = String::with_capacity(text.len());
    for letter in text.chars() {
        let turns = matches!(letter, '\u{202a}'..='\u{202e}' | '\u{2066}'..='\u{2069}' | '\u{200e}' | '\u{200f}');
        if turns || (letter.is_control() && letter != '\n') {
            let _ = write!(shown, "{}", letter.escape_default());
        } else {
            shown.push(letter);
        }
    }
    shown
}

#[cfg(test)]
mod tests;
