//! Whether the files on disk are what the spec gives now.
//!
//! In: a fresh run and a reader of the output folder. Out: [`Finding`]s, each
//! with a place, so that a line of continuous integration can point at it.
//! Hand edits, missing files, sets of two generations, moved numbers, and
//! digests that differ without a moved number are told apart.
//!
//! Not here: writing anything, solving.

use serde::Serialize;

use crate::diagnostic::{Error, Result};
use crate::emit::Source;
use crate::emit::record::{self, Record};
use crate::outcome::{Outcome, OutputOutcome};

use super::compare;
use super::edits::differences;

/// What a finding is about.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Kind {
    /// A file that should be there is not.
    Missing,
    /// A person changed a generated file.
    Edited,
    /// A file that was not written together with the record.
    Mixed,
    /// A number, an input or a name of the spec moved.
    Moved,
    /// The same numbers give other code.
    Code,
    /// The spec no longer asks for a file.
    Unwanted,
    /// The record cannot be read, or does not say what a record of this spec says.
    Record,
    /// The spec or a file it reads has another digest, the numbers are the same.
    Digest,
    /// Another version of the program wrote the files, the numbers are the same.
    Version,
}

impl Kind {
    /// Its word in messages.
    #[must_use]
    pub fn word(self) -> &'static str {
        match self {
            Self::Missing => "missing",
            Self::Edited => "edited",
            Self::Mixed => "mixed",
            Self::Moved => "moved",
            Self::Code => "code",
            Self::Unwanted => "unwanted",
            Self::Record => "record",
            Self::Digest => "digest",
            Self::Version => "version",
        }
    }

    /// True for a difference (exit status 1), false for a remark.
    #[must_use]
    pub fn is_difference(self) -> bool {
        !matches!(self, Self::Digest | Self::Version)
    }
}

/// One thing that `check` has to say.
#[derive(Clone, Debug, PartialEq, Eq, Serialize)]
pub struct Finding {
    /// What it is about.
    pub kind: Kind,
    /// The file, as the user would type it.
    pub file: String,
    /// Line, from 1.
    pub line: usize,
    /// The sentence.
    pub text: String,
}

impl Finding {
    /// `file:line:1: difference: text (word)`, the form that compilers use.
    #[must_use]
    pub fn line(&self) -> String {
        let level = if self.kind.is_difference() { "difference" } else { "remark" };
        format!("{}:{}:1: {level}: {} ({})", self.file, self.line, self.text, self.kind.word())
    }
}

/// What is checked.
pub struct Subject<'a> {
    /// The fresh outcome, outputs filled in.
    pub outcome: &'a Outcome,
    /// The fresh files, the record last.
    pub sources: &'a [Source],
    /// The spec's path, as the user gave it.
    pub spec: &'a str,
    /// Line of a formula's name in the spec, 1 if unknown.
    pub formula_line: &'a dyn Fn(&str) -> usize,
    /// Output folder, as the user would type it.
    pub folder: &'a str,
}

impl Subject<'_> {
    fn path(&self, file: &str) -> String {
        if self.folder.is_empty() { file.to_owned() } else { format!("{}/{file}", self.folder) }
    }

    fn find(&self, kind: Kind, file: &str, line: usize, text: impl Into<String>) -> Finding {
        Finding { kind, file: self.path(file), line, text: text.into() }
    }

    fn about_spec(&self, kind: Kind, line: usize, text: impl Into<String>) -> Finding {
        Finding { kind, file: self.spec.to_owned(), line, text: text.into() }
    }

    fn fresh(&self, file: &str) -> Option<&str> {
        self.sources.iter().find(|source| source.file == file).map(|source| source.text.as_str())
    }
}

/// Reads a file of the output folder; `None` if it is not there.
pub type Reader<'a> = dyn Fn(&str) -> Result<Option<Vec<u8>>> + 'a;

/// Compares the output folder with a fresh run.
///
/// # Errors
/// Only what `read` returns.
pub fn check(subject: &Subject<'_>, read: &Reader<'_>) -> Result<Vec<Finding>> {
    let name = record::file_name(&subject.outcome.name);
    let Some(bytes) = read(&name)? else {
        let text = "there is no record; run `shiftwright generate`";
        return Ok(vec![subject.find(Kind::Missing, &name, 1, text)]);
    };
    let text = String::from_utf8_lossy(&bytes).into_owned();
    let old = match record::read(&text, &name) {
        Ok(old) => old,
        Err(error) => return Ok(vec![broken(subject, &name, &text, &error)]),
    };
    let comparison = compare::compare(&old.outcome, subject.outcome);
    let mut findings = Vec::new();
    let mut whole = true;
    for output in &old.outcome.outputs {
        let found = file(subject, &old, output, comparison.is_empty(), read)?;
        whole &= found.is_empty();
        findings.extend(found);
    }
    for source in subject.sources.iter().filter(|source| source.file != name) {
        if !old.outcome.outputs.iter().any(|output| output.file == source.file) {
            let there = read(&source.file)?.is_some();
            let (kind, text) = if there {
                (Kind::Mixed, "the record does not know this file, which the spec asks for")
            } else {
                (Kind::Missing, "the spec asks for this file; run `shiftwright generate`")
            };
            findings.push(subject.find(kind, &source.file, 1, text));
        }
    }
    for moves in comparison.lines() {
        let formula = moves.split(':').next().unwrap_or("");
        findings.push(subject.about_spec(Kind::Moved, (subject.formula_line)(formula), moves));
    }
    if comparison.is_empty() && whole {
        findings.extend(output_numbers(subject, &old.outcome));
        if findings.is_empty() {
            findings.extend(record_text(subject, &old, &name, &text));
        }
    }
    findings.extend(remarks(subject, &old, comparison.is_empty()));
    Ok(findings)
}

fn broken(subject: &Subject<'_>, name: &str, text: &str, error: &Error) -> Finding {
    let diagnostic = error.diagnostics().first();
    let start = diagnostic.and_then(|d| d.place.as_ref()).map_or(0, |place| place.start);
    let line = text.get(..start).map_or(1, |head| head.matches('\n').count() + 1);
    let message = diagnostic.map_or_else(|| error.to_string(), |d| d.message.clone());
    subject.find(Kind::Record, name, line, message)
}

/// Digests of 64 hexadecimal digits that a text holds.
fn digests(text: &str) -> Vec<&str> {
    text.split(|c: char| !c.is_ascii_hexdigit()).filter(|part| part.len() == 64).collect()
}

/// `text` of the older generation with the digests and the version of the newer.
fn renewed(text: &str, old: &Record, new: &Outcome) -> String {
    let mut text = text.replace(&old.outcome.spec.sha256, &new.spec.sha256);
    for (before, after) in old.outcome.sources.iter().zip(&new.sources) {
        text = text.replace(&before.sha256, &after.sha256);
    }
    let name = env!("CARGO_PKG_NAME");
    let version = env!("CARGO_PKG_VERSION");
    text.replace(&format!("{name} {}", old.version), &format!("{name} {version}"))
}

/// What is to be said about one file that the record lists.
fn file(
    subject: &Subject<'_>,
    old: &Record,
    output: &OutputOutcome,
    same_numbers: bool,
    read: &Reader<'_>,
) -> Result<Vec<Finding>> {
    let name = output.file.as_str();
    if name.contains(['/', '\\']) || name.starts_with('.') || name.is_empty() {
        let record_name = record::file_name(&subject.outcome.name);
        let text = format!("the record names `{name}`, which is no file of its folder");
        return Ok(vec![subject.find(Kind::Record, &record_name, 1, text)]);
    }
    let fresh = subject.fresh(name);
    let Some(bytes) = read(name)? else {
        return Ok(match fresh {
            Some(_) => vec![subject.find(Kind::Missing, name, 1, "the file is not there")],
            None => vec![subject.find(
                Kind::Unwanted,
                name,
                1,
                "the spec no longer asks for this file, and it is not there",
            )],
        });
    };
    let text = String::from_utf8_lossy(&bytes).into_owned();
    if record::digest(&bytes) != output.sha256 {
        if fresh == Some(text.as_str()) {
            let text = "the file is what the spec gives now, the record is older";
            return Ok(vec![subject.find(Kind::Mixed, name, 1, text)]);
        }
        let embedded = digests(&text);
        if !embedded.is_empty() && !embedded.contains(&old.outcome.spec.sha256.as_str()) {
            let text = "the file was written from another state of the spec than the record";
            return Ok(vec![subject.find(Kind::Mixed, name, 1, text)]);
        }
        return Ok(edited(subject, old, output, fresh, &text, same_numbers));
    }
    let Some(fresh) = fresh else {
        let text = "the spec no longer asks for this file";
        return Ok(vec![subject.find(Kind::Unwanted, name, 1, text)]);
    };
    let renewed = renewed(&text, old, subject.outcome);
    if !same_numbers || renewed == fresh {
        return Ok(Vec::new());
    }
    let findings = differences(&output.language, &renewed, fresh);
    Ok(findings
        .into_iter()
        .map(|edit| {
            let text = format!("this program would write: {}", edit.text);
            subject.find(Kind::Code, name, edit.line, text)
        })
        .collect())
}

/// A file whose bytes differ from the record's digest, and what changed in it.
fn edited(
    subject: &Subject<'_>,
    old: &Record,
    output: &OutputOutcome,
    fresh: Option<&str>,
    text: &str,
    same_numbers: bool,
) -> Vec<Finding> {
    let name = output.file.as_str();
    let Some(fresh) = fresh.filter(|_| same_numbers) else {
        let text = "edited by hand since it was written; the spec has changed as well";
        return vec![subject.find(Kind::Edited, name, 1, text)];
    };
    differences(&output.language, fresh, &renewed(text, old, subject.outcome))
        .into_iter()
        .map(|edit| subject.find(Kind::Edited, name, edit.line, format!("edited by hand: {}", edit.text)))
        .collect()
}

/// Rounding bounds, ranges and coefficients of single outputs.
fn output_numbers(subject: &Subject<'_>, old: &Outcome) -> Vec<Finding> {
    let mut findings = Vec::new();
    for output in &subject.outcome.outputs {
        let Some(before) = old.outputs.iter().find(|other| other.file == output.file) else {
            continue;
        };
        for formula in &output.formulas {
            if before.formulas.iter().any(|other| other == formula) {
                continue;
            }
            let text = format!("{}: coefficients, range or rounding bound of this file moved", formula.name);
            findings.push(subject.find(Kind::Moved, &output.file, 1, text));
        }
    }
    findings
}

/// The record itself, when everything else is as it should be.
fn record_text(subject: &Subject<'_>, old: &Record, name: &str, text: &str) -> Option<Finding> {
    let fresh = subject.fresh(name)?;
    if fresh == text {
        return None;
    }
    let version = env!("CARGO_PKG_VERSION");
    let same_digests = old.outcome.spec.sha256 == subject.outcome.spec.sha256
        && old.outcome.sources == subject.outcome.sources;
    if old.version == version && same_digests {
        let edit = differences("record", fresh, text).into_iter().next()?;
        let text = format!("the record was edited by hand: {}", edit.text);
        return Some(subject.find(Kind::Edited, name, edit.line, text));
    }
    // Digests and version aside, both must say the same.
    let mut before = old.outcome.clone();
    before.spec = subject.outcome.spec.clone();
    before.sources.clone_from(&subject.outcome.sources);
    for (a, b) in before.outputs.iter_mut().zip(&subject.outcome.outputs) {
        a.sha256.clone_from(&b.sha256);
    }
    (before != *subject.outcome)
        .then(|| subject.find(Kind::Record, name, 1, "the record says other things than the spec"))
}

fn remarks(subject: &Subject<'_>, old: &Record, same_numbers: bool) -> Vec<Finding> {
    let mut findings = Vec::new();
    let record_name = record::file_name(&subject.outcome.name);
    if same_numbers && old.outcome.spec.sha256 != subject.outcome.spec.sha256 {
        let text = "the spec has another digest than its record, but the same numbers: \
                    comments or layout changed";
        findings.push(subject.about_spec(Kind::Digest, 1, text));
    }
    for source in &subject.outcome.sources {
        let before = old.outcome.sources.iter().find(|other| other.file == source.file);
        if same_numbers && before.is_some_and(|before| before.sha256 != source.sha256) {
            let text = format!("{} has another digest, but gives the same numbers", source.file);
            findings.push(subject.about_spec(Kind::Digest, 1, text));
        }
    }
    let version = env!("CARGO_PKG_VERSION");
    if old.version != version {
        let order = numbers(&old.version).cmp(&numbers(version));
        let age = if order == std::cmp::Ordering::Greater { "newer" } else { "older" };
        let text = format!("version {} wrote the files, {age} than this program {version}", old.version);
        findings.push(subject.find(Kind::Version, &record_name, 1, text));
    }
    findings
}

/// The numbers of a version, for their order.
fn numbers(version: &str) -> Vec<u64> {
    version.split(['.', '-', '+']).map_while(|part| part.parse().ok()).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::review::example;
    use std::collections::BTreeMap;

    /// A run whose files hold the spec's digest, as real ones do.
    fn run(mut outcome: Outcome) -> (Outcome, Vec<Source>) {
        let b = outcome.formulas[0].series[2];
        let text = format!(
            "//! shiftwright 0.1.0, spec {}\npub mod onset {{\n    pub const B: f64 = {b:?};\n}}\n",
            outcome.spec.sha256
        );
        outcome.outputs[0].sha256 = record::digest(text.as_bytes());
        let record = record::write(&outcome).expect("writes");
        let sources = vec![
            Source { file: "shutter_f64.rs".to_owned(), text },
            Source { file: "shutter.record.json".to_owned(), text: record },
        ];
        (outcome, sources)
    }

    fn findings(fresh: &(Outcome, Vec<Source>), disk: &BTreeMap<String, String>) -> Vec<(Kind, String)> {
        let subject = Subject {
            outcome: &fresh.0,
            sources: &fresh.1,
            spec: "shutter.yaml",
            formula_line: &|_| 7,
            folder: "out",
        };
        let read = |name: &str| Ok(disk.get(name).map(|text| text.clone().into_bytes()));
        check(&subject, &read)
            .expect("reads")
            .into_iter()
            .map(|finding| (finding.kind, finding.line()))
            .collect()
    }

    fn disk(run: &(Outcome, Vec<Source>)) -> BTreeMap<String, String> {
        run.1.iter().map(|source| (source.file.clone(), source.text.clone())).collect()
    }

    fn moved() -> Outcome {
        let mut outcome = example::outcome();
        outcome.spec.sha256 = "99ff".repeat(16);
        outcome.inputs[0].value = 9.2;
        outcome.formulas[0].series[2] = -6e-4;
        outcome.formulas[0].form =
            crate::form::Form::Polynomial { coefficients: vec![outcome.formulas[0].series[0], 0.0, -6e-4] };
        outcome
    }

    #[test]
    fn a_fresh_folder_has_nothing_to_say() {
        let fresh = run(example::outcome());
        assert_eq!(findings(&fresh, &disk(&fresh)), []);
    }

    #[test]
    fn hand_edits_missing_files_and_torn_records_are_told_apart() {
        let fresh = run(example::outcome());
        let mut edited = disk(&fresh);
        let text = edited.get_mut("shutter_f64.rs").expect("there");
        *text = text.replace("-0.0005459111401161", "-0.0005459111401162");
        let found = findings(&fresh, &edited);
        assert_eq!(found.len(), 1);
        assert_eq!(
            found[0].1,
            "out/shutter_f64.rs:3:1: difference: edited by hand: constant onset::B \
             -0.0005459111401161 to -0.0005459111401162 (edited)"
        );
        let mut commented = disk(&fresh);
        commented.get_mut("shutter_f64.rs").expect("there").push_str("// mine\n");
        assert_eq!(findings(&fresh, &commented)[0].0, Kind::Edited);
        let mut gone = disk(&fresh);
        gone.remove("shutter_f64.rs");
        assert_eq!(findings(&fresh, &gone)[0].0, Kind::Missing);
        let mut torn = disk(&fresh);
        torn.get_mut("shutter.record.json").expect("there").truncate(300);
        assert_eq!(findings(&fresh, &torn)[0].0, Kind::Record);
        torn.remove("shutter.record.json");
        assert_eq!(findings(&fresh, &torn)[0].0, Kind::Missing);
        let mut record = disk(&fresh);
        record.get_mut("shutter.record.json").expect("there").push('\n');
        assert_eq!(findings(&fresh, &record)[0].0, Kind::Edited);
    }

    #[test]
    fn a_set_of_two_generations_is_found_whichever_part_is_older() {
        let (old, new) = (run(example::outcome()), run(moved()));
        for (source, text) in [("shutter_f64.rs", &new), ("shutter.record.json", &new)] {
            let mut mixed = disk(&old);
            mixed.insert(source.to_owned(), disk(text)[source].clone());
            for fresh in [&old, &new] {
                let kinds: Vec<Kind> = findings(fresh, &mixed).into_iter().map(|f| f.0).collect();
                assert!(kinds.contains(&Kind::Mixed), "{source}: {kinds:?}");
            }
        }
    }

    #[test]
    fn moved_numbers_name_their_cause() {
        let (old, new) = (run(example::outcome()), run(moved()));
        let found = findings(&new, &disk(&old));
        assert_eq!(
            found.iter().map(|f| f.1.as_str()).collect::<Vec<_>>(),
            ["shutter.yaml:7:1: difference: onset: b -0.000546 to -0.0006 meV/(kV/cm)^2 (+9.9 %), \
              because constants.well 9 nm to 9.2 nm (moved)"]
        );
    }

    #[test]
    fn comments_of_the_spec_and_other_versions_are_remarks() {
        let old = run(example::outcome());
        let mut outcome = example::outcome();
        outcome.spec.sha256 = "99ff".repeat(16);
        let new = run(outcome);
        let kinds = |found: Vec<(Kind, String)>| found.into_iter().map(|f| f.0).collect::<Vec<_>>();
        assert_eq!(kinds(findings(&new, &disk(&old))), [Kind::Digest]);
        let mut other = disk(&old);
        let source = other["shutter_f64.rs"].replace("shiftwright 0.1.0", "shiftwright 99.0.0");
        let record = other["shutter.record.json"]
            .replace("\"version\": \"0.1.0\"", "\"version\": \"99.0.0\"")
            .replace(&record::digest(other["shutter_f64.rs"].as_bytes()), &record::digest(source.as_bytes()));
        other.insert("shutter_f64.rs".to_owned(), source);
        other.insert("shutter.record.json".to_owned(), record);
        let found = findings(&old, &other);
        assert!(found[0].1.contains("newer"), "{found:?}");
        assert_eq!(kinds(found), [Kind::Version]);
    }
}
