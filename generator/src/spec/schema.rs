//! The form of a spec as JSON Schema, for editors.
//!
//! Written from the same tables that refuse unknown and missing keys, so the two
//! cannot disagree. It says which keys may stand where; units, names and numbers
//! are the reader's business.
//!
//! Source: *JSON Schema: A Media Type for Describing JSON Documents*, draft
//! 2020-12.

use serde_json::{Map, Value, json};

use super::shape::{self, Field, Shape};

/// The schema of the spec language.
#[must_use]
pub fn schema() -> Value {
    let mut out = Map::new();
    out.insert("$schema".to_owned(), json!("https://json-schema.org/draft/2020-12/schema"));
    out.insert("title".to_owned(), json!("A shiftwright spec"));
    if let Value::Object(root) = describe(&shape::SPEC) {
        out.extend(root);
    }
    out.insert("$defs".to_owned(), json!({ "layer": body(&shape::LAYER) }));
    Value::Object(out)
}

fn describe(shape: &'static Shape) -> Value {
    if std::ptr::eq(shape, &shape::LAYER) {
        return json!({ "$ref": "#/$defs/layer" });
    }
    body(shape)
}

fn body(shape: &'static Shape) -> Value {
    match shape {
        Shape::Scalar => json!({ "type": ["string", "number", "boolean"] }),
        Shape::Either(shapes) => json!({ "anyOf": shapes.iter().map(describe).collect::<Vec<_>>() }),
        Shape::List(item) => json!({ "type": "array", "items": describe(item) }),
        Shape::Map(fields) => object(fields, None),
        Shape::Names(value) => json!({ "type": "object", "additionalProperties": describe(value) }),
        Shape::Kinds(kinds) => {
            let list: Vec<Value> = kinds.iter().map(|(kind, fields)| object(fields, Some(kind))).collect();
            json!({ "oneOf": list })
        }
    }
}

fn object(fields: &'static [Field], kind: Option<&str>) -> Value {
    let mut properties = Map::new();
    for field in fields {
        let mut value = match (field.name, kind) {
            ("kind", Some(kind)) => json!({ "const": kind }),
            _ => describe(&field.shape),
        };
        if let (Some((text, example)), Value::Object(map)) = (meaning(field.name), &mut value) {
            map.insert("description".to_owned(), json!(text));
            if !example.is_empty() {
                map.insert("examples".to_owned(), json!([example]));
            }
        }
        properties.insert(field.name.to_owned(), value);
    }
    let required: Vec<&str> = fields.iter().filter(|field| field.required).map(|field| field.name).collect();
    json!({
        "type": "object", "properties": properties, "required": required, "additionalProperties": false,
    })
}

/// What a key says, and an example of a value.
fn meaning(key: &str) -> Option<(&'static str, &'static str)> {
    Some(match key {
        "spec" => ("Version of the language", "1"),
        "name" => ("Name, for symbols or for people", "shutter"),
        "summary" => ("One line for people", ""),
        "constants" => ("Names for quantities and for expressions of other names", ""),
        "materials" => ("A materials file beside the spec, or `iii-v`", "iii-v"),
        "temperature" => ("Temperature of the materials", "300 K"),
        "systems" => ("Quantum systems by name", ""),
        "kind" => ("Kind of system", "layers"),
        "charge" => ("Charge of the carrier in elementary charges", "-1"),
        "field" => ("Uniform field, an expression of the control", "F"),
        "origin" => ("Where the potential of the field is zero", "centre"),
        "ends" => ("What happens at the outer faces: wall or decay", "decay"),
        "carrier" => ("electron, heavy hole or light hole", "electron"),
        "stack" => ("Layers by rising position", ""),
        "shells" => ("Shells from the centre outwards", ""),
        "repeat" => ("How often the inner stack follows itself", "5"),
        "thickness" => ("Thickness of a layer", "9 nm"),
        "edge" => ("Band edge: quantity, linear grade, or expression in z", "232 meV"),
        "mass" => ("Effective mass in free-electron masses", "0.067"),
        "material" => ("Takes edge and mass from the materials", "GaAs"),
        "centre_charge" => ("Charge at the centre in elementary charges", "1"),
        "permittivity" => ("Relative permittivity", "12.9"),
        "parts" => ("Parts of the product system by name", ""),
        "hamiltonian" => ("The Hamiltonian in operators of the parts", "h*A*dot(S, I) + muB*B*gS*S.z"),
        "conserved" => ("Operators that commute with each term", ""),
        "unit" => ("Unit of the numbers here", "meV"),
        "control" => ("The variable of the formulas; in an output, its width and step", ""),
        "symbol" => ("Symbol of the control", "F"),
        "at" => ("Operating point", "0"),
        "within" => ("Interval in which the formulas are wanted", ""),
        "bits" => ("Width of an integer: 8, 16 or 32", "16"),
        "step" => ("What one count is worth", "0.01 kV/cm"),
        "formulas" => ("Closed forms by name", ""),
        "sum" => ("Terms: levels, constants, expressions", ""),
        "overlap" => ("Two levels whose squared envelope overlap is wanted", ""),
        "form" => ("polynomial, paired or auto", "auto"),
        "partner" => ("Number of the other level of a pair", "2"),
        "order" => ("Highest power, 1 to 4", "2"),
        "coefficients" => ("series or minimax", "minimax"),
        "value" => ("absolute or shift; in an output, width and step of the value", "shift"),
        "tolerance" => ("Largest error inside the stated range", "0.05 meV"),
        "system" => ("Name of a system", "electron"),
        "level" => ("Number of a level, from 1", "1"),
        "where" => ("Values of conserved operators", ""),
        "times" => ("Weight of a term", "-1"),
        "family" => ("Constants that become arguments", ""),
        "outputs" => ("Files wanted", ""),
        "language" => ("rust, c, verilog-a or spice", "c"),
        "number" => ("f64, f32 or fixed", "f64"),
        "suffix" => ("Replaces the number format in file names", "bench"),
        _ => return None,
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Every reference of the schema leads somewhere, and no key of the language
    /// goes without a word about it.
    #[test]
    fn the_schema_is_closed_and_described() {
        fn visit(value: &Value, keys: &mut usize) {
            match value {
                Value::Object(map) => {
                    if let Some(target) = map.get("$ref") {
                        assert_eq!(target, "#/$defs/layer");
                    }
                    if let Some(Value::Object(properties)) = map.get("properties") {
                        for (key, one) in properties {
                            *keys += 1;
                            let power = key.len() == 2 && key.starts_with('h');
                            let plain = power
                                || matches!(
                                    key.as_str(),
                                    "from"
                                        | "to"
                                        | "alloy"
                                        | "x"
                                        | "size"
                                        | "file"
                                        | "of"
                                        | "constant"
                                        | "expression"
                                );
                            assert!(plain || one.get("description").is_some(), "{key}");
                        }
                    }
                    map.values().for_each(|one| visit(one, keys));
                }
                Value::Array(list) => list.iter().for_each(|one| visit(one, keys)),
                _ => {}
            }
        }
        let mut keys = 0;
        visit(&schema(), &mut keys);
        assert!(keys > 60, "{keys}");
    }
}
