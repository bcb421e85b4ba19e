//! Heat-bath probabilities as exact integer thresholds (`STREAM.md` §3 and §7).
//!
//! A threshold is floor(p 2^128) for the exact real p. Rational p are computed as fractions. Any
//! other p is enclosed between two fractions, with the working precision raised until both have
//! the same floor. No floating-point number of the machine lies between a parameter and a
//! threshold.

use std::fmt;

use dashu_float::{FBig, round::mode::Zero};
use dashu_int::{IBig, UBig};
use dashu_ratio::RBig;

use crate::error::{Error, Result};
use crate::law::{Beta, Critical, Law, Model};
use crate::number::Exact;

/// An integer in 0 ..= 2^128: the probability in units of 2^-128.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Threshold {
    /// A number below 2^128.
    Below(u128),
    /// 2^128: certain.
    Certain,
}

/// Bits of the first attempt at a floor; each further attempt doubles them.
const FIRST_PRECISION: usize = 192;

/// Beyond this exponent, 1/(1 + e^x) < 2^-128 (because x > 128 ln 2 = 88.72...).
const FAR: i64 = 89;

impl Threshold {
    /// Zero: impossible.
    pub const IMPOSSIBLE: Self = Self::Below(0);

    /// Whether U < theta.
    pub fn is_above(self, number: u128) -> bool {
        match self {
            Self::Below(theta) => number < theta,
            Self::Certain => true,
        }
    }

    /// Whether the first `digits` binary digits of U, the top ones of `number`, decide U < theta
    /// however U goes on (`STREAM.md` §3).
    pub fn is_decided(self, number: u128, digits: u32) -> bool {
        let Self::Below(theta) = self else { return true };
        let leading_differ = digits > 0 && (number ^ theta) >> (128 - digits) != 0;
        leading_differ || digits == 128 || theta << digits == 0
    }

    /// The threshold of a rational probability in 0 ..= 1.
    ///
    /// # Errors
    /// [`crate::error::ErrorKind::Value`] outside that range.
    pub fn of_fraction(probability: &RBig) -> Result<Self> {
        if *probability < RBig::ZERO || *probability > RBig::ONE {
            return Err(Error::value(probability, "a probability from 0 to 1"));
        }
        Ok(Self::from_floor(&scaled_floor(probability)))
    }

    fn from_floor(floor: &IBig) -> Self {
        u128::try_from(floor).map_or(Self::Certain, Self::Below)
    }
}

impl fmt::Display for Threshold {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Below(theta) => theta.fmt(f),
            Self::Certain => f.write_str("340282366920938463463374607431768211456"),
        }
    }
}

/// floor(p 2^128).
fn scaled_floor(probability: &RBig) -> IBig {
    (probability * RBig::from(UBig::ONE << 128)).floor()
}

/// The threshold of z/(1+z), for a site of the lattice gas without an occupied neighbour.
///
/// # Errors
/// [`crate::error::ErrorKind::Value`] for a negative activity.
pub fn lattice_gas(activity: &Exact) -> Result<Threshold> {
    let activity = activity.as_fraction();
    Threshold::of_fraction(&(activity / (RBig::ONE + activity)))
}

/// The threshold of 1/(1 + exp(-2 beta f)), f = the local field: the sum of J s over the neighbours, and h.
pub fn ising(beta: &Beta, local_field: &Exact) -> Threshold {
    let field = local_field.as_fraction();
    match beta {
        Beta::Number(beta) => {
            let exponent = beta.as_fraction() * field * RBig::from(2);
            if exponent.is_zero() {
                return Threshold::Below(1 << 127);
            }
            far(&exponent).unwrap_or_else(|| {
                // |x| <= 89 with one rounding: exp(x) is off by a factor e^(89 ulp) at most
                enclosed(|precision| real(precision, &exponent).exp())
            })
        }
        // every closed form is below 1, so a field of 2 FAR is far for all of them only if beta is not
        // tiny: ln(3)/4 > 1/4 gives |2 beta f| > FAR for |f| > 2 FAR
        Beta::Critical(_) if field.is_zero() => Threshold::Below(1 << 127),
        Beta::Critical(_) if *field > RBig::from(2 * FAR) => Threshold::Below(u128::MAX),
        Beta::Critical(_) if *field < RBig::from(-2 * FAR) => Threshold::IMPOSSIBLE,
        Beta::Critical(Critical::Triangular)
            if field.denominator().is_one() && (field.numerator() % IBig::from(2)).is_zero() =>
        {
            // exp(2 beta f) = 3^(f/2) is a fraction for even f
            let half = field.numerator() / IBig::from(2);
            let size =
                usize::try_from(if half < IBig::ZERO { -half.clone() } else { half.clone() }).unwrap_or(usize::MAX);
            let power = RBig::from(UBig::from(3u8).pow(size));
            let power = if half < IBig::ZERO { RBig::ONE / power } else { power };
            Threshold::from_floor(&scaled_floor(&(&power / (RBig::ONE + &power))))
        }
        Beta::Critical(critical) => {
            enclosed(|precision| (twice_critical(*critical, precision) * real(precision, field)).exp())
        }
    }
}

/// The critical beta as a decimal with `places` digits after the point, for reading only.
pub fn critical_decimal(critical: Critical, places: usize) -> String {
    let precision = FIRST_PRECISION + 4 * places;
    let half = twice_critical(critical, precision) / real(precision, &RBig::from(2));
    Exact::from_fraction(fraction(&half)).to_decimal(places)
}

/// Whether an Ising law without field lies below a critical temperature known in closed form: there
/// site heat bath needs exponentially many sweeps. For advice before a run, never used in a sample.
pub fn is_below_critical_temperature(law: &Law) -> bool {
    let Model::Ising {
        beta: Beta::Number(beta),
        coupling: Some(coupling),
        field: Some(field),
    } = law.model()
    else {
        return false;
    };
    let Some(critical) = Critical::of(law.lattice()) else {
        return false;
    };
    let product = beta.as_fraction() * coupling.as_fraction();
    let size = if product < RBig::ZERO { -product } else { product };
    Exact::parse(&critical_decimal(critical, 20)).is_ok_and(|known| field.is_zero() && size > *known.as_fraction())
}

/// Twice the critical beta.
fn twice_critical(critical: Critical, precision: usize) -> FBig<Zero> {
    let number = |value: u32| real(precision, &RBig::from(value));
    match critical {
        Critical::Square => (number(2).sqrt() + number(1)).ln(),
        Critical::Triangular => number(3).ln() / number(2),
        Critical::Honeycomb => (number(3).sqrt() + number(2)).ln(),
    }
}

/// The threshold where the exponent is so large that the floor is known without computing.
fn far(exponent: &RBig) -> Option<Threshold> {
    if *exponent >= RBig::from(FAR) {
        Some(Threshold::Below(u128::MAX))
    } else if *exponent <= RBig::from(-FAR) {
        Some(Threshold::IMPOSSIBLE)
    } else {
        None
    }
}

/// The floor of 2^128 e/(1+e), where `power` gives e at a working precision with a relative error
/// far below 2^(32 - precision): a few roundings of one unit each, magnified at most by the size
/// of the exponent (below 2^8). Both ends of that enclosure must have one floor.
fn enclosed(power: impl Fn(usize) -> FBig<Zero>) -> Threshold {
    let mut precision = FIRST_PRECISION;
    loop {
        let middle = fraction(&power(precision));
        let slack = RBig::from_parts(IBig::ONE, UBig::ONE << (precision - 32));
        let floor = |end: RBig| scaled_floor(&(&end / (RBig::ONE + &end)));
        let low = floor(&middle * (RBig::ONE - &slack));
        let high = floor(&middle * (RBig::ONE + &slack));
        if low == high {
            return Threshold::from_floor(&low);
        }
        precision *= 2;
    }
}

fn real(precision: usize, value: &RBig) -> FBig<Zero> {
    let part = |number: IBig| FBig::<Zero>::from(number).with_precision(precision).value();
    part(value.numerator().clone()) / part(IBig::from(value.denominator().clone()))
}

fn fraction(value: &FBig<Zero>) -> RBig {
    let (significand, exponent) = value.repr().clone().into_parts();
    let scale = UBig::ONE << exponent.unsigned_abs();
    if exponent < 0 {
        RBig::from_parts(significand, scale)
    } else {
        RBig::from(significand * IBig::from(scale))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn number(text: &str) -> Exact {
        Exact::parse(text).unwrap()
    }

    /// `STREAM.md` §3 by hand: theta = 1/2 is decided by the first digit; 0 and 2^128 by none;
    /// 2^128 - 1 only by the first digit 0 of U, or by all 128.
    #[test]
    fn a_comparison_is_decided_exactly_when_no_digit_can_change_it() {
        let half = Threshold::Below(1 << 127);
        assert!(!half.is_decided(0, 0));
        assert!(half.is_decided(0, 1) && half.is_decided(1 << 127, 1));
        assert!(Threshold::IMPOSSIBLE.is_decided(0, 0) && Threshold::Certain.is_decided(0, 0));
        let last = Threshold::Below(u128::MAX);
        assert!(!last.is_decided(u128::MAX << 1, 127) && last.is_decided(u128::MAX, 128));
        assert!(last.is_decided(u128::MAX << 2, 127));
        let quarter = Threshold::Below(1 << 126);
        assert!(!quarter.is_decided(0, 1) && quarter.is_decided(1 << 127, 1) && quarter.is_decided(1 << 126, 2));
    }

    /// `STREAM.md` §7: exponent 0 gives 1/2; triangular critical at local field 2 gives 3/4.
    #[test]
    fn rational_probabilities_are_exact() {
        let half = Threshold::Below(1 << 127);
        assert_eq!(ising(&Beta::Number(number("0.3")), &number("0")), half);
        assert_eq!(ising(&Beta::Number(number("0")), &number("5")), half);
        let triangular = Beta::Critical(Critical::Triangular);
        assert_eq!(ising(&triangular, &number("2")), Threshold::Below(3 << 126));
        assert_eq!(ising(&triangular, &number("-2")), Threshold::Below(1 << 126));
        assert_eq!(lattice_gas(&number("1")).unwrap(), half);
        assert_eq!(lattice_gas(&number("0")).unwrap(), Threshold::IMPOSSIBLE);
        assert_eq!(Threshold::of_fraction(&RBig::ONE).unwrap(), Threshold::Certain);
        assert!(Threshold::of_fraction(&RBig::from(2)).is_err());
    }

    #[test]
    fn far_exponents_need_no_computing_and_agree_at_the_border() {
        let one = Beta::Number(number("1"));
        for (field, theta) in [("1e300", u128::MAX), ("-1e300", 0), ("44.5", u128::MAX), ("-44.5", 0)] {
            assert_eq!(ising(&one, &number(field)), Threshold::Below(theta));
        }
        assert_eq!(ising(&one, &number("-44.4")), Threshold::IMPOSSIBLE);
        assert!(ising(&one, &number("-44.3")) > Threshold::IMPOSSIBLE);
        assert_eq!(
            ising(&Beta::Critical(Critical::Square), &number("1e9")),
            Threshold::Below(u128::MAX)
        );
        assert_eq!(
            ising(&Beta::Critical(Critical::Triangular), &number("-1e9")),
            Threshold::IMPOSSIBLE
        );
    }

    /// Onsager 1944 and Houtappel 1950, digits from `values/public.json` (a_constants, c_constants) as copied to
    /// tests/values: 0.44068679350977151261, 0.27465307216702742284, 0.65847894846240835431.
    #[test]
    fn critical_points_have_their_published_digits() {
        assert_eq!(critical_decimal(Critical::Square, 20), "0.44068679350977151261");
        assert_eq!(critical_decimal(Critical::Triangular, 20), "0.27465307216702742284");
        assert_eq!(critical_decimal(Critical::Honeycomb, 20), "0.65847894846240835431");
    }

    /// `tests/vectors/stream1.json`, made by an independent program.
    #[test]
    fn thresholds_are_the_known_ones() {
        let vectors: serde_json::Value = serde_json::from_str(include_str!("../tests/vectors/stream1.json")).unwrap();
        for case in vectors["thresholds"].as_array().unwrap() {
            let beta = Beta::Number(number(case["beta"].as_str().unwrap()));
            let field = number(&case["local_field"].to_string().replace('"', ""));
            assert_eq!(
                ising(&beta, &field).to_string(),
                case["theta"].as_str().unwrap(),
                "{case}"
            );
        }
    }

    /// A floor that is hard to reach: e^x so close above an integer boundary that 192 bits cannot tell.
    #[test]
    fn precision_is_raised_until_the_floor_is_certain() {
        // p = 3/4 - tiny: the boundary 3 * 2^126 lies between the ends at the first precision
        let exact = RBig::from(3);
        let nearly = |precision: usize| {
            let power = real(precision, &exact);
            let tiny = real(precision, &RBig::from_parts(IBig::ONE, UBig::ONE << 200));
            if precision < 300 { power } else { power - tiny }
        };
        assert_eq!(enclosed(nearly), Threshold::Below((3 << 126) - 1));
    }
}
