//! The record's fields, in the order in which they are written.
//!
//! One set of types serves the writer and the reader, so that a field has its
//! name in one place.

use std::fmt;
use std::marker::PhantomData;

use serde::de::value::{MapAccessDeserializer, SeqAccessDeserializer};
use serde::de::{self, Deserializer, MapAccess, SeqAccess, Visitor};
use serde::ser::{SerializeMap, Serializer};
use serde::{Deserialize, Serialize};

#[derive(Serialize, Deserialize)]
pub struct RecordFile {
    pub record: u32,
    pub generator: Generator,
    pub spec: SpecEntry,
    #[serde(default)]
    pub sources: Vec<Named>,
    pub inputs: Ordered<Quantity>,
    pub control: Control,
    #[serde(default)]
    pub family: Option<Family>,
    pub formulas: Ordered<Formula>,
    pub outputs: Vec<Output>,
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub warnings: Vec<Remark>,
}

#[derive(Serialize, Deserialize)]
pub struct Generator {
    pub name: String,
    pub version: String,
}

#[derive(Serialize, Deserialize)]
pub struct SpecEntry {
    pub name: String,
    pub file: String,
    pub sha256: String,
    #[serde(default)]
    pub summary: String,
}

#[derive(Serialize, Deserialize)]
pub struct Named {
    pub file: String,
    pub sha256: String,
}

#[derive(Serialize, Deserialize)]
pub struct Quantity {
    pub value: f64,
    pub unit: String,
}

#[derive(Serialize, Deserialize)]
pub struct Control {
    pub symbol: String,
    pub unit: String,
    pub at: f64,
    pub within: [f64; 2],
}

#[derive(Serialize, Deserialize)]
pub struct Family {
    pub parameters: Vec<Parameter>,
}

#[derive(Serialize, Deserialize)]
pub struct Parameter {
    pub name: String,
    pub unit: String,
    pub from: f64,
    pub to: f64,
}

#[derive(Serialize, Deserialize)]
pub struct Formula {
    pub unit: String,
    pub form: String,
    pub value: String,
    pub coefficients: Coefficients,
    pub series: [f64; 5],
    pub uncertainty: [f64; 5],
    pub zero_by_symmetry: Vec<usize>,
    pub tolerance: f64,
    pub valid: Range,
    pub error: ErrorBudget,
    pub first_to_fail: FirstToFail,
    #[serde(default)]
    pub contributions: Vec<Contribution>,
    #[serde(default)]
    pub mixing: Vec<Mixing>,
    #[serde(default)]
    pub levels: Ordered<Vec<f64>>,
    #[serde(default)]
    pub sizes: Ordered<usize>,
    #[serde(default)]
    pub samples: Vec<SampleEntry>,
    #[serde(default)]
    pub notes: Vec<Remark>,
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub family: Option<FamilyFormula>,
}

#[derive(Serialize, Deserialize)]
pub struct Range {
    pub from: f64,
    pub to: f64,
    pub limited_by: [String; 2],
}

#[derive(Serialize, Deserialize)]
pub struct ErrorBudget {
    pub remainder: f64,
    pub numerical: f64,
    pub written_digits: f64,
}

#[derive(Serialize, Deserialize)]
pub struct FirstToFail {
    pub below: Option<f64>,
    pub above: Option<f64>,
}

#[derive(Serialize, Deserialize)]
pub struct Contribution {
    pub system: String,
    pub level: LevelNumber,
    #[serde(rename = "where", default, skip_serializing_if = "Ordered::is_empty")]
    pub block: Ordered<f64>,
    pub energy: f64,
    pub share: f64,
}

#[derive(Serialize, Deserialize)]
pub struct Mixing {
    pub system: String,
    pub level: usize,
    #[serde(rename = "where", default, skip_serializing_if = "Ordered::is_empty")]
    pub block: Ordered<f64>,
    pub coefficient: f64,
}

#[derive(Serialize, Deserialize)]
pub struct SampleEntry {
    pub control: f64,
    pub exact: f64,
    pub formula: f64,
}

#[derive(Serialize, Deserialize)]
pub struct Remark {
    pub code: String,
    pub text: String,
}

#[derive(Serialize, Deserialize)]
pub struct FamilyFormula {
    pub degree: Vec<Vec<usize>>,
    pub coefficients: serde_json::Value,
    pub samples: Vec<ParameterSample>,
}

#[derive(Serialize, Deserialize)]
pub struct ParameterSample {
    pub parameters: Vec<f64>,
    pub control: f64,
    pub exact: f64,
    pub formula: f64,
}

#[derive(Serialize, Deserialize)]
pub struct Output {
    pub file: String,
    pub language: String,
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub number: Option<String>,
    pub sha256: String,
    pub formulas: Ordered<OutputEntryFormula>,
}

#[derive(Serialize, Deserialize)]
pub struct OutputEntryFormula {
    pub rounding: f64,
    pub coefficients: serde_json::Value,
    pub valid: Range,
}

/// A JSON object whose keys are names of the spec, in the order of the file.
pub struct Ordered<T>(pub Vec<(String, T)>);

impl<T> Ordered<T> {
    fn is_empty(&self) -> bool {
        self.0.is_empty()
    }
}

impl<T> Default for Ordered<T> {
    fn default() -> Self {
        Self(Vec::new())
    }
}

impl<T: Serialize> Serialize for Ordered<T> {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        let mut map = serializer.serialize_map(Some(self.0.len()))?;
        for (key, value) in &self.0 {
            map.serialize_entry(key, value)?;
        }
        map.end()
    }
}

struct OrderedVisitor<T>(PhantomData<T>);

impl<'de, T: Deserialize<'de>> Visitor<'de> for OrderedVisitor<T> {
    type Value = Ordered<T>;

    fn expecting(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        out.write_str("an object")
    }

    fn visit_map<A: MapAccess<'de>>(self, mut map: A) -> Result<Self::Value, A::Error> {
        let mut list: Vec<(String, T)> = Vec::new();
        while let Some((key, value)) = map.next_entry::<String, T>()? {
            if list.iter().any(|(other, _)| *other == key) {
                return Err(de::Error::custom(format_args!("`{key}` stands here twice")));
            }
            list.push((key, value));
        }
        Ok(Ordered(list))
    }
}

impl<'de, T: Deserialize<'de>> Deserialize<'de> for Ordered<T> {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        deserializer.deserialize_map(OrderedVisitor(PhantomData))
    }
}

/// A list of a polynomial's coefficients, or a pair's object.
pub enum Coefficients {
    Polynomial(Vec<f64>),
    Paired(Paired),
}

#[derive(Serialize, Deserialize)]
pub struct Paired {
    pub mean: Vec<f64>,
    pub half_gap_squared: Vec<f64>,
    pub sign: i8,
    pub partner: usize,
}

impl Serialize for Coefficients {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        match self {
            Self::Polynomial(list) => list.serialize(serializer),
            Self::Paired(pair) => pair.serialize(serializer),
        }
    }
}

struct CoefficientsVisitor;

impl<'de> Visitor<'de> for CoefficientsVisitor {
    type Value = Coefficients;

    fn expecting(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        out.write_str("a list of coefficients, or an object with `mean` and `half_gap_squared`")
    }

    fn visit_seq<A: SeqAccess<'de>>(self, list: A) -> Result<Self::Value, A::Error> {
        Vec::deserialize(SeqAccessDeserializer::new(list)).map(Coefficients::Polynomial)
    }

    fn visit_map<A: MapAccess<'de>>(self, map: A) -> Result<Self::Value, A::Error> {
        Paired::deserialize(MapAccessDeserializer::new(map)).map(Coefficients::Paired)
    }
}

impl<'de> Deserialize<'de> for Coefficients {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        deserializer.deserialize_any(CoefficientsVisitor)
    }
}

/// A level's number; `None` is the word `direct`.
pub struct LevelNumber(pub Option<usize>);

impl Serialize for LevelNumber {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        match self.0 {
            Some(number) => number.serialize(serializer),
            None => serializer.serialize_str("direct"),
        }
    }
}

struct LevelNumberVisitor;

impl Visitor<'_> for LevelNumberVisitor {
    type Value = LevelNumber;

    fn expecting(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        out.write_str("a level's number or \"direct\"")
    }

    fn visit_u64<E: de::Error>(self, number: u64) -> Result<LevelNumber, E> {
        usize::try_from(number).map(|n| LevelNumber(Some(n))).map_err(E::custom)
    }

    fn visit_str<E: de::Error>(self, _word: &str) -> Result<LevelNumber, E> {
        Ok(LevelNumber(None))
    }
}

impl<'de> Deserialize<'de> for LevelNumber {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        deserializer.deserialize_any(LevelNumberVisitor)
    }
}
