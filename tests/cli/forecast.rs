//! What `forecast` says: numbers for what can be drawn, plain words for what cannot, and when it ends.

use std::io::{BufRead, BufReader};
use std::process::{Command, Stdio};
use std::time::{Duration, Instant};

use serde_json::Value;

use crate::bench::{Bench, SMALL, ended};

/// One ensemble of [`SMALL`] with other words in it.
fn plan(changes: &[(&str, &str)]) -> String {
    changes
        .iter()
        .fold(SMALL.to_string(), |plan, (from, to)| plan.replace(from, to))
}

fn middle(figure: &Value) -> f64 {
    figure["middle"]
        .as_f64()
        .unwrap_or_else(|| panic!("no estimate: {figure}"))
}

/// The exact means of a 3 x 3 square with free ends, 2.4998 sweeps at beta = 0.2 and 14.105 at 0.6
/// (`tests/values/coupling_time.json`), within what 64 trials tell (two standard errors are a quarter).
#[test]
fn numbers_are_those_of_the_law() {
    let bench = Bench::new();
    let changes = [
        ("[4, 4]", "[3, 3], boundary = \"free\""),
        ("0.2, \"0.30\"", "0.2, 0.6"),
        ("samples = 5", "samples = 1000"),
    ];
    bench.write("plan.toml", &plan(&changes));
    let told = bench.json(0, &["forecast", "plan.toml", "--minutes", "0.2"]);
    assert_eq!(told["advisable"], true);
    for (ensemble, mean) in told["ensembles"]
        .as_array()
        .unwrap()
        .iter()
        .zip([2.499_847, 14.105_154])
    {
        assert_eq!(ensemble["basis"], "trials");
        assert!(ensemble["met"].as_u64().unwrap() >= 64, "{ensemble}");
        let found = middle(&ensemble["coupling_time"]);
        assert!((found / mean - 1.0).abs() < 0.25, "{mean}: {ensemble}");
        assert!(
            ensemble["coupling_time_99"].as_f64().unwrap() > 1.5 * mean,
            "{ensemble}"
        );
        assert!(ensemble["core_hours_then"].as_f64().unwrap() <= middle(&ensemble["core_hours"]) * 1.001);
    }
    let sum: f64 = (0..2).map(|at| middle(&told["ensembles"][at]["core_hours"])).sum();
    assert!((middle(&told["core_hours"]) / sum - 1.0).abs() < 0.01);

    // the file that a run then writes is about as large as was said
    let drawn = bench.json(0, &["draw", "plan.toml", "-o", "x.tar.zst"]);
    let ratio = told["archive_bytes"].as_f64().unwrap() / drawn["bytes"].as_f64().unwrap();
    assert!((0.8..=1.25).contains(&ratio), "archive: said {ratio} times what it is");

    // a limit that some samples will not meet, and one that is enough
    bench.write("plan.toml", &(plan(&changes) + "depth_limit = 4\n"));
    let told = bench.json(1, &["forecast", "plan.toml", "--minutes", "0.2"]);
    assert_eq!(
        told["ensembles"][0]["obstacles"],
        Value::Array(Vec::new()),
        "16 sweeps are enough at 0.2"
    );
    let obstacle = &told["ensembles"][1]["obstacles"][0];
    assert_eq!(obstacle["code"], "depth_limit");
    // exactly 296 of 1000 take more than 16 sweeps, 3 more than 64 and none in 10^8 more than 512
    let words: Vec<&str> = obstacle["finding"].as_str().unwrap().split(' ').collect();
    let count: f64 = words[1].parse().unwrap();
    assert!((180.0..=420.0).contains(&count) && words[0] == "about", "{obstacle}");
    let enough: u8 = words.last().unwrap().parse().unwrap();
    assert!((7..=10).contains(&enough), "{obstacle}");
}

/// Far below the critical temperature, and frustrated: said at once, with what to do instead, exit code 1. A hot
/// ensemble beside them has its numbers all the same.
#[test]
fn what_cannot_finish_is_not_advisable() {
    let bench = Bench::new();
    let frustrated = "[[ensemble]]\nlaw = \"ising\"\nlattice = { kind = \"triangular\", extents = [12, 12] }\nbeta = -2\nsamples = 5\n";
    bench.write(
        "plan.toml",
        &(plan(&[("[4, 4]", "[32, 32]"), ("\"0.30\"", "1.5")]) + frustrated),
    );
    let begin = Instant::now();
    let told = bench.expect(1, &["forecast", "plan.toml", "--minutes", "10"]);
    assert!(begin.elapsed() < Duration::from_secs(60), "a short look is enough");
    for part in [
        "not advisable: 2 of 3 ensembles",
        "ensemble 1 (beta = 1.5): it lies below the critical temperature",
        "Raise the temperature",
        "random-cluster",
        "ensemble 2 (beta = -2): it is frustrated",
        "hold more sites",
        "> a lower bound: no trial of the pilot met",
        "not shown:",
    ] {
        let text = told.out.split_whitespace().collect::<Vec<_>>().join(" ");
        assert!(text.contains(part), "{part}\n{}", told.out);
    }
    assert!(!told.out.contains("next: pastproof draw"), "{}", told.out);
    let json = bench.json(1, &["forecast", "plan.toml"]);
    assert_eq!(json["advisable"], false);
    let codes = |at: usize| {
        json["ensembles"][at]["obstacles"]
            .as_array()
            .unwrap()
            .iter()
            .map(|one| one["code"].clone())
            .collect::<Vec<_>>()
    };
    assert_eq!(
        [codes(0), codes(1), codes(2)],
        [vec![], vec!["cold".into()], vec!["frustrated".into()]] as [Vec<Value>; 3]
    );
    assert!(json["ensembles"][1]["core_hours"]["more_than"].as_f64().unwrap() > 0.0);
    assert!(
        json["core_hours"]["more_than"].as_f64().unwrap() > 0.0,
        "a sum with a bound in it is a bound"
    );
    assert!(middle(&json["ensembles"][0]["core_hours"]) > 0.0);
}

/// An ordered phase that no closed form tells of: simple cubic at beta = 0.3 (critical: 0.2217).
#[test]
fn an_ordered_phase_is_told_by_its_slowness() {
    let bench = Bench::new();
    let changes = [("[4, 4]", "[10, 10, 10]"), ("0.2, \"0.30\"", "0.3")];
    bench.write("plan.toml", &plan(&changes));
    let told = bench.json(1, &["forecast", "plan.toml", "--minutes", "0.3"]);
    assert_eq!(told["ensembles"][0]["obstacles"][0]["code"], "slow", "{told}");
    assert!(
        told["pilot_seconds"].as_f64().unwrap() < 17.0,
        "no time is spent once it is clear: {told}"
    );
}

/// A critical film that no pilot of seconds can sample: extrapolated from smaller ones, with the exponent near 2.2, and
/// marked as such.
#[test]
fn what_takes_too_long_is_extrapolated_and_marked() {
    let bench = Bench::new();
    bench.write(
        "plan.toml",
        &plan(&[("[4, 4]", "[2048, 2048]"), ("[0.2, \"0.30\"]", "\"critical\"")]),
    );
    let told = bench.json(0, &["forecast", "plan.toml", "--minutes", "0.3"]);
    let ensemble = &told["ensembles"][0];
    assert_eq!(ensemble["basis"], "smaller lattices", "{ensemble}");
    let exponent = ensemble["smaller"]["exponent"].as_f64().unwrap();
    assert!((1.5..=2.9).contains(&exponent), "{ensemble}");
    assert!(middle(&ensemble["core_hours"]) > 24.0, "{ensemble}");
    let told = bench.expect(0, &["forecast", "plan.toml", "--minutes", "0.1"]);
    assert!(
        told.out.contains("~ extrapolated from smaller lattices") || told.out.contains("> a lower bound"),
        "{}",
        told.out
    );
    assert!(told.out.contains("More --minutes tell more"), "{}", told.out);
}

/// Thirty ensembles in three seconds: all have numbers, and the command ends in time (four more for a busy machine
/// that starts it slowly, and for the sums).
#[test]
fn a_short_pilot_of_a_long_plan_ends_in_time() {
    let bench = Bench::new();
    let betas: Vec<String> = (1..=30).map(|at| format!("0.{:02}", at)).collect();
    bench.write(
        "plan.toml",
        &plan(&[("[4, 4]", "[16, 16]"), ("0.2, \"0.30\"", &betas.join(", "))]),
    );
    let begin = Instant::now();
    let told = bench.json(0, &["forecast", "plan.toml", "--minutes", "0.05"]);
    assert!(begin.elapsed() < Duration::from_secs(13), "{:?}", begin.elapsed());
    for ensemble in told["ensembles"].as_array().unwrap() {
        assert_eq!(ensemble["basis"], "trials", "{ensemble}");
    }
}

/// The sum of many threads is no other than that of one; only the wall time is.
#[test]
fn threads_share_the_wall_time() {
    let bench = Bench::new();
    bench.write("plan.toml", &plan(&[("samples = 5", "samples = 1000")]));
    let told = bench.json(0, &["forecast", "plan.toml", "--minutes", "0.1", "--threads", "500"]);
    assert_eq!(told["threads"], 500);
    let ratio = middle(&told["core_hours"]) / middle(&told["wall_hours"]);
    assert!((499.0..=501.0).contains(&ratio), "{ratio}");
}

#[test]
fn wrong_requests_have_code_2() {
    let bench = Bench::new();
    bench.write("plan.toml", SMALL);
    for minutes in ["0", "-1", "x", "nan", "inf", "1e9"] {
        bench.expect(2, &["forecast", "plan.toml", &format!("--minutes={minutes}")]);
    }
    bench.expect(2, &["forecast", "absent.toml"]);
    bench.write(
        "huge.toml",
        &plan(&[("[4, 4]", "[8000, 8000]"), ("samples = 5", "samples = 100000000")]),
    );
    let huge = bench.expect(2, &["forecast", "huge.toml"]);
    assert!(
        huge.err
            .contains("huge.toml: line 5: ensemble 0: samples: bytes of all samples"),
        "{}",
        huge.err
    );
    // a law that cannot be: no critical point is known in three dimensions
    bench.write(
        "no.toml",
        &plan(&[("[4, 4]", "[4, 4, 4]"), ("[0.2, \"0.30\"]", "\"critical\"")]),
    );
    let refused = bench.expect(2, &["forecast", "no.toml"]);
    assert!(refused.err.contains("no.toml: line 8: beta"), "{}", refused.err);
}

/// Ctrl-C ends it with code 5 and says so.
#[test]
fn a_stopped_forecast_ends_with_code_5() {
    let bench = Bench::new();
    bench.write(
        "plan.toml",
        &plan(&[("[4, 4]", "[1024, 1024]"), ("[0.2, \"0.30\"]", "\"critical\"")]),
    );
    let mut command = bench.command(&["forecast", "plan.toml", "--minutes", "60"]);
    let mut child = command.stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().unwrap();
    // the first line of progress, after ten seconds
    let mut line = String::new();
    BufReader::new(child.stderr.as_mut().unwrap())
        .read_line(&mut line)
        .unwrap();
    assert!(line.contains(" of 3600 seconds, ensemble 0"), "{line}");
    let kill = format!("kill -INT {}", child.id());
    assert!(Command::new("sh").args(["-c", &kill]).status().unwrap().success());
    let asked = Instant::now();
    let ended = ended(child.wait_with_output().unwrap());
    assert!(asked.elapsed() < Duration::from_secs(5));
    assert_eq!(ended.code, 5, "{}", ended.err);
    assert_eq!(ended.out, "");
}
