//! Every exit code of `schema/README.md`, one by one.

use std::fs;

use crate::bench::{Bench, COLD, SMALL};

#[test]
fn code_0_is_done_and_holds() {
    let bench = Bench::new();
    bench.small();
    bench.expect(0, &["show", "small.tar.zst"]);
    bench.expect(0, &["replay", "small.tar.zst", "1/4"]);
    bench.expect(0, &["replay", "small.tar.zst", "--all"]);
    bench.expect(0, &["replay", "small.tar.zst", "--all", "--fast", "--threads", "1"]);
    bench.expect(0, &["audit", "small.tar.zst"]);
    for verb in ["draw", "show", "replay", "audit"] {
        let help = bench.expect(0, &[verb, "--help"]);
        assert!(help.out.contains("Example:"), "{verb} --help shows an example");
    }
    let version = bench.expect(0, &["--version"]);
    assert!(version.out.starts_with("pastproof "));
}

#[test]
fn code_1_is_no() {
    let bench = Bench::new();
    bench.small();
    let zeros = "0".repeat(64);
    let root = bench.expect(1, &["audit", "small.tar.zst", "--root", &zeros]);
    assert!(root.out.contains("root         FAILS"), "{}", root.out);
    let seal = bench.expect(1, &["audit", "small.tar.zst", "--seal", &zeros]);
    assert!(seal.out.contains("seal         FAILS"), "{}", seal.out);
}

#[test]
fn code_2_is_a_wrong_request() {
    let bench = Bench::new();
    bench.small();
    bench.expect(2, &["draw", "--depth"]);
    bench.expect(2, &["draw", "absent.toml"]);
    bench.expect(2, &["draw", "plan.toml", "--threads", "0"]);
    bench.write("wrong.toml", &SMALL.replace("samples = 5", "samples = 0"));
    let wrong = bench.expect(2, &["draw", "wrong.toml"]);
    assert!(wrong.err.contains("wrong.toml: line 9: samples"), "{}", wrong.err);
    bench.write(
        "huge.toml",
        &SMALL
            .replace("[4, 4]", "[8000, 8000]")
            .replace("samples = 5", "samples = 100000000"),
    );
    let huge = bench.expect(2, &["draw", "huge.toml"]);
    assert!(
        huge.err
            .contains("huge.toml: line 5: ensemble 0: samples: bytes of all samples"),
        "{}",
        huge.err
    );
    let taken = bench.expect(2, &["draw", "plan.toml", "-o", "small.tar.zst"]);
    assert!(
        taken.err.contains("exists already") && taken.err.contains("--force"),
        "{}",
        taken.err
    );
    bench.expect(2, &["replay", "small.tar.zst"]);
    bench.expect(2, &["replay", "small.tar.zst", "0/0", "--all"]);
    bench.expect(2, &["replay", "small.tar.zst", "nonsense"]);
    let beyond = bench.expect(2, &["replay", "small.tar.zst", "1/5"]);
    assert!(beyond.err.contains("0 to 4"), "{}", beyond.err);
    bench.expect(2, &["replay", "small.tar.zst", "2/0"]);
    bench.expect(2, &["audit", "small.tar.zst", "--root", "12"]);
    bench.expect(2, &["draw", "plan.toml", "-o", "new.tar.zst", "--require-clean"]);
    assert!(!bench.path("new.tar.zst").exists());
}

#[test]
fn code_3_is_an_archive_that_cannot_be_read() {
    let bench = Bench::new();
    let good = fs::read(bench.small()).unwrap();
    for (name, bytes) in [
        ("empty.tar.zst", &[][..]),
        ("text.tar.zst", b"this is no archive"),
        ("cut.tar.zst", &good[..good.len() / 2]),
    ] {
        fs::write(bench.path(name), bytes).unwrap();
        for arguments in [
            &["show", name][..],
            &["replay", name, "0/0"],
            &["replay", name, "--all"],
            &["audit", name],
        ] {
            let ended = bench.expect(3, arguments);
            assert!(ended.err.starts_with(&format!("pastproof: {name}: ")), "{}", ended.err);
        }
    }
}

#[test]
fn code_4_is_a_failing_machine() {
    let bench = Bench::new();
    bench.small();
    bench.expect(4, &["show", "absent.tar.zst"]);
    let nowhere = bench.expect(4, &["draw", "plan.toml", "-o", "no/such/folder/x.tar.zst"]);
    assert!(nowhere.err.contains("no/such/folder/x.tar.zst"), "{}", nowhere.err);
    // a full disk, where the system has a file that plays one
    #[cfg(target_os = "linux")]
    {
        let full = fs::OpenOptions::new().write(true).open("/dev/full").unwrap();
        let status = bench.command(&["show", "small.tar.zst"]).stdout(full).status().unwrap();
        assert_eq!(status.code(), Some(4));
    }
}

#[test]
fn code_6_is_an_incomplete_set() {
    let bench = Bench::new();
    bench.write("cold.toml", COLD);
    let drawn = bench.expect(6, &["draw", "cold.toml", "-o", "cold.tar.zst"]);
    assert!(drawn.out.contains("3 samples are unfinished"), "{}", drawn.out);
    assert!(drawn.err.contains("caution: ensemble 0"), "{}", drawn.err);
    bench.expect(6, &["show", "cold.tar.zst"]);
    bench.expect(6, &["replay", "cold.tar.zst", "0/1"]);
    bench.expect(6, &["replay", "cold.tar.zst", "--all"]);
    let audit = bench.expect(6, &["audit", "cold.tar.zst"]);
    assert!(audit.out.contains("unfinished samples: 0/0 0/1 0/2"), "{}", audit.out);
}
