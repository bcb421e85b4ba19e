//! Archives drawn once and frozen: every later program must read, confirm and redraw them.
//!
//! `archives/INDEX.toml` lists them; roots and seals stand here a second time, so that an archive and its line cannot
//! be replaced together unseen.

use std::collections::BTreeSet;
use std::fs;

use pastproof::archive::reading::Run;
use pastproof::audit::replay::{Which, replay};
use pastproof::audit::seal::{Anchors, audit};
use pastproof::audit::{Answer, Conclusion};
use pastproof::engine::Stop;
use pastproof::engine::coupling::Proof;
use pastproof::engine::crew::Settings;
use pastproof::observer::Silent;
use pastproof::plan::Plan;
use pastproof::quantity::{Digest, EnsembleIndex, SampleIndex, Seed};
use serde::Deserialize;

use crate::drawing::Drawing;
use crate::members::{Members, golden};
use crate::toml_json::toml_as_json;

/// File, root, seal: noted when the archives were drawn (revision 6777ca6ccdd9 of this program).
const PINNED: [(&str, &str, &str); 7] = [
    (
        "torus.tar.zst",
        "4af84c3a9de0a151ab999dccfd341615078da2186f1f1c1ca10fa728326558b0",
        "8f8aa5f6bdd4baa4a68a7a1dc834a30cd7acc262b04935d586119fe50c7b8f90",
    ),
    (
        "graph.tar.zst",
        "b3c981bc3fc84599df5ee44bd14aab8901d793a7ca5ac37c1930ad8f2193736f",
        "969e2fb0bb7c6e6c4f9471f178f986c62f7c7ee5fd0522c84c009e7d2820c53c",
    ),
    (
        "unfinished.tar.zst",
        "1a082648e2a17335bac50b7ff489864ee97f968c5662fa0f9d43c736e9f5f137",
        "a35e7a784f05ce0a2726dc82e4b82eb7f6f3b25259ed27b7e291664b0635a69d",
    ),
    (
        "strips.tar.zst",
        "5b1013bd5b9d486a943123506926ccc8380fd9440d7806857c7967b0e00b1aa2",
        "a2626e7c83d33dbe980e15c840ea4d05943a69c141387fa5ac15808f6d8bd642",
    ),
    (
        "mixed.tar.zst",
        "ca119751e59e87dd008679b21b44bfda40e53abcb878eafd6bc9f5cf6d76865f",
        "b5a4060c8f91aa120a9f338d17f5ae0d94d91a314a443409a58ef40e67b49ad4",
    ),
    (
        "gas.tar.zst",
        "96ad179a61158e0d26a1f98a5ca007bc68045c72245f7d91a4db27067f9012a9",
        "769aa5ebf2a94b0d42f07d96905b4d9e5613bcec0b71513ea6e920774ddeb550",
    ),
    (
        "corners.tar.zst",
        "5f4664580bf23325d5ca9638ad3c6e9bdafdfd1b240e87e5249e9be2473f7e8f",
        "4bd99a4966cfa9a741fcc3a7061dd71e4027509458140dc33d0b8b714e38dfd8",
    ),
];

/// Bytes of all archives together.
const LARGEST: u64 = 300_000;

/// The archive of which only [`SOME`] samples are drawn again, to save time; the others are small.
const LARGE: &str = "strips.tar.zst";
/// The ends of both members of [`LARGE`], and its first sample of depth 1.
const SOME: [u64; 4] = [0, 17, 63, 64];

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct Index {
    archive: Vec<Listed>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct Listed {
    file: String,
    what: String,
    sha256: Digest,
    root: Digest,
    seal: Digest,
    conclusion: String,
    samples: u64,
    unfinished: u64,
}

impl Listed {
    fn conclusion(&self) -> Conclusion {
        match self.conclusion.as_str() {
            "holds" => Conclusion::Holds,
            "incomplete" => Conclusion::Incomplete,
            other => panic!("{other}: a golden archive holds or is incomplete"),
        }
    }
}

fn listed() -> Vec<Listed> {
    let text = fs::read_to_string(golden("INDEX.toml")).unwrap();
    let index: Index = serde_json::from_value(toml_as_json(&text)).unwrap();
    assert_eq!(index.archive.len(), PINNED.len());
    index.archive
}

#[test]
fn every_archive_is_listed_and_all_are_small() {
    let mut found = BTreeSet::new();
    let mut bytes = 0;
    for entry in fs::read_dir(golden("")).unwrap() {
        let entry = entry.unwrap();
        found.insert(entry.file_name().into_string().unwrap());
        bytes += entry.metadata().unwrap().len();
    }
    let expected = listed().into_iter().map(|line| line.file).chain(["INDEX.toml".into()]);
    assert_eq!(found, expected.collect());
    assert!(bytes < LARGEST, "{bytes} bytes");
}

#[test]
fn every_archive_is_the_file_that_was_drawn() {
    for (line, (file, root, seal)) in listed().iter().zip(PINNED) {
        assert_eq!(line.file, file);
        assert!(!line.what.is_empty());
        assert_eq!(line.root, Digest::parse(root).unwrap(), "{file}");
        assert_eq!(line.seal, Digest::parse(seal).unwrap(), "{file}");
        assert_eq!(Digest::of(&fs::read(golden(file)).unwrap()), line.sha256, "{file}");
        let members = Members::open(&golden(file));
        assert_eq!(Digest::of(members.bytes("record.json")), line.root, "{file}");
        assert_eq!(Digest::of(members.bytes("MANIFEST.sha256")), line.seal, "{file}");
        // the manifest, line by line, without the library's reader of it
        let above = &members.0[..members.place("MANIFEST.sha256")];
        let lines: String = above
            .iter()
            .map(|(name, bytes)| format!("{}  {name}\n", Digest::of(bytes)))
            .collect();
        assert_eq!(members.text("MANIFEST.sha256"), lines, "{file}");
        let told = &members.json("record.json")["ensembles"];
        let samples: u64 = told
            .as_array()
            .unwrap()
            .iter()
            .map(|ensemble| ensemble["samples"].as_u64().unwrap())
            .sum();
        assert_eq!(samples, line.samples, "{file}");
    }
}

#[test]
fn every_archive_is_confirmed() {
    for line in listed() {
        let anchors = Anchors {
            root: Some(line.root),
            seal: Some(line.seal),
        };
        let report = audit(&golden(&line.file), anchors, &Silent).unwrap();
        let all_hold = report.checks.iter().all(|check| check.answer == Answer::Holds);
        assert!(all_hold, "{}: {:?}", line.file, report.checks);
        assert_eq!(report.conclusion, line.conclusion(), "{}", line.file);
        assert_eq!(
            (report.samples, report.unfinished),
            (line.samples, line.unfinished),
            "{}",
            line.file
        );
        assert!(report.anchored && report.attested.is_empty());
    }
}

#[test]
fn every_sample_is_drawn_again() {
    for line in listed() {
        let run = Run::open(&golden(&line.file)).unwrap();
        let again = |which| {
            replay(
                &run,
                which,
                Proof::Full,
                &Settings::default(),
                &Silent,
                &Stop::default(),
            )
            .unwrap()
        };
        if line.file == LARGE {
            for sample in SOME {
                let report = again(Which::One(EnsembleIndex(0), SampleIndex(sample)));
                assert_eq!(report.conclusion, Conclusion::Holds, "{sample}: {:?}", report.checks);
            }
            continue;
        }
        let report = again(Which::All);
        assert_eq!(
            report.conclusion,
            line.conclusion(),
            "{}: {:?}",
            line.file,
            report.checks
        );
        assert_eq!(
            (report.replayed, report.unfinished),
            (line.samples, line.unfinished),
            "{}",
            line.file
        );
    }
}

/// An archive is enough to make the same archive again: plan, inputs and, for a seed from entropy, the seed.
#[test]
fn every_archive_is_made_again_from_itself() {
    for line in listed().into_iter().filter(|line| line.file != LARGE) {
        let folder = tempfile::TempDir::new().unwrap();
        let old = Members::open(&golden(&line.file));
        for (name, bytes) in &old.0 {
            let beside = name
                .strip_prefix("inputs/")
                .or_else(|| (name == "plan.toml").then_some(name));
            if let Some(beside) = beside {
                let path = folder.path().join(beside);
                fs::create_dir_all(path.parent().unwrap()).unwrap();
                fs::write(path, bytes).unwrap();
            }
        }
        let text = fs::read(folder.path().join("plan.toml")).unwrap();
        let plan = Plan::read(&text, &mut |name| Ok(fs::read(folder.path().join(name)).unwrap())).unwrap();
        let record = old.json("record.json");
        let recorded = Seed(Digest::parse(record["seed"].as_str().unwrap()).unwrap());
        let new = Drawing {
            seed: Some(recorded),
            threads: 3,
            first_depth: None,
            provenance: serde_json::from_value(old.json("provenance.json")).unwrap(),
            patch: old
                .has("difference.patch")
                .then(|| old.bytes("difference.patch").to_vec()),
        }
        .of(&plan);
        assert_eq!(Digest::of(new.bytes("record.json")), line.root, "{}", line.file);
        let names = |members: &Members| members.0.iter().map(|(name, _)| name.clone()).collect::<Vec<_>>();
        assert_eq!(names(&new), names(&old), "{}", line.file);
        // a later program may explain the archive in other words
        let apart = &["circumstances.json", "README.txt"];
        for ((name, old), (_, new)) in old.without(apart).into_iter().zip(new.without(apart)) {
            assert!(old == new, "{}: {name} differs", line.file);
        }
    }
}
