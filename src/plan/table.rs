//! TOML tables read key by key, with the line of everything.
//!
//! Apart from the meaning of a plan: this file knows what a table, a text, a whole number and an exact
//! number are, nothing of laws. A number is taken from the text as typed, never through a machine
//! float, and whatever is refused names its key and line.

use std::ops::RangeInclusive;

use toml::Spanned;
use toml::de::{DeTable, DeValue};

use crate::error::{Error, ErrorKind, Result};
use crate::number::Exact;

/// Longer texts are cut in messages.
const LONGEST_SHOWN: usize = 60;

/// `text` in quotation marks, cut if it is long, with control characters escaped.
pub(super) fn shown(text: &str) -> String {
    match text.char_indices().nth(LONGEST_SHOWN) {
        None => format!("{text:?}"),
        Some((end, _)) => format!("{:?} and so on", &text[..end]),
    }
}

/// The places at which the lines of a text end.
pub(super) struct Lines(Vec<usize>);

impl Lines {
    pub(super) fn of(text: &str) -> Self {
        Self(text.match_indices('\n').map(|(at, _)| at).collect())
    }

    /// The line, from 1, of the byte at `offset`.
    pub(super) fn at(&self, offset: usize) -> u64 {
        1 + self.0.partition_point(|end| *end < offset) as u64
    }
}

/// Reads a whole document and hands its root to `read`.
pub(super) fn document<T>(text: &str, read: impl FnOnce(Table<'_>) -> Result<T>) -> Result<T> {
    let lines = Lines::of(text);
    let root = DeTable::parse(text).map_err(|error| {
        let what = error.message().to_string();
        let fault = Error::from(ErrorKind::Syntax { format: "TOML", what });
        match error.span() {
            Some(span) => fault.at_line(lines.at(span.start)),
            None => fault,
        }
    })?;
    read(Table {
        lines: &lines,
        entries: root.get_ref(),
        line: 1,
    })
}

/// A table and the line on which it starts.
#[derive(Clone, Copy)]
pub(super) struct Table<'a> {
    lines: &'a Lines,
    entries: &'a DeTable<'a>,
    line: u64,
}

/// A value with its key.
#[derive(Clone, Copy)]
pub(super) struct Entry<'a> {
    lines: &'a Lines,
    key: &'a str,
    value: &'a Spanned<DeValue<'a>>,
}

impl<'a> Table<'a> {
    pub(super) fn line(&self) -> u64 {
        self.line
    }

    pub(super) fn is_empty(&self) -> bool {
        self.entries.is_empty()
    }

    /// Refuses the first key, in file order, that is not among `allowed`.
    pub(super) fn only(&self, allowed: &[&str]) -> Result<()> {
        let unknown = self
            .entries
            .keys()
            .filter(|key| !allowed.contains(&key.get_ref().as_ref()));
        match unknown.min_by_key(|key| key.span().start) {
            None => Ok(()),
            Some(key) => {
                let kind = ErrorKind::Unknown {
                    thing: "key",
                    found: key.get_ref().chars().take(LONGEST_SHOWN).collect(),
                    allowed: allowed.join(", "),
                };
                Err(Error::from(kind).at_line(self.lines.at(key.span().start)))
            }
        }
    }

    pub(super) fn get(&self, key: &str) -> Option<Entry<'a>> {
        let (key, value) = self.entries.get_key_value(key)?;
        Some(Entry {
            lines: self.lines,
            key: key.get_ref(),
            value,
        })
    }

    /// The value of a key that must be there; `expected` says what it is to be.
    pub(super) fn need(&self, key: &str, expected: &str) -> Result<Entry<'a>> {
        self.get(key)
            .ok_or_else(|| self.place(Error::missing(format!("key {key:?}"), expected)))
    }

    /// Names the line of the key that a fault names, or this table's line; not in a fault of another file.
    pub(super) fn place(&self, fault: Error) -> Error {
        if fault.location().path.is_some() {
            return fault;
        }
        let named = fault.location().field.as_deref().and_then(|key| self.get(key));
        fault.at_line(named.map_or(self.line, |entry| entry.line()))
    }
}

impl<'a> Entry<'a> {
    pub(super) fn line(&self) -> u64 {
        self.lines.at(self.value.span().start)
    }

    pub(super) fn key(&self) -> &'a str {
        self.key
    }

    /// Names this key and its line.
    pub(super) fn place(&self, fault: Error) -> Error {
        fault.at_field(self.key).at_line(self.line())
    }

    /// The fault of finding this value where something else is allowed.
    pub(super) fn wrong(&self, expected: impl std::fmt::Display) -> Error {
        let found = match self.value.get_ref() {
            DeValue::String(text) => shown(text),
            DeValue::Integer(number) => shown(&number.to_string()).replace('"', ""),
            DeValue::Float(number) => shown(number.as_str()).replace('"', ""),
            DeValue::Boolean(truth) => truth.to_string(),
            DeValue::Datetime(moment) => format!("the date or time {moment}"),
            DeValue::Array(items) if items.is_empty() => "an empty list".into(),
            DeValue::Array(_) => "a list".into(),
            DeValue::Table(_) => "a table".into(),
        };
        self.place(Error::value(found, expected))
    }

    pub(super) fn text(&self, expected: &str) -> Result<&'a str> {
        self.value.get_ref().as_str().ok_or_else(|| self.wrong(expected))
    }

    /// The word, if the value is a text.
    pub(super) fn word(&self) -> Option<&'a str> {
        self.value.get_ref().as_str()
    }

    pub(super) fn table(&self, expected: &str) -> Result<Table<'a>> {
        match self.value.get_ref() {
            DeValue::Table(entries) => Ok(Table {
                lines: self.lines,
                entries,
                line: self.line(),
            }),
            _ => Err(self.wrong(expected)),
        }
    }

    /// The items of a list, each under this key; `None` if the value is no list.
    pub(super) fn items(&self) -> Option<Vec<Entry<'a>>> {
        let items = self.value.get_ref().as_array()?;
        Some(items.iter().map(|value| Entry { value, ..*self }).collect())
    }

    /// A whole number in `range`, typed in decimal digits.
    pub(super) fn whole(&self, range: RangeInclusive<u64>) -> Result<u64> {
        let expected = || match *range.end() {
            u64::MAX => format!("a whole number of at least {}", range.start()),
            end => format!("a whole number from {} to {end}", range.start()),
        };
        let DeValue::Integer(number) = self.value.get_ref() else {
            return Err(self.wrong(expected()));
        };
        let number = (number.radix() == 10).then(|| number.as_str().parse::<u64>().ok());
        number
            .flatten()
            .filter(|number| range.contains(number))
            .ok_or_else(|| self.wrong(expected()))
    }

    /// The exact number as typed: a TOML integer or float, or a text such as `"1/3"`.
    pub(super) fn number(&self) -> Result<Exact> {
        let expected = "a decimal such as 0.44, or a fraction in quotation marks such as \"11/25\"";
        let text = match self.value.get_ref() {
            DeValue::Integer(number) if number.radix() == 10 => number.as_str(),
            DeValue::Float(number) => number.as_str(),
            DeValue::String(text) => text,
            _ => return Err(self.wrong(expected)),
        };
        Exact::parse(text).map_err(|error| match error.kind() {
            ErrorKind::Value { .. } => self.wrong(expected),
            _ => self.place(error),
        })
    }
}
