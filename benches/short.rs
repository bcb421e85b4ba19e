//! The bench without a clock, for checks: engines and widths agree with the definition, rivals are right,
//! instructions are as many as known.

use pastproof::engine::crew::Settings;
use pastproof::engine::word::Width;
use pastproof::lattice::Kind;
use pastproof::law::Law;
use pastproof::sample::Sample;

use crate::Result;
use crate::count;
use crate::ours::{self, Case, Team};
use crate::report::{Report, Table};
use crate::rivals;
use crate::sections;
use crate::systems::{gas, ising, regular};

/// Samples a law: for two threads a pair, and one that they may share.
const SAMPLES: u64 = 3;

/// Runs the checks.
///
/// # Errors
/// What is wrong.
pub fn run(renew: bool) -> Result<()> {
    let mut faults = agreement()?;
    rivals::check(&mut Report::new(), &rivals::build()?)?;
    faults.extend(count::check(renew)?);
    if faults.is_empty() {
        Ok(())
    } else {
        Err(faults.join("\n       ").into())
    }
}

/// Every engine, width, number of threads and budget on a few laws, against the plain engine. Returns what
/// differs.
fn agreement() -> Result<Vec<String>> {
    let mut table = Table::new(
        "Agreement with the plain engine",
        &["law", "settings", "samples", "differing"],
    );
    let mut faults = Vec::new();
    for (name, law) in laws() {
        let case = Case::new(law)?;
        let defined = samples(&case, &ours::plain())?;
        let settings = ways();
        let mut differing = 0;
        for settings in &settings {
            if samples(&case, settings)? != defined {
                differing += 1;
                faults.push(format!("{name}: {settings:?} differs from the plain engine"));
            }
        }
        table.row([
            name.into(),
            settings.len().to_string(),
            SAMPLES.to_string(),
            differing.to_string(),
        ]);
    }
    println!("{table}");
    Ok(faults)
}

fn samples(case: &Case, settings: &Settings) -> Result<Vec<Sample>> {
    Ok(Team::new(case, settings)?.draw(0..SAMPLES)?.0)
}

/// Every width with no store, one that runs full and one that does not, on one thread and on two.
fn ways() -> Vec<Settings> {
    let mut ways = Vec::new();
    for width in Width::here() {
        for memory in [0, 1 << 16, ours::WITH_STORE] {
            for threads in [1, 2] {
                ways.push(Settings {
                    memory,
                    threads: Some(threads),
                    ..ours::at_width(width)
                });
            }
        }
    }
    ways
}

fn laws() -> Vec<(&'static str, Law)> {
    let torus = |kind, extents: &[u64]| regular(kind, extents, "periodic");
    let (square, triangular, honeycomb) = (Kind::Hypercubic, Kind::Triangular, Kind::Honeycomb);
    let mut laws = vec![
        ("square 64 x 64", ising(torus(square, &[64, 64]), "0.40", "0")),
        (
            "square 70 x 33, free and plus, field",
            ising(regular(square, &[70, 33], "free plus"), "0.40", "1/10"),
        ),
        (
            "square 1024 x 600, five strips",
            ising(torus(square, &[1024, 600]), "0.20", "0"),
        ),
        ("triangular 64 x 48", ising(torus(triangular, &[64, 48]), "0.22", "0")),
        ("honeycomb 32 x 32", ising(torus(honeycomb, &[32, 32]), "0.50", "0")),
        ("cubic 16 x 16 x 16", ising(torus(square, &[16, 16, 16]), "0.18", "0")),
        ("gas on square 48 x 48", gas(torus(square, &[48, 48]), "1")),
    ];
    laws.extend(sections::random_graphs());
    laws
}
