//! Tests of samples against a known law, and how often they may raise a false alarm.
//!
//! Every statistical check of this test program goes through [`Verdict`] and one level, [`LEVEL`]. There
//! are at most [`MOST_CHECKS`] of them (92 now), so that a correct program fails with probability at most 1e-5
//! (union bound; seeds are fixed, so it fails always or never). A planted fault must fall below the
//! same level in the same check.

use std::collections::BTreeMap;
use std::sync::atomic::{AtomicUsize, Ordering};

use serde_json::Value;

/// The false-alarm rate of one check.
pub const LEVEL: f64 = 1e-7;
/// Checks that must pass, at most: together they raise a false alarm with probability 1e-5 at most.
pub const MOST_CHECKS: usize = 100;
static CHECKS: AtomicUsize = AtomicUsize::new(0);

/// Cells with a smaller expected count are merged (common practice: at least 5 to 10).
const LEAST_EXPECTED: f64 = 10.0;

/// The probability, under the stated law, of a deviation at least as large as the one found.
pub struct Verdict {
    what: String,
    found: String,
    pub tail: f64,
}

impl Verdict {
    #[track_caller]
    pub fn must_pass(&self) {
        let checks = CHECKS.fetch_add(1, Ordering::Relaxed) + 1;
        assert!(checks <= MOST_CHECKS, "more than {MOST_CHECKS} checks: lower LEVEL");
        assert!(
            self.tail >= LEVEL,
            "{}: {}, tail {:.1e}",
            self.what,
            self.found,
            self.tail
        );
    }

    #[track_caller]
    pub fn must_fail(&self) {
        assert!(
            self.tail < LEVEL,
            "{}: a planted fault was not seen: {}, tail {:.1e}",
            self.what,
            self.found,
            self.tail
        );
    }
}

/// Chi-square (Pearson 1900) of counts against probabilities that sum to 1. A count where the law gives no
/// probability has tail 0.
pub fn fit<K: Ord + Clone>(what: &str, law: &BTreeMap<K, f64>, found: impl IntoIterator<Item = K>) -> Verdict {
    let sum: f64 = law.values().sum();
    assert!((sum - 1.0).abs() < 1e-9, "{what}: probabilities sum to {sum}");
    let mut counts = BTreeMap::new();
    let mut total = 0u64;
    for key in found {
        *counts.entry(key).or_insert(0u64) += 1;
        total += 1;
    }
    let impossible: u64 = counts
        .iter()
        .filter(|(key, _)| law.get(key).is_none_or(|probability| *probability == 0.0))
        .map(|(_, count)| count)
        .sum();
    if impossible > 0 {
        return Verdict {
            what: what.into(),
            found: format!("{impossible} impossible samples"),
            tail: 0.0,
        };
    }
    let cell = |(key, probability): (&K, &f64)| (probability * total as f64, *counts.get(key).unwrap_or(&0) as f64);
    let mut cells: Vec<(f64, f64)> = law.iter().map(cell).collect();
    cells.sort_by(|one, other| one.0.total_cmp(&other.0));
    let mut merged: Vec<(f64, f64)> = Vec::new();
    for (expected, count) in cells {
        match merged.last_mut() {
            Some(last) if last.0 < LEAST_EXPECTED => *last = (last.0 + expected, last.1 + count),
            _ => merged.push((expected, count)),
        }
    }
    assert!(
        merged.len() > 1 && merged[0].0 >= LEAST_EXPECTED,
        "{what}: nothing to check, too few cells"
    );
    let value = merged
        .iter()
        .map(|(expected, count)| (count - expected).powi(2) / expected)
        .sum();
    let freedom = merged.len() - 1;
    Verdict {
        what: what.into(),
        found: format!("chi-square {value:.1} with {freedom} degrees of freedom, {total} samples"),
        tail: chi_square_tail(freedom, value),
    }
}

/// The mean of independent values against the expected one, with their own standard error (central limit).
pub fn mean(what: &str, expected: f64, values: &[f64]) -> Verdict {
    let count = values.len() as f64;
    let mean = values.iter().sum::<f64>() / count;
    let variance = values.iter().map(|value| (value - mean).powi(2)).sum::<f64>() / (count - 1.0);
    assert!(variance > 0.0, "{what}: nothing to check, all values are equal");
    let z = (mean - expected) / (variance / count).sqrt();
    Verdict {
        what: what.into(),
        found: format!("mean {mean:.6}, expected {expected:.6}, z = {z:.2}"),
        tail: normal_tail(z),
    }
}

/// The correlation of each value with its successor, 0 for independent ones (z = r sqrt n; large n).
pub fn succession(what: &str, values: &[f64]) -> Verdict {
    let count = values.len() as f64;
    let mean = values.iter().sum::<f64>() / count;
    let square: f64 = values.iter().map(|value| (value - mean).powi(2)).sum();
    assert!(square > 0.0, "{what}: nothing to check, all values are equal");
    let product: f64 = values.windows(2).map(|pair| (pair[0] - mean) * (pair[1] - mean)).sum();
    let z = product / square * count.sqrt();
    Verdict {
        what: what.into(),
        found: format!("correlation with the next {:.5}, z = {z:.2}", product / square),
        tail: normal_tail(z),
    }
}

/// P(X >= value) for chi-square X: Q(freedom/2, value/2) (DLMF 8.2.4).
pub fn chi_square_tail(freedom: usize, value: f64) -> f64 {
    upper_gamma(freedom as f64 / 2.0, value / 2.0)
}

/// P(|Z| >= |z|) for a normal Z: its square has one degree of freedom.
pub fn normal_tail(z: f64) -> f64 {
    chi_square_tail(1, z * z)
}

/// Q(a, x) = Gamma(a, x)/Gamma(a): 1 - the series of DLMF 8.11.4 for x < a + 1, else the continued fraction
/// DLMF 8.9.2 by Lentz's method (as in Numerical Recipes, 6.2). Formulas from memory, checked against SciPy.
fn upper_gamma(a: f64, x: f64) -> f64 {
    const SMALL: f64 = 1e-300;
    if x <= 0.0 {
        return 1.0;
    }
    let scale = exp(a * ln(x) - x - ln_gamma(a));
    if x < a + 1.0 {
        let (mut term, mut sum, mut n) = (1.0 / a, 1.0 / a, a);
        while term > sum * 1e-17 {
            n += 1.0;
            term *= x / n;
            sum += term;
        }
        return 1.0 - scale * sum;
    }
    let mut b = x + 1.0 - a;
    let mut c = 1.0 / SMALL;
    let mut d = 1.0 / b;
    let mut fraction = d;
    for step in 1..100_000 {
        let step = f64::from(step);
        let above = step * (a - step);
        b += 2.0;
        d = 1.0 / (above * d + b);
        c = b + above / c;
        fraction *= c * d;
        if (c * d - 1.0).abs() < 1e-15 {
            break;
        }
    }
    scale * fraction
}

/// ln Gamma(a), a > 0: Stirling's series (DLMF 5.11.1) after raising a above 20 by the recurrence.
fn ln_gamma(mut a: f64) -> f64 {
    let mut below = 1.0;
    while a < 20.0 {
        below *= a;
        a += 1.0;
    }
    let series = 1.0 / (12.0 * a) - 1.0 / (360.0 * a.powi(3)) + 1.0 / (1260.0 * a.powi(5)) - 1.0 / (1680.0 * a.powi(7));
    (a - 0.5) * ln(a) - a + ln(std::f64::consts::TAU) / 2.0 + series - ln(below)
}

#[expect(clippy::disallowed_methods, reason = "judges samples, never makes one")]
pub fn exp(number: f64) -> f64 {
    number.exp()
}

#[expect(clippy::disallowed_methods, reason = "judges samples, never makes one")]
pub fn ln(number: f64) -> f64 {
    number.ln()
}

/// `tests/values/chi_square.json`, made by SciPy 1.17.1.
#[test]
fn tails_are_those_of_scipy() {
    let known: Value = serde_json::from_str(include_str!("../values/chi_square.json")).unwrap();
    let rows = known["rows"].as_array().unwrap();
    for row in rows {
        let freedom = row["freedom"].as_u64().unwrap() as usize;
        let (value, tail) = (row["value"].as_f64().unwrap(), row["tail"].as_f64().unwrap());
        let found = chi_square_tail(freedom, value);
        assert!(
            (found - tail).abs() <= 1e-9 * tail,
            "{freedom} degrees, {value}: {found} is not {tail}"
        );
    }
    assert_eq!(rows.len(), 54);
}

#[test]
fn checks_of_nothing_do_not_pass() {
    let coin = BTreeMap::from([(0, 0.5), (1, 0.5)]);
    assert!(std::panic::catch_unwind(|| fit("no sample", &coin, [])).is_err());
    assert!(std::panic::catch_unwind(|| fit("one cell", &BTreeMap::from([(0, 1.0)]), [0; 100])).is_err());
    assert!(std::panic::catch_unwind(|| mean("constant", 1.0, &[1.0; 100])).is_err());
    fit("impossible", &coin, [2; 100]).must_fail();
    fit("always heads", &coin, [0; 100]).must_fail();
}
