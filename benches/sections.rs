//! What is measured, a table or two a section.

use std::time::Duration;

use pastproof::engine::word::Width;
use pastproof::lattice::{Kind, Lattice};
use pastproof::law::Law;
use pastproof::quantity::{Digest, SampleIndex, Seed};
use pastproof::stream::Address;

use crate::Result;
use crate::measure::{Measure, SLICE, alternate};
use crate::ours::{self, Case, Team};
use crate::report::{Goal, Report, Table, number};
use crate::rivals::Rival;
use crate::systems::{graph, ising, regular};

type Section = fn(&mut Report, &[Rival]) -> Result<()>;

/// All sections, by the names that select them.
pub const SECTIONS: [(&str, Section); 5] = [
    ("square", square),
    ("laws", laws),
    ("threads", threads),
    ("critical", critical),
    ("graph", graphs),
];

/// The temperatures of the square torus: as in a plan, and as a number for rivals. The second is ln(1 + sqrt 2) / 2.
const TEMPERATURES: [(&str, f64); 2] = [("0.40", 0.40), ("critical", 0.440_686_793_509_771_5)];

fn torus(extents: &[u64]) -> Lattice {
    regular(Kind::Hypercubic, extents, "periodic")
}

fn square_case(extent: u64, beta: &str) -> Result<Case> {
    let beta = if beta == "critical" { "beta_c" } else { beta };
    Case::new(ising(torus(&[extent, extent]), beta, "0"))
}

/// Attempts with the bounds apart, as a rate to be measured.
fn attempts<'t>(team: &'t Team<'t>) -> Result<Measure<'t>> {
    let mut worker = team.worker();
    let depth = worker.longest_apart()?;
    Ok(Box::new(move || worker.attempts(depth)))
}

/// Whole samples, as a rate to be measured.
fn samples<'t>(team: &'t Team<'t>) -> Measure<'t> {
    let mut worker = team.worker();
    Box::new(move || Ok(worker.draw(SLICE, u32::MAX)?.rate()))
}

/// The name and the goal of a column.
fn column(width: Width) -> (&'static str, Option<f64>) {
    match width {
        Width::Portable => ("portable", Some(2.0)),
        Width::Sse2 => ("SSE2", None),
        Width::Neon => ("NEON", None),
        Width::Avx2 => ("AVX2", None),
        Width::Avx512 => ("AVX-512", Some(5.0)),
    }
}

/// The square torus: each width without store, whole samples with it, and the rivals, all in turn.
fn square(report: &mut Report, rivals: &[Rival]) -> Result<()> {
    let widths: Vec<_> = Width::here().collect();
    let mut heads = vec!["beta".to_string(), "L".into()];
    for width in &widths {
        let (name, goal) = column(*width);
        heads.push(name.into());
        heads.extend(goal.map(|goal| format!("of {goal}")));
    }
    heads.extend(["whole samples".into(), "of 7".into()]);
    let mut rates = Table::new(
        "Square torus, one core: attempts without store, and whole samples with 1 GiB",
        &heads,
    );
    let mut heads = vec!["beta".to_string(), "L".into(), "ours".into()];
    for rival in rivals {
        heads.extend([rival.name.into(), "times".into()]);
        heads.extend(rival.times.map(|times| format!("of {times}")));
    }
    let mut compared = Table::new(
        "Against other programs, one core: attempts without store, and how many times as fast",
        &heads,
    );

    for (beta, number_of_beta) in TEMPERATURES {
        for extent in [64, 128, 256, 1024] {
            let case = square_case(extent.into(), beta)?;
            let is_critical = beta == "critical";
            let teams = widths.iter().map(|width| Team::new(&case, &ours::at_width(*width)));
            let teams = teams.collect::<Result<Vec<_>>>()?;
            let whole = Team::new(&case, &ours::as_given(1))?;
            let mut measures = teams.iter().map(attempts).collect::<Result<Vec<_>>>()?;
            for rival in rivals {
                measures.push(Box::new(move || rival.rate(extent, number_of_beta)));
            }
            // 7 million sweeps of a million sites take hours
            let is_drawn = !is_critical || extent < 1024;
            if is_drawn {
                measures.push(samples(&whole));
            }
            let figures = alternate(&mut measures)?;

            let (ours, others) = figures.split_at(widths.len());
            let mut row = vec![beta.to_string(), extent.to_string()];
            for (width, figure) in widths.iter().zip(ours) {
                row.push(report.rate(*figure));
                row.extend(
                    column(*width)
                        .1
                        .map(|goal| report.goal(figure.best, Goal::AtLeast(goal))),
                );
            }
            // where the planes fit
            let has_goal = !is_critical || extent <= 128;
            row.extend(match others.get(rivals.len()) {
                Some(whole) if has_goal => [report.rate(*whole), report.goal(whole.best, Goal::AtLeast(7.0))],
                Some(whole) => [report.rate(*whole), String::new()],
                None => Default::default(),
            });
            rates.row(row);
            let widest = ours.last().map_or(0.0, |figure| figure.best);
            let mut row = vec![beta.to_string(), extent.to_string(), number(widest)];
            for (rival, figure) in rivals.iter().zip(others) {
                let times = widest / figure.best;
                row.extend([report.rate(*figure), number(times)]);
                row.extend(rival.times.map(|goal| report.goal(times, Goal::AtLeast(goal))));
            }
            compared.row(row);
        }
    }
    report.say(rates);
    report.say(compared);
    report.say(
        "straightforward: uniform doubles and a table by neighbour sum. branchfree: one loop, integer thresholds of 64 \
         bits, bytes\n0 and 1. vectorised: as far as a compiler takes bytes, with numbers of 32 bits from a counter. \
         These are C, by\n`cc -O3 -march=native`. numpy: whole sublattices at a time, uniform doubles. All are \
         checkerboards and update both bounds.\n",
    );
    Ok(())
}

/// Other lattices and a field beside the square one, and small systems.
fn laws(report: &mut Report, _: &[Rival]) -> Result<()> {
    let settings = ours::without_store();
    let cases = [
        ("square", ising(torus(&[256, 256]), "0.40", "0")),
        ("square, field 1/10", ising(torus(&[256, 256]), "0.40", "1/10")),
        (
            "triangular",
            ising(regular(Kind::Triangular, &[256, 256], "periodic"), "0.25", "0"),
        ),
        (
            "honeycomb",
            ising(regular(Kind::Honeycomb, &[256, 128], "periodic"), "0.60", "0"),
        ),
        ("cubic", ising(torus(&[64, 64, 64]), "0.20", "0")),
    ];
    let cases = cases.map(|(name, law)| Case::new(law).map(|case| (name, case)));
    let cases = cases.into_iter().collect::<Result<Vec<_>>>()?;
    let teams = cases.iter().map(|(_, case)| Team::new(case, &settings));
    let teams = teams.collect::<Result<Vec<_>>>()?;
    let figures = alternate(&mut teams.iter().map(attempts).collect::<Result<Vec<_>>>()?)?;
    let heads = ["law", "sites", "rate", "of the square's", "of 0.5"];
    let mut table = Table::new("Other laws, one core, attempts without store", &heads);
    for ((name, case), figure) in cases.iter().zip(&figures) {
        let part = figure.best / figures[0].best;
        let goal = match *name {
            "square" => String::new(),
            _ => report.goal(part, Goal::AtLeast(0.5)),
        };
        let rate = report.rate(*figure);
        table.row([(*name).into(), case.map.sites().to_string(), rate, number(part), goal]);
    }
    report.say(table);

    let heads = ["beta", "L", "attempts", "of 2", "whole samples", "of 2"];
    let mut table = Table::new("Small square tori, one core", &heads);
    for (beta, _) in TEMPERATURES {
        for extent in [16, 32] {
            let case = square_case(extent, beta)?;
            let teams = [Team::new(&case, &settings)?, Team::new(&case, &ours::as_given(1))?];
            let figures = alternate(&mut [attempts(&teams[0])?, samples(&teams[1])])?;
            let mut row = vec![beta.to_string(), extent.to_string()];
            for figure in figures {
                row.extend([report.rate(figure), report.goal(figure.best, Goal::AtLeast(2.0))]);
            }
            table.row(row);
        }
    }
    report.say(table);
    Ok(())
}

/// One large sample on one thread and on two.
fn threads(report: &mut Report, _: &[Rival]) -> Result<()> {
    let case = square_case(1024, "0.40")?;
    let teams = [
        Team::new(&case, &ours::as_given(1))?,
        Team::new(&case, &ours::as_given(2))?,
    ];
    // the same samples on both; a crew that is asked for one shares it out
    let measures = teams.iter().map(|team| -> Measure {
        let mut next = 0..;
        Box::new(move || {
            let sample = next.next().unwrap_or(0);
            Ok(team.draw(sample..sample + 1)?.1.rate())
        })
    });
    let figures = alternate(&mut measures.collect::<Vec<_>>())?;
    let heads = ["threads", "rate", "times one", "of 1.8"];
    let mut table = Table::new("One sample on more threads: L = 1024, beta = 0.40", &heads);
    let times = figures[1].best / figures[0].best;
    table.row(["1".into(), report.rate(figures[0]), String::new(), String::new()]);
    table.row([
        "2".into(),
        report.rate(figures[1]),
        number(times),
        report.goal(times, Goal::AtLeast(1.8)),
    ]);
    report.say(table);
    Ok(())
}

/// How long one waits for an exact critical sample.
fn critical(report: &mut Report, _: &[Rival]) -> Result<()> {
    let heads = ["L", "samples", "milliseconds a sample", "goal, below", "of it", "rate"];
    let mut table = Table::new("Exact samples at the critical point, one core", &heads);
    for (extent, goal) in [(64, 40.0), (128, 500.0)] {
        let case = square_case(extent, "critical")?;
        let team = Team::new(&case, &ours::as_given(1))?;
        let work = team.worker().draw(Duration::from_secs(150), 200)?;
        let mean = work.time.as_secs_f64() * 1e3 / f64::from(work.samples);
        table.row([
            extent.to_string(),
            work.samples.to_string(),
            number(mean),
            goal.to_string(),
            report.goal(mean, Goal::Below(goal)),
            number(work.rate()),
        ]);
    }
    report.say(table);
    Ok(())
}

/// Random graphs: what the automatic choice makes of the plain engine.
fn graphs(report: &mut Report, _: &[Rival]) -> Result<()> {
    let heads = ["graph", "plain", "automatic", "times", "of 10"];
    let mut table = Table::new("Random graphs, 10,000 sites and 15,000 edges, one core", &heads);
    for (name, law) in random_graphs() {
        let case = Case::new(law)?;
        let teams = [
            Team::new(&case, &ours::plain())?,
            Team::new(&case, &ours::without_store())?,
        ];
        let figures = alternate(&mut [attempts(&teams[0])?, attempts(&teams[1])?])?;
        let times = figures[1].best / figures[0].best;
        let rates = [report.rate(figures[0]), report.rate(figures[1])];
        let [plain, automatic] = rates;
        table.row([
            name.into(),
            plain,
            automatic,
            number(times),
            report.goal(times, Goal::AtLeast(10.0)),
        ]);
    }
    report.say(table);
    Ok(())
}

/// A graph of random edges with one coupling, and the same with couplings 1/2, 1 and 3/2 edge by edge; both
/// near their transition (tanh beta = 1/3 where the mean degree is 3).
pub fn random_graphs() -> [(&'static str, Law); 2] {
    const SITES: u32 = 10_000;
    // any fixed words will do
    let address = Address {
        seed: Seed(Digest::of(b"Larkmoor, a random graph")),
        key: Digest::of(b""),
        sample: SampleIndex(0),
    };
    let mut words = address.words(0, 0);
    let mut below = |limit: u32| u32::try_from(words.next_word() % u64::from(limit)).unwrap_or(0);
    let mut edges = Vec::new();
    while edges.len() < 15_000 {
        let edge = [below(SITES), below(SITES)];
        if edge[0] != edge[1] {
            edges.push(edge);
        }
    }
    let couplings: Vec<_> = edges.iter().map(|_| ["1/2", "1", "3/2"][below(3) as usize]).collect();
    [
        ("one coupling", ising(graph(SITES.into(), &edges, "", ""), "0.34", "0")),
        (
            "listed couplings",
            ising(graph(SITES.into(), &edges, &couplings.join(" "), ""), "0.33", "0"),
        ),
    ]
}
