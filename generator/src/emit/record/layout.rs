//! Indentation of the record: what fits one line stays on one line.
//!
//! A change of one number then moves one line of the file, and a list of
//! coefficients is read at a glance.

use serde_json::Value;

/// Widest line that a list or an object is kept on.
const WIDTH: usize = 120;

/// The text of `value`; no line break at its end.
#[must_use]
pub fn lay_out(value: &Value) -> String {
    let mut out = String::new();
    place(value, 0, 0, &mut out);
    out
}

/// Writes `value` at `indent`; `before` characters already stand on the line.
fn place(value: &Value, indent: usize, before: usize, out: &mut String) {
    let open = match value {
        Value::Object(map) if !map.is_empty() => true,
        Value::Array(list) if !list.is_empty() => true,
        _ => false,
    };
    let line = one_line(value);
    if !open || (indent > 0 && before + line.chars().count() <= WIDTH) {
        out.push_str(&line);
        return;
    }
    let inner = indent + 2;
    let margin = " ".repeat(inner);
    match value {
        Value::Object(map) => {
            out.push('{');
            for (idx, (key, item)) in map.iter().enumerate() {
                out.push_str(if idx == 0 { "\n" } else { ",\n" });
                let head = format!("{margin}{}: ", Value::from(key.as_str()));
                out.push_str(&head);
                place(item, inner, head.chars().count() + 1, out);
            }
            out.push('\n');
            out.push_str(&" ".repeat(indent));
            out.push('}');
        }
        Value::Array(list) => {
            out.push('[');
            for (idx, item) in list.iter().enumerate() {
                out.push_str(if idx == 0 { "\n" } else { ",\n" });
                out.push_str(&margin);
                place(item, inner, inner + 1, out);
            }
            out.push('\n');
            out.push_str(&" ".repeat(indent));
            out.push(']');
        }
        _ => {}
    }
}

/// `value` on one line, with a blank after each comma and colon.
fn one_line(value: &Value) -> String {
    match value {
        Value::Array(list) => {
            let items: Vec<String> = list.iter().map(one_line).collect();
            format!("[{}]", items.join(", "))
        }
        Value::Object(map) => {
            let items: Vec<String> = map
                .iter()
                .map(|(key, item)| format!("{}: {}", Value::from(key.as_str()), one_line(item)))
                .collect();
            format!("{{{}}}", items.join(", "))
        }
        other => other.to_string(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use serde_json::json;

    #[test]
    fn short_lists_stay_on_one_line_and_long_ones_break() {
        let long: Vec<f64> = (0..40).map(|k| f64::from(k) / 7.0).collect();
        let text = lay_out(&json!({"a": [1.0, 2.5e-9], "b": {"c": null}, "long": long}));
        assert!(
            text.starts_with(
                "{\n  \"a\": [1.0, 2.5e-9],\n  \"b\": {\"c\": null},\n  \"long\": [\n    0.0,\n"
            )
        );
        assert!(text.ends_with("\n  ]\n}"));
        assert!(text.lines().all(|line| line.chars().count() <= WIDTH));
        assert_eq!(serde_json::from_str::<Value>(&text).expect("JSON")["long"][39], 39.0 / 7.0);
    }
}
