//! A draw that is stopped or killed leaves no file behind that could be taken for an archive.

use std::fs;
use std::process::{Command, Stdio};
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

fn signal(name: &str, process: u32) {
    assert!(
        Command::new("kill")
            .args([format!("-{name}"), process.to_string()])
            .status()
            .unwrap()
            .success()
    );
}

/// Code 5, within seconds, and nothing is left.
#[test]
fn a_stopped_draw_ends_with_code_5_and_leaves_nothing() {
    for name in ["INT", "TERM"] {
        let bench = Bench::new();
        endless(&bench);
        let mut command = bench.command(&["draw", "plan.toml", "-o", "x.tar.zst"]);
        let child = command.stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().unwrap();
        sleep(Duration::from_millis(700));
        let asked = Instant::now();
        signal(name, child.id());
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
        .stderr(Stdio::null())
        .spawn()
        .unwrap();
    sleep(Duration::from_millis(700));
    signal("KILL", child.id());
    child.wait().unwrap();
    assert_eq!(fs::read_to_string(bench.path("x.tar.zst")).unwrap(), "precious");
    assert_eq!(bench.names(), ["plan.toml", "x.tar.zst"]);
}
