//! The JSON Schema of a settings file: what editors complete from, and what the walk checks against.

use serde_json::Value;

use super::fields::Settings;

/// The schema made from the structs in `fields`.
pub fn schema() -> Value {
    let mut schema = schemars::schema_for!(Settings).to_value();
    schema["title"] = "Settings of a beltwright station".into();
    drop_null(&mut schema);
    schema
}

/// The schema as it stands in `config/settings.schema.json`.
pub fn schema_text() -> String {
    format!("{:#}\n", schema())
}

/// TOML has no null: a key that may be left out is simply not required.
fn drop_null(schema: &mut Value) {
    if let Some(types) = schema.get_mut("type").and_then(Value::as_array_mut) {
        types.retain(|word| word != "null");
        if let [only] = types.as_mut_slice() {
            schema["type"] = only.take();
        }
    }
    if let Some(choices) = schema.get_mut("anyOf").and_then(Value::as_array_mut) {
        choices.retain(|choice| choice["type"] != "null");
        if let [Value::Object(only)] = choices.as_mut_slice() {
            let only = std::mem::take(only);
            if let Value::Object(fields) = schema {
                fields.remove("anyOf");
                fields.extend(only);
            }
        }
    }
    match schema {
        Value::Object(fields) => fields.values_mut().for_each(drop_null),
        Value::Array(items) => items.iter_mut().for_each(drop_null),
        _ => {}
    }
}
