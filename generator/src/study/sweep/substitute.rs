//! A spec's text with other values for some of its constants.
//!
//! The text is changed where the constant's value stands, so that everything
//! else, comments included, is read as it was written.

use std::ops::Range;

use saphyr_parser::{Event, Parser};

use crate::diagnostic::{Diagnostic, Error, Result};

/// Byte ranges of the values under `constants`, by name.
///
/// # Errors
/// Text that is no YAML.
fn constants(text: &str) -> Result<Vec<(String, Range<usize>)>> {
    let offsets: Vec<usize> = text.char_indices().map(|(at, _)| at).chain([text.len()]).collect();
    let byte = |character: usize| offsets.get(character).copied().unwrap_or(text.len());
    let mut out = Vec::new();
    // Depth of collections, whether a key is due at each depth, and the open key at depth 1.
    let mut depth = 0_usize;
    let mut key_due = true;
    let mut top = String::new();
    let mut name = String::new();
    for event in Parser::new_from_str(text) {
        let (event, span) =
            event.map_err(|e| Error::spec(Diagnostic::new("yaml", format!("the spec is no YAML: {e}"))))?;
        match event {
            Event::MappingStart(..) | Event::SequenceStart(..) => {
                depth += 1;
                key_due = true;
            }
            Event::MappingEnd | Event::SequenceEnd => {
                depth = depth.saturating_sub(1);
                key_due = true;
            }
            Event::Scalar(value, ..) => {
                match (depth, key_due) {
                    (1, true) => top = value.into_owned(),
                    (2, true) if top == "constants" => name = value.into_owned(),
                    (2, false) if top == "constants" => {
                        out.push((name.clone(), byte(span.start.index())..byte(span.end.index())));
                    }
                    _ => {}
                }
                key_due = !key_due;
            }
            _ => {}
        }
    }
    Ok(out)
}

/// Reads where constants stand once, then writes texts.
pub struct Template {
    text: String,
    /// Byte range of each varied constant, in the order asked for.
    places: Vec<Range<usize>>,
}

impl Template {
    /// Finds the constants called `names`.
    ///
    /// # Errors
    /// A name that the spec's `constants` do not hold.
    pub fn new(text: &str, names: &[&str]) -> Result<Self> {
        let known = constants(text)?;
        let mut places = Vec::new();
        for name in names {
            let place = known.iter().find(|(other, _)| other == name).map(|(_, range)| range.clone());
            let list: Vec<&str> = known.iter().map(|(name, _)| name.as_str()).collect();
            places.push(place.ok_or_else(|| {
                Error::spec(
                    Diagnostic::new("no-constant", format!("the spec has no constant `{name}`"))
                        .expected(format!("one of: {}", list.join(", ")))
                        .action("give the number a name under `constants` and use that name"),
                )
            })?);
        }
        Ok(Self { text: text.to_owned(), places })
    }

    /// The text with `values` in place, each already with its unit.
    #[must_use]
    pub fn fill(&self, values: &[String]) -> String {
        let mut changes: Vec<(&Range<usize>, &String)> = self.places.iter().zip(values).collect();
        changes.sort_by_key(|(place, _)| place.start);
        let mut out = String::with_capacity(self.text.len() + 64);
        let mut done = 0;
        for (place, value) in changes {
            out.push_str(self.text.get(done..place.start).unwrap_or(""));
            out.push_str(value);
            done = place.end;
        }
        out.push_str(self.text.get(done..).unwrap_or(""));
        out
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn values_are_exchanged_where_they_stand() {
        let text = "# é\nspec: 1\nconstants:\n  well: 9 nm   # wide\n  'b': \"232 meV\"\nsystems: {well: 1, constants: {well: 5}}\n";
        let template = Template::new(text, &["b", "well"]).expect("finds");
        assert_eq!(
            template.fill(&["1 eV".to_owned(), "9.5 nm".to_owned()]),
            "# é\nspec: 1\nconstants:\n  well: 9.5 nm   # wide\n  'b': 1 eV\nsystems: {well: 1, constants: {well: 5}}\n"
        );
        assert!(Template::new(text, &["nothing"]).is_err());
    }

    #[test]
    fn flow_style_and_hostile_text_are_survived() {
        let text = "constants: {a: 1 nm, b: 2}\n";
        let template = Template::new(text, &["b"]).expect("finds");
        assert_eq!(template.fill(&["3".to_owned()]), "constants: {a: 1 nm, b: 3}\n");
        for text in ["", "a: [", "constants: 3", "- - -", "constants: {a: {b: 1}, c: 2}", "\t"] {
            let _ = Template::new(text, &["a"]);
        }
    }
}
