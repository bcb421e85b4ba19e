//! TOML as JSON, value by value, as `schema/plan.schema.json` means it.

use serde_json::{Value, json};
use toml::de::{DeTable, DeValue};

pub fn toml_as_json(text: &str) -> Value {
    as_json(&DeValue::Table(DeTable::parse(text).unwrap().into_inner()))
}

fn as_json(value: &DeValue<'_>) -> Value {
    match value {
        DeValue::String(text) => json!(text),
        DeValue::Integer(number) => json!(i64::from_str_radix(number.as_str(), number.radix()).unwrap()),
        DeValue::Float(number) => json!(number.as_str().parse::<f64>().unwrap()),
        DeValue::Boolean(truth) => json!(truth),
        DeValue::Datetime(moment) => json!(moment.to_string()),
        DeValue::Array(items) => items.iter().map(|item| as_json(item.get_ref())).collect(),
        DeValue::Table(table) => table
            .iter()
            .map(|(key, value)| (key.get_ref().to_string(), as_json(value.get_ref())))
            .collect(),
    }
}
