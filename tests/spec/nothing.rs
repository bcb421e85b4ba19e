//! V03: where there is nothing to check, or nothing that this version knows, nobody says "holds".
//!
//! Each file of the corpus is put before `audit` and `replay`, and before the program, if it was built: no verdict
//! holds, and no exit code is 0.

use std::fs;
use std::path::Path;
use std::process::Command;

use pastproof::archive::reading::Run;
use pastproof::audit::Conclusion;
use pastproof::audit::replay::{Which, replay};
use pastproof::audit::seal::{Anchors, audit};
use pastproof::engine::Stop;
use pastproof::engine::coupling::Proof;
use pastproof::engine::crew::Settings;
use pastproof::error::{Class, Error};
use pastproof::observer::Silent;
use pastproof::plan::Plan;
use pastproof::quantity::Digest;
use serde_json::{Value, json};

use crate::drawing::Drawing;
use crate::forge::Reseal;
use crate::members::{Members, golden};

/// What a file of the corpus must lead to.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
enum Verdict {
    /// It is refused as an archive that cannot be read.
    Refused,
    /// It can be read, and audit and replay fail.
    Fails,
    /// All that is there is right, but no sample finished.
    Incomplete,
}

fn compressed(tar: &[u8]) -> Vec<u8> {
    zstd::encode_all(tar, 3).unwrap()
}

/// The bytes of an archive of these members.
fn written(members: &Members) -> Vec<u8> {
    let folder = tempfile::TempDir::new().unwrap();
    let path = folder.path().join("x");
    members.write(&path);
    fs::read(path).unwrap()
}

/// A golden archive, changed and sealed again.
fn changed(file: &str, change: impl FnOnce(&mut Members)) -> Vec<u8> {
    let original = Members::open(&golden(file));
    let mut members = original.clone();
    change(&mut members);
    members.reseal(&original, Reseal::Root);
    written(&members)
}

fn record(change: impl FnOnce(&mut Value)) -> Vec<u8> {
    changed("torus.tar.zst", |members| members.edit_record(change))
}

/// An ensemble whose table, tree and samples are gone, as far as files can say so.
fn emptied(members: &mut Members, planned: u64) {
    let header = members
        .text("ensembles/0000/samples.csv")
        .lines()
        .next()
        .unwrap()
        .to_string();
    members.set("ensembles/0000/samples.csv", header + "\n");
    members.set("ensembles/0000/tree.bin", Vec::new());
    let place = members.place("ensembles/0000/samples/0000.npy");
    members.0.remove(place);
    members.edit_record(|record| {
        record["ensembles"][0]["samples"] = json!(planned);
        record["ensembles"][0]["samples_root"] = json!(Digest::of(b""));
    });
}

fn corpus() -> Vec<(&'static str, Vec<u8>, Verdict)> {
    use Verdict::{Fails, Incomplete, Refused};
    let torus = Members::open(&golden("torus.tar.zst"));
    let only = |names: &[&str]| {
        let members = torus.0.iter().filter(|(name, _)| names.contains(&name.as_str()));
        written(&Members(members.cloned().collect()))
    };
    let tar = zstd::decode_all(fs::File::open(golden("torus.tar.zst")).unwrap()).unwrap();
    vec![
        ("an empty file", Vec::new(), Refused),
        ("a text", b"title = \"Larkmoor\"\n".to_vec(), Refused),
        ("a tar that is not compressed", tar.clone(), Refused),
        ("an empty frame", compressed(b""), Refused),
        ("a tar without members", compressed(&[0; 1024]), Refused),
        (
            "an index alone",
            {
                let file = fs::read(golden("torus.tar.zst")).unwrap();
                let magic = 0x184D_2A57_u32.to_le_bytes();
                file[file.windows(4).rposition(|window| window == magic).unwrap()..].to_vec()
            },
            Refused,
        ),
        ("a tar without its end", compressed(&tar[..tar.len() - 1024]), Refused),
        ("a README alone", only(&["README.txt"]), Refused),
        ("a manifest alone", only(&["MANIFEST.sha256"]), Refused),
        ("a record alone", only(&["record.json"]), Refused),
        (
            "plan and record alone",
            only(&["plan.toml", "record.json", "STREAM.md", "MANIFEST.sha256"]),
            Refused,
        ),
        ("no record", changed_without("record.json"), Refused),
        (
            "an empty record",
            changed("torus.tar.zst", |members| members.set("record.json", *b"{}")),
            Refused,
        ),
        (
            "no ensembles",
            record(|record| record["ensembles"] = json!([])),
            Refused,
        ),
        (
            "no samples in one ensemble of five",
            record(|record| record["ensembles"][3]["samples"] = json!(0)),
            Refused,
        ),
        (
            "no samples, and no rows either",
            changed("torus.tar.zst", |members| emptied(members, 0)),
            Refused,
        ),
        (
            "samples planned, but no rows",
            changed("torus.tar.zst", |members| emptied(members, 24)),
            Fails,
        ),
        (
            "a later record",
            record(|record| record["record"] = json!("pastproof record 2")),
            Refused,
        ),
        (
            "a later stream",
            record(|record| record["stream"]["name"] = json!("pastproof stream 2")),
            Refused,
        ),
        (
            "a later law",
            record(|record| record["ensembles"][1]["law"]["law"] = json!("potts")),
            Refused,
        ),
        (
            "a later map",
            changed("torus.tar.zst", |members| {
                members.edit_json("ensembles/0002/map.json", |map| map["map"] = json!("pastproof map 2"));
            }),
            Refused,
        ),
        ("nothing but unfinished samples", none_finished(), Incomplete),
    ]
}

fn changed_without(name: &str) -> Vec<u8> {
    let mut members = Members::open(&golden("torus.tar.zst"));
    let place = members.place(name);
    members.0.remove(place);
    members.seal();
    written(&members)
}

/// A run so cold that no sample finishes.
fn none_finished() -> Vec<u8> {
    let plan = "title = \"Larkmoor\"\nseed = { phrase = \"Larkmoor\" }\n[[ensemble]]\nlaw = \"ising\"\nbeta = 2\n\
                lattice = { kind = \"hypercubic\", extents = [4, 4] }\nsamples = 3\ndepth_limit = 3\n";
    let plan = Plan::read(plan.as_bytes(), &mut |_| unreachable!()).unwrap();
    written(&Drawing::default().of(&plan))
}

#[test]
fn where_there_is_nothing_to_check_nobody_says_holds() {
    let folder = tempfile::TempDir::new().unwrap();
    let path = folder.path().join("nothing.tar.zst");
    let corpus = corpus();
    assert!(corpus.len() >= 15);
    for (what, bytes, verdict) in corpus {
        fs::write(&path, bytes).unwrap();
        let refused = |error: Error| {
            assert_eq!(error.class(), Class::Archive, "{what}: {error}");
            assert_eq!(
                error.location().path.as_deref(),
                Some(path.as_path()),
                "{what}: {error}"
            );
            None
        };
        let audited = audit(&path, Anchors::default(), &Silent).map_or_else(refused, |report| Some(report.conclusion));
        let replayed = |which| {
            let run = Run::open(&path)?;
            replay(
                &run,
                which,
                Proof::Full,
                &Settings::default(),
                &Silent,
                &Stop::default(),
            )
        };
        let all = replayed(Which::All).map_or_else(refused, |report| Some(report.conclusion));
        let (audit_must, replay_must) = match verdict {
            Verdict::Refused => (None, None),
            Verdict::Fails => (Some(Conclusion::Fails), Some(Conclusion::Fails)),
            Verdict::Incomplete => (Some(Conclusion::Incomplete), Some(Conclusion::Incomplete)),
        };
        assert_eq!((audited, all), (audit_must, replay_must), "{what}");
        program_says_no(what, &path, verdict);
    }
}

/// The exit codes of the program, if it was built.
fn program_says_no(what: &str, path: &Path, verdict: Verdict) {
    let Some(program) = option_env!("CARGO_BIN_EXE_pastproof").filter(|program| Path::new(program).exists()) else {
        return;
    };
    let code = |arguments: &[&str]| {
        let mut command = Command::new(program);
        let ended = command.args(arguments).arg(path).output().unwrap();
        ended.status.code().unwrap()
    };
    let (audit_must, replay_must) = match verdict {
        Verdict::Refused => (3, 3),
        Verdict::Fails => (1, 1),
        Verdict::Incomplete => (6, 6),
    };
    assert_eq!(
        (code(&["audit"]), code(&["replay", "--all"])),
        (audit_must, replay_must),
        "{what}"
    );
}
