//! Observables of one sample, exact: what `samples.csv` lists beside each hash.
//!
//! `pair_sum` = sum over the numbered edges of J s s (frozen neighbours are not counted),
//! `magnetisation` = sum of s, `occupied` = number of occupied sites. They follow from the sample and
//! the law alone, so that a transposed, swapped or recoded array is found even where its hash was redone.

use dashu_int::IBig;
use dashu_ratio::RBig;

use crate::law::{Law, Model};
use crate::number::Exact;
use crate::sample::Configuration;

/// Measures the samples of one law.
pub struct Observables {
    edges: Vec<[u32; 2]>,
    pairs: Pairs,
}

/// Where the coupling of an edge comes from.
enum Pairs {
    /// The lattice gas has no pair sum.
    None,
    Common(Exact),
    Listed(Vec<Exact>),
}

impl Observables {
    /// The observables of `law`.
    pub fn new(law: &Law) -> Self {
        let pairs = match law.model() {
            Model::LatticeGas { .. } => Pairs::None,
            Model::Ising {
                coupling: Some(coupling),
                ..
            } => Pairs::Common(coupling.clone()),
            Model::Ising { .. } => Pairs::Listed(
                law.lattice()
                    .graph()
                    .and_then(|graph| graph.couplings())
                    .unwrap_or_default()
                    .to_vec(),
            ),
        };
        let edges = if matches!(pairs, Pairs::None) {
            Vec::new()
        } else {
            law.lattice().edges().collect()
        };
        Self { edges, pairs }
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
        let equal = |[a, b]: &[u32; 2]| sample.is_plus(*a) == sample.is_plus(*b);
        match &self.pairs {
            Pairs::None => vec![plus.into()],
            Pairs::Common(coupling) => {
                let pairs: i64 = self.edges.iter().map(|edge| if equal(edge) { 1 } else { -1 }).sum();
                vec![
                    Exact::from_fraction(coupling.as_fraction() * RBig::from(IBig::from(pairs))),
                    magnetisation.into(),
                ]
            }
            Pairs::Listed(couplings) => {
                let sum = self
                    .edges
                    .iter()
                    .zip(couplings)
                    .fold(RBig::ZERO, |sum, (edge, coupling)| {
                        if equal(edge) {
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
