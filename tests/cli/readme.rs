//! The README is run: every command in it, in order, in one folder, and its output compared.
//!
//! What the README may hold between fences:
//!
//! - `console`: lines that begin with `$ ` are commands, what follows is all that they print, on
//!   both streams. `console tools` is the same with outside tools ([`TOOLS`]).
//! - `toml NAME`, `csv NAME`, `python NAME`: a file of that name, written before the next command.
//! - `sh`: the two commands of a first visit. `cargo run --release -- draw` is represented by the
//!   program with `draw`; `cargo test` is this very test, and is not run inside itself.
//! - `text`: an excerpt that is not run.
//!
//! Output is compared letter by letter but for what differs between two runs, builds or machines:
//! see [`steady`]. If a comparison fails, the whole README as it should be is written beside the
//! build (the message says where), to be read and then copied.
//!
//! Nobody needs more than cargo and a C compiler for `cargo test`, so the blocks with outside tools
//! are a test of their own. It is ignored by name, never skipped in silence; `.ci/run` installs the
//! tools and runs it.

use std::fmt::Write as _;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;

use crate::bench::Bench;

/// Programs of blocks marked `tools`; NumPy is needed beside them.
const TOOLS: [&str; 4] = ["tar", "zstd", "sha256sum", "python3"];

/// Programs of other blocks: ours, and what POSIX has everywhere.
const PLAIN: [&str; 5] = ["pastproof", "echo", "grep", "head", "tail"];

/// The two commands of a first visit.
const FIRST: [&str; 2] = ["cargo run --release -- draw", "cargo test"];

#[derive(Clone, Copy, PartialEq, Eq, Debug)]
enum With {
    PlainCommands,
    Tools,
}

#[test]
fn the_readme_says_what_the_program_prints() {
    check(With::PlainCommands);
}

#[test]
#[ignore = "needs tar, zstd, sha256sum and python3 with NumPy; .ci/run installs them and runs it"]
fn the_readme_holds_with_outside_tools() {
    for tool in TOOLS {
        let there = Command::new(tool).arg("--version").output();
        assert!(
            there.is_ok_and(|there| there.status.success()),
            "{tool} is not installed"
        );
    }
    check(With::Tools);
}

/// The job in one paragraph, then the two commands and nothing else.
#[test]
fn the_readme_opens_with_the_job_and_two_commands() {
    let text = readme();
    let parts: Vec<&str> = text.split("\n\n").take(3).collect();
    assert!(parts[0].starts_with("# "), "a heading: {}", parts[0]);
    assert!(
        parts[1].len() > 200 && !parts[1].starts_with(['#', '`', '-']),
        "one paragraph: {}",
        parts[1]
    );
    assert_eq!(parts[2], format!("```sh\n{}\n```", FIRST.join("\n")));
}

/// The comparison itself must see a difference, and only let through what varies.
#[test]
fn a_planted_difference_is_seen() {
    let same = |one: &str, other: &str| assert_eq!(steady(one), steady(other));
    same("seal 12ab", "seal 12ab");
    same(&format!("seal {}", "a".repeat(64)), &format!("seal {}", "b".repeat(64)));
    same("    0  50   0.172  beta", "    0  50  10.001  beta");
    same("sealed x (123 bytes)", "sealed x (45 bytes)");
    same(
        "2026-12-01T13:06:10Z to 2026-12-01T13:06:11Z on linux x86_64, 2 threads",
        "2027-01-01T00:00:00Z to 2027-01-01T00:00:01Z on linux aarch64, 64 threads",
    );
    let differ = |one: &str, other: &str| assert_ne!(steady(one), steady(other));
    differ(&format!("root {}", "a".repeat(64)), &format!("root {}", "b".repeat(64)));
    differ(&format!("hash {}", "a".repeat(64)), &format!("hash {}", "b".repeat(64)));
    differ("holds: 50 samples", "holds: 51 samples");
    differ("beta = 0.35", "beta = 0.36");
    differ("two  blanks", "two blanks");
    let block = |text: &str| blocks(&format!("```console\n{text}```\n"));
    let run = |text: &str| refill(&Bench::new(), &block(text)[0]);
    assert_eq!(
        run("$ echo one; echo two >&2\none\ntwo\n"),
        "$ echo one; echo two >&2\none\ntwo\n"
    );
    assert_ne!(run("$ echo one\ntwo\n"), "$ echo one\ntwo\n");
    assert_ne!(run("$ echo one\none\nand more\n"), "$ echo one\none\nand more\n");
}

fn readme() -> String {
    fs::read_to_string(Path::new(env!("CARGO_MANIFEST_DIR")).join("README.md")).unwrap()
}

/// A fenced block: the words after the fence, and the lines between.
struct Block {
    words: Vec<String>,
    text: String,
    /// The place of the text in the README.
    start: usize,
}

fn blocks(readme: &str) -> Vec<Block> {
    let mut found = Vec::new();
    let mut rest = 0;
    while let Some(at) = readme[rest..].find("```") {
        let words_at = rest + at + 3;
        let start = words_at + readme[words_at..].find('\n').expect("a line after a fence") + 1;
        let end = start + readme[start..].find("```").expect("a closing fence");
        found.push(Block {
            words: readme[words_at..start].split_whitespace().map(str::to_string).collect(),
            text: readme[start..end].to_string(),
            start,
        });
        rest = end + 3;
    }
    found
}

fn check(with: With) {
    let readme = readme();
    let bench = Bench::new();
    let (mut filled, mut copied, mut commands) = (String::new(), 0, 0);
    for block in blocks(&readme) {
        let words: Vec<&str> = block.words.iter().map(String::as_str).collect();
        match words[..] {
            ["sh"] => {
                let lines: Vec<&str> = block.text.lines().collect();
                assert_eq!(lines, FIRST);
                bench.expect(0, &["draw"]);
            }
            ["toml" | "python" | "csv", name] => {
                bench.write(name, &block.text);
            }
            ["text"] => {}
            ["console"] => {
                for command in block.text.lines().filter_map(|line| line.strip_prefix("$ ")) {
                    for part in command
                        .split([';', '|', '&'])
                        .map(str::trim)
                        .filter(|part| !part.is_empty())
                    {
                        let program = part.split(' ').next().unwrap_or("");
                        assert!(
                            PLAIN.contains(&program),
                            "{program}: mark the block with the word tools"
                        );
                    }
                }
                let now = refill(&bench, &block);
                filled += &readme[copied..block.start];
                filled += &now;
                copied = block.start + block.text.len();
                commands += 1;
            }
            ["console", "tools"] if with == With::Tools => {
                let now = refill(&bench, &block);
                filled += &readme[copied..block.start];
                filled += &now;
                copied = block.start + block.text.len();
                commands += 1;
            }
            ["console", "tools"] => {}
            _ => panic!("a block that nobody checks: {:?}", block.words),
        }
    }
    filled += &readme[copied..];
    assert!(commands > 3, "hardly anything was run");
    if filled != readme {
        let place = PathBuf::from(env!("CARGO_TARGET_TMPDIR")).join(format!("README.{with:?}.md"));
        fs::write(&place, &filled).unwrap();
        let differing = readme
            .lines()
            .zip(filled.lines())
            .enumerate()
            .find(|(_, (one, other))| one != other);
        panic!(
            "the README differs from what the program prints; as it should be: {}\nfirst difference: {differing:#?}",
            place.display()
        );
    }
}

/// The block with what its commands print now; the shown output where that is the same but for
/// what varies.
fn refill(bench: &Bench, block: &Block) -> String {
    let mut filled = String::new();
    for part in block
        .text
        .split_inclusive('\n')
        .collect::<Vec<_>>()
        .chunk_by(|_, next| !next.starts_with("$ "))
    {
        let command = part[0]
            .strip_prefix("$ ")
            .expect("a block begins with a command")
            .trim_end();
        let shown = part[1..].concat();
        let now = output(bench, command);
        let same = steady(&now) == steady(&shown);
        let _ = write!(filled, "$ {command}\n{}", if same { &shown } else { &now });
    }
    filled
}

/// What a command prints on both streams. It must succeed: one that does not shows its exit code.
fn output(bench: &Bench, command: &str) -> String {
    let programs = bench.path(".programs");
    if !programs.exists() {
        fs::create_dir(&programs).unwrap();
        fs::copy(env!("CARGO_BIN_EXE_pastproof"), programs.join("pastproof")).unwrap();
    }
    // the shell knows its PATH; the program's folder goes before it as $0
    let done = Command::new("sh")
        .args(["-c", &format!("exec 2>&1; PATH=\"$0:$PATH\"; {command}")])
        .arg(&programs)
        .current_dir(bench.folder())
        .env("LC_ALL", "C")
        .output()
        .unwrap();
    let text = String::from_utf8(done.stdout).unwrap();
    assert!(done.status.success(), "{command}: {}\n{text}", done.status);
    text
}

/// `text` with a fixed word for what differs between two runs, builds or machines:
///
/// - a number with three decimals: seconds; and then the blanks before it;
/// - a number before the word `bytes`: sizes depend on the compressor and on how long times are;
/// - the seal, which covers times, machine and build (never root, keys or hashes);
/// - the line that begins with the time of drawing, and the one that names the program's revision.
fn steady(text: &str) -> String {
    text.lines().map(|line| steady_line(line) + "\n").collect()
}

fn steady_line(line: &str) -> String {
    let words: Vec<&str> = line.split(' ').collect();
    let is_digits = |text: &str| !text.is_empty() && text.bytes().all(|byte| byte.is_ascii_digit());
    let is_time = |word: &str| word.len() == 20 && word.ends_with('Z') && word.as_bytes()[10] == b'T';
    if words.first().is_some_and(|word| is_time(word)) {
        return "TIME to TIME on MACHINE".into();
    }
    if line.starts_with("drawn by pastproof ") {
        return "drawn by pastproof VERSION, REVISION".into();
    }
    let mut steady: Vec<&str> = Vec::new();
    for (at, word) in words.iter().enumerate() {
        let seconds = word
            .split_once('.')
            .is_some_and(|(whole, part)| is_digits(whole) && is_digits(part) && part.len() == 3);
        let bytes = words
            .get(at + 1)
            .is_some_and(|next| next.trim_end_matches([')', ',']) == "bytes");
        if seconds {
            while steady.last() == Some(&"") {
                steady.pop();
            }
            steady.push("SECONDS");
        } else if bytes && is_digits(word.trim_start_matches('(')) {
            steady.push("SIZE");
        } else if words[0] == "seal" && at == 1 && word.len() == 64 {
            steady.push("SEAL");
        } else {
            steady.push(word);
        }
    }
    steady.join(" ")
}
