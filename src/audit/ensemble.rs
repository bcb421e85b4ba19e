//! What replay and audit both recompute before they look at samples: plan, keys, thresholds.

use crate::archive::layout;
use crate::archive::reading::Run;
use crate::archive::table::Columns;
use crate::archive::wire;
use crate::audit::{Check, Fault, count};
use crate::error::Result;
use crate::law::Law;
use crate::observable::Observables;
use crate::plan::{Plan, SeedRule};
use crate::quantity::{Digest, EnsembleIndex};
use crate::random_map::RandomMap;

/// One ensemble with everything that follows from its law.
pub struct Checked<'a> {
    /// Its number.
    pub number: EnsembleIndex,
    /// Its record.
    pub record: &'a wire::Ensemble,
    /// Its law.
    pub law: Law,
    /// The key as the law gives it, whatever is recorded.
    pub key: Digest,
    /// The random map as the law gives it, whatever is stored.
    pub map: RandomMap,
    /// What is measured in its samples.
    pub observables: Observables,
    /// The columns of its table.
    pub columns: Columns,
}

impl<'a> Checked<'a> {
    /// Recomputes key, state and thresholds of an ensemble and compares them with what is stored.
    ///
    /// # Errors
    /// Whatever makes law or map unreadable.
    pub fn new(run: &'a Run, number: EnsembleIndex, keys: &mut Check, thresholds: &mut Check) -> Result<Self> {
        let record = run.ensemble(number)?;
        let law = run.law(number)?;
        let key = law.key()?;
        let at = |member: &str, what: String| Fault::new(what).in_member(member).at_ensemble(number);
        keys.expect(key == record.key, || {
            at(
                layout::RECORD,
                format!("recorded key {}, the law gives {key}", record.key),
            )
        });
        let parts = wire::Part::of(&law);
        keys.expect(parts == record.state, || {
            at(layout::RECORD, "the recorded state is not that of the law".into())
        });
        let map = RandomMap::new(&law)
            .map_err(|error| error.at_ensemble(number).in_member(layout::RECORD).in_file(run.path()))?;
        compare_maps(
            &run.map(number)?,
            &wire::Map::of(&law, &map),
            &layout::in_ensemble(number, layout::MAP),
            number,
            thresholds,
        );
        let observables = Observables::new(&law);
        let columns = Columns::new(observables.names())?;
        Ok(Self {
            number,
            record,
            law,
            key,
            map,
            observables,
            columns,
        })
    }
}

fn compare_maps(stored: &wire::Map, expected: &wire::Map, member: &str, number: EnsembleIndex, check: &mut Check) {
    let at = |what: String| Fault::new(what).in_member(member).at_ensemble(number);
    for ((argument, theta), (_, known)) in stored
        .thresholds
        .iter()
        .zip(&expected.thresholds)
        .filter(|(a, b)| a.0 == b.0 && a.1 != b.1)
    {
        check.fault(at(format!(
            "threshold at {} {argument}: stored {theta}, the parameters give {known}",
            expected.argument
        )));
    }
    let arguments = |map: &wire::Map| {
        map.thresholds
            .iter()
            .map(|(argument, _)| argument.clone())
            .collect::<Vec<_>>()
    };
    check.expect(arguments(stored) == arguments(expected), || {
        at(format!(
            "{} thresholds stored, {} expected, for other arguments",
            stored.thresholds.len(),
            expected.thresholds.len()
        ))
    });
    let rest = |map: &wire::Map| {
        (
            map.update.clone(),
            map.digits.clone(),
            map.argument.clone(),
            map.lanes.clone(),
        )
    };
    check.expect(rest(stored) == rest(expected), || {
        at("update, digits, argument or lanes are not those of the law".into())
    });
}

/// Compares the recorded ensembles, the seed and the plan's digest with what the plan in the archive says.
///
/// # Errors
/// Those of the digests.
pub fn check_parameters(run: &Run, plan: &Plan, ensembles: &[EnsembleIndex], check: &mut Check) -> Result<()> {
    let record = run.record();
    let at = |what: String| Fault::new(what).in_member(layout::RECORD);
    let planned = plan.ensembles().len();
    check.expect(planned == record.ensembles.len(), || {
        at(format!(
            "{} ensembles recorded, the plan gives {planned}",
            record.ensembles.len()
        ))
    });
    for &number in ensembles {
        let (Some(planned), recorded) = (plan.ensembles().get(number.0 as usize), run.ensemble(number)?) else {
            continue;
        };
        let law = planned.law().to_json()?;
        let differing = |name: &str, recorded: &serde_json::Value, planned: &serde_json::Value| {
            at(format!("{name}: recorded {recorded}, the plan gives {planned}")).at_ensemble(number)
        };
        if let (Some(found), Some(expected)) = (recorded.law.as_object(), law.as_object()) {
            let names: std::collections::BTreeSet<&String> = found.keys().chain(expected.keys()).collect();
            let null = serde_json::Value::Null;
            for name in names {
                let (found, expected) = (found.get(name).unwrap_or(&null), expected.get(name).unwrap_or(&null));
                check.expect(found == expected, || differing(name, found, expected));
            }
        }
        check.expect(recorded.samples == planned.samples(), || {
            differing("samples", &recorded.samples.into(), &planned.samples().into())
        });
        check.expect(recorded.depth_limit == planned.depth_limit(), || {
            differing(
                "depth_limit",
                &recorded.depth_limit.into(),
                &planned.depth_limit().into(),
            )
        });
    }
    let rule = plan.seed_rule().to_json();
    check.expect(rule == record.seed_rule, || {
        at(format!(
            "seed rule: recorded {}, the plan gives {rule}",
            record.seed_rule
        ))
    });
    if let Some(seed) = plan.seed_rule().seed() {
        check.expect(seed.0 == record.seed, || {
            at(format!("seed: recorded {}, its rule gives {}", record.seed, seed.0))
        });
    }
    let digest = plan.digest()?;
    check.expect(digest == record.plan_digest, || {
        at(format!(
            "plan digest: recorded {}, the plan gives {digest}",
            record.plan_digest
        ))
    });
    let entropy = matches!(plan.seed_rule(), SeedRule::Entropy);
    let ensembles = count(ensembles.len() as u64, "ensemble");
    check.examined = if entropy {
        format!("{ensembles} as plan.toml gives them; a seed from system entropy has no rule to recompute it from")
    } else {
        format!("{ensembles} and the seed as plan.toml gives them")
    };
    Ok(())
}
