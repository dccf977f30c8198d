//! Rust: one file, usable as a module or through `include!` in a `no_std` crate.

use proc_macro2::{Ident, Literal, Span, TokenStream};
use quote::quote;

use super::header::{self, Entry};
use super::text::{coefficient_unit, real, real_single, unit_name};
use super::{Source, arguments, branches, cuts, end, evaluation};
use crate::diagnostic::{Error, Result};
use crate::formula::{Expr, Float, FloatForm, Formula, Numbers, horner, horner_slope};
use crate::outcome::Outcome;

mod fixed;
mod float;

/// The whole file.
///
/// # Errors
/// Only if a rule of the program itself is broken: what was built is no Rust.
pub fn print(outcome: &Outcome, stem: &str, formulas: &[Formula]) -> Result<Source> {
    let modules = formulas.iter().map(|f| module(outcome, f)).collect::<Result<Vec<_>>>()?;
    let digest = &outcome.spec.sha256;
    let mut tokens = quote! {
        #[doc = " Why there is no answer."]
        #[allow(dead_code)]
        #[derive(Clone, Copy, Debug, PartialEq, Eq)]
        pub enum OutOfRange {
            #[doc = " The control lies below the range."]
            Below,
            #[doc = " The control lies above the range."]
            Above,
            #[doc = " An argument is not a number."]
            NotANumber,
            #[doc = " The formula does not reach the value on this branch."]
            NoSolution,
            #[doc = " A family parameter lies outside its box."]
            OutsideFamily,
        }

        #[doc = " SHA-256 of the spec."]
        #[allow(dead_code)]
        pub const SPEC_SHA256: &str = #digest;

        #(#modules)*
    };
    tokens.extend(helpers(formulas)?);
    let file = syn::parse2::<syn::File>(tokens).map_err(Error::internal)?;
    let printed = spaced(&prettyplease::unparse(&file));
    let entries: Vec<Entry<'_>> = formulas.iter().map(super::entry).collect();
    let (words, sentence) = evaluation(formulas);
    let mut text = String::new();
    for line in header::lines(outcome, stem, words, sentence, &entries) {
        text.push_str(format!("// {line}").trim_end());
        text.push('\n');
    }
    text.push('\n');
    text.push_str(&printed);
    Ok(Source { file: format!("{stem}.rs"), text })
}

/// Rust text in the printer's layout under its head comment.
///
/// # Errors
/// Only if a rule of the program itself is broken: the text is no Rust.
pub(super) fn commented(lines: &[String], body: &str) -> Result<String> {
    let file = syn::parse_file(body).map_err(Error::internal)?;
    let mut text = String::new();
    for line in lines {
        text.push_str(format!("// {line}").trim_end());
        text.push('\n');
    }
    text.push('\n');
    text.push_str(&spaced(&prettyplease::unparse(&file)));
    Ok(text)
}

/// Blank lines between items, which the printer of syntax trees leaves out.
fn spaced(text: &str) -> String {
    let mut out = String::with_capacity(text.len() + 256);
    let mut previous = "";
    let mut attributes = false;
    for line in text.lines() {
        let bare = line.trim_start();
        let attribute = bare.starts_with("///") || bare.starts_with("#[");
        let item = attribute
            || ["pub ", "const ", "fn ", "use "].iter().any(|word| bare.starts_with(word))
                && !bare.ends_with(',');
        let closes = previous.trim_start() == "}" || previous.trim_end().ends_with(';');
        let deep = line.len() - bare.len() > 4;
        if item && !attributes && closes && !deep {
            out.push('\n');
        }
        attributes = attribute;
        out.push_str(line);
        out.push('\n');
        previous = line;
    }
    out
}

fn module(outcome: &Outcome, formula: &Formula) -> Result<TokenStream> {
    match &formula.numbers {
        Numbers::Double(float) => float::module(outcome, formula, float, true),
        Numbers::Single(float) => float::module(outcome, formula, float, false),
        Numbers::Fixed(fixed) => fixed::module(outcome, formula, fixed),
    }
}

fn helpers(formulas: &[Formula]) -> Result<TokenStream> {
    let mut out = TokenStream::new();
    let mut done = Vec::new();
    for formula in formulas {
        let (word, needed) = match &formula.numbers {
            Numbers::Double(float) => ("double", float.roots()),
            Numbers::Single(float) => ("single", float.roots()),
            Numbers::Fixed(fixed) => ("whole", fixed.roots()),
        };
        if needed && !done.contains(&word) {
            done.push(word);
            out.extend(match word {
                "double" => float::root(true),
                "single" => float::root(false),
                _ => fixed::root(),
            });
        }
    }
    Ok(out)
}

/// Tokens of source text that the program wrote itself.
fn tokens(text: &str) -> Result<TokenStream> {
    text.parse().map_err(Error::internal)
}

fn ident(name: &str) -> Ident {
    Ident::new(name, Span::call_site())
}

/// A doc line.
fn doc(text: &str) -> TokenStream {
    let text = format!(" {text}");
    quote! { #[doc = #text] }
}
