//! Plans: what a person asks for, read from TOML, checked wholly before any work.
//!
//! A [`Plan`] that exists is valid: every ensemble has a law with its key, no key occurs twice, and
//! all files that the plan names have been read. Nothing here opens a file, draws entropy or knows
//! how samples are made: the caller hands over bytes, and a plan without a seed says so.
//!
//! Ensembles stand in this order: tables in file order; within a table every combination of the
//! listed values, of `beta` (or `temperature`), then `coupling`, then `field`, or of `activity`,
//! the last varying fastest.

mod graph_files;
mod grid;
mod table;
#[cfg(test)]
mod tests;

use std::fmt;
use std::sync::Arc;

use serde::{Deserialize, Serialize};
use serde_json::{Value, json};

use self::grid::Grid;
use self::table::{Table, shown};
use crate::canonical;
use crate::error::{Error, ErrorKind, Result};
use crate::law::Law;
use crate::quantity::{Digest, EnsembleIndex, Seed};

/// Bytes of a plan, at most.
pub const LARGEST_PLAN: u64 = 1 << 20;
/// Bytes of a file that a plan names, at most.
pub const LARGEST_FILE: u64 = 256 << 20;
/// Ensembles of a plan after its grid is expanded, at most.
pub const MOST_ENSEMBLES: usize = 10_000;
/// Samples of an ensemble, at most.
pub const MOST_SAMPLES: u64 = 100_000_000;
/// The depth limit of an ensemble that names none.
pub const DEPTH_LIMIT: u8 = 30;
/// The largest depth limit (`STREAM.md` §6).
pub const DEEPEST: u8 = 62;
/// Bytes of the name of a file that a plan names, at most.
pub const LONGEST_FILE_NAME: usize = 60;

/// Characters of a title, at most.
const LONGEST_TITLE: usize = 200;
/// Bytes of a phrase, at most.
const LONGEST_PHRASE: usize = 1000;
/// Characters of a slug, at most.
const LONGEST_SLUG: usize = 60;

/// When an ensemble is complete: all samples asked for are drawn, whatever they are.
pub const STOPPING: &str = "fixed count";

/// A plan: a title, a rule for the seed, and ensembles.
#[derive(Clone, Debug)]
pub struct Plan {
    text: Vec<u8>,
    title: String,
    seed_rule: SeedRule,
    ensembles: Vec<Ensemble>,
    files: Vec<InputFile>,
}

/// One point of a plan's grid.
#[derive(Clone, Debug)]
pub struct Ensemble {
    law: Law,
    key: Digest,
    samples: u64,
    depth_limit: u8,
    first_depth: u8,
    labels: Option<Arc<Vec<String>>>,
    line: u64,
}

/// A file that a plan names.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct InputFile {
    /// Its name as the plan has it; [`check_file_name`] allows it.
    pub name: String,
    /// Its bytes.
    pub bytes: Vec<u8>,
}

/// Where the seed of a run comes from.
#[derive(Clone, PartialEq, Eq, Debug)]
pub enum SeedRule {
    /// Nobody chose it: 32 bytes of the system's entropy.
    Entropy,
    /// A person wrote its digits.
    Hex(Seed),
    /// A person wrote a phrase, whose UTF-8 bytes are hashed by SHA-256.
    Phrase(String),
}

/// What the digest of a plan takes from one ensemble.
#[derive(Clone, PartialEq, Debug)]
pub struct Asked {
    /// The law object of `STREAM.md` §10.
    pub law: Value,
    /// The number of samples.
    pub samples: u64,
    /// The largest depth allowed.
    pub depth_limit: u8,
}

impl Plan {
    /// The plan that `text` states; `read_file` gives the bytes of the files that it names.
    ///
    /// # Errors
    /// Whatever is wrong with the plan, with line and key, or with a file that it names, with that
    /// file's name, line and column. The caller adds the plan's own name ([`Error::in_file`]).
    pub fn read(text: &[u8], read_file: &mut dyn FnMut(&str) -> Result<Vec<u8>>) -> Result<Self> {
        if text.len() as u64 > LARGEST_PLAN {
            return Err(Error::too_large("bytes of the plan", text.len(), LARGEST_PLAN));
        }
        let text = std::str::from_utf8(text).map_err(|error| {
            let line = 1 + text[..error.valid_up_to()]
                .iter()
                .filter(|byte| **byte == b'\n')
                .count();
            let what = "bytes that are not UTF-8".into();
            Error::from(ErrorKind::Syntax { format: "TOML", what }).at_line(line as u64)
        })?;
        let plan = table::document(text, |root| Self::from_table(root, read_file))?;
        Ok(Self {
            text: text.as_bytes().to_vec(),
            ..plan
        })
    }

    fn from_table(root: Table<'_>, read_file: &mut dyn FnMut(&str) -> Result<Vec<u8>>) -> Result<Self> {
        if root.is_empty() {
            return Err(Error::value(
                "an empty plan",
                "a title and at least one [[ensemble]] table",
            ));
        }
        root.only(&["title", "seed", "ensemble"])?;
        let expected = format!("1 to {LONGEST_TITLE} characters without control characters");
        let entry = root.need("title", &expected)?;
        let title = entry.text(&expected)?;
        if !(1..=LONGEST_TITLE).contains(&title.chars().count()) || title.chars().any(char::is_control) {
            return Err(entry.wrong(expected));
        }
        let seed_rule = match root.get("seed") {
            None => SeedRule::Entropy,
            Some(entry) => SeedRule::from_table(entry.table("a table with the key \"phrase\" or \"hex\"")?)?,
        };
        let expected = "at least one [[ensemble]] table";
        let entry = root.need("ensemble", expected)?;
        let tables = entry.items().filter(|tables| !tables.is_empty());
        let mut read_file = |name: &str| read_file(name);
        let mut grid = Grid::new(&mut read_file);
        for table in tables.ok_or_else(|| entry.wrong(expected))? {
            grid.add(table.table(expected)?)?;
        }
        Ok(Self {
            text: Vec::new(),
            title: title.to_string(),
            seed_rule,
            ensembles: grid.ensembles,
            files: grid.files,
        })
    }

    /// The text that states it.
    pub fn text(&self) -> &[u8] {
        &self.text
    }

    /// The title.
    pub fn title(&self) -> &str {
        &self.title
    }

    /// Where the seed comes from.
    pub fn seed_rule(&self) -> &SeedRule {
        &self.seed_rule
    }

    /// All ensembles with their numbers.
    pub fn numbered(&self) -> impl Iterator<Item = (EnsembleIndex, &Ensemble)> {
        (0..).map(EnsembleIndex).zip(&self.ensembles)
    }

    /// All ensembles, the grid expanded, in documented order.
    pub fn ensembles(&self) -> &[Ensemble] {
        &self.ensembles
    }

    /// The files that the plan names, each once, in order of first use.
    pub fn files(&self) -> &[InputFile] {
        &self.files
    }

    /// The digest of what is asked for: not of title, first depth, or how numbers are typed.
    ///
    /// # Errors
    /// Those of [`canonical::digest`].
    pub fn digest(&self) -> Result<Digest> {
        let asked = self.ensembles.iter().map(Ensemble::asked).collect::<Result<Vec<_>>>()?;
        digest_of(&self.seed_rule, asked)
    }
}

impl Ensemble {
    /// The law.
    pub fn law(&self) -> &Law {
        &self.law
    }

    /// The law's key.
    pub fn key(&self) -> Digest {
        self.key
    }

    /// The number of samples to draw.
    pub fn samples(&self) -> u64 {
        self.samples
    }

    /// The largest depth allowed.
    pub fn depth_limit(&self) -> u8 {
        self.depth_limit
    }

    /// The depth of the first attempt, a matter of speed alone.
    pub fn first_depth(&self) -> u8 {
        self.first_depth
    }

    /// On a graph, the labels of the sites by site number.
    pub fn labels(&self) -> Option<&Arc<Vec<String>>> {
        self.labels.as_ref()
    }

    /// The line of the plan on which its table starts.
    pub fn line(&self) -> u64 {
        self.line
    }

    /// What the plan's digest takes from it.
    ///
    /// # Errors
    /// Those of [`Law::to_json`].
    pub fn asked(&self) -> Result<Asked> {
        Ok(Asked {
            law: self.law.to_json()?,
            samples: self.samples,
            depth_limit: self.depth_limit,
        })
    }
}

/// The digest of a plan, from what a record says: the SHA-256 of the canonical JSON of
/// `{plan, seed, ensembles}`.
///
/// # Errors
/// Those of [`canonical::digest`].
pub fn digest_of(seed_rule: &SeedRule, ensembles: impl IntoIterator<Item = Asked>) -> Result<Digest> {
    let ensembles = ensembles.into_iter().map(|asked| {
        json!({
            "law": asked.law, "samples": asked.samples, "depth_limit": asked.depth_limit, "stopping": STOPPING,
        })
    });
    canonical::digest(&json!({
        "plan": "pastproof plan 1", "seed": seed_rule.to_json(), "ensembles": ensembles.collect::<Vec<_>>(),
    }))
}

/// The JSON of a rule: the digits of a seed are not in it, they stand beside it in the record.
#[derive(Serialize, Deserialize)]
#[serde(tag = "rule", rename_all = "lowercase", deny_unknown_fields)]
enum RuleObject {
    Entropy {},
    Hex {},
    Phrase { phrase: String },
}

/// In words, with the label of a seed that a person chose.
impl fmt::Display for SeedRule {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Entropy => f.write_str("from system entropy"),
            Self::Hex(_) => f.write_str("typed as 64 hexadecimal digits: chosen by a person"),
            Self::Phrase(phrase) => write!(f, "the SHA-256 of the phrase {phrase:?}: chosen by a person"),
        }
    }
}

impl SeedRule {
    fn from_table(table: Table<'_>) -> Result<Self> {
        table.only(&["phrase", "hex"])?;
        match (table.get("phrase"), table.get("hex")) {
            (Some(_), Some(hex)) => Err(hex.place(Error::conflict("hex stands beside phrase: give one of the two"))),
            (Some(entry), None) => {
                let expected = format!("1 to {LONGEST_PHRASE} bytes of text");
                let phrase = entry.text(&expected)?;
                check_phrase(phrase).map_err(|error| entry.place(error))?;
                Ok(Self::Phrase(phrase.to_string()))
            }
            (None, Some(entry)) => {
                let expected = "64 hexadecimal digits";
                let digits = entry.text(expected)?.to_ascii_lowercase();
                let seed = Digest::parse(&digits).ok_or_else(|| entry.wrong(expected))?;
                Ok(Self::Hex(Seed(seed)))
            }
            (None, None) => {
                let expected = "one of them, or no [seed] table: then the seed is drawn from the system's entropy";
                Err(table.place(Error::missing("key \"phrase\" or \"hex\"", expected).at_field("seed")))
            }
        }
    }

    /// The seed that the rule fixes; `None` where it must be drawn.
    pub fn seed(&self) -> Option<Seed> {
        match self {
            Self::Entropy => None,
            Self::Hex(seed) => Some(*seed),
            Self::Phrase(phrase) => Some(Seed(Digest::of(phrase.as_bytes()))),
        }
    }

    /// Whether a person chose the seed, and could have chosen another one.
    pub fn chosen_by_a_person(&self) -> bool {
        *self != Self::Entropy
    }

    /// `{"rule":"entropy"}`, `{"rule":"hex"}` or `{"phrase":"...","rule":"phrase"}`.
    pub fn to_json(&self) -> Value {
        match self {
            Self::Entropy => json!({ "rule": "entropy" }),
            Self::Hex(_) => json!({ "rule": "hex" }),
            Self::Phrase(phrase) => json!({ "rule": "phrase", "phrase": phrase }),
        }
    }

    /// The rule of such an object, in a record whose seed is `seed`.
    ///
    /// Whether the seed of a phrase is `seed` is left to the caller: that is a check, not a reading.
    ///
    /// # Errors
    /// [`ErrorKind::Syntax`] if it is no such object; [`ErrorKind::Value`] or
    /// [`ErrorKind::TooLarge`] for a phrase that no plan can have.
    pub fn from_json(value: &Value, seed: Seed) -> Result<Self> {
        let object = RuleObject::deserialize(value).map_err(|error| {
            let what = error.to_string();
            Error::from(ErrorKind::Syntax { format: "JSON", what })
        })?;
        Ok(match object {
            RuleObject::Entropy {} => Self::Entropy,
            RuleObject::Hex {} => Self::Hex(seed),
            RuleObject::Phrase { phrase } => {
                check_phrase(&phrase).map_err(|error| error.at_field("phrase"))?;
                Self::Phrase(phrase)
            }
        })
    }
}

fn check_phrase(phrase: &str) -> Result<()> {
    match phrase.len() {
        0 => Err(Error::value(
            "an empty phrase",
            format!("1 to {LONGEST_PHRASE} bytes of text"),
        )),
        1..=LONGEST_PHRASE => Ok(()),
        bytes => Err(Error::too_large("bytes of a phrase", bytes, LONGEST_PHRASE)),
    }
}

/// Whether a plan may name a file so: a plain relative name inside the plan's folder, fit for an archive member
/// (`schema/ARCHIVE.md` §1), so that a run cannot fail for it after its samples are drawn.
///
/// # Errors
/// [`ErrorKind::Value`] or [`ErrorKind::TooLarge`].
pub fn check_file_name(name: &str) -> Result<()> {
    if name.len() > LONGEST_FILE_NAME {
        return Err(Error::too_large("bytes of a file name", name.len(), LONGEST_FILE_NAME));
    }
    let plain = |byte: u8| byte.is_ascii_alphanumeric() || b"._-+=,@/".contains(&byte);
    let inside = |part: &str| !matches!(part, "" | "." | "..") && !part.starts_with('-');
    if name.bytes().all(plain) && name.split('/').all(inside) {
        Ok(())
    } else {
        let expected = "a relative file name inside the plan's folder: ASCII letters, digits and ._-+=,@ in parts \
                        between slashes, none of them empty, . or .. or begun with -";
        Err(Error::value(shown(name), expected))
    }
}

/// A file name for `title`: lower-case ASCII letters, digits and single hyphens, never empty.
pub fn slug(title: &str) -> String {
    let mut slug = String::new();
    for character in title.chars() {
        if character.is_ascii_alphanumeric() {
            slug.push(character.to_ascii_lowercase());
        } else if !slug.is_empty() && !slug.ends_with('-') {
            slug.push('-');
        }
        if slug.len() == LONGEST_SLUG {
            break;
        }
    }
    match slug.trim_end_matches('-') {
        "" => "run".into(),
        slug => slug.into(),
    }
}
