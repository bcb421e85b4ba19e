//! The one error type of the library: what is wrong and where.
//!
//! An `Error` means that a question could not be answered: a request that makes no sense, an
//! archive that cannot be read, a machine that failed. A check that was made and failed is no
//! error but a finding (see the module `audit`). Places are filled in on the way up, so that the
//! layer that notices a fault need not know the file it came from.

use std::{
    fmt,
    path::{Path, PathBuf},
};

use crate::quantity::{EnsembleIndex, SampleIndex};

/// What is wrong. Every kind has a stable code, shown in messages and in JSON.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum ErrorKind {
    // -- what a person or a record wrote --
    /// A text that its format (TOML, JSON, CSV) does not allow.
    #[error("not valid {format}: {what}")]
    Syntax {
        /// The format's name.
        format: &'static str,
        /// What the reader of that format says.
        what: String,
    },
    /// A key or a column that nobody knows.
    #[error("unknown {thing} {found:?}, allowed: {allowed}")]
    Unknown {
        /// What kind of name it is: "key", "law", "member" ...
        thing: &'static str,
        /// The name found.
        found: String,
        /// The names that are allowed.
        allowed: String,
    },
    /// A key, column, member or value that must be there and is not.
    #[error("{thing} is missing, expected {expected}")]
    Missing {
        /// What is missing.
        thing: String,
        /// What should stand there.
        expected: String,
    },
    /// A value that is not of the kind or in the range that is allowed.
    #[error("found {found}, expected {expected}")]
    Value {
        /// The value as it was found.
        found: String,
        /// What is allowed.
        expected: String,
    },
    /// Two things that exclude each other, or two of what must be one.
    #[error("{what}")]
    Conflict {
        /// Which two, and why they exclude each other.
        what: String,
    },
    /// More than this program takes in one request.
    #[error("{what}: found {found}, at most {limit}")]
    TooLarge {
        /// What is counted.
        what: String,
        /// The number found.
        found: String,
        /// The largest number allowed.
        limit: String,
    },
    /// The author asked for a clean checkout and it is not.
    #[error("{what}")]
    NotClean {
        /// What makes it unclean.
        what: String,
    },
    /// A file that would be overwritten.
    #[error("exists already")]
    Exists,

    /// Flags that the command line does not know.
    #[error("{what}")]
    Flags {
        /// What is wrong with them.
        what: String,
    },

    // -- archives --
    /// The bytes of the container make no sense.
    #[error("damaged: {what}")]
    Damaged {
        /// Found and expected.
        what: String,
    },
    /// A version or definition that this program does not know.
    #[error("not supported: {what}")]
    Unsupported {
        /// What was found and what is known.
        what: String,
    },
    /// An archive, ensemble or choice without anything to check.
    #[error("nothing to check: {what}")]
    Nothing {
        /// Why there is nothing.
        what: String,
    },

    // -- the machine --
    /// The operating system refused.
    #[error("{action}: {source}")]
    Io {
        /// What was attempted.
        action: &'static str,
        /// What the system said.
        source: std::io::Error,
    },
    /// A self-check of this program failed; the result must not be used.
    #[error("internal check failed: {what}")]
    SelfCheck {
        /// The check and what it found.
        what: String,
    },
    /// Ctrl-C or a termination signal.
    #[error("stopped on request")]
    Stopped,
}

/// How the program ends when an error reaches its top.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Class {
    /// A wrong request: exit code 2.
    Request,
    /// An archive that cannot be read: exit code 3.
    Archive,
    /// The machine failed: exit code 4.
    Machine,
    /// Stopped on request: exit code 5.
    Stopped,
}

/// Where it is wrong; what does not apply stays empty.
#[derive(Clone, Default, PartialEq, Eq, Debug)]
#[non_exhaustive]
pub struct Location {
    /// The file as the user named it.
    pub path: Option<PathBuf>,
    /// The archive member.
    pub member: Option<String>,
    /// The line of a text, from 1.
    pub line: Option<u64>,
    /// The ensemble.
    pub ensemble: Option<EnsembleIndex>,
    /// The sample.
    pub sample: Option<SampleIndex>,
    /// The key, field or column.
    pub field: Option<String>,
    /// The byte offset in the uncompressed archive.
    pub offset: Option<u64>,
}

/// A kind and a place.
#[derive(Debug)]
pub struct Error {
    kind: Box<ErrorKind>,
    at: Box<Location>,
}

/// The result of a library call.
pub type Result<T, E = Error> = std::result::Result<T, E>;

impl From<ErrorKind> for Error {
    fn from(kind: ErrorKind) -> Self {
        Self {
            kind: Box::new(kind),
            at: Box::default(),
        }
    }
}

impl Error {
    /// A value other than expected.
    pub fn value(found: impl fmt::Display, expected: impl fmt::Display) -> Self {
        ErrorKind::Value {
            found: found.to_string(),
            expected: expected.to_string(),
        }
        .into()
    }

    /// Bytes that make no sense.
    pub fn damaged(what: impl fmt::Display) -> Self {
        ErrorKind::Damaged { what: what.to_string() }.into()
    }

    /// Two things that exclude each other.
    pub fn conflict(what: impl fmt::Display) -> Self {
        ErrorKind::Conflict { what: what.to_string() }.into()
    }

    /// Something that must be there and is not.
    pub fn missing(thing: impl fmt::Display, expected: impl fmt::Display) -> Self {
        ErrorKind::Missing {
            thing: thing.to_string(),
            expected: expected.to_string(),
        }
        .into()
    }

    /// More than is taken.
    pub fn too_large(what: impl fmt::Display, found: impl fmt::Display, limit: impl fmt::Display) -> Self {
        ErrorKind::TooLarge {
            what: what.to_string(),
            found: found.to_string(),
            limit: limit.to_string(),
        }
        .into()
    }

    /// A refusal of the operating system.
    pub fn io(action: &'static str, source: std::io::Error) -> Self {
        ErrorKind::Io { action, source }.into()
    }

    /// What is wrong.
    pub fn kind(&self) -> &ErrorKind {
        &self.kind
    }

    /// Where it is wrong.
    pub fn location(&self) -> &Location {
        &self.at
    }

    /// Names the file, unless a deeper layer has named one.
    #[must_use]
    pub fn in_file(mut self, path: &Path) -> Self {
        self.at.path.get_or_insert_with(|| path.to_path_buf());
        self
    }

    /// Names the archive member, unless a deeper layer has named one.
    #[must_use]
    pub fn in_member(mut self, member: &str) -> Self {
        self.at.member.get_or_insert_with(|| member.to_string());
        self
    }

    /// Names the line, from 1.
    #[must_use]
    pub fn at_line(mut self, line: u64) -> Self {
        self.at.line.get_or_insert(line);
        self
    }

    /// Names the ensemble.
    #[must_use]
    pub fn at_ensemble(mut self, ensemble: EnsembleIndex) -> Self {
        self.at.ensemble.get_or_insert(ensemble);
        self
    }

    /// Names the sample.
    #[must_use]
    pub fn at_sample(mut self, sample: SampleIndex) -> Self {
        self.at.sample.get_or_insert(sample);
        self
    }

    /// Names the key, field or column.
    #[must_use]
    pub fn at_field(mut self, field: impl fmt::Display) -> Self {
        self.at.field.get_or_insert_with(|| field.to_string());
        self
    }

    /// Names the byte offset in the uncompressed archive.
    #[must_use]
    pub fn at_offset(mut self, offset: u64) -> Self {
        self.at.offset.get_or_insert(offset);
        self
    }

    /// The stable code of this error, such as `request.value` or `archive.damaged`.
    pub fn code(&self) -> &'static str {
        let in_archive = self.at.member.is_some();
        match (&*self.kind, in_archive) {
            (ErrorKind::Syntax { .. }, false) => "request.syntax",
            (ErrorKind::Syntax { .. }, true) => "archive.syntax",
            (ErrorKind::Unknown { .. }, false) => "request.unknown",
            (ErrorKind::Unknown { .. }, true) => "archive.unknown",
            (ErrorKind::Missing { .. }, false) => "request.missing",
            (ErrorKind::Missing { .. }, true) => "archive.missing",
            (ErrorKind::Value { .. }, false) => "request.value",
            (ErrorKind::Value { .. }, true) => "archive.value",
            (ErrorKind::Conflict { .. }, false) => "request.conflict",
            (ErrorKind::Conflict { .. }, true) => "archive.conflict",
            (ErrorKind::TooLarge { .. }, false) => "request.too-large",
            (ErrorKind::TooLarge { .. }, true) => "archive.too-large",
            (ErrorKind::NotClean { .. }, _) => "request.not-clean",
            (ErrorKind::Exists, _) => "request.exists",
            (ErrorKind::Flags { .. }, _) => "request.flags",
            (ErrorKind::Damaged { .. }, _) => "archive.damaged",
            (ErrorKind::Unsupported { .. }, _) => "archive.unsupported",
            (ErrorKind::Nothing { .. }, _) => "archive.nothing",
            (ErrorKind::Io { .. }, _) => "machine.io",
            (ErrorKind::SelfCheck { .. }, _) => "machine.self-check",
            (ErrorKind::Stopped, _) => "stopped",
        }
    }

    /// How the program should end.
    pub fn class(&self) -> Class {
        match self.code().split('.').next() {
            Some("request") => Class::Request,
            Some("archive") => Class::Archive,
            Some("stopped") => Class::Stopped,
            _ => Class::Machine,
        }
    }

    /// One line of advice, where there is any to give.
    pub fn help(&self) -> Option<&'static str> {
        Some(match &*self.kind {
            ErrorKind::Exists => "choose another name with -o, or pass --force to replace it",
            ErrorKind::Unsupported { .. } => "use a program version that knows it; nothing was checked",
            ErrorKind::Damaged { .. } => {
                "fetch the file again and compare its size and digest with the source; nothing was checked"
            }
            ErrorKind::NotClean { .. } => "commit or remove the changes, or leave out --require-clean",
            ErrorKind::Nothing { .. } => "nothing was checked, so nothing is confirmed",
            ErrorKind::Stopped => "nothing was written; the same plan with the same seed draws the same samples",
            ErrorKind::SelfCheck { .. } => "this is a fault of the program or the machine: do not use the result",
            _ => return None,
        })
    }
}

impl fmt::Display for Location {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let mut parts = Vec::new();
        if let Some(path) = &self.path {
            parts.push(path.display().to_string());
        }
        parts.extend(self.member.clone());
        parts.extend(self.line.map(|line| format!("line {line}")));
        parts.extend(self.ensemble.map(|ensemble| format!("ensemble {ensemble}")));
        parts.extend(self.sample.map(|sample| format!("sample {sample}")));
        parts.extend(self.field.clone());
        parts.extend(
            self.offset
                .map(|offset| format!("at byte {offset} of the uncompressed archive")),
        );
        f.write_str(&parts.join(": "))
    }
}

impl fmt::Display for Error {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        if *self.at != Location::default() {
            write!(f, "{}: ", self.at)?;
        }
        write!(f, "{} [{}]", self.kind, self.code())
    }
}

impl std::error::Error for Error {}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_message_says_where_what_and_which_code() {
        let error = Error::value(4096, "at most 2048")
            .at_field("coupling_time")
            .at_sample(SampleIndex(41))
            .in_member("ensembles/0003/samples.csv")
            .in_member("a later layer does not rename it")
            .in_file(Path::new("run.tar.zst"));
        assert_eq!(
            error.to_string(),
            "run.tar.zst: ensembles/0003/samples.csv: sample 41: coupling_time: found 4096, expected at most 2048 [archive.value]"
        );
        assert_eq!(error.class(), Class::Archive);
        assert_eq!(Error::value(0, "at least 1").class(), Class::Request);
    }
}
