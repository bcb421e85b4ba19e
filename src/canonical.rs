//! Canonical JSON (RFC 8785), the only form in which records are hashed.
//!
//! Two guards stand around the library that writes it. Reading refuses duplicate keys, which JSON
//! readers would merge silently. Writing refuses every number that is not an integer of at most
//! 2^53 in size, because RFC 8785 would round it: exact numbers are strings.

use serde::{Serialize, de};
use serde_json::{Map, Value};

use crate::error::{Error, ErrorKind, Result};
use crate::quantity::Digest;

/// The largest integer that every JSON reader keeps exactly (RFC 8785 appendix D).
pub const LARGEST_INTEGER: u64 = 1 << 53;

/// Nesting beyond this is refused; no record of ours is a tenth as deep.
const DEEPEST: usize = 64;

/// The canonical bytes of `value`.
///
/// # Errors
/// [`ErrorKind::SelfCheck`] if `value` holds a number that canonical JSON would round.
pub fn to_bytes<T: Serialize>(value: &T) -> Result<Vec<u8>> {
    let fault = |what: String| {
        Error::from(ErrorKind::SelfCheck {
            what: format!("canonical JSON: {what}"),
        })
    };
    let value = serde_json::to_value(value).map_err(|error| fault(error.to_string()))?;
    check_numbers(&value).map_err(|number| fault(format!("{number} would be rounded")))?;
    serde_json_canonicalizer::to_vec(&value).map_err(|error| fault(error.to_string()))
}

/// The SHA-256 of the canonical bytes of `value`.
///
/// # Errors
/// As [`to_bytes`].
pub fn digest<T: Serialize>(value: &T) -> Result<Digest> {
    Ok(Digest::of(&to_bytes(value)?))
}

/// Reads JSON, refusing duplicate keys, rounded numbers, trailing text and deep nesting.
///
/// # Errors
/// [`ErrorKind::Syntax`].
pub fn parse(text: &[u8]) -> Result<Value> {
    let fault = |what: String| Error::from(ErrorKind::Syntax { format: "JSON", what });
    let mut reader = serde_json::Deserializer::from_slice(text);
    let value =
        de::DeserializeSeed::deserialize(Strict { depth: 0 }, &mut reader).map_err(|error| fault(error.to_string()))?;
    reader.end().map_err(|error| fault(error.to_string()))?;
    check_numbers(&value).map_err(|number| {
        fault(format!(
            "{number} is not an integer of at most 2^53; exact numbers are strings"
        ))
    })?;
    Ok(value)
}

/// Reads a record that must stand in canonical form, byte for byte, as `T`.
///
/// # Errors
/// [`ErrorKind::Syntax`] if it is not JSON, not canonical, not a `T`, or not what this `T` is written as.
pub fn parse_canonical<T: de::DeserializeOwned + Serialize>(text: &[u8]) -> Result<T> {
    let fault = |what: String| Error::from(ErrorKind::Syntax { format: "JSON", what });
    let value = parse(text)?;
    if to_bytes(&value)? != text {
        return Err(fault("not in canonical form (RFC 8785)".into()));
    }
    let record = serde_json::from_value(value).map_err(|error| fault(error.to_string()))?;
    // serde takes a field that is absent for null
    if to_bytes(&record)? != text {
        return Err(fault("a field is absent that must be null".into()));
    }
    Ok(record)
}

fn check_numbers(value: &Value) -> Result<(), String> {
    match value {
        Value::Number(number) => {
            let size = number.as_u64().or_else(|| number.as_i64().map(i64::unsigned_abs));
            if size.is_some_and(|size| size <= LARGEST_INTEGER) {
                Ok(())
            } else {
                Err(number.to_string())
            }
        }
        Value::Array(items) => items.iter().try_for_each(check_numbers),
        Value::Object(fields) => fields.values().try_for_each(check_numbers),
        _ => Ok(()),
    }
}

/// Builds a [`Value`] and refuses what `serde_json` would merge or follow without end.
struct Strict {
    depth: usize,
}

impl<'de> de::DeserializeSeed<'de> for Strict {
    type Value = Value;

    fn deserialize<D: de::Deserializer<'de>>(self, deserializer: D) -> Result<Value, D::Error> {
        if self.depth > DEEPEST {
            return Err(de::Error::custom(format!("nested deeper than {DEEPEST}")));
        }
        deserializer.deserialize_any(self)
    }
}

impl<'de> de::Visitor<'de> for Strict {
    type Value = Value;

    fn expecting(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.write_str("JSON")
    }

    fn visit_unit<E>(self) -> Result<Value, E> {
        Ok(Value::Null)
    }

    fn visit_bool<E>(self, value: bool) -> Result<Value, E> {
        Ok(value.into())
    }

    fn visit_i64<E>(self, value: i64) -> Result<Value, E> {
        Ok(value.into())
    }

    fn visit_u64<E>(self, value: u64) -> Result<Value, E> {
        Ok(value.into())
    }

    fn visit_f64<E: de::Error>(self, value: f64) -> Result<Value, E> {
        Err(E::custom(format!(
            "{value} is not an integer; exact numbers are strings"
        )))
    }

    fn visit_str<E>(self, value: &str) -> Result<Value, E> {
        Ok(value.into())
    }

    fn visit_seq<A: de::SeqAccess<'de>>(self, mut items: A) -> Result<Value, A::Error> {
        let mut list = Vec::new();
        while let Some(item) = items.next_element_seed(Strict { depth: self.depth + 1 })? {
            list.push(item);
        }
        Ok(list.into())
    }

    fn visit_map<A: de::MapAccess<'de>>(self, mut entries: A) -> Result<Value, A::Error> {
        let mut fields = Map::new();
        while let Some(key) = entries.next_key::<String>()? {
            let value = entries.next_value_seed(Strict { depth: self.depth + 1 })?;
            if fields.insert(key.clone(), value).is_some() {
                return Err(de::Error::custom(format!("duplicate key {key:?}")));
            }
        }
        Ok(fields.into())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// RFC 8785 section 3.2.3: keys sort by their UTF-16 code units.
    #[test]
    fn keys_sort_as_in_rfc_8785() {
        let value = parse(
            "{\"\\u20ac\":1,\"\\r\":2,\"\\ufb33\":3,\"1\":4,\"\\ud83d\\ude00\":5,\"\\u0080\":6,\"\\u00f6\":7}"
                .as_bytes(),
        )
        .unwrap();
        let text = String::from_utf8(to_bytes(&value).unwrap()).unwrap();
        assert_eq!(
            text,
            "{\"\\r\":2,\"1\":4,\"\u{80}\":6,\"ö\":7,\"€\":1,\"😀\":5,\"\u{fb33}\":3}"
        );
    }

    #[test]
    fn what_would_be_merged_or_rounded_is_refused() {
        for (text, what) in [
            (r#"{"a":1,"a":1}"#, "duplicate"),
            (r#"{"a":{"b":1,"b":2}}"#, "duplicate"),
            ("9007199254740993", "2^53"),
            ("[1.5]", "not an integer"),
            ("[1e3]", "not an integer"),
            ("[1] 2", "trailing"),
            (&"[".repeat(200), "nested"),
        ] {
            assert!(parse(text.as_bytes()).unwrap_err().to_string().contains(what), "{text}");
        }
        assert!(to_bytes(&(LARGEST_INTEGER + 1)).is_err());
        assert!(to_bytes(&0.5).is_err());
        assert!(to_bytes(&LARGEST_INTEGER).is_ok());
    }

    #[test]
    fn a_record_must_stand_in_canonical_form() {
        assert!(parse_canonical::<Value>(br#"{"a":1,"b":[2]}"#).is_ok());
        assert!(
            parse_canonical::<Value>(br#"{"b":[2],"a":1}"#)
                .unwrap_err()
                .to_string()
                .contains("canonical")
        );
        assert!(
            parse_canonical::<Value>(br#"{"a": 1}"#)
                .unwrap_err()
                .to_string()
                .contains("canonical")
        );
    }
}
