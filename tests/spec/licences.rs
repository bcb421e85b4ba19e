//! The licences of everything the program is built from, on the platform that it is tested on.

use std::collections::BTreeMap;
use std::process::Command;

use serde_json::Value;

/// Licences under which a dependency may come, as SPDX identifiers. libgit2 itself is GPL-2.0 with a
/// linking exception: its crate says so in words, and NOTICE names it.
const ALLOWED: [&str; 7] = [
    "Apache-2.0",
    "BSD-2-Clause",
    "BSD-3-Clause",
    "MIT",
    "MIT-0",
    "Unicode-3.0",
    "Zlib",
];

/// Whether an SPDX expression of `OR`, `AND` and `WITH` can be met with allowed licences alone.
fn allowed(expression: &str) -> bool {
    let word = |word: &str| ALLOWED.contains(&word.trim().split(" WITH ").next().unwrap_or(""));
    // old crates write `/` for OR
    let plain = expression.replace('/', " OR ").replace(['(', ')'], "");
    plain.split(" AND ").all(|part| part.split(" OR ").any(word))
}

#[test]
fn every_dependency_comes_under_an_allowed_licence() {
    let metadata = Command::new(env!("CARGO"))
        .args([
            "metadata",
            "--format-version",
            "1",
            "--locked",
            "--filter-platform",
            "x86_64-unknown-linux-gnu",
        ])
        .current_dir(env!("CARGO_MANIFEST_DIR"))
        .output()
        .unwrap();
    assert!(
        metadata.status.success(),
        "{}",
        String::from_utf8_lossy(&metadata.stderr)
    );
    let metadata: Value = serde_json::from_slice(&metadata.stdout).unwrap();
    let packages = metadata["packages"].as_array().unwrap();
    let licence = |package: &Value| package["license"].as_str().unwrap_or("none stated").to_string();
    let refused: BTreeMap<_, _> = packages
        .iter()
        .filter(|package| !allowed(&licence(package)))
        .map(|package| (package["name"].to_string(), licence(package)))
        .collect();
    assert!(packages.len() > 50, "the whole tree is looked at");
    assert!(refused.is_empty(), "{refused:?}");
    let sources: Vec<_> = packages
        .iter()
        .filter_map(|package| package["source"].as_str())
        .collect();
    assert!(
        sources.iter().all(|source| source.starts_with("registry+")),
        "no dependency from elsewhere"
    );
}

#[test]
fn a_foreign_licence_is_seen() {
    assert!(allowed("MIT OR Apache-2.0") && allowed("(MIT OR Apache-2.0) AND Unicode-3.0") && allowed("Unlicense/MIT"));
    assert!(!allowed("GPL-3.0-only") && !allowed("MIT AND GPL-3.0-only") && !allowed("none stated"));
}
