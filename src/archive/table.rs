//! `samples.csv`: what is recorded of every sample, one row each, and the tree leaf of a row.
//!
//! Apart because rows are read in three ways that must agree: all in order, one by its number,
//! and one line by itself. There is one way to write a row, and reading takes no other.
//!
//! The first line is `index,status,depth,merged_at,row,hash` followed by the observables. Lines
//! end with a line feed, the last one too; nothing is quoted; no line is longer than 4096 bytes.
//! Integers have no sign and no leading zeros.
//!
//! - `index`: the number of the sample, 0, 1, 2 ... without gaps
//! - `status`: `exact` or `unfinished`
//! - `depth`: from 0 to 62
//! - `merged_at`: below 2^depth; 0 if unfinished
//! - `row`: the number of the sample among the exact ones, which is its row in the array of
//!   samples; empty if unfinished
//! - `hash`: 64 lower-case hexadecimal digits
//! - observables: an integer (`36`, `-4`) or a fraction in lowest terms (`-1/2`); empty if unfinished
//!
//! A leaf is 50 bytes, little-endian: u64 index, u8 status (0 exact, 1 unfinished), u8 depth, u64
//! merged_at, 32 bytes hash.

use std::io::{BufRead, Read as _, Write};

use dashu_int::UBig;
use dashu_int::ops::Gcd as _;

use crate::error::{Error, ErrorKind, Result};
use crate::quantity::Digest;
use crate::quantity::SampleIndex;

/// Longest line in bytes, its line feed not counted.
pub const LINE_BYTES: usize = 4096;

/// Bytes of a leaf.
pub const LEAF_BYTES: usize = 50;

/// Largest depth there is (stream.md: a run's depth limit is at most 62).
const DEPTH_LIMIT: u8 = 62;

const FIXED_COLUMNS: [&str; 6] = ["index", "status", "depth", "merged_at", "row", "hash"];

/// Below so many bytes a search reads all that is left.
const SEARCH_END: u64 = 64 << 10;

/// What became of a sample.
#[derive(Clone, PartialEq, Eq, Debug)]
pub enum Outcome {
    /// The bounds met.
    Exact {
        /// The number of the sample among the exact ones.
        row: u64,
        /// The observables in the order of the columns.
        observables: Vec<String>,
    },
    /// The bounds did not meet within the depth limit.
    Unfinished,
}

/// A line of the table.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Row {
    /// The number of the sample in its ensemble.
    pub index: SampleIndex,
    /// What became of it.
    pub outcome: Outcome,
    /// The attempt that met, or the depth limit.
    pub depth: u8,
    /// How far back the bounds are equal.
    pub merged_at: u64,
    /// The hash of the sample, or of the bounds of an unfinished one.
    pub hash: Digest,
}

impl Row {
    /// The bytes that stand for this sample in the tree.
    pub fn leaf(&self) -> [u8; LEAF_BYTES] {
        let status = match self.outcome {
            Outcome::Exact { .. } => 0,
            Outcome::Unfinished => 1,
        };
        let mut leaf = [0; LEAF_BYTES];
        leaf[..8].copy_from_slice(&self.index.0.to_le_bytes());
        leaf[8] = status;
        leaf[9] = self.depth;
        leaf[10..18].copy_from_slice(&self.merged_at.to_le_bytes());
        leaf[18..].copy_from_slice(&self.hash.0);
        leaf
    }

    /// The number of the sample among the exact ones, if it is one of them.
    pub fn exact_row(&self) -> Option<u64> {
        match self.outcome {
            Outcome::Exact { row, .. } => Some(row),
            Outcome::Unfinished => None,
        }
    }

    /// The observables, none for an unfinished sample.
    pub fn observables(&self) -> &[String] {
        match &self.outcome {
            Outcome::Exact { observables, .. } => observables,
            Outcome::Unfinished => &[],
        }
    }

    /// The ranges of the numbers, the same for writing and reading.
    fn check(&self) -> Result<()> {
        if self.depth > DEPTH_LIMIT {
            return Err(Error::value(self.depth, format!("at most {DEPTH_LIMIT}")).at_field("depth"));
        }
        let (below, row) = match self.outcome {
            Outcome::Exact { row, .. } => (1 << self.depth, row),
            Outcome::Unfinished => (1, 0),
        };
        if self.merged_at >= below {
            return Err(Error::value(self.merged_at, format!("below {below}")).at_field("merged_at"));
        }
        if row > self.index.0 {
            return Err(Error::value(row, format!("at most the index {}", self.index)).at_field("row"));
        }
        Ok(())
    }
}

/// The columns of a table: the fixed ones and the observables.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Columns {
    observables: Vec<String>,
}

impl Columns {
    /// The fixed columns and these observables.
    ///
    /// # Errors
    /// `Value` for a name that is not of lower-case letters, digits and `_` with a letter first,
    /// `Conflict` for one that stands twice, `TooLarge` if the first line would be too long.
    pub fn new(observables: &[&str]) -> Result<Self> {
        for (at, name) in observables.iter().enumerate() {
            let allowed = |byte: u8| byte.is_ascii_lowercase() || byte.is_ascii_digit() || byte == b'_';
            if !name.starts_with(|first: char| first.is_ascii_lowercase()) || !name.bytes().all(allowed) {
                return Err(Error::value(
                    format!("column {name:?}"),
                    "lower-case letters, digits and _, a letter first",
                ));
            }
            if FIXED_COLUMNS.contains(name) || observables[..at].contains(name) {
                return Err(Error::conflict(format!("column {name:?} stands twice")));
            }
        }
        let columns = Self {
            observables: observables.iter().map(ToString::to_string).collect(),
        };
        let length = columns.first_line().len() - 1;
        if length > LINE_BYTES {
            return Err(Error::too_large("bytes of the first line", length, LINE_BYTES));
        }
        Ok(columns)
    }

    /// The names of the observables.
    pub fn observables(&self) -> &[String] {
        &self.observables
    }

    /// The first line, with its line feed.
    pub fn first_line(&self) -> String {
        let names: Vec<_> = FIXED_COLUMNS
            .into_iter()
            .chain(self.observables.iter().map(String::as_str))
            .collect();
        names.join(",") + "\n"
    }

    /// Writes a row with its line feed.
    ///
    /// # Errors
    /// `Value` for what [`Columns::parse_row`] would refuse, `TooLarge` for a line that is too long, `Io` if the sink
    /// fails.
    pub fn write_row(&self, row: &Row, sink: &mut impl Write) -> Result<()> {
        let placed = |error: Error| error.at_sample(row.index);
        row.check().map_err(placed)?;
        let (status, number, observables) = match &row.outcome {
            Outcome::Exact { row, observables } => ("exact", row.to_string(), observables.clone()),
            Outcome::Unfinished => ("unfinished", String::new(), vec![String::new(); self.observables.len()]),
        };
        if observables.len() != self.observables.len() {
            let expected = self.observables.len();
            return Err(placed(Error::value(
                format!("{} observables", observables.len()),
                expected,
            )));
        }
        if let Outcome::Exact { .. } = row.outcome {
            for (name, text) in self.observables.iter().zip(&observables) {
                check_rational(text).map_err(|error| placed(error.at_field(name)))?;
            }
        }
        let mut line = format!(
            "{},{status},{},{},{number},{}",
            row.index, row.depth, row.merged_at, row.hash
        );
        for text in &observables {
            line.push(',');
            line.push_str(text);
        }
        if line.len() > LINE_BYTES {
            return Err(placed(Error::too_large("bytes of a line", line.len(), LINE_BYTES)));
        }
        line.push('\n');
        sink.write_all(line.as_bytes())
            .map_err(|source| Error::io("write the table", source))
    }

    /// Reads a line without its line feed.
    ///
    /// # Errors
    /// `Syntax` or `Value` for a line that [`Columns::write_row`] does not write, with its column.
    pub fn parse_row(&self, line: &[u8]) -> Result<Row> {
        let line = std::str::from_utf8(line)
            .ok()
            .filter(|line| line.is_ascii() && line.len() <= LINE_BYTES)
            .ok_or_else(|| syntax("a line beyond ASCII or 4096 bytes"))?;
        let fields: Vec<_> = line.split(',').collect();
        let expected = FIXED_COLUMNS.len() + self.observables.len();
        if fields.len() != expected {
            return Err(syntax(format!("found {} columns, expected {expected}", fields.len())));
        }
        let integer = |at: usize| parse_integer(fields[at]).map_err(|error| error.at_field(FIXED_COLUMNS[at]));
        let index = SampleIndex(integer(0)?);
        let depth = integer(2)?;
        let depth =
            u8::try_from(depth).map_err(|_| Error::value(depth, format!("at most {DEPTH_LIMIT}")).at_field("depth"))?;
        let merged_at = integer(3)?;
        let observables = &fields[FIXED_COLUMNS.len()..];
        let outcome = match fields[1] {
            "exact" => {
                for (name, text) in self.observables.iter().zip(observables) {
                    check_rational(text).map_err(|error| error.at_field(name))?;
                }
                Outcome::Exact {
                    row: integer(4)?,
                    observables: observables.iter().map(ToString::to_string).collect(),
                }
            }
            "unfinished" => {
                let names = self.observables.iter().map(String::as_str);
                for (name, text) in names.zip(observables).chain([("row", &fields[4])]) {
                    if !text.is_empty() {
                        return Err(Error::value(format!("{text:?}"), "nothing, as it is unfinished").at_field(name));
                    }
                }
                Outcome::Unfinished
            }
            other => return Err(Error::value(format!("{other:?}"), "exact or unfinished").at_field("status")),
        };
        let hash = Digest::parse(fields[5]).ok_or_else(|| {
            Error::value(format!("{:?}", fields[5]), "64 lower-case hexadecimal digits").at_field("hash")
        })?;
        let row = Row {
            index,
            outcome,
            depth,
            merged_at,
            hash,
        };
        row.check()?;
        Ok(row)
    }

    /// Reads a whole table in order; see [`Rows`].
    ///
    /// # Errors
    /// `Syntax` if the first line is another, `Io` if `source` fails.
    pub fn rows<B: BufRead>(&self, source: B) -> Result<Rows<'_, B>> {
        let mut rows = Rows {
            columns: self,
            source,
            line: Vec::new(),
            line_number: 0,
            next_index: 0,
            next_row: 0,
            ended: false,
        };
        if !rows.next_line()? {
            return Err(syntax("the first line is missing").at_line(1));
        }
        self.check_first_line(&rows.line)?;
        Ok(rows)
    }

    /// The row of one sample, found by bisection; `None` if the table ends before it.
    ///
    /// `read_range` gives bytes of the table from a start on, so many as asked; `length` is that of the table. A table
    /// of n bytes takes about log2(n / 64 KiB) + 2 reads, none above 64 KiB. Only what is read is checked.
    ///
    /// # Errors
    /// `Syntax`, `Value` or `Damaged` for what is not a table, and any error of `read_range`.
    pub fn find_row(
        &self,
        index: SampleIndex,
        length: u64,
        mut read_range: impl FnMut(u64, u64) -> Result<Vec<u8>>,
    ) -> Result<Option<Row>> {
        let mut read = |start: u64, end: u64| {
            let bytes = read_range(start, end - start)?;
            if bytes.len() as u64 != end - start {
                let expected = format!("{} bytes", end - start);
                return Err(Error::value(format!("{} bytes", bytes.len()), expected));
            }
            Ok(bytes)
        };
        let first_line = self.first_line();
        let mut low = first_line.len() as u64;
        let found = read(0, low.min(length))?;
        self.check_first_line(found.strip_suffix(b"\n").unwrap_or(&found))?;
        if low > length {
            return Err(syntax("the first line has no line feed").at_line(1));
        }
        let mut high = length;
        // a line begins at `low`, and `high` is the end or a line begins there; the numbers of both, as far as known
        let (mut least, mut beyond) = (0, None);
        while high - low > SEARCH_END {
            let middle = low + (high - low) / 2;
            // from anywhere in a line, two longest lines hold one whole line
            let window = read(middle, middle + 2 * (LINE_BYTES as u64 + 1))?;
            let mut lines = window.split(|&byte| byte == b'\n');
            let skipped = lines.next().map_or(0, <[u8]>::len);
            let (Some(line), Some(_)) = (lines.next(), lines.next()) else {
                return Err(syntax(format!(
                    "a line near byte {middle} is longer than {LINE_BYTES} bytes"
                )));
            };
            let row = self.parse_row(line)?;
            if row.index.0 < least || beyond.is_some_and(|beyond| row.index.0 >= beyond) {
                return Err(out_of_order(&row, least));
            }
            let start = middle + skipped as u64 + 1;
            if row.index == index {
                return Ok(Some(row));
            }
            if row.index < index {
                (low, least) = (start, row.index.0);
            } else {
                (high, beyond) = (start, Some(row.index.0));
            }
        }
        let mut due = least;
        for line in read(low, high)?.split_inclusive(|&byte| byte == b'\n') {
            let line = line
                .strip_suffix(b"\n")
                .ok_or_else(|| syntax("the last line has no line feed"))?;
            let row = self.parse_row(line)?;
            if row.index.0 != due {
                return Err(out_of_order(&row, due));
            }
            if row.index == index {
                return Ok(Some(row));
            }
            due = due.saturating_add(1);
        }
        match beyond {
            // the lines before `high` must lead to the number there, or the sample was left out
            Some(beyond) if due != beyond => Err(Error::damaged(format!(
                "the table goes on with sample {beyond}, expected {due}"
            ))),
            _ => Ok(None),
        }
    }

    fn check_first_line(&self, line: &[u8]) -> Result<()> {
        let expected = self.first_line();
        if line != expected.trim_end().as_bytes() {
            let found = line.escape_ascii();
            return Err(syntax(format!(
                "first line: found \"{found}\", expected {:?}",
                expected.trim_end()
            ))
            .at_line(1));
        }
        Ok(())
    }
}

/// All rows of a table in order, read one by one: indices without gaps from 0, row numbers without
/// gaps from 0, lines of bounded length that all end with a line feed. After an error it ends.
pub struct Rows<'a, B> {
    columns: &'a Columns,
    source: B,
    line: Vec<u8>,
    line_number: u64,
    next_index: u64,
    next_row: u64,
    ended: bool,
}

impl<B: BufRead> Rows<'_, B> {
    /// The number of exact samples so far.
    pub fn exact(&self) -> u64 {
        self.next_row
    }

    /// Reads a line into `line`, without its line feed; false at the end.
    fn next_line(&mut self) -> Result<bool> {
        self.line.clear();
        self.line_number += 1;
        let placed = |error: Error| error.at_line(self.line_number);
        (&mut self.source)
            .take(LINE_BYTES as u64 + 1)
            .read_until(b'\n', &mut self.line)
            .map_err(|source| placed(Error::io("read the table", source)))?;
        match self.line.pop() {
            None => Ok(false),
            Some(b'\n') => Ok(true),
            Some(_) if self.line.len() == LINE_BYTES => {
                Err(placed(Error::too_large("bytes of a line", "more", LINE_BYTES)))
            }
            Some(_) => Err(placed(syntax("the last line has no line feed"))),
        }
    }

    fn next_row(&mut self) -> Result<Option<Row>> {
        if !self.next_line()? {
            return Ok(None);
        }
        let placed = |error: Error| error.at_line(self.line_number);
        let row = self.columns.parse_row(&self.line).map_err(placed)?;
        if row.index.0 != self.next_index {
            return Err(placed(out_of_order(&row, self.next_index)));
        }
        self.next_index += 1;
        if let Outcome::Exact { row: number, .. } = row.outcome {
            if number != self.next_row {
                return Err(placed(
                    Error::value(number, self.next_row).at_field("row").at_sample(row.index),
                ));
            }
            self.next_row += 1;
        }
        Ok(Some(row))
    }
}

impl<B: BufRead> Iterator for Rows<'_, B> {
    type Item = Result<Row>;

    fn next(&mut self) -> Option<Self::Item> {
        if self.ended {
            return None;
        }
        let row = self.next_row().transpose();
        self.ended = !matches!(row, Some(Ok(_)));
        row
    }
}

fn syntax(what: impl Into<String>) -> Error {
    ErrorKind::Syntax {
        format: "table",
        what: what.into(),
    }
    .into()
}

fn out_of_order(row: &Row, expected: u64) -> Error {
    Error::value(row.index, expected).at_field("index")
}

/// An unsigned integer in its one form.
fn parse_integer(text: &str) -> Result<u64> {
    canonical_digits(text)
        .then(|| text.parse().ok())
        .flatten()
        .ok_or_else(|| {
            Error::value(
                format!("{text:?}"),
                "an integer of 64 bits without sign and leading zeros",
            )
        })
}

fn canonical_digits(text: &str) -> bool {
    !text.is_empty() && text.bytes().all(|byte| byte.is_ascii_digit()) && (text == "0" || !text.starts_with('0'))
}

/// Refuses all but an integer or a fraction in lowest terms with a denominator above 1.
fn check_rational(text: &str) -> Result<()> {
    let unsigned = text.strip_prefix('-').unwrap_or(text);
    let lawful = unsigned != "0" || text == "0";
    let lawful = lawful
        && match unsigned.split_once('/') {
            None => canonical_digits(unsigned),
            Some((numerator, denominator)) => {
                canonical_digits(numerator)
                    && canonical_digits(denominator)
                    && !["0", "1"].contains(&denominator)
                    && coprime(numerator, denominator)
            }
        };
    if !lawful {
        return Err(Error::value(
            format!("{text:?}"),
            "an integer or a fraction in lowest terms",
        ));
    }
    Ok(())
}

fn coprime(first: &str, second: &str) -> bool {
    let number = |text| UBig::from_str_radix(text, 10).ok();
    match (number(first), number(second)) {
        (Some(first), Some(second)) => (&first).gcd(&second) == UBig::ONE,
        _ => false,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const HASH: &str = "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad";

    fn columns() -> Columns {
        Columns::new(&["pair_sum", "magnetisation"]).unwrap()
    }

    /// Every seventh sample unfinished.
    fn row(index: u64) -> Row {
        let depth = (index % 20) as u8;
        let exact = index % 7 != 3;
        let before = index - (index + 3) / 7;
        Row {
            index: SampleIndex(index),
            outcome: if exact {
                let observables = vec![(index as i64 - 50).to_string(), format!("-{}/2", 2 * index + 1)];
                Outcome::Exact {
                    row: before,
                    observables,
                }
            } else {
                Outcome::Unfinished
            },
            depth,
            merged_at: if exact { (1 << depth) - 1 } else { 0 },
            hash: Digest::of(&index.to_le_bytes()),
        }
    }

    fn table(rows: u64) -> Vec<u8> {
        let columns = columns();
        let mut table = columns.first_line().into_bytes();
        (0..rows).for_each(|index| columns.write_row(&row(index), &mut table).unwrap());
        table
    }

    fn read(table: &[u8]) -> Result<Vec<Row>> {
        columns().rows(table)?.collect()
    }

    #[test]
    fn text_of_rows() {
        let mut text = Vec::new();
        let exact = Row {
            index: SampleIndex(5),
            outcome: Outcome::Exact {
                row: 4,
                observables: vec!["36".into(), "-1/2".into()],
            },
            depth: 3,
            merged_at: 7,
            hash: Digest::of(b"abc"),
        };
        let unfinished = Row {
            index: SampleIndex(6),
            outcome: Outcome::Unfinished,
            depth: 62,
            merged_at: 0,
            ..exact.clone()
        };
        let columns = columns();
        columns.write_row(&exact, &mut text).unwrap();
        columns.write_row(&unfinished, &mut text).unwrap();
        assert_eq!(
            String::from_utf8(text).unwrap(),
            format!("5,exact,3,7,4,{HASH},36,-1/2\n6,unfinished,62,0,,{HASH},,\n")
        );
        assert_eq!(
            columns.first_line(),
            "index,status,depth,merged_at,row,hash,pair_sum,magnetisation\n"
        );
        // the layout of the module comment, byte by byte
        let mut leaf = vec![5, 0, 0, 0, 0, 0, 0, 0, 0, 3, 7, 0, 0, 0, 0, 0, 0, 0];
        leaf.extend(Digest::of(b"abc").0);
        assert_eq!(exact.leaf()[..], leaf);
        leaf[0] = 6;
        leaf[8..11].copy_from_slice(&[1, 62, 0]);
        assert_eq!(unfinished.leaf()[..], leaf);
    }

    #[test]
    fn rows_make_the_round_trip() {
        for count in [0, 1, 2, 3, 4, 100] {
            let rows: Vec<_> = (0..count).map(row).collect();
            assert_eq!(read(&table(count)).unwrap(), rows);
        }
        let table = table(100);
        let columns = columns();
        let mut rows = columns.rows(&table[..]).unwrap();
        assert!(rows.by_ref().all(|row| row.is_ok()));
        assert_eq!(rows.exact(), 86);
        // a table without observables
        let bare = Columns::new(&[]).unwrap();
        let line = format!("0,exact,0,0,0,{HASH}");
        assert_eq!(bare.parse_row(line.as_bytes()).unwrap().hash, Digest::of(b"abc"));
    }

    #[test]
    fn other_lines_are_refused() {
        let columns = columns();
        let good = [
            format!("9,exact,3,7,4,{HASH},36,-1/2"),
            format!("9,unfinished,3,0,,{HASH},,"),
            format!("18446744073709551615,exact,62,4611686018427387903,18446744073709551615,{HASH},0,0"),
        ];
        for line in &good {
            columns.parse_row(line.as_bytes()).unwrap();
        }
        for (line, field, bad) in [
            (
                0,
                0,
                [
                    "",
                    "09",
                    "+9",
                    "-9",
                    " 9",
                    "9 ",
                    "0x9",
                    "9.0",
                    "18446744073709551616",
                    "\"9\"",
                ]
                .as_slice(),
            ),
            (0, 1, &["", "Exact", "exact ", "failed", "0"]),
            (0, 2, &["", "03", "63", "255", "256", "-1"]),
            (0, 3, &["", "8", "07", "-0"]),
            (0, 4, &["", "10", "04"]),
            (
                0,
                5,
                &[
                    "",
                    "00",
                    "BA7816BF8F01CFEA414140DE5DAE2223B00361A396177A9CB410FF61F20015AD",
                ],
            ),
            (
                0,
                6,
                &[
                    "",
                    "+1",
                    "-0",
                    "00",
                    "1.5",
                    "1e3",
                    "--1",
                    "-",
                    "/",
                    "1/",
                    "/2",
                    "1/1",
                    "1/0",
                    "0/2",
                    "2/4",
                    "1/-2",
                    "01/2",
                    "1/02",
                    "-0/3",
                    "1/2/3",
                    "NaN",
                    " 1",
                    "1\r",
                    "100000000000000000000000000/20000000000000000",
                ],
            ),
            (1, 3, &["1"]),
            (1, 4, &["0"]),
            (1, 6, &["0"]),
            (1, 7, &["1"]),
        ] {
            for value in bad {
                let mut fields: Vec<_> = good[line].split(',').collect();
                fields[field] = value;
                let error = columns.parse_row(fields.join(",").as_bytes()).expect_err(value);
                assert!(error.location().field.is_some(), "{value:?}: {error}");
            }
        }
        for line in [
            "",
            ",",
            &good[0][1..],
            &format!("{},", good[0]),
            &good[0][..good[0].len() - 5],
            "\u{e9},exact",
        ] {
            assert!(columns.parse_row(line.as_bytes()).is_err(), "{line:?}");
        }
        assert!(columns.parse_row(b"\xff").is_err());
        let long = good[0].replace(",36,", &format!(",{},", "7".repeat(LINE_BYTES)));
        assert!(columns.parse_row(long.as_bytes()).is_err());
        for value in ["7", "-7", "1/2", "-123456789012345678901234567890/11", "0"] {
            columns
                .parse_row(good[0].replace(",36,", &format!(",{value},")).as_bytes())
                .unwrap();
        }
    }

    /// What is written can be read, so what cannot be read is not written.
    #[test]
    fn unlawful_rows_are_not_written() {
        let columns = columns();
        let refused = |change: &dyn Fn(&mut Row)| {
            let mut changed = row(8);
            change(&mut changed);
            let mut sink = Vec::new();
            columns.write_row(&changed, &mut sink).is_err() && sink.is_empty()
        };
        let with = |texts: &[&str]| Outcome::Exact {
            row: 7,
            observables: texts.iter().map(ToString::to_string).collect(),
        };
        assert!(!refused(&|_| ()));
        assert!(refused(&|row| row.depth = 63));
        assert!(refused(&|row| row.merged_at = 256));
        assert!(refused(&|row| row.outcome = Outcome::Unfinished));
        assert!(refused(&|row| row.index = SampleIndex(6)));
        assert!(!refused(&|row| row.outcome = with(&["1", "2"])));
        assert!(refused(&|row| row.outcome = with(&["1"])));
        assert!(refused(&|row| row.outcome = with(&["1", "2/4"])));
        assert!(refused(&|row| row.outcome = with(&["1", "2\n"])));
        assert!(refused(&|row| row.outcome = with(&["1", ""])));
        assert!(refused(&|row| row.outcome = with(&["1", &"7".repeat(LINE_BYTES)])));
    }

    #[test]
    fn columns_are_named_plainly_and_once() {
        for names in [
            &["Energy"][..],
            &["a,b"],
            &[""],
            &["_a"],
            &["1a"],
            &["a", "a"],
            &["hash"],
            &["a b"],
            &["\u{e9}"],
        ] {
            assert!(Columns::new(names).is_err(), "{names:?}");
        }
        assert!(Columns::new(&[&"a".repeat(LINE_BYTES)]).is_err());
    }

    #[test]
    fn gaps_repeats_and_other_orders_are_refused() {
        let whole = table(20);
        let lines: Vec<_> = whole.split_inclusive(|&byte| byte == b'\n').collect();
        let without = |at: usize| [&lines[..at], &lines[at + 1..]].concat().concat();
        for at in 0..20 {
            assert!(read(&without(at)).is_err(), "line {at} left out");
        }
        assert_eq!(read(&without(20)).unwrap().len(), 19);
        for at in 0..20 {
            let mut swapped = lines.clone();
            swapped.swap(at, at + 1);
            assert!(read(&swapped.concat()).is_err(), "lines {at} and the next swapped");
            let twice = [&lines[..=at], &lines[at..]].concat().concat();
            assert!(read(&twice).is_err(), "line {at} twice");
        }
        let text = String::from_utf8(whole.clone()).unwrap();
        // sample 5 is number 4 of the exact ones
        let error = read(text.replace("5,exact,5,31,4,", "5,exact,5,31,5,").as_bytes()).unwrap_err();
        assert_eq!(
            error.to_string(),
            "line 7: sample 5: row: found 5, expected 4 [request.value]"
        );
        for other in [
            text.replace('\n', "\r\n"),
            text.replace('\n', "\n\n"),
            format!("\u{feff}{text}"),
            format!("{text}\n"),
        ] {
            assert!(read(other.as_bytes()).is_err());
        }
        let lines_at: Vec<_> = (1..=lines.len()).map(|count| lines[..count].concat().len()).collect();
        for cut in (0..whole.len()).filter(|cut| !lines_at.contains(cut)) {
            assert!(read(&whole[..cut]).is_err(), "cut at {cut}");
        }
    }

    /// A line without end is left after the limit, not collected.
    #[test]
    fn lines_without_end_are_left_early() {
        let endless = std::io::BufReader::new(std::io::repeat(b'7'));
        assert!(matches!(
            columns().rows(endless).err().unwrap().kind(),
            ErrorKind::TooLarge { .. }
        ));
        let after_first = columns().first_line().into_bytes();
        let endless = std::io::BufReader::new(after_first.chain(std::io::repeat(b'7')));
        let columns = columns();
        let mut rows = columns.rows(endless).unwrap();
        assert!(matches!(
            rows.next().unwrap().unwrap_err().kind(),
            ErrorKind::TooLarge { .. }
        ));
        assert!(rows.next().is_none());
    }

    #[test]
    fn one_row_is_found_by_few_small_reads() {
        for count in [0, 1, 2, 500, 20_000] {
            let table = table(count);
            let length = table.len() as u64;
            let step = (count / 300).max(1) as usize;
            let wanted = (0..count)
                .step_by(step)
                .chain([count.saturating_sub(1), count, count + 1, u64::MAX]);
            for index in wanted {
                let (mut reads, mut largest) = (0_u32, 0);
                let found = columns()
                    .find_row(SampleIndex(index), length, |start, bytes| {
                        reads += 1;
                        largest = largest.max(bytes);
                        Ok(table[start as usize..(start + bytes) as usize].to_vec())
                    })
                    .unwrap();
                assert_eq!(found, (index < count).then(|| row(index)), "sample {index} of {count}");
                // halving, with at most one line lost each time
                assert!(
                    reads <= 3 + (length / SEARCH_END + 1).ilog2() + 1,
                    "{reads} reads of {length} bytes"
                );
                assert!(largest <= SEARCH_END);
            }
        }
    }

    #[test]
    fn a_search_refuses_what_is_no_table() {
        let find = |table: &[u8], index: u64| {
            columns().find_row(SampleIndex(index), table.len() as u64, |start, bytes| {
                Ok(table[start as usize..(start + bytes) as usize].to_vec())
            })
        };
        let whole = table(3000);
        assert_eq!(find(&whole, 2999).unwrap(), Some(row(2999)));
        assert!(find(&whole[..whole.len() - 1], 2999).is_err());
        assert!(find(&whole[1..], 0).is_err());
        assert!(find(&whole[..20], 0).is_err());
        assert!(find(&[], 0).is_err());
        assert!(find(&vec![b'7'; 1 << 20], 0).is_err());
        let mut endless = columns().first_line().into_bytes();
        endless.resize(1 << 20, b'7');
        assert!(find(&endless, 0).is_err());
        endless.resize(2 << 20, b'\n');
        assert!(find(&endless, 0).is_err());
        // a sample that was left out is an error, not an absent one, wherever the search meets the gap
        let whole = table(1500);
        let lines: Vec<_> = whole.split_inclusive(|&byte| byte == b'\n').collect();
        for gone in 0..1499 {
            let without = [&lines[..gone + 1], &lines[gone + 2..]].concat().concat();
            assert!(find(&without, gone as u64).is_err(), "sample {gone}");
        }
        // the reader of ranges gives too little
        let short = columns().find_row(SampleIndex(0), 1000, |_, _| Ok(Vec::new()));
        assert!(short.is_err());
    }
}
