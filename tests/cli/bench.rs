//! A folder of its own for each test, and the program run in it.

use std::fs;
use std::path::{Path, PathBuf};
use std::process::{Command, Output};

use serde_json::Value;

/// A folder that vanishes, with the program to run in it.
pub struct Bench {
    folder: tempfile::TempDir,
}

/// What a run of the program gave.
pub struct Ended {
    pub code: i32,
    pub out: String,
    pub err: String,
}

/// A small plan that draws in an instant; `%` stands for its title.
pub const SMALL: &str = r#"
title = "Larkmoor test film"
[seed]
phrase = "Larkmoor test"
[[ensemble]]
law = "ising"
lattice = { kind = "hypercubic", extents = [4, 4] }
beta = [0.2, "0.30"]
samples = 5
"#;

/// A plan so cold that no sample finishes.
pub const COLD: &str = r#"
title = "Larkmoor cold film"
seed = { phrase = "Larkmoor test" }
[[ensemble]]
law = "ising"
lattice = { kind = "hypercubic", extents = [4, 4] }
beta = 1.5
samples = 3
depth_limit = 5
"#;

impl Bench {
    pub fn new() -> Self {
        Self {
            folder: tempfile::TempDir::new().unwrap(),
        }
    }

    pub fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    pub fn folder(&self) -> &Path {
        self.folder.path()
    }

    pub fn write(&self, name: &str, text: &str) -> PathBuf {
        let path = self.path(name);
        fs::create_dir_all(path.parent().unwrap()).unwrap();
        fs::write(&path, text).unwrap();
        path
    }

    /// The program, ready to be run in the folder.
    pub fn command(&self, arguments: &[&str]) -> Command {
        let mut command = Command::new(env!("CARGO_BIN_EXE_pastproof"));
        command.args(arguments).current_dir(self.folder()).env("NO_COLOR", "1");
        command
    }

    pub fn run(&self, arguments: &[&str]) -> Ended {
        ended(self.command(arguments).output().unwrap())
    }

    /// Runs with the expected exit code.
    pub fn expect(&self, code: i32, arguments: &[&str]) -> Ended {
        let ended = self.run(arguments);
        assert_eq!(
            ended.code, code,
            "{arguments:?}\nout: {}\nerr: {}",
            ended.out, ended.err
        );
        ended
    }

    /// Runs with `--json`: the one object on standard output.
    pub fn json(&self, code: i32, arguments: &[&str]) -> Value {
        let ended = self.expect(code, &[arguments, &["--json"]].concat());
        assert_eq!(
            ended.out.lines().count(),
            1,
            "one object and nothing else: {}",
            ended.out
        );
        serde_json::from_str(&ended.out).unwrap()
    }

    /// A drawn archive of [`SMALL`].
    pub fn small(&self) -> PathBuf {
        self.write("plan.toml", SMALL);
        self.expect(0, &["draw", "plan.toml", "-o", "small.tar.zst"]);
        self.path("small.tar.zst")
    }

    /// The names in the folder, sorted.
    pub fn names(&self) -> Vec<String> {
        let entries = fs::read_dir(self.folder()).unwrap();
        let mut names: Vec<_> = entries
            .map(|entry| entry.unwrap().file_name().into_string().unwrap())
            .collect();
        names.sort();
        names
    }
}

pub fn ended(output: Output) -> Ended {
    let text = |bytes: Vec<u8>| String::from_utf8(bytes).unwrap();
    Ended {
        code: output.status.code().unwrap_or(-1),
        out: text(output.stdout),
        err: text(output.stderr),
    }
}

/// Whether the tools of the system that a test needs are there. With `PASTPROOF_TEST_TOOLS=required`, as in
/// CI, a missing one is a failure; without, the test is left out, so that cargo alone passes all others.
pub fn has_tools(tools: &[&str]) -> bool {
    let missing: Vec<_> = tools
        .iter()
        .filter(|tool| Command::new(tool).arg("--version").output().is_err())
        .collect();
    assert!(
        missing.is_empty() || std::env::var_os("PASTPROOF_TEST_TOOLS").is_none(),
        "missing: {missing:?}"
    );
    missing.is_empty()
}
