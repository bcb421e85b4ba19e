//! One sample: its bits in site order, and what the coupling that gave it looked like (`STREAM.md` §6, §8).
//!
//! A sample that did not finish is a sample too: it keeps its place, its bounds are hashed, and it
//! is never dropped.

use crate::quantity::Digest;
use crate::quantity::Hasher;

/// The largest depth limit (`STREAM.md` §6).
pub const DEEPEST: u8 = 62;

/// Packed site values, `STREAM.md` §8: bit i, least significant first, is 1 for +1 (occupied) at site i;
/// the last byte is padded with zeros.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Configuration {
    sites: u32,
    bytes: Vec<u8>,
}

impl Configuration {
    /// Packs site values.
    pub fn pack(values: &[bool]) -> Self {
        let mut bytes = vec![0; values.len().div_ceil(8)];
        for (site, _) in values.iter().enumerate().filter(|(_, value)| **value) {
            bytes[site / 8] |= 1 << (site % 8);
        }
        Self {
            sites: u32::try_from(values.len()).unwrap_or(u32::MAX),
            bytes,
        }
    }

    /// The configuration of `sites` sites of which those in `plus` are +1 (occupied), the others -1 (empty).
    ///
    /// # Panics
    /// For a site that is not one of them.
    pub fn of_plus(sites: u32, plus: impl Iterator<Item = u32>) -> Self {
        let mut bytes = vec![0; bytes_per_sample(sites)];
        for site in plus {
            bytes[site as usize / 8] |= 1 << (site % 8);
        }
        Self { sites, bytes }
    }

    /// The configuration that `bytes` are, if they are as many as needed and padded with zeros.
    pub fn from_bytes(sites: u32, bytes: &[u8]) -> Option<Self> {
        let padded = match (sites % 8, bytes.last()) {
            (0, _) => true,
            (used, Some(last)) => last >> used == 0,
            (_, None) => false,
        };
        (bytes.len() == bytes_per_sample(sites) && padded).then(|| Self {
            sites,
            bytes: bytes.to_vec(),
        })
    }

    /// The number of sites.
    pub fn sites(&self) -> u32 {
        self.sites
    }

    /// The packed bytes.
    pub fn as_bytes(&self) -> &[u8] {
        &self.bytes
    }

    /// The sites 64 at a time: bit i of word w is 1 for +1 (occupied) at site 64 w + i.
    pub fn words(&self) -> impl Iterator<Item = u64> + '_ {
        let word = |bytes: &[u8]| {
            let mut word = [0; 8];
            word[..bytes.len()].copy_from_slice(bytes);
            u64::from_le_bytes(word)
        };
        self.bytes.chunks(8).map(word)
    }

    /// Whether `site` is +1 (occupied).
    pub fn is_plus(&self, site: u32) -> bool {
        self.bytes[site as usize / 8] >> (site % 8) & 1 == 1
    }

    /// How many sites are +1 (occupied).
    pub fn count_plus(&self) -> u64 {
        self.words().map(|word| u64::from(word.count_ones())).sum()
    }

    /// The first site at which two configurations of one lattice differ.
    pub fn first_difference(&self, other: &Self) -> Option<u32> {
        (0..self.sites.min(other.sites)).find(|site| self.is_plus(*site) != other.is_plus(*site))
    }
}

/// Bytes of a packed sample.
pub fn bytes_per_sample(sites: u32) -> usize {
    (sites as usize).div_ceil(8)
}

/// How a sample ended.
#[derive(Clone, PartialEq, Eq, Debug)]
pub enum Outcome {
    /// The bounds met: the state at time 0.
    Exact(Configuration),
    /// The attempt at the depth limit failed: both bounds at time 0.
    Unfinished {
        /// The lower bound.
        lower: Configuration,
        /// The upper bound.
        upper: Configuration,
    },
}

/// A drawn sample.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Sample {
    /// State or bounds at time 0.
    pub outcome: Outcome,
    /// The least attempt that meets; the depth limit for an unfinished sample.
    pub depth: u8,
    /// The largest m such that the bounds of attempt `depth` are equal at all times -m .. 0; 0 if unfinished.
    pub merged_at: u64,
    /// All words drawn in the attempt `depth`.
    pub words: u64,
}

impl Sample {
    /// The hash: the SHA-256 of the bytes, of both bounds' bytes for an unfinished sample.
    pub fn hash(&self) -> Digest {
        match &self.outcome {
            Outcome::Exact(configuration) => Digest::of(configuration.as_bytes()),
            Outcome::Unfinished { lower, upper } => {
                let mut hasher = Hasher::default();
                hasher.update(lower.as_bytes());
                hasher.update(upper.as_bytes());
                hasher.finish()
            }
        }
    }

    /// The exact configuration, if the sample finished.
    pub fn exact(&self) -> Option<&Configuration> {
        match &self.outcome {
            Outcome::Exact(configuration) => Some(configuration),
            Outcome::Unfinished { .. } => None,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// `numpy.packbits(bitorder="little")` of nine ones and zeros, by hand.
    #[test]
    fn bits_are_packed_least_significant_first() {
        let packed = Configuration::pack(&[true, false, false, true, false, false, false, true, true]);
        assert_eq!(packed.as_bytes(), [0b1000_1001, 1]);
        assert_eq!(packed.count_plus(), 4);
        assert!(packed.words().eq([0b1_1000_1001]));
        let long = Configuration::pack(&[true; 70]);
        assert!(long.words().eq([u64::MAX, 0b11_1111]));
        assert_eq!(Configuration::from_bytes(9, &[0b1000_1001, 1]), Some(packed.clone()));
        assert_eq!(
            Configuration::from_bytes(9, &[0b1000_1001, 3]),
            None,
            "padding must be zero"
        );
        assert_eq!(Configuration::from_bytes(9, &[0b1000_1001]), None);
        let other = Configuration::pack(&[true, false, false, true, true, false, false, true, true]);
        assert_eq!(packed.first_difference(&other), Some(4));
        assert_eq!(packed.first_difference(&packed), None);
    }
}
