//! Records both ways: what golden archives hold is what `schema/` describes, and each record is written back byte for
//! byte; what a schema refuses, the reader refuses too, but for the texts that it only passes on.

use std::fs;
use std::path::Path;

use jsonschema::Validator;
use pastproof::archive::wire::{self, Circumstances, Map, Provenance, Record};
use pastproof::canonical;
use pastproof::error::Result;
use pastproof::plan::Plan;
use serde_json::{Value, json};

use crate::members::{Members, golden};
use crate::toml_json::toml_as_json;

fn schema(name: &str) -> Validator {
    let path = Path::new(env!("CARGO_MANIFEST_DIR"))
        .join("schema")
        .join(format!("{name}.schema.json"));
    let schema: Value = serde_json::from_str(&fs::read_to_string(path).unwrap()).unwrap();
    assert!(jsonschema::meta::is_valid(&schema), "{name}");
    jsonschema::draft202012::new(&schema).unwrap()
}

fn archives() -> Vec<(String, Members)> {
    let names = fs::read_dir(golden(""))
        .unwrap()
        .map(|entry| entry.unwrap().file_name().into_string().unwrap());
    let mut archives: Vec<_> = names
        .filter(|name| name.ends_with(".tar.zst"))
        .map(|name| {
            let members = Members::open(&golden(&name));
            (name, members)
        })
        .collect();
    archives.sort_by(|(one, _), (other, _)| one.cmp(other));
    assert!(archives.len() >= 7);
    archives
}

/// Reads a record as its kind and writes it again.
fn written_again(kind: &str, text: &[u8]) -> Result<Vec<u8>> {
    fn again<T: serde::Serialize + serde::de::DeserializeOwned>(
        kind: &str,
        word: &str,
        text: &[u8],
    ) -> Result<Vec<u8>> {
        wire::known_version(text, kind, word)?;
        canonical::to_bytes(&canonical::parse_canonical::<T>(text)?)
    }
    match kind {
        "record" => canonical::to_bytes(&Record::parse(text)?),
        "map" => again::<Map>(kind, wire::MAP, text),
        "provenance" => again::<Provenance>(kind, wire::PROVENANCE, text),
        "circumstances" => again::<Circumstances>(kind, wire::CIRCUMSTANCES, text),
        other => panic!("{other} is no kind of record"),
    }
}

const KINDS: [&str; 4] = ["record", "map", "provenance", "circumstances"];

/// The kind of record that a member is, if it is one.
fn kind_of(member: &str) -> Option<&'static str> {
    let file = member.rsplit('/').next()?.strip_suffix(".json")?;
    KINDS.into_iter().find(|kind| *kind == file)
}

#[test]
fn records_are_as_their_schemas_say_and_are_written_back_byte_for_byte() {
    let schemas = KINDS.map(|kind| (kind, schema(kind)));
    let mut seen = [0; KINDS.len()];
    for (archive, members) in archives() {
        for (name, bytes) in &members.0 {
            let Some(at) = KINDS.iter().position(|kind| Some(*kind) == kind_of(name)) else {
                continue;
            };
            seen[at] += 1;
            let (kind, schema) = &schemas[at];
            let value: Value = serde_json::from_slice(bytes).unwrap();
            let faults: Vec<_> = schema
                .iter_errors(&value)
                .map(|fault| format!("{fault} at {}", fault.instance_path()))
                .collect();
            assert!(faults.is_empty(), "{archive}: {name}: {faults:?}");
            assert!(written_again(kind, bytes).unwrap() == *bytes, "{archive}: {name}");
        }
    }
    assert!(seen.iter().all(|count| *count >= 7), "{seen:?}");
}

#[test]
fn plans_are_as_their_schema_says() {
    let schema = schema("plan");
    for (archive, members) in archives() {
        let value = toml_as_json(members.text("plan.toml"));
        let faults: Vec<_> = schema
            .iter_errors(&value)
            .map(|fault| format!("{fault} at {}", fault.instance_path()))
            .collect();
        assert!(faults.is_empty(), "{archive}: {faults:?}");
        assert_eq!(members.plan().text(), members.bytes("plan.toml"));
    }
}

/// Who must refuse a wrong record.
#[derive(Clone, Copy, PartialEq, Eq)]
enum By {
    /// Schema and reader.
    Both,
    /// The schema alone: the reader passes the value on, and audit holds it against what it recomputes, or nothing
    /// depends on it.
    Schema,
}

/// A record of each kind with one value replaced, or taken out where there is none.
const WRONG: &[(&str, &str, Option<&str>, By)] = &[
    ("record", "/record", Some(r#""pastproof record 2""#), By::Both),
    ("record", "/stream/name", Some(r#""pastproof stream 2""#), By::Both),
    ("record", "/stream/sha256", None, By::Both),
    ("record", "/seed", Some(r#""12""#), By::Both),
    ("record", "/seed", Some("12"), By::Both),
    ("record", "/seed_rule", None, By::Both),
    ("record", "/seed_rule/rule", Some(r#""dice""#), By::Schema),
    ("record", "/plan_digest", None, By::Both),
    ("record", "/ensembles", Some("[]"), By::Both),
    ("record", "/ensembles", Some("{}"), By::Both),
    ("record", "/ensembles/0/samples", Some("0"), By::Both),
    ("record", "/ensembles/0/samples", Some(r#""24""#), By::Both),
    ("record", "/ensembles/0/depth_limit", Some("63"), By::Both),
    ("record", "/ensembles/0/depth_limit", Some("-1"), By::Both),
    ("record", "/ensembles/0/stopping", Some(r#""when it suits""#), By::Both),
    ("record", "/ensembles/0/key", Some(r#""""#), By::Both),
    ("record", "/ensembles/0/samples_root", None, By::Both),
    ("record", "/ensembles/0/state/0/bits", Some("2"), By::Schema),
    ("record", "/ensembles/0/state/0/values", None, By::Both),
    ("record", "/ensembles/0/law", None, By::Both),
    ("record", "/ensembles/0/law/law", Some(r#""potts""#), By::Schema),
    ("record", "/ensembles/0/law/beta", Some("0"), By::Schema),
    ("record", "/ensembles/0/law/lattice/extents", Some("[0]"), By::Schema),
    ("record", "/surplus", Some("1"), By::Both),
    ("record", "/ensembles/0/surplus", Some("1"), By::Both),
    ("map", "/map", Some(r#""pastproof map 2""#), By::Both),
    ("map", "/map", None, By::Both),
    ("map", "/update", Some(r#""bond heat bath""#), By::Schema),
    ("map", "/digits", Some(r#""decimal""#), By::Schema),
    ("map", "/lanes", Some("[0]"), By::Schema),
    ("map", "/lanes", Some("[-1]"), By::Both),
    ("map", "/thresholds", None, By::Both),
    ("map", "/thresholds/0", Some(r#"["0"]"#), By::Both),
    ("map", "/thresholds/0", Some(r#"["0","1","2"]"#), By::Both),
    ("map", "/thresholds/0/0", Some(r#""1/0""#), By::Both),
    ("map", "/thresholds/0/0", Some(r#""2/4x""#), By::Both),
    ("map", "/thresholds/0/1", Some("1"), By::Both),
    ("map", "/thresholds/0/1", Some(r#""0x1""#), By::Schema),
    ("map", "/surplus", Some("1"), By::Both),
    (
        "provenance",
        "/provenance",
        Some(r#""pastproof provenance 2""#),
        By::Both,
    ),
    ("provenance", "/program", Some("null"), By::Both),
    ("provenance", "/program/name", Some(r#""another""#), By::Schema),
    ("provenance", "/program/version", None, By::Both),
    ("provenance", "/program/revision/clean", Some(r#""yes""#), By::Both),
    ("provenance", "/program/revision/commit", Some(r#""HEAD""#), By::Schema),
    ("provenance", "/program/cargo_lock", Some(r#""12""#), By::Both),
    ("provenance", "/repository", None, By::Both),
    ("provenance", "/repository/patch", Some(r#""../x""#), By::Schema),
    ("provenance", "/repository/difference", Some(r#""12""#), By::Both),
    ("provenance", "/repository/remote", None, By::Both),
    ("provenance", "/commitment", Some("1"), By::Both),
    ("provenance", "/commitment", None, By::Both),
    ("provenance", "/ledger", Some("{}"), By::Both),
    ("provenance", "/surplus", Some("null"), By::Both),
    ("circumstances", "/circumstances", Some("1"), By::Both),
    ("circumstances", "/start", None, By::Both),
    ("circumstances", "/start", Some(r#""yesterday""#), By::Schema),
    ("circumstances", "/end", Some("0"), By::Both),
    ("circumstances", "/cpu_features", Some("null"), By::Both),
    ("circumstances", "/threads", Some("-1"), By::Both),
    ("circumstances", "/threads", Some("0"), By::Schema),
    ("circumstances", "/seconds", Some("[1]"), By::Both),
    ("circumstances", "/seconds", Some(r#"["1"]"#), By::Schema),
    ("circumstances", "/surplus", Some("1"), By::Both),
];

/// Sets or takes out the value at a JSON pointer (RFC 6901).
fn edited(mut value: Value, pointer: &str, new: Option<&str>) -> Value {
    let (parent, name) = pointer.rsplit_once('/').unwrap();
    match (value.pointer_mut(parent).unwrap(), new) {
        (Value::Object(fields), Some(new)) => {
            fields.insert(name.into(), serde_json::from_str(new).unwrap());
        }
        (Value::Object(fields), None) => {
            fields.remove(name).unwrap();
        }
        (Value::Array(items), Some(new)) => items[name.parse::<usize>().unwrap()] = serde_json::from_str(new).unwrap(),
        (other, _) => panic!("{pointer}: {other}"),
    }
    value
}

#[test]
fn wrong_records_are_refused_by_schema_and_reader() {
    // the graph's archive has a value in every field
    let members = Members::open(&golden("graph.tar.zst"));
    for kind in KINDS {
        let schema = schema(kind);
        let name = if kind == "map" {
            "ensembles/0000/map.json".to_string()
        } else {
            format!("{kind}.json")
        };
        let good = members.json(&name);
        let wrong: Vec<_> = WRONG.iter().filter(|(of, ..)| *of == kind).collect();
        assert!(wrong.len() >= 5, "{kind}");
        for (_, pointer, new, by) in wrong {
            let value = edited(good.clone(), pointer, *new);
            assert!(
                !schema.is_valid(&value),
                "{kind}: the schema takes {new:?} at {pointer}"
            );
            let read = written_again(kind, &canonical::to_bytes(&value).unwrap());
            assert_eq!(read.is_err(), *by == By::Both, "{kind}: {new:?} at {pointer}");
        }
    }
}

#[test]
fn wrong_plans_are_refused_by_schema_and_reader() {
    let schema = schema("plan");
    let members = Members::open(&golden("corners.tar.zst"));
    let good = members.text("plan.toml");
    for (old, new) in [
        ("title = \"Larkmoor corners\"", ""),
        ("title = \"Larkmoor corners\"", "title = 3"),
        ("title = ", "subtitle = "),
        ("hex = \"4c", "hex = \""),
        ("law = \"lattice-gas\"", "law = \"potts\""),
        ("kind = \"triangular\"", "kind = \"kagome\""),
        ("extents = [1]", "extents = []"),
        ("extents = [1]", "extents = [0]"),
        ("boundary = \"free\"", "boundary = \"wired\""),
        ("temperature = [2, \"8/3\"]", "temperature = [2, \"8/0\"]"),
        ("temperature = [2, \"8/3\"]", "temperature = []"),
        ("samples = 2", "samples = 0"),
        ("depth_limit = 40", "depth_limit = 63"),
        ("held = \"held.csv\"", "held = \"../held.csv\""),
        ("activity = 0", "activity = -1"),
        ("activity = 0", "activity = 0\nfield = 1"),
    ] {
        assert_eq!(good.matches(old).count(), 1, "{old}");
        let text = good.replace(old, new);
        assert!(
            !schema.is_valid(&toml_as_json(&text)),
            "the schema takes {new:?} for {old:?}"
        );
        let read = Plan::read(text.as_bytes(), &mut |name| {
            Ok(members.bytes(&format!("inputs/{name}")).to_vec())
        });
        assert!(read.is_err(), "the reader takes {new:?} for {old:?}");
    }
}

/// One value has one text: other orders of keys, blanks and other writings of a number are refused.
#[test]
fn records_have_one_text() {
    let members = Members::open(&golden("graph.tar.zst"));
    for kind in KINDS.into_iter().filter(|kind| *kind != "map") {
        let name = format!("{kind}.json");
        let text = members.text(&name);
        let value = members.json(&name);
        let mut reversed: Vec<_> = value.as_object().unwrap().iter().collect();
        reversed.reverse();
        let reversed: Vec<_> = reversed
            .iter()
            .map(|(key, value)| format!("{}:{value}", json!(key)))
            .collect();
        for other in [
            format!(" {text}"),
            format!("{text}\n"),
            text.replacen(':', ": ", 1),
            text.replacen("\"pastproof", "\"\\u0070astproof", 1),
            format!("{{{}}}", reversed.join(",")),
            serde_json::to_string_pretty(&value).unwrap(),
        ] {
            assert_ne!(other, text);
            assert!(written_again(kind, other.as_bytes()).is_err(), "{kind}: {other}");
        }
    }
}
