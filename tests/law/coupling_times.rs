//! What `forecast` builds on: times forward from a start that was chosen before are coupling times, and
//! the fitted law says of them what the exact one says.

use std::collections::BTreeMap;

use pastproof::engine::Stop;
use pastproof::engine::crew::{Crew, Settings};
use pastproof::law::Law;
use pastproof::random_map::RandomMap;
use pastproof::statistics::{Fit, Known, Law as TimeLaw};

use crate::exactness::{order_of, windows_of};
use crate::statistics::{fit, mean};
use crate::systems::{address, draw, graph, ising};
use crate::values::{COUPLING_TIME, parse};

/// From how many starts 2^depth sweeps in the past the bounds meet after how many sweeps.
fn forward(law: &Law, depth: u8, count: u64) -> Vec<Known> {
    let map = RandomMap::new(law).unwrap();
    let crew = Crew::new(&map, &Settings::default());
    let starts: Vec<u64> = (0..count).collect();
    let times = crew.each(&starts, |engine, start| {
        let attempt = engine.attempt(&address(law, *start), depth, &Stop::default())?;
        let sweeps = 1 << depth;
        Ok(match attempt.merged_at {
            Some(merged_at) => Known::Exactly(sweeps - merged_at),
            None => Known::Beyond(sweeps),
        })
    });
    times.unwrap()
}

/// The window of a time: 0 for 1, k for above 2^(k-1) and up to 2^k; the one after the start's for longer ones.
fn window(time: &Known) -> u32 {
    match time {
        Known::Exactly(time) => time.next_power_of_two().ilog2(),
        Known::Beyond(sweeps) => sweeps.ilog2() + 1,
        Known::Within { .. } => panic!("a forward time is no interval"),
    }
}

/// The exact laws of an independent program (`tests/values/coupling_time.json`): 14 checks, half of them of a start
/// that is too near for one time in five or so. The times at the least depth that meets are another law's.
#[test]
fn forward_times_are_coupling_times_and_are_fitted() {
    let known = parse(COUPLING_TIME);
    let mut seen = 0;
    for record in known["ising_heat_bath"].as_array().unwrap() {
        let edges: Vec<[u32; 2]> = serde_json::from_value(record["edges"].clone()).unwrap();
        let order: Vec<u32> = serde_json::from_value(record["site_order"].clone()).unwrap();
        let law = ising(
            graph(order.len() as u64, &edges, "", ""),
            record["beta"].as_str().unwrap(),
            "0",
        );
        if order_of(&law) != order {
            continue;
        }
        seen += 1;
        let what = format!("{} at {}, forward", record["graph"], record["beta"]);
        let windows = windows_of(record);
        let beyond = |depth: usize| windows[depth + 1..].iter().sum::<f64>();
        let far = (0..windows.len()).find(|depth| beyond(*depth) < 1e-3).unwrap();
        let near = (0..far).find(|depth| beyond(*depth) < 0.25).unwrap();
        for depth in [near, far] {
            let times = forward(&law, depth as u8, 20_000);
            let cut: BTreeMap<u32, f64> = (0..)
                .zip(windows[..=depth].iter().copied().chain([beyond(depth)]))
                .collect();
            fit(&what, &cut, times.iter().map(window)).must_pass();

            // a pilot's worth of them: a share of 64 has a standard error of 0.06 at most
            let fitted = Fit::new(&times[..64], law.lattice().sites().into()).unwrap();
            let exact = record["mean_sweeps"].as_f64().unwrap();
            let estimate = fitted.estimate(TimeLaw::mean);
            assert!(
                (estimate.middle / exact - 1.0).abs() < 0.3,
                "{what}: mean {exact}, fitted {estimate:?}"
            );
            let rest = 0.01..0.5;
            for k in (0..windows.len()).filter(|k| rest.contains(&beyond(*k))) {
                let found = fitted.beyond(1 << k);
                assert!(
                    (found - beyond(k)).abs() < 0.15,
                    "{what}: beyond 2^{k} {}, fitted {found}",
                    beyond(k)
                );
            }
        }
        // STREAM.md section 6: 2^depth - merged_at of a sample is no draw of T
        let samples = draw(&law, 20_000);
        let selected = samples
            .iter()
            .map(|sample| ((1u64 << sample.depth) - sample.merged_at) as f64);
        let exact = record["mean_sweeps"].as_f64().unwrap();
        mean(&what, exact, &selected.collect::<Vec<_>>()).must_fail();
    }
    assert_eq!(seen, 7);
}
