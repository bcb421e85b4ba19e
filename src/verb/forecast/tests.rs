use super::*;

use crate::engine::Attempt;
use crate::engine::Engine;
use crate::engine::coupling;
use crate::observer::Silent;
use crate::quantity::SampleIndex;
use crate::sample::Configuration;
use crate::statistics::Known;
use crate::stream::Address;

fn plan(tables: &str) -> Plan {
    let text = format!("title = \"Larkmoor pilot\"\nseed = {{ phrase = \"Larkmoor\" }}\n{tables}");
    Plan::read(text.as_bytes(), &mut |name| Err(Error::missing(name, "a file"))).unwrap()
}

fn ising(lattice: &str, beta: &str) -> String {
    format!("[[ensemble]]\nlaw = \"ising\"\nlattice = {{ {lattice} }}\nbeta = {beta}\nsamples = 100\n")
}

/// An engine whose sample `t` has the coupling time `t`, and which counts the sweeps that it is asked for.
#[derive(Default)]
struct Counting {
    sweeps: f64,
}

impl Engine for Counting {
    fn attempt(&mut self, address: &Address, depth: u8, _: &Stop) -> Result<Attempt> {
        let sweeps = 1u64 << depth;
        self.sweeps += sweeps as f64;
        Ok(Attempt {
            merged_at: sweeps.checked_sub(address.sample.0),
            words: 0,
        })
    }

    fn bounds(&self) -> [Configuration; 2] {
        [false, true].map(|bit| Configuration::pack(&[bit]))
    }
}

/// What draws cost is what `coupling::draw` asks an engine for: here in sweeps, over coupling times from 1 to 40, each
/// as likely as the others.
#[test]
fn the_price_of_a_draw_is_that_of_the_attempts_it_makes() {
    let mut prices = Prices::default();
    prices.add(Turn::First, 3, 8.0);
    let beyond = |time: u64| 1.0 - time.min(40) as f64 / 40.0;
    for limit in [2, 5, 6, 62] {
        for first_depth in 0..=8u8.min(limit) {
            let mut engine = Counting::default();
            for time in 1..=40 {
                let address = Address {
                    seed: Seed(Digest([0; 32])),
                    key: Digest([0; 32]),
                    sample: SampleIndex(time),
                };
                coupling::draw(&mut engine, &address, first_depth, limit, &Stop::default()).unwrap();
            }
            let told = seconds(&prices, first_depth, limit, beyond);
            assert!(
                (told - engine.sweeps / 40.0).abs() < 1e-9,
                "from {first_depth} to {limit}: {told}"
            );
        }
    }
}

#[test]
fn prices_are_medians_and_grow_with_the_sweeps() {
    let mut prices = Prices::default();
    assert_eq!(prices.seconds(Turn::First, 5), 0.0);
    for seconds in [9.0, 1.0, 2.0] {
        prices.add(Turn::First, 4, seconds);
    }
    prices.add(Turn::Longer, 6, 5.0);
    prices.add(Turn::Longer, 8, 24.0);
    assert_eq!(prices.seconds(Turn::First, 4), 2.0);
    assert_eq!(prices.seconds(Turn::First, 7), 16.0);
    assert_eq!(prices.seconds(Turn::Longer, 5), 2.5);
    assert_eq!(prices.seconds(Turn::Longer, 9), 48.0);
    assert_eq!(prices.seconds(Turn::Shorter, 3), 1.0, "not measured: as the first one");
}

/// A clock that stands still: there is time for everything, and whatever is enough ends it.
struct Still;

impl Clock for Still {
    fn utc(&self) -> String {
        String::new()
    }

    fn elapsed(&self) -> Duration {
        Duration::ZERO
    }

    fn busy(&self) -> Duration {
        Duration::ZERO
    }
}

fn told(plan: &Plan, end: u64) -> Result<Forecast> {
    let request = Request {
        plan,
        settings: Settings {
            threads: Some(2),
            ..Settings::default()
        },
        threads: None,
        end: Duration::from_secs(end),
    };
    forecast(&request, &Still, &Silent, &Stop::default())
}

/// The same pilot has the same trials, whatever else is in the plan but its other words; another plan has others.
#[test]
fn a_pilot_is_repeated_by_its_seed_alone() {
    let film = ising("kind = \"hypercubic\", extents = [6, 6]", "0.35");
    let one = told(&plan(&film), 60).unwrap();
    let again = told(&plan(&film), 60).unwrap();
    assert_eq!(one.ensembles[0].coupling_time, again.ensembles[0].coupling_time);
    let other = told(&plan(&film.replace("100", "101")), 60).unwrap();
    assert_ne!(one.ensembles[0].coupling_time, other.ensembles[0].coupling_time);
    let run = plan(&film).seed_rule().seed().unwrap();
    assert_ne!(pilot_seed(&plan(&film)).unwrap(), run);
}

#[test]
fn without_time_nothing_is_said_and_nothing_is_found_against_it() {
    let nothing = told(&plan(&ising("kind = \"hypercubic\", extents = [6, 6]", "[0.1, 2]")), 0).unwrap();
    for outlook in &nothing.ensembles {
        assert_eq!((&outlook.basis, outlook.trials), (&Basis::Nothing, 0));
        assert_eq!(outlook.core_seconds, Figure::Unknown);
        assert!(outlook.obstacles.is_empty());
    }
    assert_eq!(nothing.core_seconds, Figure::MoreThan(0.0));
}

#[test]
fn a_request_to_stop_ends_it() {
    let request = Request {
        plan: &plan(&ising("kind = \"hypercubic\", extents = [6, 6]", "0.1")),
        settings: Settings::default(),
        threads: None,
        end: Duration::from_secs(60),
    };
    let stop = Stop::at(Arc::new(AtomicBool::new(true)));
    let error = forecast(&request, &Still, &Silent, &stop).unwrap_err();
    assert_eq!(error.code(), "stopped");
}

#[test]
fn a_sum_with_a_bound_in_it_is_a_bound() {
    let about = |middle: f64| {
        Figure::About(Estimate {
            low: middle / 2.0,
            middle,
            high: middle * 2.0,
        })
    };
    assert_eq!(Figure::sum([about(2.0), about(4.0)].into_iter()), about(6.0));
    assert_eq!(
        Figure::sum([about(2.0), Figure::MoreThan(1.0)].into_iter()),
        Figure::MoreThan(3.0)
    );
    assert_eq!(
        Figure::sum([Figure::Unknown, about(2.0)].into_iter()),
        Figure::MoreThan(2.0)
    );
    assert_eq!(Figure::Unknown.scaled(2.0), Figure::Unknown);
}

/// By hand: halves and quarters keep their parity (an odd cycle stays one), short axes stay as they are.
#[test]
fn smaller_lattices_are_of_the_same_kind() {
    let extents = |lattice: &str, beta: &str, factor: u32| {
        let plan = plan(&ising(lattice, beta));
        smaller::reduced(plan.ensembles()[0].law(), factor).map(|(regular, _)| regular.extents().to_vec())
    };
    let square = |text: &str| format!("kind = \"hypercubic\", extents = {text}");
    assert_eq!(extents(&square("[64, 64]"), "0.4", 4), Some(vec![16, 16]));
    assert_eq!(extents(&square("[33, 64]"), "0.4", 2), Some(vec![17, 32]));
    assert_eq!(extents(&square("[4, 1000]"), "0.4", 8), Some(vec![4, 126]));
    assert_eq!(extents(&square("[16, 16]"), "0.4", 8), None);
    assert_eq!(extents(&square("[6, 6]"), "0.4", 2), None);
    assert_eq!(
        extents("kind = \"honeycomb\", extents = [32, 32]", "\"critical\"", 2),
        Some(vec![16, 16])
    );
}

#[test]
fn limits_are_held_against_the_law_of_coupling_times() {
    let plan = plan(&ising("kind = \"hypercubic\", extents = [6, 6]", "0.35").replace("100", "100\ndepth_limit = 6"));
    let ensemble = &plan.ensembles()[0];
    let mut pilot = Pilot::new(EnsembleIndex(0), ensemble);
    let obstacle = |times: &[Known], pilot: &Pilot<'_>| {
        obstacle::of(ensemble, pilot, Fit::new(times, 36).as_ref())
            .iter()
            .map(Obstacle::code)
            .collect::<Vec<_>>()
    };
    assert!(obstacle(&[Known::Exactly(5); 40], &pilot).is_empty());
    assert_eq!(obstacle(&[Known::Exactly(50); 40], &pilot), ["depth_limit"]);
    pilot.trials.failed = Some((5, 36));
    assert!(
        obstacle(&[], &pilot).is_empty(),
        "the pilot went less far than a run would"
    );
    pilot.trials.failed = Some((6, 36));
    assert_eq!(obstacle(&[], &pilot), ["depth_limit"]);
    pilot.doubt = Some(Doubt::Cold);
    assert_eq!(obstacle(&[], &pilot), ["cold", "depth_limit"]);
}
