//! What holds for every plan and every archive: on what a sample depends, and what never happens.
//!
//! The cases are drawn at random from fixed seeds, so each run of the tests tries the same ones.

use std::collections::BTreeMap;
use std::fs;
use std::path::Path;

use pastproof::archive::reading::Run;
use pastproof::audit::Conclusion;
use pastproof::audit::replay::{Which, replay};
use pastproof::audit::seal::{Anchors, audit};
use pastproof::engine::Stop;
use pastproof::engine::coupling::Proof;
use pastproof::engine::crew::Settings;
use pastproof::observer::Silent;
use pastproof::plan::Plan;
use pastproof::quantity::{Digest, EnsembleIndex, SampleIndex};
use pastproof::verb::show::show;
use proptest::prelude::*;
use proptest::test_runner::RngSeed;
use serde_json::{Value, json};

use crate::drawing::Drawing;
use crate::members::{Members, golden};

fn cases(cases: u32, seed: u64) -> ProptestConfig {
    ProptestConfig {
        failure_persistence: None,
        rng_seed: RngSeed::Fixed(seed),
        ..ProptestConfig::with_cases(cases)
    }
}

/// The lines of an `[[ensemble]]` table but for the number of samples: a small law of any kind.
fn law() -> impl Strategy<Value = String> {
    let word = prop::sample::select(&["periodic", "free", "plus", "minus"][..]);
    let kind = prop::sample::select(&["hypercubic", "triangular", "honeycomb"][..]);
    let axes = prop::collection::vec((2u8..6, word), 1..4);
    let model = prop_oneof![
        3 => (-20i32..40, -10i32..20, 1i32..3).prop_map(|(beta, field, coupling)| {
            format!("law = \"ising\"\nbeta = \"{beta}/100\"\nfield = \"{field}/10\"\ncoupling = {coupling}")
        }),
        1 => (0i32..12).prop_map(|activity| format!("law = \"lattice-gas\"\nactivity = \"{activity}/10\"")),
    ];
    (kind, axes, model).prop_map(|(kind, mut axes, model)| {
        if kind != "hypercubic" {
            axes.resize(2, (3, "free"));
        }
        let (extents, boundary): (Vec<_>, Vec<_>) = axes.into_iter().unzip();
        format!(
            "{model}\ndepth_limit = 9\n\
             lattice = {{ kind = \"{kind}\", extents = {extents:?}, boundary = {boundary:?} }}"
        )
    })
}

/// One to three laws, no two equal.
fn laws() -> impl Strategy<Value = Vec<String>> {
    prop::collection::vec(law(), 1..4).prop_filter("two equal laws", |laws| {
        Plan::read(plan_text(laws, &[1, 1, 1], "").as_bytes(), &mut |_| unreachable!()).is_ok()
    })
}

fn plan_text(laws: &[String], samples: &[u64], surplus: &str) -> String {
    let tables = laws
        .iter()
        .zip(samples)
        .map(|(law, samples)| format!("[[ensemble]]\n{law}\nsamples = {samples}\n{surplus}\n"));
    "title = \"Larkmoor\"\nseed = { phrase = \"Larkmoor, properties\" }\n".to_string() + &tables.collect::<String>()
}

fn plan(laws: &[String], samples: &[u64], surplus: &str) -> Plan {
    Plan::read(plan_text(laws, samples, surplus).as_bytes(), &mut |_| unreachable!()).unwrap()
}

fn root(members: &Members) -> Digest {
    Digest::of(members.bytes("record.json"))
}

fn in_ensemble(number: usize, member: &str) -> String {
    format!("ensembles/{number:04}/{member}")
}

proptest! {
    #![proptest_config(cases(16, 1))]

    #[test]
    fn nothing_depends_on_threads_or_first_depth(laws in laws(), threads in 1usize..9, first_depth in 0u8..10) {
        let usual = plan(&laws, &[5, 3, 9], "");
        let one = Drawing { threads: 1, ..Drawing::default() }.of(&usual);
        let other = Drawing { threads, first_depth: Some(first_depth), ..Drawing::default() }.of(&usual);
        prop_assert!(one.in_common() == other.in_common());
        // written in the plan, it changes the text of the plan alone
        let planned = plan(&laws, &[5, 3, 9], &format!("first_depth = {first_depth}"));
        prop_assert_eq!(root(&one), root(&Drawing::default().of(&planned)));
    }

    #[test]
    fn the_order_of_ensembles_changes_no_key_and_no_sample(laws in laws(), turn in 0usize..3) {
        let samples = [5, 3, 9];
        let count = laws.len();
        let places: Vec<usize> = (0..count).map(|at| (at + turn) % count).rev().collect();
        let moved: Vec<String> = places.iter().map(|&at| laws[at].clone()).collect();
        let moved_samples: Vec<u64> = places.iter().map(|&at| samples[at]).collect();
        let one = Drawing::default().of(&plan(&laws, &samples, ""));
        let other = Drawing::default().of(&plan(&moved, &moved_samples, ""));
        let by_key = |members: &Members| {
            let record = members.json("record.json");
            let ensembles = record["ensembles"].as_array().unwrap().iter().enumerate();
            let ensembles = ensembles.map(|(number, ensemble)| {
                let table = members.bytes(&in_ensemble(number, "samples.csv")).to_vec();
                (ensemble["key"].to_string(), (ensemble.clone(), table))
            });
            ensembles.collect::<BTreeMap<_, _>>()
        };
        prop_assert_eq!(by_key(&one).len(), count);
        prop_assert!(by_key(&one) == by_key(&other));
        prop_assert_eq!(root(&one) == root(&other), places.iter().copied().eq(0..count));
    }

    #[test]
    fn a_longer_run_begins_with_the_shorter_one(law in law(), few in 1u64..8, more in 1u64..8) {
        let laws = [law];
        let short = Drawing::default().of(&plan(&laws, &[few], ""));
        let long = Drawing::default().of(&plan(&laws, &[few + more], ""));
        let table = |members: &Members| members.text(&in_ensemble(0, "samples.csv")).to_string();
        prop_assert!(table(&long).starts_with(&table(&short)));
        let rows = |members: &Members| {
            let name = in_ensemble(0, "samples/0000.npy");
            if members.has(&name) { members.bytes(&name)[128..].to_vec() } else { Vec::new() }
        };
        prop_assert!(rows(&long).starts_with(&rows(&short)));
        prop_assert_ne!(root(&short), root(&long));
    }
}

/// Ways to write the number `numerator`/1000 in a plan; all are the same number.
fn spellings(numerator: i64) -> Vec<String> {
    let sign = if numerator < 0 { "-" } else { "" };
    let size = numerator.abs();
    let (whole, rest) = (size / 1000, size % 1000);
    vec![
        format!("{sign}{whole}.{rest:03}"),
        format!("{sign}{whole}.{rest:03}000"),
        format!("\"{sign}{whole}.{rest:03}\""),
        format!("\"{sign}{size}/1000\""),
        format!("\"{sign}{}/7000\"", size * 7),
        format!("{sign}{size}e-3"),
        format!("\"{sign}{size}.0E-3\""),
        format!("\"{sign}0{size}00/100000\""),
    ]
}

proptest! {
    #![proptest_config(cases(64, 2))]

    #[test]
    fn one_number_has_one_key_however_it_is_written(beta in -1500i64..1500, field in -3000i64..3000, activity in 0i64..2000) {
        let key = |law: &str| {
            let text = plan_text(&[format!("{law}\nlattice = {{ kind = \"hypercubic\", extents = [4, 4] }}")], &[1], "");
            let plan = Plan::read(text.as_bytes(), &mut |_| unreachable!());
            let plan = plan.unwrap_or_else(|error| panic!("{error}\n{text}"));
            (plan.ensembles()[0].key(), plan.digest().unwrap())
        };
        let ising = |beta: &str, field: &str| key(&format!("law = \"ising\"\nbeta = {beta}\nfield = {field}"));
        let gas = |activity: &str| key(&format!("law = \"lattice-gas\"\nactivity = {activity}"));
        let (betas, fields, activities) = (spellings(beta), spellings(field), spellings(activity));
        for at in 1..betas.len() {
            let other = (at + 3) % betas.len();
            prop_assert_eq!(ising(&betas[at], &fields[other]), ising(&betas[0], &fields[0]), "{} {}", betas[at], fields[other]);
            prop_assert_eq!(gas(&activities[at]), gas(&activities[0]), "{}", activities[at]);
        }
        let next = spellings(beta + 1);
        prop_assert_ne!(ising(&next[0], &fields[0]), ising(&betas[0], &fields[0]));
    }
}

/// The true root and seal of an archive.
fn anchors(original: &Members) -> Anchors {
    Anchors {
        root: Some(root(original)),
        seal: Some(Digest::of(original.bytes("MANIFEST.sha256"))),
    }
}

/// Does to the archive at `path` what reads strangers' files; a panic would fail the test.
fn examine(path: &Path, anchors: Anchors) -> Option<Conclusion> {
    if let Ok(run) = Run::open(path) {
        let _ = show(&run);
        let one = Which::One(EnsembleIndex(0), SampleIndex(3));
        let _ = replay(
            &run,
            one,
            Proof::Fast,
            &Settings {
                threads: Some(1),
                ..Settings::default()
            },
            &Silent,
            &Stop::default(),
        );
    }
    audit(path, anchors, &Silent).ok().map(|report| report.conclusion)
}

/// Every place of a JSON value, as pointers (RFC 6901).
fn places(value: &Value, at: &str, found: &mut Vec<String>) {
    found.push(at.to_string());
    match value {
        Value::Array(items) => {
            for (number, item) in items.iter().enumerate() {
                places(item, &format!("{at}/{number}"), found);
            }
        }
        Value::Object(fields) => {
            for (name, item) in fields {
                places(item, &format!("{at}/{name}"), found);
            }
        }
        _ => {}
    }
}

/// Each value of each record replaced by each of these: refused or found wrong, never confirmed, never a panic.
#[test]
fn no_value_in_a_record_is_trusted() {
    let folder = tempfile::TempDir::new().unwrap();
    let path = folder.path().join("changed.tar.zst");
    let strange = [
        Value::Null,
        json!(""),
        json!("0"),
        json!(-1),
        json!(0),
        json!(9_007_199_254_740_992_u64),
        json!([]),
        json!({}),
        json!([[0, 0]]),
    ];
    let original = Members::open(&golden("graph.tar.zst"));
    let mut tried = 0;
    for name in [
        "record.json",
        "provenance.json",
        "circumstances.json",
        "ensembles/0000/map.json",
        "ensembles/0000/graph.json",
        "ensembles/0000/held.json",
    ] {
        let value = original.json(name);
        let mut pointers = Vec::new();
        places(&value, "", &mut pointers);
        for (number, pointer) in pointers.iter().enumerate() {
            for (kind, new) in strange.iter().enumerate() {
                // the first ensemble stands for the others, and every third value for its like
                let other = pointer.starts_with("/ensembles/1") || pointer.starts_with("/ensembles/2");
                if other || (number + kind) % 3 != 0 || value.pointer(pointer) == Some(new) {
                    continue;
                }
                let mut archive = original.clone();
                archive.edit_json(name, |value| *value.pointer_mut(pointer).unwrap() = new.clone());
                archive.seal();
                archive.write(&path);
                let found = examine(&path, anchors(&original));
                assert!(
                    found.is_none_or(|found| found == Conclusion::Fails),
                    "{name}: {new} at {pointer}: {found:?}"
                );
                tried += 1;
            }
        }
    }
    assert!(tried > 500, "{tried}");
}

proptest! {
    #![proptest_config(cases(300, 3))]

    /// Bytes of any member changed, put in or taken out, under a manifest made anew.
    #[test]
    fn changed_members_are_never_confirmed(member in any::<prop::sample::Index>(), at in any::<prop::sample::Index>(), byte in any::<u8>(), deed in 0u8..4) {
        let original = Members::open(&golden("gas.tar.zst"));
        let mut archive = original.clone();
        let end = archive.place("MANIFEST.sha256");
        let bytes = &mut archive.0[member.index(end + 1)].1;
        let at = at.index(bytes.len());
        match deed {
            0 => bytes[at] = byte,
            1 => bytes.insert(at, byte),
            2 => drop(bytes.remove(at)),
            _ => bytes.truncate(at),
        }
        if archive.0 != original.0 {
            archive.seal();
            let folder = tempfile::TempDir::new().unwrap();
            let path = folder.path().join("changed.tar.zst");
            archive.write(&path);
            let found = examine(&path, anchors(&original));
            let resealed = archive.0 == original.0;
            prop_assert!(resealed || found.is_none_or(|found| found == Conclusion::Fails), "{:?}", found);
        }
    }

    /// Bytes of the compressed file changed: whatever is confirmed has the very members that were drawn.
    #[test]
    fn changed_files_are_never_confirmed(at in any::<prop::sample::Index>(), byte in 1u8..=255, deed in 0u8..3) {
        let original = Members::open(&golden("gas.tar.zst"));
        let mut file = fs::read(golden("gas.tar.zst")).unwrap();
        let at = at.index(file.len());
        match deed {
            0 => file[at] ^= byte,
            1 => file.truncate(at),
            _ => file.insert(at, byte),
        }
        let folder = tempfile::TempDir::new().unwrap();
        let path = folder.path().join("changed.tar.zst");
        fs::write(&path, &file).unwrap();
        if examine(&path, anchors(&original)) == Some(Conclusion::Holds) {
            prop_assert!(Members::open(&path).0 == original.0);
        }
    }
}
