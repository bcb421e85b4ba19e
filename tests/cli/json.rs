//! Every `--json` answer against its schema in `schema/`, and each schema against a wrong answer.

use std::fs;
use std::path::Path;

use serde_json::{Value, json};

use crate::bench::{Bench, COLD};

fn schema(name: &str) -> Value {
    let path = Path::new(env!("CARGO_MANIFEST_DIR"))
        .join("schema")
        .join(format!("{name}.schema.json"));
    serde_json::from_str(&fs::read_to_string(path).unwrap()).unwrap()
}

fn check(name: &str, value: &Value) {
    let validator = jsonschema::validator_for(&schema(name)).unwrap();
    let faults: Vec<_> = validator
        .iter_errors(value)
        .map(|fault| format!("{fault} at {}", fault.instance_path()))
        .collect();
    assert!(faults.is_empty(), "{name}: {faults:?}\n{value}");
    // the schema must refuse: an unknown field, a missing field, a wrong type
    let fields = value.as_object().unwrap();
    let mut unknown = fields.clone();
    unknown.insert("surplus".into(), json!(1));
    assert!(
        !validator.is_valid(&Value::Object(unknown)),
        "{name} takes an unknown field"
    );
    for field in fields.keys() {
        let mut without = fields.clone();
        without.remove(field);
        assert!(
            !validator.is_valid(&Value::Object(without)),
            "{name} does without {field}"
        );
        let mut wrong = fields.clone();
        wrong.insert(field.clone(), json!({ "no": ["such", 1.5] }));
        assert!(
            !validator.is_valid(&Value::Object(wrong)),
            "{name} takes anything as {field}"
        );
    }
}

#[test]
fn answers_are_as_their_schemas_say() {
    let bench = Bench::new();
    bench.small();
    check("draw", &bench.json(0, &["draw", "plan.toml", "-o", "again.tar.zst"]));
    check("show", &bench.json(0, &["show", "small.tar.zst"]));
    check("replay", &bench.json(0, &["replay", "small.tar.zst", "0/3"]));
    check(
        "replay",
        &bench.json(0, &["replay", "small.tar.zst", "--all", "--fast"]),
    );
    let audit = bench.json(0, &["audit", "small.tar.zst"]);
    check("audit", &audit);
    assert_eq!(audit["conclusion"], "holds");
    check(
        "forecast",
        &bench.json(0, &["forecast", "plan.toml", "--minutes", "0.05"]),
    );
    bench.write("cold.toml", COLD);
    check(
        "forecast",
        &bench.json(1, &["forecast", "cold.toml", "--minutes", "0.05"]),
    );
    check("draw", &bench.json(6, &["draw", "cold.toml", "-o", "cold.tar.zst"]));
    check("show", &bench.json(6, &["show", "cold.tar.zst"]));
    let replay = bench.json(6, &["replay", "cold.tar.zst", "0/0"]);
    check("replay", &replay);
    assert_eq!(replay["conclusion"], "incomplete");
    check("audit", &bench.json(6, &["audit", "cold.tar.zst"]));
    check(
        "audit",
        &bench.json(1, &["audit", "small.tar.zst", "--root", &"0".repeat(64)]),
    );
}

#[test]
fn errors_are_objects_too() {
    let bench = Bench::new();
    bench.small();
    for (verb, code, arguments, known) in [
        ("draw", 2, &["draw", "absent.toml"][..], "request.missing"),
        (
            "draw",
            2,
            &["draw", "plan.toml", "-o", "small.tar.zst"],
            "request.exists",
        ),
        ("draw", 2, &["draw", "--nonsense"], "request.flags"),
        ("forecast", 2, &["forecast", "absent.toml"], "request.missing"),
        ("replay", 2, &["replay", "small.tar.zst", "7/0"], "request.value"),
        ("show", 3, &["show", "plan.toml"], "archive.damaged"),
        ("audit", 3, &["audit", "plan.toml"], "archive.damaged"),
        ("audit", 4, &["audit", "absent.tar.zst"], "machine.io"),
    ] {
        let answer = bench.json(code, arguments);
        check(verb, &answer);
        assert_eq!(answer["error"]["code"], known, "{answer}");
    }
}
