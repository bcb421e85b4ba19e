//! Deeds of doubt: `seal` checks a whole archive against itself, `replay` draws samples again.
//!
//! A check that was made and failed is a [`Fault`] of its [`Check`], never an `Err`: an `Err` means
//! that the question could not be answered. A verdict always says what it did not show.

mod ensemble;
pub mod replay;
pub mod seal;

use serde::Serialize;

use crate::quantity::{EnsembleIndex, SampleIndex};

/// Faults of one check that are described; further ones are counted.
const DESCRIBED: usize = 20;

/// The answer to one question.
#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Answer {
    /// Examined, and it is so.
    Holds,
    /// Examined, and it is not so.
    Fails,
    /// Not examined.
    NotExamined,
}

/// One thing that is not as it should be.
#[derive(Clone, PartialEq, Eq, Debug, Serialize)]
pub struct Fault {
    /// The member, if it is in one.
    pub member: Option<String>,
    /// The ensemble, if it is in one.
    pub ensemble: Option<u32>,
    /// The sample, if it is in one.
    pub sample: Option<u64>,
    /// Found and expected.
    pub what: String,
}

/// One check: the question, what was examined, the answer.
#[derive(Clone, PartialEq, Eq, Debug, Serialize)]
pub struct Check {
    /// Its stable name.
    pub id: &'static str,
    /// The answer.
    pub answer: Answer,
    /// What was examined, in words and numbers.
    pub examined: String,
    /// How many faults were found.
    pub fault_count: u64,
    /// The first of them.
    pub faults: Vec<Fault>,
}

/// What a whole verdict comes to.
#[derive(Clone, Copy, PartialEq, Eq, Debug, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Conclusion {
    /// Every check holds.
    Holds,
    /// A check fails.
    Fails,
    /// Every check holds, but some samples are unfinished.
    Incomplete,
}

impl Fault {
    /// A fault without a place.
    pub fn new(what: impl Into<String>) -> Self {
        Self {
            member: None,
            ensemble: None,
            sample: None,
            what: what.into(),
        }
    }

    /// Names the member.
    #[must_use]
    pub fn in_member(mut self, member: &str) -> Self {
        self.member = Some(member.to_string());
        self
    }

    /// Names the ensemble.
    #[must_use]
    pub fn at_ensemble(mut self, ensemble: EnsembleIndex) -> Self {
        self.ensemble = Some(ensemble.0);
        self
    }

    /// Names the sample.
    #[must_use]
    pub fn at_sample(mut self, sample: SampleIndex) -> Self {
        self.sample = Some(sample.0);
        self
    }
}

impl std::fmt::Display for Fault {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        if let Some(member) = &self.member {
            write!(f, "{member}: ")?;
        }
        if let Some(ensemble) = self.ensemble {
            write!(f, "ensemble {ensemble}: ")?;
        }
        if let Some(sample) = self.sample {
            write!(f, "sample {sample}: ")?;
        }
        f.write_str(&self.what)
    }
}

impl Check {
    /// A check that nothing has contradicted yet.
    fn new(id: &'static str) -> Self {
        Self {
            id,
            answer: Answer::Holds,
            examined: String::new(),
            fault_count: 0,
            faults: Vec::new(),
        }
    }

    /// A check that was not made.
    fn not_examined(id: &'static str, why: impl Into<String>) -> Self {
        Self {
            answer: Answer::NotExamined,
            examined: why.into(),
            ..Self::new(id)
        }
    }

    /// Records a fault.
    fn fault(&mut self, fault: Fault) {
        self.answer = Answer::Fails;
        self.fault_count += 1;
        if self.faults.len() < DESCRIBED {
            self.faults.push(fault);
        }
    }

    /// Records a fault unless `holds`.
    fn expect(&mut self, holds: bool, fault: impl FnOnce() -> Fault) {
        if !holds {
            self.fault(fault());
        }
    }
}

/// `1 sample`, `2 samples`.
fn count(number: u64, noun: &str) -> String {
    let ending = match (number, noun) {
        (1, _) => "",
        (_, "hash") => "es",
        _ => "s",
    };
    format!("{number} {noun}{ending}")
}

/// What `checks` come to, with `unfinished` samples among those examined.
fn conclude(checks: &[Check], unfinished: u64) -> Conclusion {
    if checks.iter().any(|check| check.answer == Answer::Fails) {
        Conclusion::Fails
    } else if unfinished > 0 {
        Conclusion::Incomplete
    } else {
        Conclusion::Holds
    }
}
