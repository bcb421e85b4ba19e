//! Who may import whom. This table is the rule; DEVELOPERS.md shows it.
//!
//! Each line names a module of the library and every module it may import. A line names modules of
//! earlier lines only, so the table cannot hold a cycle. A file that no line covers is a fault, and
//! so is an import that a line does not allow. The binary (`main.rs`, `cli/`) is another crate: the
//! library cannot name it.

use std::collections::BTreeSet;
use std::fs;
use std::path::{Path, PathBuf};

const MAY_IMPORT: &[(&str, &[&str])] = &[
    // 0 words
    ("quantity", &[]),
    ("observer", &[]),
    ("clock", &[]),
    ("error", &["quantity"]),
    ("canonical", &["quantity", "error"]),
    ("number", &["error"]),
    ("tree", &["quantity"]),
    // 1 law: what a sample is, by definition
    ("stream", &["quantity"]),
    ("sample", &["quantity"]),
    ("lattice", &["quantity", "error", "canonical", "number"]),
    (
        "law",
        &["quantity", "error", "canonical", "number", "lattice", "sample"],
    ),
    ("threshold", &["error", "number", "law"]),
    ("random_map", &["error", "number", "lattice", "law", "threshold"]),
    // 2 machinery: islands that do not know each other
    (
        "plan",
        &["quantity", "error", "canonical", "number", "lattice", "law", "sample"],
    ),
    (
        "engine",
        &["error", "law", "threshold", "random_map", "sample", "stream"],
    ),
    ("observable", &["number", "lattice", "law", "sample"]),
    ("exact", &["error", "number", "lattice", "law"]),
    ("statistics", &[]),
    // 3 record: bytes on disk; knows no engine
    (
        "archive",
        &[
            "quantity",
            "error",
            "canonical",
            "number",
            "tree",
            "stream",
            "sample",
            "lattice",
            "law",
            "random_map",
            "plan",
        ],
    ),
    // 4 deeds
    (
        "audit",
        &[
            "quantity",
            "observer",
            "error",
            "canonical",
            "number",
            "tree",
            "stream",
            "sample",
            "lattice",
            "law",
            "threshold",
            "random_map",
            "plan",
            "engine",
            "observable",
            "exact",
            "archive",
        ],
    ),
    (
        "verb",
        &[
            "quantity",
            "observer",
            "clock",
            "error",
            "canonical",
            "number",
            "tree",
            "stream",
            "sample",
            "lattice",
            "law",
            "threshold",
            "random_map",
            "plan",
            "engine",
            "observable",
            "exact",
            "statistics",
            "archive",
        ],
    ),
];

#[test]
fn the_table_has_no_cycle() {
    let mut earlier = BTreeSet::new();
    for (module, imports) in MAY_IMPORT {
        for import in *imports {
            assert!(earlier.contains(import), "{module}: {import} stands on a later line");
        }
        assert!(earlier.insert(*module), "{module} stands twice");
    }
}

#[test]
fn imports_follow_the_table() {
    let mut faults = Vec::new();
    for file in rust_files(Path::new("src")) {
        // tests beside the code may name what they judge it by
        if file.ends_with("tests.rs") {
            continue;
        }
        let Some(own) = module_of(&file) else { continue };
        faults.extend(faults_of(
            &own,
            &file.display().to_string(),
            &fs::read_to_string(&file).unwrap(),
        ));
    }
    assert!(faults.is_empty(), "layering:\n  {}", faults.join("\n  "));
}

/// DEVELOPERS.md shows this table, line by line.
#[test]
fn the_document_shows_the_table() {
    let document = fs::read_to_string("DEVELOPERS.md").unwrap();
    let section = document
        .split("\n## ")
        .find(|section| section.starts_with("Layers"))
        .unwrap();
    let shown: Vec<(&str, Vec<&str>)> = section
        .lines()
        .filter(|line| line.starts_with("| ") && line.contains('`'))
        .map(|line| {
            let cells: Vec<&str> = line.split('|').map(str::trim).collect();
            let imports = cells[3].split(", ").filter(|name| !name.is_empty());
            (
                cells[2].trim_matches('`'),
                imports.map(|name| name.trim_matches('`')).collect(),
            )
        })
        .collect();
    let known: Vec<_> = MAY_IMPORT
        .iter()
        .map(|(module, imports)| (*module, imports.to_vec()))
        .collect();
    assert_eq!(shown, known);
}

/// The check itself must catch what it is for.
#[test]
fn a_planted_import_is_caught() {
    assert_eq!(faults_of("stream", "f", "use crate::quantity::Seed;\n").len(), 0);
    assert_eq!(faults_of("stream", "f", "use crate::engine::Engine;\n").len(), 1);
    assert_eq!(
        faults_of("archive", "f", "fn f() { crate::engine::threads(None); }\n").len(),
        1
    );
    assert_eq!(faults_of("verb", "f", "use crate::verb::draw;\n").len(), 1);
    assert_eq!(faults_of("verb", "f", "use crate::audit::seal;\n").len(), 1);
    assert_eq!(faults_of("plan", "f", "use crate::{engine, law};\n").len(), 1);
    assert_eq!(faults_of("plan", "f", "// use crate::engine\n").len(), 0);
    assert_eq!(faults_of("helpers", "f", "").len(), 1);
}

fn faults_of(own: &str, file: &str, text: &str) -> Vec<String> {
    let Some((_, allowed)) = MAY_IMPORT.iter().find(|(module, _)| *module == own) else {
        return vec![format!("{file}: not in the table")];
    };
    let mut faults = Vec::new();
    for (number, line) in text.lines().enumerate() {
        let code = line.split("//").next().unwrap();
        for (start, prefix) in code.match_indices("crate::") {
            let letters = code[start + prefix.len()..].chars();
            let name: String = letters
                .take_while(|letter| letter.is_ascii_lowercase() || *letter == '_')
                .collect();
            let inside = name == own && own != "verb";
            if name.is_empty() {
                faults.push(format!("{file}:{}: write one `use crate::module` a line", number + 1));
            } else if !inside && !allowed.contains(&name.as_str()) {
                faults.push(format!("{file}:{}: {own} may not import {name}", number + 1));
            }
        }
    }
    faults
}

/// The library module that a file belongs to; `None` for `lib.rs` and the binary.
fn module_of(file: &Path) -> Option<String> {
    let first = file.strip_prefix("src").ok()?.iter().next()?.to_str()?;
    let name = first.trim_end_matches(".rs");
    (!["lib", "main", "cli"].contains(&name)).then(|| name.to_string())
}

fn rust_files(folder: &Path) -> Vec<PathBuf> {
    let mut found = Vec::new();
    for entry in fs::read_dir(folder).unwrap() {
        let path = entry.unwrap().path();
        if path.is_dir() {
            found.extend(rust_files(&path));
        } else if path.extension().is_some_and(|ending| ending == "rs") {
            found.push(path);
        }
    }
    found.sort();
    found
}
