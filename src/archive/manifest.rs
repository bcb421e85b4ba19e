//! The list of members with their SHA-256, as text that `sha256sum -c` takes.
//!
//! One line per member: 64 lower-case hexadecimal digits, two spaces, the name, a line feed. Apart
//! because it is read without this program, so nothing else may creep into it. Order is kept; the
//! names obey the rules of the [container](super::container), and none stands twice.

use std::fmt;

use crate::error::{Error, ErrorKind, Result};
use crate::quantity::Digest;

use super::container::{Names, check_name};

/// Names and digests in the order of the text.
#[derive(Default)]
pub struct Manifest {
    lines: Vec<(String, Digest)>,
    names: Names,
}

impl Manifest {
    /// Appends a line.
    ///
    /// # Errors
    /// `Unsupported` for a name that no member may have, `Damaged` for one that is there already.
    pub fn push(&mut self, name: &str, digest: Digest) -> Result<()> {
        check_name(name.as_bytes())?;
        self.names.insert(name)?;
        self.lines.push((name.to_string(), digest));
        Ok(())
    }

    /// The lines in order.
    pub fn lines(&self) -> &[(String, Digest)] {
        &self.lines
    }

    /// Reads the text of a manifest; nothing but the lines described above is taken.
    ///
    /// # Errors
    /// `Nothing` for an empty text, `Syntax` for a line that is none of a manifest, and those of
    /// [`Manifest::push`]; all but the first with the line.
    pub fn parse(text: &[u8]) -> Result<Self> {
        if text.is_empty() {
            return Err(ErrorKind::Nothing {
                what: "a manifest without lines".to_string(),
            }
            .into());
        }
        let mut manifest = Self::default();
        for (number, line) in (1..).zip(text.split_inclusive(|&byte| byte == b'\n')) {
            manifest.take_line(line).map_err(|error| error.at_line(number))?;
        }
        Ok(manifest)
    }

    fn take_line(&mut self, line: &[u8]) -> Result<()> {
        let syntax = |what: &str| {
            Error::from(ErrorKind::Syntax {
                format: "manifest",
                what: what.to_string(),
            })
        };
        let line = line
            .strip_suffix(b"\n")
            .ok_or_else(|| syntax("the last line has no line feed"))?;
        let (digest, rest) = line.split_at_checked(64).unwrap_or((line, &[]));
        let digest = std::str::from_utf8(digest)
            .ok()
            .and_then(Digest::parse)
            .ok_or_else(|| syntax("expected 64 lower-case hexadecimal digits at the beginning of the line"))?;
        let name = rest
            .strip_prefix(b"  ")
            .ok_or_else(|| syntax("expected two spaces between digest and name"))?;
        self.push(check_name(name)?, digest)
    }
}

impl fmt::Display for Manifest {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        self.lines
            .iter()
            .try_for_each(|(name, digest)| writeln!(f, "{digest}  {name}"))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    // made with `sha256sum plan.toml ensembles/0000/tree.bin` of GNU coreutils 9.1, for files that hold "abc" and nothing
    const TEXT: &str = "\
ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad  plan.toml
e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855  ensembles/0000/tree.bin
";

    #[test]
    fn text_of_sha256sum_is_read_and_written() {
        let manifest = Manifest::parse(TEXT.as_bytes()).unwrap();
        assert_eq!(manifest.lines()[0], ("plan.toml".to_string(), Digest::of(b"abc")));
        assert_eq!(
            manifest.lines()[1],
            ("ensembles/0000/tree.bin".to_string(), Digest::of(b""))
        );
        assert_eq!(manifest.to_string(), TEXT);
        let mut made = Manifest::default();
        made.push("plan.toml", Digest::of(b"abc")).unwrap();
        made.push("ensembles/0000/tree.bin", Digest::of(b"")).unwrap();
        assert_eq!(made.to_string(), TEXT);
    }

    #[test]
    fn anything_else_is_refused() {
        let good = TEXT.lines().next().unwrap();
        let changed = |line: String| Manifest::parse(line.as_bytes()).err().map(|error| error.to_string());
        assert_eq!(changed(format!("{good}\n")), None);
        for line in [
            String::new(),
            "\n".into(),
            good.into(),
            format!("{good}\n\n"),
            format!("{good}\r\n"),
            format!(" {good}\n"),
            format!("# comment\n{good}\n"),
            format!("\\{good}\n"),
            format!("{}\n", good.replace("  ", " ")),
            format!("{}\n", good.replace("  ", "   ")),
            format!("{}\n", good.replace("  ", " *")),
            format!("{}\n", good.replace("  ", "\t")),
            format!("{}\n", good.to_uppercase()),
            format!("{}\n", good.replace("plan", "../plan")),
            format!("{}\n", &good[..64]),
            format!("{}  \n", &good[..64]),
            format!("{}\n", &good[..30]),
            format!("{good}\n{good}\n"),
            format!("{good}\n{}\n", good.replace("plan", "PLAN")),
            format!("{good}\0\n"),
        ] {
            assert!(changed(line.clone()).is_some(), "{line:?}");
        }
        assert!(Manifest::parse(b"\xff\n").is_err());
        let twice = changed(format!("{good}\n{good}\n")).unwrap();
        assert!(
            twice.starts_with("plan.toml: line 2: damaged: a second member"),
            "{twice}"
        );
    }

    #[test]
    fn every_cut_is_refused_but_that_between_lines() {
        let whole = TEXT.find('\n').unwrap() + 1;
        for cut in (0..TEXT.len()).filter(|&cut| cut != whole) {
            assert!(Manifest::parse(&TEXT.as_bytes()[..cut]).is_err(), "cut at {cut}");
        }
    }
}
