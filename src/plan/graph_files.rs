//! Edge lists, site lists and held values as people write them: CSV, read into numbered sites.
//!
//! Apart from the plan: these files have lines and columns of their own, so that a fault names the
//! file, the line and the column. What is read is exact text; a label is a number only by accident.

use std::collections::BTreeMap;
use std::path::Path;
use std::sync::Arc;

use super::InputFile;
use super::table::shown;
use crate::error::{Error, ErrorKind, Result};
use crate::lattice::{Graph, MOST_EDGES, MOST_SITES, Spin};
use crate::law::Held;
use crate::number::Exact;

/// Bytes of one site label, at most.
const LONGEST_LABEL: usize = 200;

/// A graph and the labels of its sites.
pub(super) struct LabelledGraph {
    pub(super) graph: Arc<Graph>,
    /// The labels by site number.
    pub(super) labels: Arc<Vec<String>>,
    numbers: BTreeMap<String, u32>,
}

/// What the rows of a file are: the short form and, where there is one, the long form.
struct Form {
    columns: &'static [&'static str],
    least: usize,
}

const EDGES: Form = Form {
    columns: &["from", "to", "coupling"],
    least: 2,
};
const SITES: Form = Form {
    columns: &["site", "field"],
    least: 1,
};
const HELD: Form = Form {
    columns: &["site", "value"],
    least: 2,
};

/// The graph of an edge list and, if there is one, a site list.
///
/// # Errors
/// Any fault of the files, with file, line and column.
pub(super) fn read_graph(edges: &InputFile, sites: Option<&InputFile>) -> Result<LabelledGraph> {
    let mut numbering = Numbering::default();
    let mut fields = Vec::new();
    let mut listed = BTreeMap::new();
    if let Some(file) = sites {
        each_row(file, &SITES, |line, row| {
            let site = label(row[0]).map_err(|error| error.at_field("site"))?;
            if let Some(first) = listed.insert(site.to_string(), line) {
                let what = format!("site {site:?} is listed on line {first} and on line {line}");
                return Err(Error::conflict(what).at_field("site"));
            }
            numbering.number(site)?;
            if let Some(field) = row.get(1) {
                fields.push(Exact::parse(field).map_err(|error| error.at_field("field"))?);
            }
            Ok(())
        })?;
    }
    let mut pairs = Vec::new();
    let mut couplings = Vec::new();
    each_row(edges, &EDGES, |_, row| {
        let mut ends = [0; 2];
        for (end, (column, text)) in ends.iter_mut().zip(EDGES.columns.iter().zip(row)) {
            let site = label(text).map_err(|error| error.at_field(column))?;
            *end = match sites {
                None => numbering.number(site)?,
                Some(file) => *numbering.numbers.get(site).ok_or_else(|| {
                    let expected = format!("a site listed in {}", file.name);
                    Error::value(format!("site {site:?}"), expected).at_field(column)
                })?,
            };
        }
        if ends[0] == ends[1] {
            let found = format!("an edge from site {:?} to itself", label(row[0])?);
            return Err(Error::value(found, "two different sites").at_field("to"));
        }
        if pairs.len() as u64 == MOST_EDGES {
            return Err(Error::too_large("edges of the graph", "one more", MOST_EDGES));
        }
        pairs.push(ends);
        if let Some(coupling) = row.get(2) {
            couplings.push(Exact::parse(coupling).map_err(|error| error.at_field("coupling"))?);
        }
        Ok(())
    })?;
    let at = Path::new(&sites.unwrap_or(edges).name);
    let count = numbering.labels.len() as u64;
    let couplings = (!couplings.is_empty()).then_some(couplings);
    let fields = (!fields.is_empty()).then_some(fields);
    let graph = Graph::new(count, pairs, couplings, fields).map_err(|error| error.in_file(at))?;
    Ok(LabelledGraph {
        graph: Arc::new(graph),
        labels: Arc::new(numbering.labels),
        numbers: numbering.numbers,
    })
}

/// The held sites of a file: site numbers below `sites` or, on a graph, labels.
///
/// # Errors
/// Any fault of the file, with file, line and column.
pub(super) fn read_held(file: &InputFile, sites: u32, graph: Option<&LabelledGraph>) -> Result<Held> {
    let mut held = BTreeMap::new();
    let mut minus: Option<(&'static str, u64)> = None;
    each_row(file, &HELD, |line, row| {
        let site = match graph {
            None => site_number(row[0], sites),
            Some(graph) => label(row[0]).and_then(|site| {
                let known = graph.numbers.get(site).copied();
                known.ok_or_else(|| Error::value(format!("site {site:?}"), "a site of the graph"))
            }),
        };
        let site = site.map_err(|error| error.at_field("site"))?;
        let (spin, zero) = match row[1] {
            "1" | "+1" => (Spin::Plus, None),
            "-1" => (Spin::Minus, Some("-1")),
            "0" => (Spin::Minus, Some("0")),
            other => {
                let expected = "1 or +1 (plus, occupied), -1 or 0 (minus, empty)";
                return Err(Error::value(shown(other), expected).at_field("value"));
            }
        };
        if let Some(word) = zero {
            let (first, at) = *minus.get_or_insert((word, line));
            if first != word {
                let what = format!("{word} stands beside {first} on line {at}: write minus as -1 or as 0, not as both");
                return Err(Error::conflict(what).at_field("value"));
            }
        }
        match held.insert(site, (spin, line)) {
            None => Ok(()),
            Some((_, first)) => {
                let what = format!("site {} is held on line {first} and on line {line}", shown(row[0]));
                Err(Error::conflict(what).at_field("site"))
            }
        }
    })?;
    Held::new(held.into_iter().map(|(site, (spin, _))| (site, spin)).collect())
        .map_err(|error| error.in_file(Path::new(&file.name)))
}

/// Sites numbered in the order in which their labels are first met.
#[derive(Default)]
struct Numbering {
    labels: Vec<String>,
    numbers: BTreeMap<String, u32>,
}

impl Numbering {
    fn number(&mut self, label: &str) -> Result<u32> {
        if let Some(number) = self.numbers.get(label) {
            return Ok(*number);
        }
        let too_large = || Error::too_large("sites of the graph", "one more", MOST_SITES);
        let next = self.labels.len() as u64;
        let number = u32::try_from(next).ok().filter(|_| next < MOST_SITES);
        let number = number.ok_or_else(too_large)?;
        self.labels.push(label.to_string());
        self.numbers.insert(label.to_string(), number);
        Ok(number)
    }
}

fn label(text: &str) -> Result<&str> {
    let expected = "a site label without control characters";
    if text.is_empty() {
        Err(Error::value("an empty label", expected))
    } else if text.len() > LONGEST_LABEL {
        Err(Error::too_large("bytes of a site label", text.len(), LONGEST_LABEL))
    } else if text.chars().any(char::is_control) {
        Err(Error::value(shown(text), expected))
    } else {
        Ok(text)
    }
}

fn site_number(text: &str, sites: u32) -> Result<u32> {
    let digits = !text.is_empty() && text.bytes().all(|byte| byte.is_ascii_digit());
    let number = digits.then(|| text.parse::<u32>().ok()).flatten();
    number
        .filter(|number| *number < sites)
        .ok_or_else(|| Error::value(format!("site {}", shown(text)), format!("a site number below {sites}")))
}

/// Hands every row with its line to `take`, trimmed, the header left out, all rows as wide as the first.
fn each_row(file: &InputFile, form: &Form, mut take: impl FnMut(u64, &[&str]) -> Result<()>) -> Result<()> {
    let path = Path::new(&file.name);
    let bytes = file.bytes.as_slice();
    let mut reader = csv::ReaderBuilder::new()
        .has_headers(false)
        .flexible(true)
        .from_reader(bytes);
    let mut record = csv::ByteRecord::new();
    let mut place = Place {
        bytes,
        counted: 0,
        line: 1,
    };
    let mut width = None;
    loop {
        let start = usize::try_from(reader.position().byte()).unwrap_or(usize::MAX);
        let more = reader.read_byte_record(&mut record);
        let syntax = |what: String| Error::from(ErrorKind::Syntax { format: "CSV", what }).in_file(path);
        if !more.map_err(|error| syntax(error.to_string()))? {
            break;
        }
        let line = place.advance(start);
        let text = record.iter().map(std::str::from_utf8).collect::<Result<Vec<_>, _>>();
        let text = text.map_err(|_| syntax("bytes that are not UTF-8".into()).at_line(line))?;
        if text.len() == 1 && !text[0].is_empty() && trim(text[0]).is_empty() && !place.is_quoted() {
            continue;
        }
        let row: Vec<_> = text.iter().map(|field| trim(field)).collect();
        // `a, "b"` would otherwise be a label with quotation marks in it, another one than `b`
        if text
            .iter()
            .zip(&row)
            .any(|(field, trimmed)| field != trimmed && trimmed.starts_with('"'))
        {
            return Err(syntax("a quotation mark must follow the comma at once".into()).at_line(line));
        }
        let first = width.is_none();
        let columns = *width.get_or_insert(row.len());
        let expected = if !(form.least..=form.columns.len()).contains(&columns) {
            let short = form.columns[..form.least].join(",");
            let long = form.columns.join(",");
            Some(if short == long {
                short
            } else {
                format!("{short} or {long}")
            })
        } else if row.len() != columns {
            Some(format!("{columns} in every row, as in the first"))
        } else {
            None
        };
        if let Some(expected) = expected {
            return Err(Error::value(format!("{} columns", row.len()), expected)
                .in_file(path)
                .at_line(line));
        }
        if first && row == form.columns[..columns] {
            continue;
        }
        take(line, &row).map_err(|error| error.in_file(path).at_line(line))?;
    }
    if bytes.iter().filter(|byte| **byte == b'"').count() % 2 == 1 {
        let what = "an odd number of quotation marks: one is not closed, or stands within a field".into();
        return Err(Error::from(ErrorKind::Syntax { format: "CSV", what })
            .in_file(path)
            .at_line(place.line));
    }
    Ok(())
}

/// Blanks are trimmed from fields; other white space is not.
fn trim(field: &str) -> &str {
    field.trim_matches([' ', '\t'])
}

/// Where the last row starts: the reader's own count stands before the blank lines that it skips.
struct Place<'a> {
    bytes: &'a [u8],
    counted: usize,
    line: u64,
}

impl Place<'_> {
    /// The line of the first row at or after byte `start`.
    fn advance(&mut self, start: usize) -> u64 {
        let rest = self.bytes.get(start..).unwrap_or_default();
        let skipped = rest.iter().take_while(|byte| matches!(byte, b'\r' | b'\n')).count();
        let row = (start + skipped).min(self.bytes.len());
        let passed = self.bytes.get(self.counted..row).unwrap_or_default();
        self.line += passed.iter().filter(|byte| **byte == b'\n').count() as u64;
        self.counted = row;
        self.line
    }

    fn is_quoted(&self) -> bool {
        self.bytes.get(self.counted) == Some(&b'"')
    }
}
