//! The spec as it is written: typed, with every scalar still text.
//!
//! Read by serde from text that [`super::tree`] has found harmless and
//! [`super::shape`] has found complete. Mappings with free names are lists of
//! pairs, so that the order of the file is kept.

use std::fmt;
use std::marker::PhantomData;

use serde::Deserialize;
use serde::de::{Deserializer, Error, MapAccess, SeqAccess, Visitor, value};

/// One scalar, quoted or not; numbers in their shortest decimal text.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Scalar(pub String);

/// A mapping with free names, in the order of the file.
#[derive(Clone, Debug)]
pub struct Named<T>(pub Vec<(String, T)>);

impl<T> Default for Named<T> {
    fn default() -> Self {
        Self(Vec::new())
    }
}

/// A scalar, or something with keys.
#[derive(Clone, Debug)]
pub enum OneOr<T> {
    One(Scalar),
    More(T),
}

/// A scalar, or a list of scalars.
#[derive(Clone, Debug)]
pub enum Entry {
    One(Scalar),
    List(Vec<Scalar>),
}

/// Rows of a matrix, or the file that holds it.
#[derive(Clone, Debug)]
pub enum Matrix {
    Rows(Vec<Vec<Entry>>),
    File(Scalar),
}

/// A number of a materials file: alone, as coefficients, or with its source.
#[derive(Clone, Debug)]
pub enum Sourced {
    Plain(Entry),
    With(Entry),
}

impl Sourced {
    pub fn entry(&self) -> &Entry {
        match self {
            Self::Plain(entry) | Self::With(entry) => entry,
        }
    }
}

macro_rules! scalars {
    ($wrap:expr) => {
        fn visit_bool<E: Error>(self, v: bool) -> Result<Self::Value, E> {
            Ok($wrap(Scalar(v.to_string())))
        }
        fn visit_i64<E: Error>(self, v: i64) -> Result<Self::Value, E> {
            Ok($wrap(Scalar(v.to_string())))
        }
        fn visit_u64<E: Error>(self, v: u64) -> Result<Self::Value, E> {
            Ok($wrap(Scalar(v.to_string())))
        }
        fn visit_i128<E: Error>(self, v: i128) -> Result<Self::Value, E> {
            Ok($wrap(Scalar(v.to_string())))
        }
        fn visit_u128<E: Error>(self, v: u128) -> Result<Self::Value, E> {
            Ok($wrap(Scalar(v.to_string())))
        }
        fn visit_f64<E: Error>(self, v: f64) -> Result<Self::Value, E> {
            Ok($wrap(Scalar(number(v))))
        }
        fn visit_str<E: Error>(self, v: &str) -> Result<Self::Value, E> {
            Ok($wrap(Scalar(v.to_owned())))
        }
    };
}

/// Shortest decimal text that reads back to the same double.
fn number(v: f64) -> String {
    if v != 0.0 && !(1e-4..1e15).contains(&v.abs()) { format!("{v:e}") } else { format!("{v}") }
}

impl<'de> Deserialize<'de> for Scalar {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        struct Reader;
        impl Visitor<'_> for Reader {
            type Value = Scalar;
            fn expecting(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
                out.write_str("one value")
            }
            scalars!(|scalar| scalar);
        }
        deserializer.deserialize_any(Reader)
    }
}

impl<'de, T: Deserialize<'de>> Deserialize<'de> for Named<T> {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        struct Reader<T>(PhantomData<T>);
        impl<'de, T: Deserialize<'de>> Visitor<'de> for Reader<T> {
            type Value = Named<T>;
            fn expecting(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
                out.write_str("a mapping")
            }
            fn visit_map<A: MapAccess<'de>>(self, mut map: A) -> Result<Self::Value, A::Error> {
                let mut out = Vec::new();
                while let Some((Scalar(name), value)) = map.next_entry()? {
                    out.push((name, value));
                }
                Ok(Named(out))
            }
        }
        deserializer.deserialize_map(Reader(PhantomData))
    }
}

impl<'de, T: Deserialize<'de>> Deserialize<'de> for OneOr<T> {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        struct Reader<T>(PhantomData<T>);
        impl<'de, T: Deserialize<'de>> Visitor<'de> for Reader<T> {
            type Value = OneOr<T>;
            fn expecting(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
                out.write_str("one value or a mapping")
            }
            scalars!(OneOr::One);
            fn visit_map<A: MapAccess<'de>>(self, map: A) -> Result<Self::Value, A::Error> {
                T::deserialize(value::MapAccessDeserializer::new(map)).map(OneOr::More)
            }
        }
        deserializer.deserialize_any(Reader(PhantomData))
    }
}

impl<'de> Deserialize<'de> for Entry {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        struct Reader;
        impl<'de> Visitor<'de> for Reader {
            type Value = Entry;
            fn expecting(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
                out.write_str("one value or a list")
            }
            scalars!(Entry::One);
            fn visit_seq<A: SeqAccess<'de>>(self, seq: A) -> Result<Self::Value, A::Error> {
                Vec::deserialize(value::SeqAccessDeserializer::new(seq)).map(Entry::List)
            }
        }
        deserializer.deserialize_any(Reader)
    }
}

impl<'de> Deserialize<'de> for Matrix {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        #[derive(Deserialize)]
        #[serde(deny_unknown_fields)]
        struct InFile {
            file: Scalar,
        }
        struct Reader;
        impl<'de> Visitor<'de> for Reader {
            type Value = Matrix;
            fn expecting(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
                out.write_str("a list of rows or `{file: ...}`")
            }
            fn visit_seq<A: SeqAccess<'de>>(self, seq: A) -> Result<Self::Value, A::Error> {
                Vec::deserialize(value::SeqAccessDeserializer::new(seq)).map(Matrix::Rows)
            }
            fn visit_map<A: MapAccess<'de>>(self, map: A) -> Result<Self::Value, A::Error> {
                InFile::deserialize(value::MapAccessDeserializer::new(map)).map(|one| Matrix::File(one.file))
            }
        }
        deserializer.deserialize_any(Reader)
    }
}

impl<'de> Deserialize<'de> for Sourced {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        #[derive(Deserialize)]
        #[serde(deny_unknown_fields)]
        struct With {
            value: Entry,
            // Read so that it may be written; the number alone counts.
            #[serde(rename = "source")]
            _source: Option<Scalar>,
        }
        struct Reader;
        impl<'de> Visitor<'de> for Reader {
            type Value = Sourced;
            fn expecting(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
                out.write_str("a number, a list of numbers, or `{value: ..., source: ...}`")
            }
            scalars!(|scalar| Sourced::Plain(Entry::One(scalar)));
            fn visit_seq<A: SeqAccess<'de>>(self, seq: A) -> Result<Self::Value, A::Error> {
                Vec::deserialize(value::SeqAccessDeserializer::new(seq))
                    .map(|list| Sourced::Plain(Entry::List(list)))
            }
            fn visit_map<A: MapAccess<'de>>(self, map: A) -> Result<Self::Value, A::Error> {
                With::deserialize(value::MapAccessDeserializer::new(map)).map(|one| Sourced::With(one.value))
            }
        }
        deserializer.deserialize_any(Reader)
    }
}

#[derive(Clone, Debug, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Spec {
    #[serde(rename = "spec")]
    pub _version: Scalar,
    pub name: Scalar,
    pub summary: Option<Scalar>,
    #[serde(default)]
    pub constants: Named<Scalar>,
    pub materials: Option<Scalar>,
    pub temperature: Option<Scalar>,
    pub systems: Named<System>,
    pub control: Control,
    pub formulas: Named<Formula>,
    #[serde(default)]
    pub family: Named<Range>,
    pub outputs: Option<Vec<Output>>,
}

/// All keys of all kinds; which may stand together is settled by the shape.
#[derive(Clone, Debug, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct System {
    pub kind: Scalar,
    pub charge: Option<Scalar>,
    pub field: Option<Scalar>,
    pub origin: Option<Scalar>,
    pub ends: Option<Scalar>,
    pub carrier: Option<Scalar>,
    #[serde(default)]
    pub stack: Vec<Layer>,
    #[serde(default)]
    pub shells: Vec<Layer>,
    pub centre_charge: Option<Scalar>,
    pub permittivity: Option<Scalar>,
    #[serde(default)]
    pub parts: Named<OneOr<Named<Size>>>,
    pub hamiltonian: Option<Scalar>,
    #[serde(default)]
    pub conserved: Named<Scalar>,
    pub unit: Option<Scalar>,
    pub h0: Option<Matrix>,
    pub h1: Option<Matrix>,
    pub h2: Option<Matrix>,
    pub h3: Option<Matrix>,
    pub h4: Option<Matrix>,
    pub h5: Option<Matrix>,
    pub h6: Option<Matrix>,
    pub h7: Option<Matrix>,
    pub h8: Option<Matrix>,
}

impl System {
    pub fn matrices(&self) -> [Option<&Matrix>; 9] {
        [&self.h0, &self.h1, &self.h2, &self.h3, &self.h4, &self.h5, &self.h6, &self.h7, &self.h8]
            .map(Option::as_ref)
    }
}

#[derive(Clone, Debug, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Size {
    pub size: Scalar,
}

#[derive(Clone, Debug, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Range {
    pub from: Scalar,
    pub to: Scalar,
}

#[derive(Clone, Debug, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Alloy {
    pub alloy: Scalar,
    pub x: OneOr<Range>,
}

#[derive(Clone, Debug, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Layer {
    pub name: Option<Scalar>,
    pub thickness: Option<Scalar>,
    pub edge: Option<OneOr<Range>>,
    pub mass: Option<OneOr<Range>>,
    pub material: Option<OneOr<Alloy>>,
    pub repeat: Option<Scalar>,
    pub stack: Option<Vec<Layer>>,
}

#[derive(Clone, Debug, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Control {
    pub symbol: Scalar,
    pub unit: Scalar,
    pub at: Option<Scalar>,
    pub within: Vec<Scalar>,
    pub bits: Option<Scalar>,
    pub step: Option<Scalar>,
}

#[derive(Clone, Debug, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Term {
    pub constant: Option<Scalar>,
    pub expression: Option<Scalar>,
    pub system: Option<Scalar>,
    pub level: Option<Scalar>,
    #[serde(rename = "where", default)]
    pub block: Named<Scalar>,
    pub times: Option<Scalar>,
}

#[derive(Clone, Debug, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Count {
    pub bits: Scalar,
    pub step: Scalar,
    pub of: Option<Scalar>,
}

#[derive(Clone, Debug, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Formula {
    pub unit: Scalar,
    pub sum: Option<Vec<Term>>,
    pub overlap: Option<Vec<Term>>,
    pub form: Option<Scalar>,
    pub partner: Option<Scalar>,
    pub order: Option<Scalar>,
    pub coefficients: Option<Scalar>,
    pub value: Option<OneOr<Count>>,
    pub tolerance: Scalar,
}

#[derive(Clone, Debug, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Output {
    pub language: Scalar,
    pub number: Option<Scalar>,
    pub suffix: Option<Scalar>,
    pub control: Option<Count>,
    pub value: Option<Count>,
}

#[derive(Clone, Debug, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Materials {
    pub materials: Scalar,
    #[serde(rename = "source")]
    pub _source: Option<Scalar>,
    pub compounds: Named<Compound>,
    #[serde(default)]
    pub alloys: Named<AlloyOf>,
}

#[derive(Clone, Debug, Default, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Masses {
    pub electron: Option<Sourced>,
    pub heavy_hole: Option<Sourced>,
    pub light_hole: Option<Sourced>,
}

#[derive(Clone, Debug, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Varshni {
    pub alpha: Sourced,
    pub beta: Sourced,
}

#[derive(Clone, Debug, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Compound {
    pub gap: Option<Sourced>,
    pub varshni: Option<Varshni>,
    pub valence_edge: Option<Sourced>,
    #[serde(rename = "split_off")]
    pub _split_off: Option<Sourced>,
    #[serde(default)]
    pub mass: Masses,
    #[serde(rename = "permittivity")]
    pub _permittivity: Option<Sourced>,
    pub monolayer: Option<Sourced>,
    #[serde(rename = "source")]
    pub _source: Option<Scalar>,
}

#[derive(Clone, Debug, Default, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Bowing {
    pub gap: Option<Sourced>,
    pub valence_edge: Option<Sourced>,
    #[serde(rename = "split_off")]
    pub _split_off: Option<Sourced>,
    #[serde(rename = "permittivity")]
    pub _permittivity: Option<Sourced>,
    pub monolayer: Option<Sourced>,
    #[serde(default)]
    pub mass: Masses,
}

#[derive(Clone, Debug, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct AlloyOf {
    pub of: Vec<Scalar>,
    #[serde(default)]
    pub bowing: Bowing,
    #[serde(rename = "source")]
    pub _source: Option<Scalar>,
}
