//! `show`: what an archive holds, without judging it.
//!
//! Laws with their conventions, counts, the seed and where it comes from, program and revision, root
//! and seal. Nothing is checked beyond what it takes to read it, and the result says so.

use serde::Serialize;
use serde_json::Value;

use crate::archive::layout;
use crate::archive::reading::Run;
use crate::archive::readme;
use crate::archive::table::Columns;
use crate::archive::wire;
use crate::error::Result;
use crate::law::{Beta, Law, Model};
use crate::number::Exact;
use crate::observable::Observables;
use crate::quantity::{Digest, EnsembleIndex};
use crate::random_map::RandomMap;
use crate::threshold;

/// What an archive holds.
#[derive(Clone, Debug, Serialize)]
pub struct Overview {
    /// The title of the plan.
    pub title: String,
    /// The SHA-256 of the record.
    pub root: Digest,
    /// The SHA-256 of the manifest.
    pub seal: Digest,
    /// The name of the stream definition.
    pub stream: String,
    /// The seed.
    pub seed: Digest,
    /// Where it comes from.
    pub seed_rule: Value,
    /// Whether a person chose it.
    pub seed_chosen_by_a_person: bool,
    /// The digest of the plan without title and first depth.
    pub plan_digest: Digest,
    /// The ensembles.
    pub ensembles: Vec<Shown>,
    /// Program and author's checkout.
    pub provenance: wire::Provenance,
    /// Times and machine.
    pub circumstances: wire::Circumstances,
    /// Members after the manifest.
    pub attested: Vec<String>,
}

/// One ensemble of an archive.
#[derive(Clone, Debug, Serialize)]
pub struct Shown {
    /// Its number.
    pub ensemble: u32,
    /// The law object.
    pub law: Value,
    /// The key.
    pub key: Digest,
    /// The root of the tree over its samples.
    pub samples_root: Digest,
    /// The lattice in words.
    pub lattice: String,
    /// The parameters in words, a critical point with 20 digits.
    pub parameters: String,
    /// The convention in words.
    pub convention: String,
    /// Whether the bounds are the two extremal chains (else they enclose the true states).
    pub ordered: bool,
    /// Samples planned.
    pub samples: u64,
    /// Samples recorded as unfinished.
    pub unfinished: u64,
    /// The depth limit.
    pub depth_limit: u8,
    /// The largest depth of a sample.
    pub deepest: u8,
    /// The largest number of decisions of one sample: lanes times 2^depth.
    pub decisions: String,
    /// The power of two that bounds the distance of each sample's distribution from the stated law,
    /// given an ideal source of digits: decisions times 2^-128 is below 2^this.
    pub distance_exponent: i64,
}

/// The parameters of a law in words: a critical point as its formula with `digits` digits, or where none are
/// asked for as the word.
pub fn parameters(law: &Law, digits: Option<usize>) -> String {
    let named = |name: &str, value: &Option<Exact>| match value {
        Some(value) => format!("{name} = {}", value.to_plain()),
        None => format!("{name} listed"),
    };
    match law.model() {
        Model::Ising { beta, coupling, field } => {
            let beta = match beta {
                Beta::Number(beta) => beta.to_plain(),
                Beta::Critical(critical) => match digits {
                    None => "critical".to_string(),
                    Some(digits) => format!(
                        "critical = {} = {}...",
                        critical.formula(),
                        threshold::critical_decimal(*critical, digits)
                    ),
                },
            };
            format!("beta = {beta}, {}, {}", named("J", coupling), named("h", field))
        }
        Model::LatticeGas { activity } => format!("z = {}", activity.to_plain()),
    }
}

/// Reads what `run` holds.
///
/// # Errors
/// Whatever makes a member unreadable.
pub fn show(run: &Run) -> Result<Overview> {
    let plan = run.plan()?;
    let record = run.record();
    let numbers = (0..).map(EnsembleIndex).take(record.ensembles.len());
    let ensembles = numbers.map(|number| ensemble(run, number)).collect::<Result<_>>()?;
    let attested = run
        .names()?
        .into_iter()
        .filter(|name| name.starts_with(layout::ATTEST))
        .collect();
    Ok(Overview {
        title: plan.title().to_string(),
        root: run.root(),
        seal: run.seal()?,
        stream: record.stream.name.clone(),
        seed: record.seed,
        seed_rule: record.seed_rule.clone(),
        seed_chosen_by_a_person: plan.seed_rule().chosen_by_a_person(),
        plan_digest: record.plan_digest,
        ensembles,
        provenance: run.json(layout::PROVENANCE, "provenance", wire::PROVENANCE)?,
        circumstances: run.json(layout::CIRCUMSTANCES, "circumstances", wire::CIRCUMSTANCES)?,
        attested,
    })
}

fn ensemble(run: &Run, number: EnsembleIndex) -> Result<Shown> {
    let record = run.ensemble(number)?;
    let law = run.law(number)?;
    let map = RandomMap::new(&law)?;
    let (mut unfinished, mut deepest) = (0, 0);
    let columns = Columns::new(Observables::new(&law).names())?;
    for row in run.rows(number, &columns)? {
        let row = row?;
        unfinished += u64::from(row.exact_row().is_none());
        deepest = deepest.max(row.depth);
    }
    let decisions = u128::from(map.lanes()) << deepest.min(62);
    let bits = 128 - i64::from(decisions.leading_zeros());
    Ok(Shown {
        ensemble: number.0,
        law: record.law.clone(),
        key: record.key,
        samples_root: record.samples_root,
        lattice: law.lattice().to_string(),
        parameters: parameters(&law, Some(20)),
        convention: readme::conventions(&law).to_string(),
        ordered: map.is_ordered(),
        samples: record.samples,
        unfinished,
        depth_limit: record.depth_limit,
        deepest,
        decisions: decisions.to_string(),
        distance_exponent: bits - 128,
    })
}
