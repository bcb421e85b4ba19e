//! The program itself: the source, compiler and target it was built from and for.
//!
//! Fixed when it was built (`build.rs`); nothing here looks at the machine it runs on. What could
//! not be known then is `None`, never a guess.

use pastproof::quantity::Digest;

/// The source revision of the program.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Source {
    /// The git commit, in hexadecimal digits.
    pub commit: &'static str,
    /// Whether the checkout held nothing but that commit and ignored files.
    pub clean: bool,
}

/// What the program was built from and for.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Program {
    /// The version of the crate.
    pub version: &'static str,
    /// The source revision; none if it was not built in a git checkout of its own.
    pub source: Option<Source>,
    /// The SHA-256 of `Cargo.lock`, which names every dependency and its digest.
    pub lock: Option<Digest>,
    /// What `rustc -V` said.
    pub rustc: Option<&'static str>,
    /// The target triple.
    pub target: &'static str,
    /// `release` or `debug`: the profile, or the one it inherits from.
    pub profile: &'static str,
}

impl Program {
    /// This program.
    pub fn this() -> Self {
        Self {
            version: env!("CARGO_PKG_VERSION"),
            source: source(env!("PASTPROOF_BUILD_COMMIT"), env!("PASTPROOF_BUILD_TREE")),
            lock: Digest::parse(env!("PASTPROOF_BUILD_LOCK_SHA256")),
            rustc: Some(env!("PASTPROOF_BUILD_RUSTC")).filter(|version| !version.is_empty()),
            target: env!("PASTPROOF_BUILD_TARGET"),
            profile: env!("PASTPROOF_BUILD_PROFILE"),
        }
    }
}

fn source(commit: &'static str, tree: &'static str) -> Option<Source> {
    match tree {
        "clean" | "changed" => Some(Source {
            commit,
            clean: tree == "clean",
        }),
        _ => None,
    }
}

#[cfg(test)]
#[path = "../../build.rs"]
#[allow(dead_code, clippy::print_stdout, reason = "the build script, here to be tested")]
mod build_script;

#[cfg(test)]
mod tests {
    use super::*;

    use std::fs;
    use std::path::Path;
    use std::process::Command;

    use super::build_script::watched;

    fn git(folder: &Path, arguments: &[&str]) {
        let who = ["-c", "user.name=Larkmoor", "-c", "user.email=film@larkmoor.example"];
        let done = Command::new("git")
            .arg("-C")
            .arg(folder)
            .args(who)
            .args(arguments)
            .status();
        assert!(done.unwrap().success(), "{arguments:?}");
    }

    /// The last part of the path and the file behind it, for what cargo is told to watch.
    fn watched_names(folder: &Path) -> Vec<String> {
        let paths = watched(folder);
        assert!(
            paths.iter().all(|path| path.exists()),
            "a missing file means: at every build"
        );
        let names = paths
            .iter()
            .map(|path| path.file_name().unwrap().to_string_lossy().into_owned());
        names.collect()
    }

    #[test]
    fn only_a_checkout_of_the_crate_itself_has_a_commit() {
        needs!("git");
        let folder = tempfile::TempDir::new().unwrap();
        let top = folder.path();
        let source = build_script::source;
        // unpacked from a tarball
        assert_eq!(source(top), None);
        // before the first commit
        git(top, &["init", "-q", "-b", "moor"]);
        assert_eq!(source(top), None);
        fs::write(top.join("Cargo.toml"), "").unwrap();
        git(top, &["add", "-A"]);
        git(top, &["commit", "-q", "-m", "larkmoor"]);
        let (first, tree) = source(top).unwrap();
        assert_eq!((first.len(), tree), (40, "clean"));
        fs::write(top.join("new.rs"), "").unwrap();
        assert_eq!(source(top), Some((first.clone(), "changed")));
        // a copy inside somebody else's repository, and a folder within `.git`
        fs::create_dir(top.join("vendored")).unwrap();
        assert_eq!(source(&top.join("vendored")), None);
        assert_eq!(source(&top.join(".git")), None);
        // a second work tree
        let second = tempfile::TempDir::new().unwrap();
        let place = second.path().join("second");
        git(top, &["worktree", "add", "-q", place.to_str().unwrap()]);
        assert_eq!(source(&place), Some((first, "clean")));
        assert_eq!(watched_names(&place), ["HEAD", "HEAD", "index", "second"]);
    }

    #[test]
    fn a_commit_changes_what_is_watched() {
        needs!("git");
        let folder = tempfile::TempDir::new().unwrap();
        let top = folder.path();
        git(top, &["init", "-q", "-b", "moor"]);
        git(top, &["commit", "-q", "--allow-empty", "-m", "larkmoor"]);
        assert_eq!(watched_names(top), ["HEAD", "HEAD", "index", "moor"]);
        let state = |top| {
            watched(top)
                .iter()
                .map(|path| fs::read(path).unwrap())
                .collect::<Vec<_>>()
        };
        // with and without a file for the branch, on a branch and on none
        for change in [["pack-refs", "--all"], ["checkout", "--detach"]] {
            git(top, &change);
            let before = state(top);
            let paths = watched(top);
            git(top, &["commit", "-q", "--allow-empty", "-m", "larkmoor"]);
            let after: Vec<_> = paths.iter().map(|path| fs::read(path).unwrap()).collect();
            assert_ne!(before, after, "{change:?}");
        }
        // asking changes nothing, or every build would be a new one
        fs::write(top.join("Cargo.toml"), "").unwrap();
        git(top, &["add", "-A"]);
        git(top, &["commit", "-q", "-m", "larkmoor"]);
        // an old time stamp, which git would like to note in its index
        let file = fs::File::options().write(true).open(top.join("Cargo.toml")).unwrap();
        let old = std::time::UNIX_EPOCH + std::time::Duration::from_secs(1_000_000_000);
        file.set_modified(old).unwrap();
        let before = state(top);
        assert_eq!(build_script::source(top).unwrap().1, "clean");
        assert_eq!(state(top), before);
    }

    /// Expected: what `git`, the lock file and the compiler say themselves.
    #[test]
    fn the_program_knows_what_it_was_built_from() {
        needs!("git");
        let program = Program::this();
        let folder = Path::new(env!("CARGO_MANIFEST_DIR"));
        let lock = std::fs::read(folder.join("Cargo.lock")).unwrap();
        assert_eq!(program.lock, Some(Digest::of(&lock)));
        assert!(program.rustc.unwrap().starts_with("rustc 1."));
        assert!(program.target.contains(std::env::consts::ARCH));
        assert!(["debug", "release"].contains(&program.profile));
        // a checkout of its own has `.git` beside Cargo.toml
        assert_eq!(program.source.is_some(), folder.join(".git").exists());
        if let Some(source) = program.source {
            let head = Command::new("git")
                .arg("-C")
                .arg(folder)
                .args(["rev-parse", "HEAD"])
                .output()
                .unwrap();
            assert_eq!(source.commit, String::from_utf8(head.stdout).unwrap().trim());
        }
    }

    #[test]
    fn no_commit_without_a_state_of_the_tree() {
        assert_eq!(source("", ""), None);
        assert_eq!(
            source("ab12", "changed"),
            Some(Source {
                commit: "ab12",
                clean: false
            })
        );
        assert!(source("ab12", "clean").unwrap().clean);
    }
}
