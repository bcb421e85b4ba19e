//! P11: what `forecast` says of 20 ensembles against what their runs then take.
//!
//! Timed, and so ignored by name: `.ci/run long` runs it, and it wants an idle machine. Pilot and run
//! have different seeds by construction. It prints its table in Markdown, as `RESULTS.md` shows it:
//!
//!     cargo test --release --test law forecast -- --ignored --nocapture

use std::time::{Duration, Instant};

use pastproof::archive::wire;
use pastproof::audit::seal::{self, Anchors};
use pastproof::clock::Clock;
use pastproof::engine::Stop;
use pastproof::engine::crew::Settings;
use pastproof::observer::Silent;
use pastproof::plan::Plan;
use pastproof::verb::draw::{self, Existing, draw};
use pastproof::verb::forecast::{self, Basis, Figure, Outlook, forecast};
use rustix::time::{ClockId, clock_gettime};

/// Lattice, parameters, samples; a star is for at most 5 % off a critical point. Those are: square 0.440687, triangular
/// 0.274653, honeycomb 0.658479 (closed forms); cubic 0.2216546 (A. M. Ferrenberg, J. Xu, D. P. Landau 2018, from
/// memory).
const GRID: [(&str, &str, &str, u32); 20] = [
    ("hypercubic", "extents = [64, 64]", "beta = 0.40", 2000),
    ("hypercubic", "extents = [64, 64]", "beta = 0.43 # *", 600),
    ("hypercubic", "extents = [64, 64]", "beta = \"critical\" # *", 150),
    ("hypercubic", "extents = [32, 32]", "beta = \"critical\" # *", 1500),
    ("hypercubic", "extents = [128, 128]", "beta = 0.42 # *", 150),
    ("hypercubic", "extents = [256, 256]", "beta = 0.38", 80),
    ("hypercubic", "extents = [24, 24]", "beta = 0.45 # *", 600),
    (
        "hypercubic",
        "extents = [48, 80], boundary = [\"free\", \"plus\"]",
        "beta = 0.44 # *",
        200,
    ),
    ("triangular", "extents = [48, 48]", "beta = 0.25", 1500),
    ("triangular", "extents = [48, 48]", "beta = \"critical\" # *", 150),
    ("triangular", "extents = [96, 96]", "beta = 0.265 # *", 200),
    ("honeycomb", "extents = [32, 32]", "beta = 0.55", 1500),
    ("honeycomb", "extents = [32, 32]", "beta = \"critical\" # *", 150),
    ("honeycomb", "extents = [40, 40]", "beta = 0.64 # *", 300),
    ("hypercubic", "extents = [12, 12, 12]", "beta = 0.2216546 # *", 800),
    ("hypercubic", "extents = [20, 20, 20]", "beta = 0.215 # *", 400),
    ("hypercubic", "extents = [24, 24, 24]", "beta = 0.20", 400),
    ("graph", "edges = \"ring.csv\"", "beta = 0.3", 300),
    ("graph", "edges = \"ring.csv\"", "beta = 0.38", 60),
    ("graph", "edges = \"mixed.csv\"", "beta = 0.3", 300),
];

/// A ring of 300 sites, each with a chord to another: every site has three or four neighbours.
fn edges(couplings: bool) -> String {
    let lines = (0..300u32).flat_map(|site| [(site, (site + 1) % 300), (site, (site * 7 + 30) % 300)]);
    let lines = lines.filter(|(from, to)| from != to).enumerate();
    let row = |(number, (from, to))| {
        let coupling = ["", ",1", ",4/5", ",1/2"][if couplings { 1 + number % 3 } else { 0 }];
        format!("site {from},site {to}{coupling}\n")
    };
    let head = if couplings { "from,to,coupling\n" } else { "from,to\n" };
    head.to_string() + &lines.map(row).collect::<String>()
}

fn plan(points: &[(&str, &str, &str, u32)]) -> Plan {
    let table = |(kind, lattice, parameters, samples): &(&str, &str, &str, u32)| {
        format!(
            "[[ensemble]]\nlaw = \"ising\"\nlattice = {{ kind = \"{kind}\", {lattice} }}\n{parameters}\nsamples = \
             {samples}\n"
        )
    };
    let tables: String = points.iter().map(table).collect();
    let text = format!("title = \"Larkmoor grid\"\nseed = {{ phrase = \"Larkmoor 2026, grid\" }}\n{tables}");
    let file = |name: &str| Ok(edges(name == "mixed.csv").into_bytes());
    Plan::read(text.as_bytes(), &mut { file }).unwrap()
}

struct Watch(Instant);

impl Clock for Watch {
    fn utc(&self) -> String {
        "2027-01-01T00:00:00Z".into()
    }

    fn elapsed(&self) -> Duration {
        self.0.elapsed()
    }

    fn busy(&self) -> Duration {
        clock_gettime(ClockId::ThreadCPUTime).try_into().unwrap()
    }
}

/// Seconds that all threads of this process have had a processor.
fn core_seconds() -> f64 {
    let time: Duration = clock_gettime(ClockId::ProcessCPUTime).try_into().unwrap();
    time.as_secs_f64()
}

/// Draws and audits a plan, as the program does; gives core seconds.
fn run(plan: &Plan, settings: &Settings) -> f64 {
    let folder = tempfile::tempdir().unwrap();
    let output = folder.path().join("run.tar.zst");
    let request = draw::Request {
        plan,
        seed: plan.seed_rule().seed().unwrap(),
        first_depth: None,
        output: &output,
        existing: Existing::Refuse,
        settings: settings.clone(),
        provenance: wire::Provenance {
            provenance: wire::PROVENANCE.into(),
            program: wire::Program {
                name: "pastproof".into(),
                version: "0".into(),
                revision: None,
                cargo_lock: None,
                rustc: None,
            },
            repository: None,
            repository_unreadable: None,
            commitment: None,
            ledger: None,
        },
        patch: None,
        platform: String::new(),
        cpu_features: Vec::new(),
    };
    let begin = core_seconds();
    let sealed = draw(&request, &Watch(Instant::now()), &Silent, &Stop::default()).unwrap();
    let anchors = Anchors {
        root: Some(sealed.root),
        seal: Some(sealed.seal),
    };
    seal::audit(&output, anchors, &Silent).unwrap();
    core_seconds() - begin
}

#[test]
#[expect(clippy::print_stdout, reason = "the table is for people")]
#[ignore = "timed: takes minutes and wants an idle machine; .ci/run long runs it"]
fn forecast_core_hours_are_within_a_factor_of_two_for_18_of_20() {
    let settings = Settings::default();
    let whole = plan(&GRID);
    let request = forecast::Request {
        plan: &whole,
        settings: settings.clone(),
        threads: None,
        end: Duration::from_secs(60),
    };
    let told = forecast(&request, &Watch(Instant::now()), &Silent, &Stop::default()).unwrap();
    println!("| lattice | parameters | samples | trials | sweeps | forecast, s | 5 to 95 % | measured, s | ratio |");
    println!("|---|---|--:|--:|--:|--:|--:|--:|--:|");
    let (mut good, mut critical) = (0, 0);
    for (point, outlook) in GRID.iter().zip(&told.ensembles) {
        let Outlook {
            basis: Basis::Trials,
            core_seconds: Figure::About(core),
            coupling_time,
            ..
        } = outlook
        else {
            println!("| {} {} | {} | {} | no forecast |", point.0, point.1, point.2, point.3);
            continue;
        };
        let measured = run(&plan(&[*point]), &settings);
        let ratio = core.middle / measured;
        good += u32::from((0.5..=2.0).contains(&ratio));
        critical += u32::from(point.2.ends_with('*'));
        println!(
            "| {} {} | {} | {} | {} | {:.0} | {:.2} | {:.2} to {:.2} | {measured:.2} | {ratio:.2} |",
            point.0,
            point.1.replace("extents = ", ""),
            point.2,
            point.3,
            outlook.met,
            coupling_time.at_least(),
            core.middle,
            core.low,
            core.high,
        );
    }
    println!("\n{good} of 20 within a factor of 2; {critical} points within 5 % of a critical one");
    assert!(good >= 18 && critical >= 6);
}
