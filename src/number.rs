//! Exact numbers: every parameter stays the decimal or fraction that a person typed.
//!
//! An [`Exact`] is a reduced fraction. It is read from text, never from a machine float, and is
//! written in one way only, so that equal numbers typed differently give equal laws and keys
//! (`STREAM.md` §10).

use std::fmt;

use dashu_int::{IBig, UBig, ops::UnsignedAbs};
use dashu_ratio::RBig;
use serde::{Deserialize, Deserializer, Serialize, Serializer};

use crate::error::{Error, Result};

/// Digits of a numerator or denominator, and size of a decimal exponent, beyond this are refused.
const MOST_DIGITS: usize = 400;

/// An exact rational number.
#[derive(Clone, PartialEq, Eq, PartialOrd, Ord)]
pub struct Exact(RBig);

impl Exact {
    /// Zero.
    pub fn zero() -> Self {
        Self(RBig::ZERO)
    }

    /// One.
    pub fn one() -> Self {
        Self(RBig::ONE)
    }

    /// The number that a person typed: `0.44`, `-3`, `4.4e-1` or `11/25`.
    ///
    /// # Errors
    /// [`crate::error::ErrorKind::Value`] if it is no such number, or too long.
    pub fn parse(text: &str) -> Result<Self> {
        let fault = || {
            Error::value(
                format!("{text:?}"),
                "a decimal such as 0.44 or a fraction such as 11/25",
            )
        };
        if text.len() > 2 * MOST_DIGITS + 2 {
            return Err(Error::too_large("digits of a number", text.len(), MOST_DIGITS));
        }
        let value = match text.split_once('/') {
            Some((top, bottom)) => {
                let denominator = natural(bottom).ok_or_else(fault)?;
                if denominator.is_zero() {
                    return Err(fault());
                }
                RBig::from_parts(integer(top).ok_or_else(fault)?, denominator)
            }
            None => decimal(text).ok_or_else(fault)?,
        };
        Ok(Self(value))
    }

    /// The number whose one written form is `text`; anything else than that form is refused.
    ///
    /// # Errors
    /// [`crate::error::ErrorKind::Value`].
    pub fn parse_canonical(text: &str) -> Result<Self> {
        let value = Self::parse(text)?;
        if value.to_string() == text {
            Ok(value)
        } else {
            Err(Error::value(format!("{text:?}"), format!("\"{value}\"")))
        }
    }

    /// `1 / self`, or `None` for zero.
    pub fn inverse(&self) -> Option<Self> {
        (!self.is_zero()).then(|| Self(RBig::ONE / &self.0))
    }

    /// Whether it is 0.
    pub fn is_zero(&self) -> bool {
        self.0.is_zero()
    }

    /// Whether it is below 0.
    pub fn is_negative(&self) -> bool {
        self.0 < RBig::ZERO
    }

    /// The fraction itself.
    pub fn as_fraction(&self) -> &RBig {
        &self.0
    }

    /// The number as people write it: an exact decimal where one of at most 30 places exists, else the fraction.
    pub fn to_plain(&self) -> String {
        let exact = (0..=30)
            .map(|places| self.to_decimal(places))
            .find(|text| Self::parse(text).is_ok_and(|value| value == *self));
        exact.unwrap_or_else(|| self.to_string())
    }

    /// The same number from a fraction.
    pub fn from_fraction(value: RBig) -> Self {
        Self(value)
    }

    /// The decimal with `places` digits after the point, cut towards zero, for reading only.
    pub fn to_decimal(&self, places: usize) -> String {
        let scale = UBig::from(10u8).pow(places);
        let size = self.0.numerator().clone().unsigned_abs();
        let digits = format!(
            "{:0>width$}",
            (size * scale / self.0.denominator()).to_string(),
            width = places + 1
        );
        let (whole, part) = digits.split_at(digits.len() - places);
        let sign = if self.is_negative() { "-" } else { "" };
        if places == 0 {
            format!("{sign}{whole}")
        } else {
            format!("{sign}{whole}.{part}")
        }
    }
}

impl From<i64> for Exact {
    fn from(value: i64) -> Self {
        Self(RBig::from(value))
    }
}

fn natural(text: &str) -> Option<UBig> {
    let plain = !text.is_empty() && text.len() <= MOST_DIGITS && text.bytes().all(|byte| byte.is_ascii_digit());
    plain.then(|| UBig::from_str_radix(text, 10).ok()).flatten()
}

fn integer(text: &str) -> Option<IBig> {
    let (negative, digits) = match text.as_bytes().first()? {
        b'-' => (true, &text[1..]),
        b'+' => (false, &text[1..]),
        _ => (false, text),
    };
    let size = IBig::from(natural(digits)?);
    Some(if negative { -size } else { size })
}

fn decimal(text: &str) -> Option<RBig> {
    let (mantissa, exponent) = match text.split_once(['e', 'E']) {
        Some((mantissa, exponent)) => (mantissa, exponent.parse::<i32>().ok()?),
        None => (text, 0),
    };
    let (whole, part) = mantissa.split_once('.').unwrap_or((mantissa, ""));
    let bare_point = mantissa.contains('.') && (part.is_empty() || whole.trim_start_matches(['+', '-']).is_empty());
    if bare_point || exponent.unsigned_abs() as usize > MOST_DIGITS || !part.bytes().all(|byte| byte.is_ascii_digit()) {
        return None;
    }
    let digits = integer(&format!("{whole}{part}"))?;
    let power = exponent - i32::try_from(part.len()).ok()?;
    let scale = UBig::from(10u8).pow(power.unsigned_abs() as usize);
    Some(if power < 0 {
        RBig::from_parts(digits, scale)
    } else {
        RBig::from(digits * IBig::from(scale))
    })
}

impl fmt::Display for Exact {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}", self.0.numerator())?;
        if self.0.denominator().is_one() {
            Ok(())
        } else {
            write!(f, "/{}", self.0.denominator())
        }
    }
}

impl fmt::Debug for Exact {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        fmt::Display::fmt(self, f)
    }
}

impl Serialize for Exact {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serializer.collect_str(self)
    }
}

impl<'de> Deserialize<'de> for Exact {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        let text = String::deserialize(deserializer)?;
        Self::parse_canonical(&text).map_err(|error| serde::de::Error::custom(error.to_string()))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// `STREAM.md` §10: equal numbers typed differently are one number with one written form.
    #[test]
    fn equal_numbers_have_one_written_form() {
        for text in ["0.4", "0.40", "2/5", "4e-1", "+0.4", "40.0e-2", "4/10", "0.04E1"] {
            assert_eq!(Exact::parse(text).unwrap().to_string(), "2/5", "{text}");
        }
        assert_eq!(Exact::parse("-0.0").unwrap().to_string(), "0");
        assert_eq!(Exact::parse("-1.50").unwrap().to_string(), "-3/2");
        assert_eq!(Exact::parse("1e3").unwrap().to_string(), "1000");
        assert_eq!(Exact::parse("6/3").unwrap().to_string(), "2");
    }

    #[test]
    fn what_is_no_number_is_refused() {
        for text in [
            "", "-", ".", "1.", ".5", "nan", "inf", "0x10", "1_000", "1/0", "1/-2", "1//2", "1/2/3", "1e999", "1 ",
            "٣", "1.5/2", "e3", "1.+5", "--1",
        ] {
            assert!(Exact::parse(text).is_err(), "{text:?}");
        }
        assert!(Exact::parse(&"9".repeat(401)).is_err());
        assert!(Exact::parse_canonical("2/5").is_ok());
        assert!(Exact::parse_canonical("0.4").is_err());
        assert!(Exact::parse_canonical("4/10").is_err());
    }

    #[test]
    fn decimals_for_reading() {
        assert_eq!(Exact::parse("-1/3").unwrap().to_decimal(5), "-0.33333");
        assert_eq!(Exact::parse("22/7").unwrap().to_decimal(2), "3.14");
        assert_eq!(Exact::parse("7").unwrap().to_decimal(0), "7");
        for (text, plain) in [
            ("2/5", "0.4"),
            ("-3", "-3"),
            ("1/3", "1/3"),
            ("-1/8", "-0.125"),
            ("1e-40", &format!("1/1{}", "0".repeat(40))),
        ] {
            assert_eq!(Exact::parse(text).unwrap().to_plain(), plain);
        }
    }
}
