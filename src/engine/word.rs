//! 512 lanes at a time, at the widest words that the processor has.
//!
//! [`Lanes`] is what a kernel may do with the 512 bits of a group, and with the generator of a strip;
//! [`call`] runs a kernel with words of a [`Width`]. All widths give the same bits. This is the only file with
//! unsafe code, and all of it has one reason: an instruction may be used only where the processor
//! has it. The vector types are private and exist only while [`call`] runs a kernel, and [`call`]
//! needs [`Words`], which exist only for a width that [`Width::is_here`] has found.
#![expect(unsafe_code, reason = "vector instructions; see the module comment")]

use std::fmt;

use crate::engine::leap::{CHAINS, Chains};

/// 64-bit words of a group of 512 lanes.
pub const WORDS: usize = 8;

/// The 512 bits of a group, bit j of word w for lane 64 w + j.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
#[repr(align(64))]
pub struct Block(pub [u64; WORDS]);

impl Block {
    /// No lane.
    pub const NONE: Self = Self([0; WORDS]);
    /// Every lane.
    pub const ALL: Self = Self([u64::MAX; WORDS]);
}

/// How wide the words are that a kernel works with.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Width {
    /// 64 bits, on every machine.
    Portable,
    /// 128 bits, on every x86-64.
    Sse2,
    /// 128 bits.
    Neon,
    /// 256 bits.
    Avx2,
    /// 512 bits, with 52-bit multiplication for the generator.
    Avx512,
}

impl Width {
    const ALL: [Self; 5] = [Self::Portable, Self::Sse2, Self::Neon, Self::Avx2, Self::Avx512];

    /// Whether this machine has it.
    pub fn is_here(self) -> bool {
        match self {
            Self::Portable => true,
            Self::Sse2 => cfg!(target_arch = "x86_64"),
            #[cfg(target_arch = "aarch64")]
            Self::Neon => std::arch::is_aarch64_feature_detected!("neon"),
            #[cfg(target_arch = "x86_64")]
            Self::Avx2 => std::arch::is_x86_feature_detected!("avx2") && std::arch::is_x86_feature_detected!("bmi2"),
            #[cfg(all(target_arch = "x86_64", pastproof_avx512))]
            Self::Avx512 => {
                std::arch::is_x86_feature_detected!("avx512f")
                    && std::arch::is_x86_feature_detected!("avx512dq")
                    && std::arch::is_x86_feature_detected!("avx512ifma")
                    && std::arch::is_x86_feature_detected!("avx512vbmi2")
            }
            _ => false,
        }
    }

    /// The widths of this machine, narrowest first.
    pub fn here() -> impl Iterator<Item = Self> {
        Self::ALL.into_iter().filter(|width| width.is_here())
    }

    /// The widest words of this machine.
    pub fn widest() -> Words {
        Words(Self::here().last().unwrap_or(Self::Portable))
    }

    /// Words as wide as that, if this machine has them.
    pub fn words(self) -> Option<Words> {
        self.is_here().then_some(Words(self))
    }

    /// How many states of a generator are kept.
    pub fn chains(self) -> usize {
        if self == Self::Avx512 { CHAINS } else { 1 }
    }
}

impl fmt::Display for Width {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::Portable => "64-bit words",
            Self::Sse2 => "128-bit words (SSE2)",
            Self::Neon => "128-bit words (NEON)",
            Self::Avx2 => "256-bit words (AVX2)",
            Self::Avx512 => "512-bit words (AVX-512)",
        })
    }
}

/// What a kernel may do with 512 lanes.
pub trait Lanes: Copy {
    /// The lanes of a block.
    fn load(words: &[u64; WORDS]) -> Self;
    /// The lanes as a block.
    fn store(self, words: &mut [u64; WORDS]);
    /// 512 bits from bit `shift` (0 .. 63) on.
    fn window(words: &[u64; WORDS + 1], shift: u64) -> Self;
    /// All lanes 0 or all 1: `word` is 0 or all ones.
    fn splat(word: u64) -> Self;
    /// Lane by lane.
    fn and(self, other: Self) -> Self;
    /// Lane by lane.
    fn or(self, other: Self) -> Self;
    /// Lane by lane.
    fn xor(self, other: Self) -> Self;
    /// `self` and not `other`.
    fn without(self, other: Self) -> Self;
    /// `yes` where `self` is 1, else `no`.
    fn select(self, yes: Self, no: Self) -> Self;
    /// `self` or (`a` and `b`).
    fn or_and(self, a: Self, b: Self) -> Self;
    /// `self` and (`a` xor `b`).
    fn and_xor(self, a: Self, b: Self) -> Self;
    /// Whether no lane is 1.
    fn is_none(self) -> bool;
    /// The next words of a generator: as many as it makes ahead.
    fn fill(chains: &mut Chains, out: &mut [u64]);
}

/// Work that can be done at any width. `run` and all that it calls with `L` must be inlined.
pub trait Kernel {
    /// What it gives.
    type Output;
    /// Does the work with words of type `L`.
    fn run<L: Lanes>(self) -> Self::Output;
}

/// Words of a width that this machine has: only [`Width::words`] makes one.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Words(Width);

impl Words {
    /// How wide they are.
    pub fn width(self) -> Width {
        self.0
    }
}

/// Runs a kernel with such words.
#[inline]
pub fn call<K: Kernel>(words: Words, kernel: K) -> K::Output {
    match words.0 {
        #[cfg(target_arch = "aarch64")]
        // SAFETY: the machine has NEON, or there were no such words.
        Width::Neon => unsafe { neon::call(kernel) },
        #[cfg(target_arch = "x86_64")]
        Width::Sse2 => kernel.run::<sse2::Sse2>(),
        #[cfg(target_arch = "x86_64")]
        // SAFETY: the machine has AVX2 and BMI2, or there were no such words.
        Width::Avx2 => unsafe { avx2::call(kernel) },
        #[cfg(all(target_arch = "x86_64", pastproof_avx512))]
        // SAFETY: the machine has all four features, or there were no such words.
        Width::Avx512 => unsafe { avx512::call(kernel) },
        _ => kernel.run::<Portable>(),
    }
}

/// Eight 64-bit words; the compiler may join them as the target allows.
#[derive(Clone, Copy)]
struct Portable([u64; WORDS]);

impl Portable {
    #[inline(always)]
    fn each(self, other: Self, work: impl Fn(u64, u64) -> u64) -> Self {
        Self(std::array::from_fn(|at| work(self.0[at], other.0[at])))
    }
}

impl Lanes for Portable {
    #[inline(always)]
    fn load(words: &[u64; WORDS]) -> Self {
        Self(*words)
    }
    #[inline(always)]
    fn store(self, words: &mut [u64; WORDS]) {
        *words = self.0;
    }
    #[inline(always)]
    fn window(words: &[u64; WORDS + 1], shift: u64) -> Self {
        // shifting by 1 and then 63 - shift keeps a shift of 0 in range
        Self(std::array::from_fn(|at| {
            words[at] >> shift | words[at + 1] << 1 << (63 - shift)
        }))
    }
    #[inline(always)]
    fn splat(word: u64) -> Self {
        Self([word; WORDS])
    }
    #[inline(always)]
    fn and(self, other: Self) -> Self {
        self.each(other, |a, b| a & b)
    }
    #[inline(always)]
    fn or(self, other: Self) -> Self {
        self.each(other, |a, b| a | b)
    }
    #[inline(always)]
    fn xor(self, other: Self) -> Self {
        self.each(other, |a, b| a ^ b)
    }
    #[inline(always)]
    fn without(self, other: Self) -> Self {
        self.each(other, |a, b| a & !b)
    }
    #[inline(always)]
    fn select(self, yes: Self, no: Self) -> Self {
        self.and(yes.xor(no)).xor(no)
    }
    #[inline(always)]
    fn or_and(self, a: Self, b: Self) -> Self {
        self.or(a.and(b))
    }
    #[inline(always)]
    fn and_xor(self, a: Self, b: Self) -> Self {
        self.and(a.xor(b))
    }
    #[inline(always)]
    fn is_none(self) -> bool {
        self.0.iter().fold(0, |all, word| all | word) == 0
    }
    #[inline(always)]
    fn fill(chains: &mut Chains, out: &mut [u64]) {
        chains.fill(out);
    }
}

#[cfg(target_arch = "aarch64")]
mod neon {
    //! Four 128-bit registers.
    use std::arch::aarch64::*;

    use super::{Chains, Kernel, Lanes, WORDS};

    /// # Safety
    /// The machine has NEON.
    #[target_feature(enable = "neon")]
    pub(super) unsafe fn call<K: Kernel>(kernel: K) -> K::Output {
        kernel.run::<Neon>()
    }

    #[derive(Clone, Copy)]
    struct Neon([uint64x2_t; 4]);

    impl Neon {
        #[inline(always)]
        fn each(self, other: Self, work: impl Fn(uint64x2_t, uint64x2_t) -> uint64x2_t) -> Self {
            Self(std::array::from_fn(|at| work(self.0[at], other.0[at])))
        }
    }

    // SAFETY of every block below: values of this type exist inside `call` only, so the machine has
    // NEON; loads and stores stay inside the array that the reference covers.
    impl Lanes for Neon {
        #[inline(always)]
        fn load(words: &[u64; WORDS]) -> Self {
            Self(std::array::from_fn(|at| unsafe { vld1q_u64(words[2 * at..].as_ptr()) }))
        }
        #[inline(always)]
        fn store(self, words: &mut [u64; WORDS]) {
            for (at, part) in self.0.into_iter().enumerate() {
                unsafe { vst1q_u64(words[2 * at..].as_mut_ptr(), part) };
            }
        }
        #[inline(always)]
        fn window(words: &[u64; WORDS + 1], shift: u64) -> Self {
            let (right, left) = (-shift as i64, 64 - shift as i64);
            Self(std::array::from_fn(|at| unsafe {
                let low = vshlq_u64(vld1q_u64(words[2 * at..].as_ptr()), vdupq_n_s64(right));
                let high = vshlq_u64(vld1q_u64(words[2 * at + 1..].as_ptr()), vdupq_n_s64(left));
                vorrq_u64(low, high)
            }))
        }
        #[inline(always)]
        fn splat(word: u64) -> Self {
            Self([unsafe { vdupq_n_u64(word) }; 4])
        }
        #[inline(always)]
        fn and(self, other: Self) -> Self {
            self.each(other, |a, b| unsafe { vandq_u64(a, b) })
        }
        #[inline(always)]
        fn or(self, other: Self) -> Self {
            self.each(other, |a, b| unsafe { vorrq_u64(a, b) })
        }
        #[inline(always)]
        fn xor(self, other: Self) -> Self {
            self.each(other, |a, b| unsafe { veorq_u64(a, b) })
        }
        #[inline(always)]
        fn without(self, other: Self) -> Self {
            self.each(other, |a, b| unsafe { vbicq_u64(a, b) })
        }
        #[inline(always)]
        fn select(self, yes: Self, no: Self) -> Self {
            Self(std::array::from_fn(|at| unsafe {
                vbslq_u64(self.0[at], yes.0[at], no.0[at])
            }))
        }
        #[inline(always)]
        fn or_and(self, a: Self, b: Self) -> Self {
            self.or(a.and(b))
        }
        #[inline(always)]
        fn and_xor(self, a: Self, b: Self) -> Self {
            self.and(a.xor(b))
        }
        #[inline(always)]
        fn is_none(self) -> bool {
            let [a, b, c, d] = self.0;
            unsafe { vmaxvq_u32(vreinterpretq_u32_u64(vorrq_u64(vorrq_u64(a, b), vorrq_u64(c, d)))) == 0 }
        }
        #[inline(always)]
        fn fill(chains: &mut Chains, out: &mut [u64]) {
            chains.fill(out);
        }
    }
}

#[cfg(target_arch = "x86_64")]
mod sse2 {
    //! Four 128-bit registers.
    use std::arch::x86_64::*;

    use super::{Chains, Lanes, WORDS};

    #[derive(Clone, Copy)]
    pub(super) struct Sse2([__m128i; 4]);

    impl Sse2 {
        #[inline(always)]
        fn each(self, other: Self, work: impl Fn(__m128i, __m128i) -> __m128i) -> Self {
            Self(std::array::from_fn(|at| work(self.0[at], other.0[at])))
        }
    }

    // SAFETY of every block below: SSE2 is part of x86-64; loads and stores are unaligned ones and stay
    // inside the array that the reference covers.
    impl Lanes for Sse2 {
        #[inline(always)]
        fn load(words: &[u64; WORDS]) -> Self {
            Self(std::array::from_fn(|at| unsafe {
                _mm_loadu_si128(words[2 * at..2 * at + 2].as_ptr().cast())
            }))
        }
        #[inline(always)]
        fn store(self, words: &mut [u64; WORDS]) {
            for (at, part) in self.0.into_iter().enumerate() {
                unsafe { _mm_storeu_si128(words[2 * at..2 * at + 2].as_mut_ptr().cast(), part) };
            }
        }
        #[inline(always)]
        fn window(words: &[u64; WORDS + 1], shift: u64) -> Self {
            // counts of 64 and more give 0
            let (right, left) = unsafe { (_mm_cvtsi64_si128(shift as i64), _mm_cvtsi64_si128(64 - shift as i64)) };
            Self(std::array::from_fn(|at| unsafe {
                let low = _mm_loadu_si128(words[2 * at..2 * at + 2].as_ptr().cast());
                let high = _mm_loadu_si128(words[2 * at + 1..2 * at + 3].as_ptr().cast());
                _mm_or_si128(_mm_srl_epi64(low, right), _mm_sll_epi64(high, left))
            }))
        }
        #[inline(always)]
        fn splat(word: u64) -> Self {
            Self([unsafe { _mm_set1_epi64x(word as i64) }; 4])
        }
        #[inline(always)]
        fn and(self, other: Self) -> Self {
            self.each(other, |a, b| unsafe { _mm_and_si128(a, b) })
        }
        #[inline(always)]
        fn or(self, other: Self) -> Self {
            self.each(other, |a, b| unsafe { _mm_or_si128(a, b) })
        }
        #[inline(always)]
        fn xor(self, other: Self) -> Self {
            self.each(other, |a, b| unsafe { _mm_xor_si128(a, b) })
        }
        #[inline(always)]
        fn without(self, other: Self) -> Self {
            self.each(other, |a, b| unsafe { _mm_andnot_si128(b, a) })
        }
        #[inline(always)]
        fn select(self, yes: Self, no: Self) -> Self {
            self.and(yes.xor(no)).xor(no)
        }
        #[inline(always)]
        fn or_and(self, a: Self, b: Self) -> Self {
            self.or(a.and(b))
        }
        #[inline(always)]
        fn and_xor(self, a: Self, b: Self) -> Self {
            self.and(a.xor(b))
        }
        #[inline(always)]
        fn is_none(self) -> bool {
            let [a, b, c, d] = self.0;
            unsafe {
                let all = _mm_or_si128(_mm_or_si128(a, b), _mm_or_si128(c, d));
                _mm_movemask_epi8(_mm_cmpeq_epi8(all, _mm_setzero_si128())) == 0xffff
            }
        }
        #[inline(always)]
        fn fill(chains: &mut Chains, out: &mut [u64]) {
            chains.fill(out);
        }
    }
}

#[cfg(target_arch = "x86_64")]
mod avx2 {
    //! Two 256-bit registers.
    use std::arch::x86_64::*;

    use super::{Chains, Kernel, Lanes, WORDS};

    /// # Safety
    /// The machine has AVX2 and BMI2.
    #[target_feature(enable = "avx2,bmi2")]
    pub(super) unsafe fn call<K: Kernel>(kernel: K) -> K::Output {
        kernel.run::<Avx2>()
    }

    #[derive(Clone, Copy)]
    struct Avx2([__m256i; 2]);

    impl Avx2 {
        #[inline(always)]
        fn each(self, other: Self, work: impl Fn(__m256i, __m256i) -> __m256i) -> Self {
            Self([work(self.0[0], other.0[0]), work(self.0[1], other.0[1])])
        }
    }

    // SAFETY of every block below: values of this type exist inside `call` only, so the machine has
    // AVX2; loads and stores are unaligned ones and stay inside the array that the reference covers.
    impl Lanes for Avx2 {
        #[inline(always)]
        fn load(words: &[u64; WORDS]) -> Self {
            let at = |first: usize| unsafe { _mm256_loadu_si256(words[first..first + 4].as_ptr().cast()) };
            Self([at(0), at(4)])
        }
        #[inline(always)]
        fn store(self, words: &mut [u64; WORDS]) {
            let [low, high] = self.0;
            unsafe {
                _mm256_storeu_si256(words[..4].as_mut_ptr().cast(), low);
                _mm256_storeu_si256(words[4..].as_mut_ptr().cast(), high);
            }
        }
        #[inline(always)]
        fn window(words: &[u64; WORDS + 1], shift: u64) -> Self {
            // counts of 64 and more give 0
            let (right, left) = unsafe { (_mm_cvtsi64_si128(shift as i64), _mm_cvtsi64_si128(64 - shift as i64)) };
            let part = |first: usize| unsafe {
                let low = _mm256_loadu_si256(words[first..first + 4].as_ptr().cast());
                let high = _mm256_loadu_si256(words[first + 1..first + 5].as_ptr().cast());
                _mm256_or_si256(_mm256_srl_epi64(low, right), _mm256_sll_epi64(high, left))
            };
            Self([part(0), part(4)])
        }
        #[inline(always)]
        fn splat(word: u64) -> Self {
            Self([unsafe { _mm256_set1_epi64x(word as i64) }; 2])
        }
        #[inline(always)]
        fn and(self, other: Self) -> Self {
            self.each(other, |a, b| unsafe { _mm256_and_si256(a, b) })
        }
        #[inline(always)]
        fn or(self, other: Self) -> Self {
            self.each(other, |a, b| unsafe { _mm256_or_si256(a, b) })
        }
        #[inline(always)]
        fn xor(self, other: Self) -> Self {
            self.each(other, |a, b| unsafe { _mm256_xor_si256(a, b) })
        }
        #[inline(always)]
        fn without(self, other: Self) -> Self {
            self.each(other, |a, b| unsafe { _mm256_andnot_si256(b, a) })
        }
        #[inline(always)]
        fn select(self, yes: Self, no: Self) -> Self {
            self.and(yes.xor(no)).xor(no)
        }
        #[inline(always)]
        fn or_and(self, a: Self, b: Self) -> Self {
            self.or(a.and(b))
        }
        #[inline(always)]
        fn and_xor(self, a: Self, b: Self) -> Self {
            self.and(a.xor(b))
        }
        #[inline(always)]
        fn is_none(self) -> bool {
            let [low, high] = self.0;
            unsafe {
                let all = _mm256_or_si256(low, high);
                _mm256_testz_si256(all, all) != 0
            }
        }
        #[inline(always)]
        fn fill(chains: &mut Chains, out: &mut [u64]) {
            chains.fill(out);
        }
    }
}

#[cfg(all(target_arch = "x86_64", pastproof_avx512))]
mod avx512 {
    //! One 512-bit register.
    #![expect(
        clippy::incompatible_msrv,
        reason = "compiled only where build.rs found a compiler that has it"
    )]

    use std::arch::x86_64::*;

    use super::{CHAINS, Chains, Kernel, Lanes, WORDS};
    use crate::engine::leap::MULTIPLIER;

    /// # Safety
    /// The machine has AVX-512 F, DQ, IFMA and VBMI2.
    #[target_feature(enable = "avx512f,avx512dq,avx512ifma,avx512vbmi2")]
    pub(super) unsafe fn call<K: Kernel>(kernel: K) -> K::Output {
        kernel.run::<Avx512>()
    }

    #[derive(Clone, Copy)]
    struct Avx512(__m512i);

    /// Registers of generator states that are stepped together, to hide their latency.
    const PARTS: usize = CHAINS / WORDS;

    // SAFETY of every block below: values of this type exist inside `call` only, so the machine has
    // the features; loads and stores are unaligned ones and stay inside the array that the
    // reference covers.
    impl Lanes for Avx512 {
        #[inline(always)]
        fn load(words: &[u64; WORDS]) -> Self {
            Self(unsafe { _mm512_loadu_si512(words.as_ptr().cast()) })
        }
        #[inline(always)]
        fn store(self, words: &mut [u64; WORDS]) {
            unsafe { _mm512_storeu_si512(words.as_mut_ptr().cast(), self.0) };
        }
        #[inline(always)]
        fn window(words: &[u64; WORDS + 1], shift: u64) -> Self {
            Self(unsafe {
                let low = _mm512_loadu_si512(words[..WORDS].as_ptr().cast());
                let high = _mm512_alignr_epi64::<1>(_mm512_set1_epi64(words[WORDS] as i64), low);
                _mm512_shrdv_epi64(low, high, _mm512_set1_epi64(shift as i64))
            })
        }
        #[inline(always)]
        fn splat(word: u64) -> Self {
            Self(unsafe { _mm512_set1_epi64(word as i64) })
        }
        #[inline(always)]
        fn and(self, other: Self) -> Self {
            Self(unsafe { _mm512_and_si512(self.0, other.0) })
        }
        #[inline(always)]
        fn or(self, other: Self) -> Self {
            Self(unsafe { _mm512_or_si512(self.0, other.0) })
        }
        #[inline(always)]
        fn xor(self, other: Self) -> Self {
            Self(unsafe { _mm512_xor_si512(self.0, other.0) })
        }
        #[inline(always)]
        fn without(self, other: Self) -> Self {
            Self(unsafe { _mm512_andnot_si512(other.0, self.0) })
        }
        // The truth tables: bit 4a + 2b + c is the answer to the inputs a, b, c.
        #[inline(always)]
        fn select(self, yes: Self, no: Self) -> Self {
            Self(unsafe { _mm512_ternarylogic_epi64::<0b1100_1010>(self.0, yes.0, no.0) })
        }
        #[inline(always)]
        fn or_and(self, a: Self, b: Self) -> Self {
            Self(unsafe { _mm512_ternarylogic_epi64::<0b1111_1000>(self.0, a.0, b.0) })
        }
        #[inline(always)]
        fn and_xor(self, a: Self, b: Self) -> Self {
            Self(unsafe { _mm512_ternarylogic_epi64::<0b0110_0000>(self.0, a.0, b.0) })
        }
        #[inline(always)]
        fn is_none(self) -> bool {
            unsafe { _mm512_test_epi64_mask(self.0, self.0) == 0 }
        }

        /// 128-bit states as three limbs of 52, 52 and 24 bits: multiplication takes the low 52 bits
        /// of each limb, so that only carries must be moved; what lies above bit 127 falls away.
        #[inline(always)]
        fn fill(chains: &mut Chains, out: &mut [u64]) {
            const LIMB: u64 = (1 << 52) - 1;
            let limbs = |value: u128| {
                let limb = |shift: u32| (value >> shift) as u64 & LIMB;
                unsafe {
                    [
                        _mm512_set1_epi64(limb(0) as i64),
                        _mm512_set1_epi64(limb(52) as i64),
                        _mm512_set1_epi64(limb(104) as i64),
                    ]
                }
            };
            let ([low, high], [multiplier, increment]) = chains.vectors();
            let [a0, a1, a2] = limbs(multiplier);
            let [c0, c1, c2] = limbs(increment);
            unsafe {
                let multiplier = _mm512_set1_epi64(MULTIPLIER as i64);
                let one = _mm512_set1_epi64(1);
                let mut states = [[_mm512_setzero_si512(); 3]; PARTS];
                for (part, state) in states.iter_mut().enumerate() {
                    let low = _mm512_loadu_si512(low[part * WORDS..(part + 1) * WORDS].as_ptr().cast());
                    let high = _mm512_loadu_si512(high[part * WORDS..(part + 1) * WORDS].as_ptr().cast());
                    *state = [low, _mm512_shrdi_epi64::<52>(low, high), _mm512_srli_epi64::<40>(high)];
                }
                // low and high half of a state: limbs shifted to the top, and down again as one
                let halves = |[s0, s1, s2]: [__m512i; 3]| {
                    let s0 = _mm512_slli_epi64::<12>(s0);
                    let high = _mm512_shrdi_epi64::<24>(_mm512_slli_epi64::<12>(s1), s2);
                    (_mm512_shrdi_epi64::<12>(s0, s1), high)
                };
                for row in out.chunks_exact_mut(CHAINS) {
                    for (part, state) in states.iter_mut().enumerate() {
                        let (low, mut high) = halves(*state);
                        let [s0, s1, s2] = *state;
                        let t0 = _mm512_madd52lo_epu64(c0, s0, a0);
                        let mut t1 = _mm512_madd52lo_epu64(c1, s0, a1);
                        let mut t2 = _mm512_madd52lo_epu64(c2, s0, a2);
                        t1 = _mm512_madd52lo_epu64(t1, s1, a0);
                        t2 = _mm512_madd52lo_epu64(t2, s1, a1);
                        t1 = _mm512_madd52hi_epu64(t1, s0, a0);
                        t2 = _mm512_madd52hi_epu64(t2, s0, a1);
                        t2 = _mm512_madd52hi_epu64(t2, s1, a0);
                        t2 = _mm512_madd52lo_epu64(t2, s2, a0);
                        t1 = _mm512_add_epi64(t1, _mm512_srli_epi64::<52>(t0));
                        t2 = _mm512_add_epi64(t2, _mm512_srli_epi64::<52>(t1));
                        *state = [t0, t1, t2];
                        high = _mm512_xor_si512(high, _mm512_srli_epi64::<32>(high));
                        high = _mm512_mullo_epi64(high, multiplier);
                        high = _mm512_xor_si512(high, _mm512_srli_epi64::<48>(high));
                        let word = _mm512_mullo_epi64(high, _mm512_or_si512(low, one));
                        _mm512_storeu_si512(row[part * WORDS..(part + 1) * WORDS].as_mut_ptr().cast(), word);
                    }
                }
                for (part, state) in states.into_iter().enumerate() {
                    let (new_low, new_high) = halves(state);
                    _mm512_storeu_si512(low[part * WORDS..(part + 1) * WORDS].as_mut_ptr().cast(), new_low);
                    _mm512_storeu_si512(high[part * WORDS..(part + 1) * WORDS].as_mut_ptr().cast(), new_high);
                }
            }
        }
    }
}
