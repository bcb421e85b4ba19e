//! `show`, `replay` and `audit` on the command line: one line a check, ending with what was not shown.

use pastproof::archive::reading::Run;
use pastproof::archive::table::Row;
use pastproof::audit::seal::{self, Anchors};
use pastproof::audit::{Answer, Check, Conclusion, replay};
use pastproof::engine::Stop;
use pastproof::engine::coupling::Proof;
use pastproof::error::Result;
use pastproof::plan::SeedRule;
use pastproof::quantity::{Digest, Seed};
use pastproof::verb::show::{self, Overview};
use serde::Serialize;
use serde_json::Value;

use super::Exit;
use super::args;
use super::drawing::Shown;
use super::terminal::{Terminal, Tone, Unit, wrapped};

/// Shows what an archive holds.
pub fn show(request: &args::Show, terminal: &Terminal) -> Result<Exit> {
    #[derive(Serialize)]
    struct Object<'a> {
        command: &'static str,
        archive: String,
        #[serde(flatten)]
        overview: &'a Overview,
        not_shown: [&'static str; 1],
    }
    let run = Run::open(&request.archive)?;
    let overview = show::show(&run)?;
    let archive = request.archive.display().to_string();
    let not_shown = ["whether any of this holds: see replay and audit"];
    terminal.object(&Object {
        command: "show",
        archive,
        overview: &overview,
        not_shown,
    })?;
    print_overview(&overview, terminal)?;
    print_not_shown(&not_shown, terminal)?;
    Ok(if overview.ensembles.iter().any(|ensemble| ensemble.unfinished > 0) {
        Exit::Incomplete
    } else {
        Exit::Done
    })
}

fn print_overview(overview: &Overview, terminal: &Terminal) -> Result<()> {
    let line = |text: String| terminal.line(Tone::Plain, &text);
    terminal.line(Tone::Strong, &overview.title)?;
    line(format!("root {}\nseal {}", overview.root, overview.seal))?;
    let rule = SeedRule::from_json(&overview.seed_rule, Seed(overview.seed))?;
    print_seed(overview.seed, &rule, terminal)?;
    line(format!(
        "random maps as defined by {:?}, whose text is in the archive",
        overview.stream
    ))?;
    let mut conventions: Vec<&str> = Vec::new();
    for ensemble in &overview.ensembles {
        line(format!(
            "\nensemble {}: {}, {}",
            ensemble.ensemble,
            ensemble.law["law"].as_str().unwrap_or(""),
            ensemble.lattice
        ))?;
        line(wrapped("  ", &ensemble.parameters, 4))?;
        line(format!("  key {}", ensemble.key))?;
        line(format!("  root of its samples {}", ensemble.samples_root))?;
        let unfinished = if ensemble.unfinished == 0 {
            "none unfinished".into()
        } else {
            format!("{} UNFINISHED", ensemble.unfinished)
        };
        line(format!(
            "  {} samples, {unfinished}; reached back 2^{} sweeps at most, limit 2^{}",
            ensemble.samples, ensemble.deepest, ensemble.depth_limit
        ))?;
        line(format!(
            "  {}",
            if ensemble.ordered {
                "bounds: the two extremal chains; when they meet, every start has met"
            } else {
                "bounds: they enclose every chain, but may never meet (frustrated law)"
            }
        ))?;
        line(format!(
            "  rounding: with ideal digits each sample's law is within 2^{} of the stated one",
            ensemble.distance_exponent
        ))?;
        if !conventions.contains(&ensemble.convention.as_str()) {
            conventions.push(&ensemble.convention);
        }
    }
    line("\nconventions".into())?;
    for convention in conventions {
        line(wrapped("  ", convention, 2))?;
    }
    let provenance = &overview.provenance;
    let revision = provenance.program.revision.as_ref().map_or_else(
        || "revision not known".to_string(),
        |revision| {
            format!(
                "revision {}{}",
                revision.commit,
                if revision.clean { ", clean" } else { ", CHANGED" }
            )
        },
    );
    line(format!(
        "\ndrawn by {} {}, {revision}",
        provenance.program.name, provenance.program.version
    ))?;
    line(match (&provenance.repository, &provenance.repository_unreadable) {
        (Some(repository), _) => format!(
            "author's repository: commit {}, {}",
            repository.commit.as_deref().unwrap_or("none yet"),
            match &repository.difference {
                Some(difference) => format!("CHANGED, difference {difference}"),
                None => "clean".into(),
            }
        ),
        (None, Some(reason)) => format!("author's repository: could not be read: {reason}"),
        (None, None) => "author's repository: none around the plan".into(),
    })?;
    let circumstances = &overview.circumstances;
    line(format!(
        "{} to {} on {}, {} threads",
        circumstances.start, circumstances.end, circumstances.platform, circumstances.threads
    ))?;
    for name in &overview.attested {
        line(format!("{name}: added after the seal, not examined"))?;
    }
    Ok(())
}

/// Draws samples again and says what was found.
pub fn replay(request: &args::Replay, terminal: &Terminal, stop: &Stop) -> Result<Exit> {
    #[derive(Serialize)]
    struct Object<'a> {
        command: &'static str,
        archive: String,
        root: Digest,
        replayed: u64,
        unfinished: u64,
        full: bool,
        sample: Option<Value>,
        checks: &'a [Check],
        conclusion: Conclusion,
        not_shown: &'a [&'static str],
    }
    let run = Run::open(&request.archive)?;
    let which = match request.sample {
        Some((ensemble, sample)) => replay::Which::One(ensemble, sample),
        None => replay::Which::All,
    };
    let proof = if request.fast { Proof::Fast } else { Proof::Full };
    let total = match which {
        replay::Which::One(..) => 1,
        replay::Which::All => run.record().ensembles.iter().map(|ensemble| ensemble.samples).sum(),
    };
    let report = {
        let progress = Shown::new(terminal, total, Unit::Samples, request.work.verbose);
        replay::replay(&run, which, proof, &request.work.settings(), &progress, stop)?
    };
    let sample = report
        .sample
        .as_ref()
        .zip(request.sample)
        .map(|(row, (ensemble, sample))| {
            serde_json::json!({
                "ensemble": ensemble.0, "sample": sample.0, "hash": row.hash, "depth": row.depth,
                "merged_at": row.merged_at.to_string(),
            })
        });
    terminal.object(&Object {
        command: "replay",
        archive: request.archive.display().to_string(),
        root: report.root,
        replayed: report.replayed,
        unfinished: report.unfinished,
        full: proof == Proof::Full,
        sample,
        checks: &report.checks,
        conclusion: report.conclusion,
        not_shown: &replay::NOT_SHOWN,
    })?;
    terminal.line(Tone::Plain, &format!("root {}", report.root))?;
    if let (Some(row), Some((ensemble, sample))) = (&report.sample, request.sample) {
        let text = format!(
            "sample {sample} of ensemble {ensemble}\nhash {}\n{}",
            row.hash,
            wrapped("  ", &story(row), 4)
        );
        terminal.line(Tone::Plain, &text)?;
    }
    print_checks(&report.checks, terminal)?;
    let exact = report.replayed - report.unfinished;
    print_conclusion(
        report.conclusion,
        &report.checks,
        &format!(
            "{} drawn again, bit for bit as stored",
            counted(exact, "exact sample", "exact samples")
        ),
        report.unfinished,
        terminal,
    )?;
    print_not_shown(&replay::NOT_SHOWN, terminal)?;
    Ok(report.conclusion.into())
}

/// How the coupling of a sample went, in words.
fn story(row: &Row) -> String {
    let depth = row.depth;
    match (row.exact_row(), row.merged_at) {
        (None, _) => format!("unfinished: begun 2^{depth} sweeps before time 0, the bounds did not meet"),
        (Some(_), 0) => format!("depth {depth}: begun 2^{depth} sweeps before time 0, the bounds met at its end"),
        (Some(_), sweeps) => {
            format!("depth {depth}: begun 2^{depth} sweeps before time 0, bounds equal for the last {sweeps}")
        }
    }
}

/// Audits an archive and says what was found.
pub fn audit(request: &args::Audit, terminal: &Terminal) -> Result<Exit> {
    #[derive(Serialize)]
    struct Object<'a> {
        command: &'static str,
        archive: String,
        root: Digest,
        seal: Digest,
        seed: Digest,
        seed_rule: Value,
        seed_chosen_by_a_person: bool,
        samples: u64,
        unfinished: u64,
        unfinished_first: &'a [(u32, u64)],
        not_examined: &'a [String],
        anchored: bool,
        checks: &'a [Check],
        conclusion: Conclusion,
        not_shown: &'a [&'static str],
    }
    let total = Run::open(&request.archive)?
        .record()
        .ensembles
        .iter()
        .map(|ensemble| ensemble.samples)
        .sum();
    let report = {
        let progress = Shown::new(terminal, total, Unit::Samples, false);
        seal::audit(
            &request.archive,
            Anchors {
                root: request.root,
                seal: request.seal,
            },
            &progress,
        )?
    };
    terminal.object(&Object {
        command: "audit",
        archive: request.archive.display().to_string(),
        root: report.root,
        seal: report.seal,
        seed: report.seed.0,
        seed_rule: report.seed_rule.to_json(),
        seed_chosen_by_a_person: report.seed_rule.chosen_by_a_person(),
        samples: report.samples,
        unfinished: report.unfinished,
        unfinished_first: &report.unfinished_first,
        not_examined: &report.attested,
        anchored: report.anchored,
        checks: &report.checks,
        conclusion: report.conclusion,
        not_shown: &seal::NOT_SHOWN,
    })?;
    terminal.line(Tone::Plain, &format!("root {}\nseal {}", report.root, report.seal))?;
    print_seed(report.seed.0, &report.seed_rule, terminal)?;
    print_checks(&report.checks, terminal)?;
    for name in &report.attested {
        terminal.line(Tone::Plain, &format!("{name}: added after the seal, not examined"))?;
    }
    if !report.unfinished_first.is_empty() {
        let list: Vec<_> = report
            .unfinished_first
            .iter()
            .map(|(ensemble, sample)| format!("{ensemble}/{sample}"))
            .collect();
        let more = report.unfinished - list.len() as u64;
        let more = if more > 0 {
            format!(" and {more} more")
        } else {
            String::new()
        };
        terminal.line(
            Tone::Bad,
            &wrapped("unfinished samples: ", &format!("{}{more}", list.join(" ")), 2),
        )?;
    }
    let anchored = if report.anchored {
        "it is the archive that was named"
    } else {
        "internally consistent only: no root or seal from outside was given, so a forger could have made all of it anew"
    };
    print_conclusion(
        report.conclusion,
        &report.checks,
        &format!("{}, {anchored}", counted(report.samples, "sample", "samples")),
        report.unfinished,
        terminal,
    )?;
    print_not_shown(&seal::NOT_SHOWN, terminal)?;
    Ok(report.conclusion.into())
}

/// The seed, and who chose it.
fn print_seed(seed: Digest, rule: &SeedRule, terminal: &Terminal) -> Result<()> {
    terminal.line(
        Tone::Plain,
        &format!("seed {seed}\n{}", wrapped("  ", &rule.to_string(), 2)),
    )
}

fn print_checks(checks: &[Check], terminal: &Terminal) -> Result<()> {
    for check in checks {
        let (tone, word) = match check.answer {
            Answer::Holds => (Tone::Good, "holds"),
            Answer::Fails => (Tone::Bad, "FAILS"),
            Answer::NotExamined => (Tone::Plain, "not examined"),
        };
        let head = format!("{:<12} {word:<13} ", check.id);
        terminal.line(tone, &wrapped(&head, &check.examined, head.len()))?;
    }
    print_faults(checks, terminal)
}

/// Every described fault, a line each.
pub fn print_faults(checks: &[Check], terminal: &Terminal) -> Result<()> {
    for check in checks {
        for fault in &check.faults {
            terminal.line(Tone::Bad, &wrapped(&format!("{}: ", check.id), &fault.to_string(), 2))?;
        }
        let more = check.fault_count - check.faults.len() as u64;
        if more > 0 {
            terminal.line(Tone::Bad, &format!("{}: and {more} more", check.id))?;
        }
    }
    Ok(())
}

fn print_conclusion(
    conclusion: Conclusion,
    checks: &[Check],
    what: &str,
    unfinished: u64,
    terminal: &Terminal,
) -> Result<()> {
    match conclusion {
        Conclusion::Holds => terminal.line(Tone::Good, &wrapped("holds: ", what, 2)),
        Conclusion::Fails => {
            let failed = checks.iter().filter(|check| check.answer == Answer::Fails);
            let failed: Vec<&str> = failed.map(|check| check.id).collect();
            let text = format!(
                "{} of {} checks ({}); this is not what its author sealed, or not what seed and law give",
                failed.len(),
                checks.len(),
                failed.join(", ")
            );
            terminal.line(Tone::Bad, &wrapped("fails: ", &text, 2))
        }
        Conclusion::Incomplete => {
            let text = format!(
                "{what}; but {} unfinished, so the exact ones alone are a biased set",
                counted(unfinished, "sample is", "samples are")
            );
            terminal.line(Tone::Bad, &wrapped("holds, but incomplete: ", &text, 2))
        }
    }
}

/// A number with its word.
fn counted(number: u64, one: &str, many: &str) -> String {
    format!("{number} {}", if number == 1 { one } else { many })
}

/// The list that ends every verdict.
pub fn print_not_shown(not_shown: &[&str], terminal: &Terminal) -> Result<()> {
    terminal.line(Tone::Plain, "not shown:")?;
    for what in not_shown {
        terminal.line(Tone::Plain, &wrapped("  ", what, 4))?;
    }
    Ok(())
}
