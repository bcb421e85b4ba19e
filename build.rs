//! Records which source the program is built from: commit, lock file, compiler, target, profile.
//!
//! The values reach the program as environment variables of the compiler (`src/cli/program.rs`
//! reads them); every variable is always set, empty where nothing is known, so that none can slip
//! in from the environment of the build. Only the folder of this crate is asked: a copy inside
//! somebody else's repository, or one unpacked from a tarball, has no commit.

use std::{
    env,
    ffi::OsString,
    fs,
    path::{Path, PathBuf},
    process::Command,
};

use sha2::{Digest as _, Sha256};

/// What the program is compiled from. The state of these, and of the repository, is recorded.
const SOURCES: [&str; 6] = ["build.rs", "Cargo.toml", "Cargo.lock", "src", "schema", "examples"];

fn main() {
    let folder = PathBuf::from(variable("CARGO_MANIFEST_DIR"));
    for source in SOURCES.iter().filter(|source| folder.join(source).exists()) {
        println!("cargo::rerun-if-changed={source}");
    }
    // AVX-512 intrinsics are stable from this compiler on; older ones build the library without them
    println!("cargo::rustc-check-cfg=cfg(pastproof_avx512)");
    if rustc_minor().is_some_and(|minor| minor >= 89) {
        println!("cargo::rustc-cfg=pastproof_avx512");
    }
    // the library knows nothing of git or of the machine
    if env::var_os("CARGO_FEATURE_CLI").is_none() {
        return;
    }
    for path in watched(&folder) {
        println!("cargo::rerun-if-changed={}", path.display());
    }
    let (commit, tree) = source(&folder).unwrap_or_default();
    record("COMMIT", &commit);
    record("TREE", tree);
    record("LOCK_SHA256", &lock_digest(&folder).unwrap_or_default());
    record("RUSTC", &rustc_version().unwrap_or_default());
    record("TARGET", &text(variable("TARGET")));
    record("PROFILE", &text(variable("PROFILE")));
}

fn record(name: &str, value: &str) {
    assert!(!value.contains('\n'), "{name} is one line");
    println!("cargo::rustc-env=PASTPROOF_BUILD_{name}={value}");
}

/// A variable that cargo always sets for a build script.
fn variable(name: &str) -> OsString {
    env::var_os(name).unwrap_or_else(|| panic!("cargo sets {name}"))
}

fn text(value: OsString) -> String {
    value.to_string_lossy().into_owned()
}

fn lock_digest(folder: &Path) -> Option<String> {
    let bytes = fs::read(folder.join("Cargo.lock")).ok()?;
    Some(
        Sha256::digest(&bytes)
            .iter()
            .map(|byte| format!("{byte:02x}"))
            .collect(),
    )
}

fn rustc_version() -> Option<String> {
    let output = Command::new(variable("RUSTC")).arg("-V").output().ok()?;
    let line = String::from_utf8(output.stdout).ok()?.trim().to_string();
    output.status.success().then_some(line)
}

/// The minor version of the compiler.
fn rustc_minor() -> Option<u32> {
    rustc_version()?.split('.').nth(1)?.parse().ok()
}

/// Whether `folder` is the top of a git work tree.
fn is_top(folder: &Path) -> bool {
    // the prefix is the way from the top down to this folder
    let place = git(folder, &["rev-parse", "--is-inside-work-tree", "--show-prefix"]);
    place.is_some_and(|place| place.trim_end() == "true")
}

/// The commit checked out in `folder`, and "clean" or "changed"; none if `folder` is not the top
/// of a git work tree, git is missing, or there is no commit yet.
pub fn source(folder: &Path) -> Option<(String, &'static str)> {
    if !is_top(folder) {
        return None;
    }
    let commit = git(folder, &["rev-parse", "--verify", "HEAD^{commit}"])?;
    let all = ["--untracked-files=normal", "--ignore-submodules=none"];
    let changes = git(folder, &["status", "--porcelain", all[0], all[1]])?;
    let tree = if changes.is_empty() { "clean" } else { "changed" };
    Some((commit.trim().to_string(), tree))
}

/// The files that change with a commit, a checkout or the index. Cargo takes a missing file as one
/// that changes at every build, so only those that exist.
pub fn watched(folder: &Path) -> Vec<PathBuf> {
    if !is_top(folder) {
        return Vec::new();
    }
    // logs/HEAD grows with each move of HEAD, also while the branch itself sits in packed-refs
    let mut names = ["HEAD", "logs/HEAD", "index", "packed-refs", "reftable"]
        .map(String::from)
        .to_vec();
    names.extend(git(folder, &["symbolic-ref", "--quiet", "HEAD"]));
    let path = |name: &String| git(folder, &["rev-parse", "--git-path", name.trim()]);
    let paths = names.iter().filter_map(path);
    let paths = paths.map(|path| folder.join(path.trim_end_matches('\n')));
    paths.filter(|path| path.exists()).collect()
}

/// What git says in `folder`, untouched by a surrounding git (a hook sets these variables) and
/// without git refreshing the index, which would look like a change.
fn git(folder: &Path, arguments: &[&str]) -> Option<String> {
    let output = Command::new("git")
        .env_remove("GIT_DIR")
        .env_remove("GIT_WORK_TREE")
        .env_remove("GIT_INDEX_FILE")
        .env_remove("GIT_PREFIX")
        .arg("--no-optional-locks")
        .arg("-C")
        .arg(folder)
        .args(arguments)
        .output()
        .ok()?;
    output.status.success().then(|| String::from_utf8(output.stdout).ok())?
}
