//! Observables of one sample, exact: what `samples.csv` lists beside each hash.
//!
//! `pair_sum` = sum over the numbered edges of J s s (frozen neighbours are not counted),
//! `magnetisation` = sum of s, `occupied` = number of occupied sites. They follow from the sample and
//! the law alone, so that a transposed, swapped or recoded array is found even where its hash was redone.

use std::collections::BTreeMap;
use std::sync::Arc;

use dashu_int::IBig;
use dashu_ratio::RBig;

use crate::lattice::{Graph, Lattice};
use crate::law::{Law, Model};
use crate::number::Exact;
use crate::sample::Configuration;

/// Measures the samples of one law.
pub struct Observables {
    pairs: Pairs,
}

/// Where the coupling of an edge comes from.
enum Pairs {
    /// The lattice gas has no pair sum.
    None,
    Common(Exact, Edges),
    Listed(Arc<Graph>),
}

impl Observables {
    /// The observables of `law`.
    pub fn new(law: &Law) -> Self {
        let pairs = match (law.model(), law.lattice().graph()) {
            (
                Model::Ising {
                    coupling: Some(coupling),
                    ..
                },
                _,
            ) => Pairs::Common(coupling.clone(), Edges::of(law.lattice())),
            (Model::Ising { .. }, Some(graph)) => Pairs::Listed(graph.clone()),
            _ => Pairs::None,
        };
        Self { pairs }
    }

    /// Their names: the columns of `samples.csv` after the hash.
    pub fn names(&self) -> &'static [&'static str] {
        match self.pairs {
            Pairs::None => &["occupied"],
            _ => &["pair_sum", "magnetisation"],
        }
    }

    /// Their values in `sample`, in the order of the names.
    pub fn measure(&self, sample: &Configuration) -> Vec<Exact> {
        let plus = i64::try_from(sample.count_plus()).unwrap_or(i64::MAX);
        let magnetisation = 2 * plus - i64::from(sample.sites());
        match &self.pairs {
            Pairs::None => vec![plus.into()],
            Pairs::Common(coupling, edges) => {
                let pairs = IBig::from(edges.pairs(sample));
                vec![
                    Exact::from_fraction(coupling.as_fraction() * RBig::from(pairs)),
                    magnetisation.into(),
                ]
            }
            Pairs::Listed(graph) => {
                let couplings = graph.couplings().unwrap_or_default();
                let sum = graph
                    .edges()
                    .iter()
                    .zip(couplings)
                    .fold(RBig::ZERO, |sum, (edge, coupling)| {
                        if are_equal(sample, *edge) {
                            sum + coupling.as_fraction()
                        } else {
                            sum - coupling.as_fraction()
                        }
                    });
                vec![Exact::from_fraction(sum), magnetisation.into()]
            }
        }
    }
}

fn are_equal(sample: &Configuration, [a, b]: [u32; 2]) -> bool {
    sample.is_plus(a) == sample.is_plus(b)
}

/// The edges of a lattice, to count how many have two equal ends.
enum Edges {
    /// Few distinct differences between the numbers of two ends: 64 edges at a time.
    Shifts { edges: u64, shifts: Vec<Shift> },
    /// Edge by edge.
    Each(Lattice),
}

/// Edges between sites whose numbers differ by one number.
struct Shift {
    by: u32,
    /// A bit for each site up to the last one that is the lower end of such an edge.
    lower: Vec<u64>,
}

impl Edges {
    fn of(lattice: &Lattice) -> Self {
        let words = (lattice.sites() as usize).div_ceil(64);
        // a word of a shift stands for up to 64 edges, which in a list take as many words
        let most = lattice.graph().map_or(usize::MAX, |graph| graph.edges().len() / words);
        let mut layers: BTreeMap<u32, Vec<Vec<u64>>> = BTreeMap::new();
        let (mut edges, mut count) = (0, 0);
        for [a, b] in lattice.edges() {
            let (low, high) = (a.min(b), a.max(b));
            let own = 1 << (low % 64);
            let at = low as usize / 64;
            let same = layers.entry(high - low).or_default();
            // parallel edges each need a layer
            let free = same.iter().position(|lower| lower[at] & own == 0);
            let layer = free.unwrap_or_else(|| {
                same.push(vec![0; words]);
                count += 1;
                same.len() - 1
            });
            if count > most {
                return Self::Each(lattice.clone());
            }
            same[layer][at] |= own;
            edges += 1;
        }
        let shifts = layers.into_iter().flat_map(|(by, same)| {
            same.into_iter().map(move |mut lower| {
                let used = lower.iter().rposition(|word| *word != 0).map_or(0, |last| last + 1);
                lower.truncate(used);
                Shift { by, lower }
            })
        });
        Self::Shifts {
            edges,
            shifts: shifts.collect(),
        }
    }

    /// The sum of s s.
    fn pairs(&self, sample: &Configuration) -> i64 {
        match self {
            Self::Shifts { edges, shifts } => {
                // a last word without sites, so that every word has a next one
                let words: Vec<u64> = sample.words().chain([0]).collect();
                let unequal: u64 = shifts.iter().map(|shift| shift.unequal(&words)).sum();
                i64::try_from(*edges).unwrap_or(i64::MAX) - 2 * i64::try_from(unequal).unwrap_or(i64::MAX)
            }
            Self::Each(lattice) => {
                let product = |edge| if are_equal(sample, edge) { 1 } else { -1 };
                lattice.edges().map(product).sum()
            }
        }
    }
}

impl Shift {
    /// How many of these edges have two different ends.
    fn unequal(&self, words: &[u64]) -> u64 {
        let (whole, part) = (self.by as usize / 64, self.by % 64);
        let far = words[whole..].windows(2);
        let far = far.map(|pair| pair[0] >> part | pair[1] << 1 << (63 - part));
        let words = self.lower.iter().zip(words).zip(far);
        words
            .map(|((lower, near), far)| u64::from(((near ^ far) & lower).count_ones()))
            .sum()
    }
}

#[cfg(test)]
mod tests;
