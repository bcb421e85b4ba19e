//! `schema/plan.schema.json` against the reader: good plans pass both, wrong ones neither.

use super::*;

#[path = "../../../tests/spec/toml_json.rs"]
mod toml_json;

#[test]
fn the_schema_takes_good_plans_and_refuses_wrong_ones() {
    let schema: Value = serde_json::from_str(include_str!("../../../schema/plan.schema.json")).unwrap();
    assert!(jsonschema::meta::is_valid(&schema));
    let schema = jsonschema::draft202012::new(&schema).unwrap();
    let valid = |text: &str| schema.is_valid(&toml_json::toml_as_json(text));
    let files: Files<'_> = &[
        ("bonds.csv", b"a,b\n"),
        ("sites.csv", b"a\nb\nc\n"),
        ("in/.held+sites.csv", b"c,0\n"),
        ("held.csv", b"1,1\n"),
    ];
    let seeded = |line: &str| square("beta = 1").replace("\n[[", &format!("\n[seed]\n{line}\n[["));
    let gas = |line: &str| square(line).replace("ising", "lattice-gas");
    for text in [
        square("beta = 0.44"),
        square("beta = [0.4, \"critical\", \"1/3\", -2, \"1e-3\"]\ncoupling = [1, \"-1/2\"]\nfield = 0.5"),
        square("temperature = [2.5, \"5/2000\"]\nheld = \"held.csv\"\ndepth_limit = 62\nfirst_depth = 1"),
        square("beta = 1").replace("16]", "16], boundary = [\"plus\", \"free\"]"),
        square("beta = 1").replace("hypercubic", "honeycomb"),
        sites("beta = 1\nheld = \"in/.held+sites.csv\""),
        graph("activity = 2").replace("ising", "lattice-gas"),
        gas("activity = [0, \"6/5\"]"),
        seeded("phrase = \"Larkmoor\""),
        seeded(&format!("hex = \"{}\"", "aF".repeat(32))),
    ] {
        assert!(read(&text, files).is_ok(), "{:?} {text}", read(&text, files));
        assert!(valid(&text), "{text}");
    }
    for text in [
        "title = \"x\"\n".to_string(),
        "title = \"x\"\nensemble = []\n".into(),
        square("beta = 1").replace("Larkmoor", ""),
        square("beta = 1").replace("Larkmoor", "a\\tb"),
        square("beta = 1").replace("= 3", "= 0"),
        square("beta = 1").replace("= 3", "= \"3\""),
        square("beta = 1").replace("ising", "potts"),
        square("beta = 1\ntemperature = 1"),
        square("temperature = 0"),
        square(""),
        square("beta = []"),
        square("beta = \"cold\""),
        square("beta = \"1/0\""),
        square("beta = 1\nactivity = 1"),
        square("beta = 1\ndepth_limit = 63"),
        square("beta = 1\nheld = \"../held.csv\""),
        square("beta = 1\nheld = \"a//b\""),
        square("beta = 1\nheld = \"c:b\""),
        square("beta = 1\nheld = \"a b\""),
        square("beta = 1\nheld = \"a/-b\""),
        square("beta = 1").replace("16, 16", "16, 0"),
        square("beta = 1")
            .replace("hypercubic", "triangular")
            .replace("16, 16", "16"),
        square("beta = 1").replace("hypercubic", "graph"),
        square("beta = 1").replace("16]", "16], boundary = \"wired\""),
        gas("activity = -1"),
        gas("activity = \"-1/2\""),
        seeded(""),
        seeded("phrase = \"\""),
        seeded("hex = \"12\""),
        seeded(&format!("phrase = \"a\"\nhex = \"{}\"", "0".repeat(64))),
    ] {
        assert!(read(&text, files).is_err(), "{text}");
        assert!(!valid(&text), "{text}");
    }
}
