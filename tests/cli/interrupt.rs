//! A draw that is stopped or killed leaves no file behind that could be taken for an archive.

use std::fs;
use std::io::{BufRead, BufReader};
use std::process::{Child, Command, Stdio};
use std::thread::sleep;
use std::time::{Duration, Instant};

use crate::bench::{Bench, SMALL, ended};

/// A plan whose first sample takes longer than any test.
fn endless(bench: &Bench) {
    bench.write(
        "plan.toml",
        &SMALL
            .replace("beta = [0.2, \"0.30\"]", "beta = 2\ndepth_limit = 60")
            .replace("[4, 4]", "[32, 32]"),
    );
}

/// Waits for the caution that comes before the first sample (the signals are listened for by then), then sends one.
fn signal(name: &str, child: &mut Child) {
    let mut caution = String::new();
    let mut err = BufReader::new(child.stderr.as_mut().unwrap());
    while !caution.contains("below the critical temperature") {
        assert!(err.read_line(&mut caution).unwrap() > 0, "no caution: {caution}");
    }
    sleep(Duration::from_millis(500));
    let line = format!("kill -{name} {}", child.id());
    assert!(Command::new("sh").args(["-c", &line]).status().unwrap().success());
}

/// Code 5, within seconds, and nothing is left.
#[test]
fn a_stopped_draw_ends_with_code_5_and_leaves_nothing() {
    for name in ["INT", "TERM"] {
        let bench = Bench::new();
        endless(&bench);
        let mut command = bench.command(&["draw", "plan.toml", "-o", "x.tar.zst"]);
        let mut child = command.stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().unwrap();
        signal(name, &mut child);
        let asked = Instant::now();
        let ended = ended(child.wait_with_output().unwrap());
        assert!(asked.elapsed() < Duration::from_secs(5));
        assert_eq!(ended.code, 5, "{}", ended.err);
        assert!(ended.err.contains("stopped on request"), "{}", ended.err);
        assert_eq!(bench.names(), ["plan.toml"]);
    }
}

/// A file that was there stays as it was, even with --force.
#[test]
fn a_killed_draw_does_not_touch_the_file_it_would_replace() {
    let bench = Bench::new();
    endless(&bench);
    fs::write(bench.path("x.tar.zst"), "precious").unwrap();
    let mut child = bench
        .command(&["draw", "plan.toml", "-o", "x.tar.zst", "--force"])
        .stderr(Stdio::piped())
        .spawn()
        .unwrap();
    signal("KILL", &mut child);
    child.wait().unwrap();
    assert_eq!(fs::read_to_string(bench.path("x.tar.zst")).unwrap(), "precious");
    assert_eq!(bench.names(), ["plan.toml", "x.tar.zst"]);
}
