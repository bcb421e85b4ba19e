//! The words of `pastproof stream 1` (`STREAM.md` §1 and §2): an address gives a generator.
//!
//! What a sample depends on is exactly what [`Address`] holds with an epoch and a strip. The text
//! of the definition is compiled in, because every archive carries it.

use rand::rand_core::Rng;
use rand_pcg::Lcg128CmDxsm64;

use crate::quantity::Digest;
use crate::quantity::Hasher;
use crate::quantity::SampleIndex;
use crate::quantity::Seed;

/// The name of the definition.
pub const NAME: &str = "pastproof stream 1";
/// The text of the definition.
pub const TEXT: &str = include_str!("../schema/STREAM.md");

/// Lanes of a full group (`STREAM.md` §2).
pub const GROUP: usize = 512;
/// Groups of a full strip (`STREAM.md` §2).
pub const STRIP: usize = 128;

/// Which sample of which law under which seed.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Address {
    /// The seed of the run.
    pub seed: Seed,
    /// The key of the ensemble: the digest of its law.
    pub key: Digest,
    /// The number of the sample.
    pub sample: SampleIndex,
}

/// The generator of one strip in one epoch of one sample; it counts the words it gives.
pub struct Words {
    generator: Lcg128CmDxsm64,
    drawn: u64,
}

impl Address {
    /// What the generator of `strip` in `epoch` is seeded with: state and stream.
    pub fn seeding(&self, epoch: u32, strip: u32) -> [u128; 2] {
        let mut hasher = Hasher::default();
        hasher.update(b"pastproof stream 1\n");
        hasher.update(&self.seed.0.0);
        hasher.update(&self.key.0);
        hasher.update(&self.sample.0.to_le_bytes());
        hasher.update(&epoch.to_le_bytes());
        hasher.update(&strip.to_le_bytes());
        let digest = hasher.finish().0;
        let half = |range: std::ops::Range<usize>| {
            digest[range]
                .iter()
                .rev()
                .fold(0, |number: u128, &byte| number << 8 | u128::from(byte))
        };
        [half(0..16), half(16..32)]
    }

    /// The generator of `strip` in `epoch`, at its first word.
    pub fn words(&self, epoch: u32, strip: u32) -> Words {
        let [state, stream] = self.seeding(epoch, strip);
        Words {
            generator: Lcg128CmDxsm64::new(state, stream),
            drawn: 0,
        }
    }
}

impl Words {
    /// The next word.
    pub fn next_word(&mut self) -> u64 {
        self.drawn += 1;
        self.generator.next_u64()
    }

    /// How many words it has given.
    pub fn drawn(&self) -> u64 {
        self.drawn
    }
}
