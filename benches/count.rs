//! Instruction counts of three kernels, under callgrind: the part of speed that a busy machine cannot
//! change, so the part that may fail a check.
//!
//! The bench runs itself under valgrind with `--count KERNEL`; only what happens inside [`instructions`]
//! is collected. Valgrind has no AVX-512, so the portable width is counted. Another compiler makes other
//! instructions: counts bind only the one that `instructions.toml` names.

use std::collections::BTreeMap;
use std::fmt::Write as _;
use std::fs;
use std::hint::black_box;
use std::path::{Path, PathBuf};
use std::process::Command;

use pastproof::engine::crew::Crew;
use pastproof::engine::word::Width;
use pastproof::engine::{Attempt, Engine, Stop};
use pastproof::lattice::Kind;
use pastproof::law::Law;
use pastproof::stream::Address;
use serde::Deserialize;

use crate::Result;
use crate::ours::{self, Case};
use crate::report::Table;
use crate::systems::{ising, regular};
use crate::toml_json::toml_as_json;

/// The kernels that are counted, each in one attempt of 2^[`DEPTH`] sweeps of 64 x 64 sites.
const KERNELS: [&str; 3] = ["square", "triangular", "field"];
const DEPTH: u8 = 9;

/// A count may differ by so much: allocation and start are in it.
const TOLERANCE: f64 = 0.02;

/// `benches/instructions.toml`.
#[derive(Deserialize)]
struct Known {
    rustc: String,
    target: String,
    instructions: BTreeMap<String, u64>,
}

fn law(kernel: &str) -> Result<Law> {
    let torus = |kind| regular(kind, &[64, 64], "periodic");
    match kernel {
        "square" => Ok(ising(torus(Kind::Hypercubic), "beta_c", "0")),
        "triangular" => Ok(ising(torus(Kind::Triangular), "0.25", "0")),
        "field" => Ok(ising(torus(Kind::Hypercubic), "beta_c", "1/10")),
        _ => Err(format!("no kernel {kernel}").into()),
    }
}

/// The attempt that is counted, when the bench runs inside valgrind.
pub fn counted(kernel: &str) -> Result<()> {
    let case = Case::new(law(kernel)?)?;
    let crew = Crew::new(&case.map, &ours::at_width(Width::Portable));
    black_box(instructions(crew.engine().as_mut(), &case.address(0))?);
    Ok(())
}

/// Its name tells callgrind when to collect.
#[inline(never)]
fn instructions(engine: &mut dyn Engine, address: &Address) -> Result<Attempt> {
    Ok(engine.attempt(address, DEPTH, &Stop::default())?)
}

fn file() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("benches/instructions.toml")
}

/// Counts, and holds the counts against the file or writes the file anew. What is wrong is returned.
pub fn check(renew: bool) -> Result<Vec<String>> {
    if Command::new("valgrind").arg("--version").output().is_err() {
        // as for the tests: a missing tool must not be left out in CI
        if std::env::var_os("PASTPROOF_TEST_TOOLS").is_some() {
            return Err("valgrind is not installed".into());
        }
        println!("Instructions: not counted, no valgrind\n");
        return Ok(Vec::new());
    }
    let rustc = env!("PASTPROOF_BUILD_RUSTC");
    let target = env!("PASTPROOF_BUILD_TARGET");
    let counts = KERNELS
        .iter()
        .map(|kernel| Ok((*kernel, count(kernel)?)))
        .collect::<Result<Vec<_>>>()?;
    if renew {
        fs::write(file(), known_text(rustc, target, &counts))?;
    }
    let known: Known = serde_json::from_value(toml_as_json(&fs::read_to_string(file())?))?;
    let mut table = Table::new("Instructions", &["kernel", "counted", "known", "counted / known"]);
    let mut faults = Vec::new();
    let binding = known.rustc == rustc && known.target == target;
    for (kernel, count) in counts {
        let expected = *known
            .instructions
            .get(kernel)
            .ok_or(format!("{kernel} is not in the file"))?;
        let ratio = count as f64 / expected as f64;
        table.row([
            kernel.into(),
            count.to_string(),
            expected.to_string(),
            format!("{ratio:.4}"),
        ]);
        faults.extend(verdict(kernel, ratio).filter(|_| binding));
    }
    println!("{table}");
    if !binding {
        println!(
            "Reported only: counted with {rustc} for {target}, known for {} for {}\n",
            known.rustc, known.target
        );
    }
    Ok(faults)
}

/// What is wrong with a count that is `ratio` times the known one.
fn verdict(kernel: &str, ratio: f64) -> Option<String> {
    if ratio > 1.0 + TOLERANCE {
        Some(format!(
            "{kernel}: {:.1} % more instructions than known",
            (ratio - 1.0) * 100.0
        ))
    } else if ratio < 1.0 - TOLERANCE {
        let less = (1.0 - ratio) * 100.0;
        Some(format!(
            "{kernel}: {less:.1} % fewer instructions: update the file (--short --renew)"
        ))
    } else {
        None
    }
}

/// The instructions of one kernel.
fn count(kernel: &str) -> Result<u64> {
    let output = Command::new("valgrind")
        .args(["--tool=callgrind", "--callgrind-out-file=/dev/null"])
        .arg("--toggle-collect=*count*instructions*")
        .arg(std::env::current_exe()?)
        .args(["--count", kernel])
        .output()?;
    let said = String::from_utf8_lossy(&output.stderr);
    let collected = said.lines().find_map(|line| line.split_once("Collected : "));
    let count: u64 = match collected {
        Some((_, count)) if output.status.success() => count.trim().parse()?,
        _ => return Err(format!("valgrind: {said}").into()),
    };
    if count == 0 {
        return Err("callgrind collected nothing: is the symbol of `instructions` gone?".into());
    }
    Ok(count)
}

fn known_text(rustc: &str, target: &str, counts: &[(&str, u64)]) -> String {
    let mut text = format!(
        "# Instructions of one attempt of 2^{DEPTH} sweeps of 64 x 64 sites, portable width, counted by callgrind.\n\
         # `cargo bench -- --short` fails above these counts by more than {} %, and asks for new ones below.\n\
         # Written by `cargo bench -- --short --renew`; say in the commit why they changed.\n\
         rustc = \"{rustc}\"\ntarget = \"{target}\"\n\n[instructions]\n",
        TOLERANCE * 100.0
    );
    for (kernel, count) in counts {
        let _ = writeln!(text, "{kernel} = {count}");
    }
    text
}
