//! Memory grows with the system and with nothing else (P14): the peak of the program, as Linux counts it.

use std::fs;
use std::process::Stdio;
use std::time::Duration;

use crate::bench::Bench;

/// The largest memory that a draw of one sample ever had, in KiB: `VmHWM` of proc_pid_status(5). The sample is
/// made in one attempt of 2^`depth` sweeps.
fn peak_of_draw(extent: u32, depth: u32, memory: &str) -> u64 {
    let bench = Bench::new();
    let plan = format!(
        "title = \"Larkmoor peak\"\nseed = {{ phrase = \"Larkmoor test\" }}\n[[ensemble]]\nlaw = \"ising\"\n\
         lattice = {{ kind = \"hypercubic\", extents = [{extent}, {extent}] }}\nbeta = \"critical\"\nsamples = 1\n\
         first_depth = {depth}\ndepth_limit = {depth}\n"
    );
    bench.write("plan.toml", &plan);
    let mut command = bench.command(&["draw", "plan.toml", "--threads", "1", "--memory", memory]);
    let mut child = command.stdout(Stdio::null()).stderr(Stdio::null()).spawn().unwrap();
    let status = format!("/proc/{}/status", child.id());
    let mut peak = 0;
    let code = loop {
        // after the end the line is gone; what was read before stands
        let text = fs::read_to_string(&status).unwrap_or_default();
        if let Some(line) = text.lines().find_map(|line| line.strip_prefix("VmHWM:")) {
            peak = line.trim().trim_end_matches(" kB").parse().unwrap();
        }
        if let Some(ended) = child.try_wait().unwrap() {
            break ended.code();
        }
        std::thread::sleep(Duration::from_micros(200));
    };
    // unfinished: at the critical point the bounds meet much later
    assert_eq!(code, Some(6), "{extent} x {extent}, depth {depth}");
    assert!(peak > 0);
    peak
}

/// 16 times the sweeps, the same memory; unless maps may be kept, which shows that the measurement sees them.
#[test]
#[cfg_attr(not(target_os = "linux"), ignore = "reads /proc")]
fn the_peak_does_not_grow_with_the_depth() {
    // the last moments of a process may be missed; not five times
    let most = |depth| (0..5).map(|_| peak_of_draw(512, depth, "0")).max().unwrap_or(0);
    let (short, long) = (most(10), peak_of_draw(512, 14, "0"));
    assert!(
        long * 10 <= short * 11,
        "{short} KiB at depth 10, {long} KiB at depth 14"
    );
    let kept = peak_of_draw(512, 10, "1GiB");
    assert!(kept > 2 * short, "{short} KiB without kept maps, {kept} KiB with them");
}

/// Issue 3, item 4: 16.8 million sites within 64 MiB.
#[test]
#[ignore = "takes half a minute; .ci/run long"]
fn a_large_system_is_drawn_in_little_memory() {
    let peak = peak_of_draw(4096, 2, "0");
    assert!(peak <= 64 << 10, "{peak} KiB");
}
