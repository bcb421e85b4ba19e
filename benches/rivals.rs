//! Other programs for the same task: built here, held against an exact energy, and timed in turn with ours.
//!
//! A rival that is wrong would be a wrong yardstick, so each of them has to give Kaufman's energy and to let
//! its bounds meet. What they are and how they are asked stands in `rivals/rival.h`.

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
use std::process::Command;

use pastproof::exact::kaufman;

use crate::Result;
use crate::measure::SLICE;
use crate::report::{Report, Table};

/// A program to compare with.
pub struct Rival {
    pub name: &'static str,
    /// How many times faster ours shall be; none for the one that shows how far bytes go.
    pub times: Option<f64>,
    /// Decisions a nanosecond, roughly: for how many sweeps a measurement takes.
    pace: f64,
    command: Vec<PathBuf>,
}

/// What a rival answers, see `rival.h`.
struct Answer(BTreeMap<String, Vec<f64>>);

impl Answer {
    fn get(&self, name: &str, place: usize) -> Result<f64> {
        let values = self.0.get(name).and_then(|values| values.get(place));
        Ok(*values.ok_or(format!("a rival says no {name}"))?)
    }
}

/// All rivals that this machine can run.
pub fn build() -> Result<Vec<Rival>> {
    let sources = Path::new(env!("CARGO_MANIFEST_DIR")).join("benches/rivals");
    let mut rivals = Vec::new();
    for (name, times, pace) in [
        ("straightforward", Some(33.0), 0.1),
        ("branchfree", Some(23.0), 0.3),
        ("vectorised", None, 1.5),
    ] {
        let program = Path::new(env!("CARGO_TARGET_TMPDIR")).join(name);
        let done = Command::new("cc")
            .args(["-O3", "-march=native", "-o"])
            .arg(&program)
            .arg(sources.join(name).with_extension("c"))
            .arg("-lm")
            .output()
            .map_err(|error| format!("cc: {error}"))?;
        if !done.status.success() {
            return Err(format!("cc {name}.c: {}", String::from_utf8_lossy(&done.stderr)).into());
        }
        let command = vec![program];
        rivals.push(Rival {
            name,
            times,
            pace,
            command,
        });
    }
    let numpy = Command::new("python3").args(["-c", "import numpy"]).output();
    if numpy.is_ok_and(|there| there.status.success()) {
        rivals.push(Rival {
            name: "numpy",
            times: Some(50.0),
            pace: 0.08,
            command: vec!["python3".into(), sources.join("checkerboard.py")],
        });
    }
    Ok(rivals)
}

impl Rival {
    fn ask(&self, extent: u32, beta: f64, warm: u64, sweeps: u64, every: u64) -> Result<Answer> {
        let output = Command::new(&self.command[0])
            .args(&self.command[1..])
            .args([extent.to_string(), beta.to_string()])
            .args([warm, sweeps, every].map(|number| number.to_string()))
            .output()?;
        if !output.status.success() {
            return Err(format!("{}: {}", self.name, String::from_utf8_lossy(&output.stderr)).into());
        }
        let mut answer = BTreeMap::new();
        for line in String::from_utf8(output.stdout)?.lines() {
            let mut words = line.split(' ');
            let name = words.next().unwrap_or_default().to_string();
            answer.insert(name, words.map(str::parse).collect::<std::result::Result<_, _>>()?);
        }
        Ok(Answer(answer))
    }

    /// Decisions a nanosecond.
    pub fn rate(&self, extent: u32, beta: f64) -> Result<f64> {
        let sites = f64::from(extent).powi(2);
        let sweeps = (self.pace * SLICE.as_nanos() as f64 / sites).ceil();
        let answer = self.ask(extent, beta, 0, sweeps as u64, 0)?;
        Ok(sites * sweeps / answer.get("nanoseconds", 0)?)
    }
}

/// The energies of all rivals against Kaufman's solution of the torus, at a temperature where the bounds
/// meet within some 40 sweeps. The C programs have fixed seeds and give the same figures at each run.
///
/// # Errors
/// If a rival is wrong: 5 standard errors off, or bounds that stay apart.
pub fn check(report: &mut Report, rivals: &[Rival]) -> Result<()> {
    const EXTENT: u32 = 64;
    const BETA: f64 = 0.30;
    let exact = kaufman(EXTENT, EXTENT, BETA)?.energy_per_site;
    let title = format!("Rivals are right: energy of a site, L = {EXTENT}, beta = {BETA:.2}, exactly {exact:.6}");
    let mut table = Table::new(&title, &["program", "energy", "standard error", "off, in these"]);
    let mut wrong = Vec::new();
    for rival in rivals {
        let answer = rival.ask(EXTENT, BETA, 1000, 8000, 8)?;
        let [lower, energy] = [answer.get("energies", 0)?, answer.get("energies", 1)?];
        let error = answer.get("error", 0)?;
        let off = (energy - exact) / error;
        table.row([
            rival.name.into(),
            format!("{energy:.6}"),
            format!("{error:.6}"),
            format!("{off:.2}"),
        ]);
        let met = answer.get("differing", 0)? == 0.0 && lower == energy;
        if !met || off.abs() >= 5.0 {
            wrong.push(rival.name);
        }
    }
    report.say(table);
    if !rivals.iter().any(|rival| rival.name == "numpy") {
        report.say("numpy: not measured, `python3 -c 'import numpy'` fails\n");
    }
    if wrong.is_empty() {
        Ok(())
    } else {
        Err(format!("these rivals are wrong: {}", wrong.join(", ")).into())
    }
}
