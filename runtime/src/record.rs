//! Formulas out of a record, so that a host computes what the firmware computes.
//!
//! In: the text of `NAME.record.json`, the name of one of the files that it
//! lists, and the name of a formula. Out: the numbers which that file evaluates,
//! in its number format; the views that [`Loaded`] hands out give the file's bits.
//!
//! Only with the feature `record`, which needs an allocator and a JSON reader.
//!
//! ```
//! use shiftwright_runtime::record::{Loaded, Numbers};
//!
//! let record = r#"{"record": 1, "control": {"at": 0.0}, "outputs": [{
//!     "file": "shutter_f64.c", "number": "f64", "formulas": {"edge": {
//!         "rounding": 1e-13, "coefficients": [35.0, 0.0, -5e-4],
//!         "valid": {"from": -60.0, "to": 60.0}}}}]}"#;
//! let edge = Loaded::new(record, "shutter_f64.c", "edge").unwrap();
//! let Numbers::Double(numbers) = &edge.numbers else { panic!("another format") };
//! assert_eq!(numbers.formula().checked(10.0), Ok(35.0 + 10.0 * (10.0 * -5e-4)));
//! ```

use alloc::format;
use alloc::string::String;
use alloc::vec::Vec;

use serde_json::Value;

use crate::fixed::{self, Branch, Rung};
use crate::{double, single};

/// A formula of a record in the number format of one of its files.
#[derive(Clone, Debug, PartialEq)]
pub struct Loaded {
    /// Unit of the value, where the record names it.
    pub unit: String,
    /// The numbers.
    pub numbers: Numbers,
}

/// Numbers by format.
#[derive(Clone, Debug, PartialEq)]
pub enum Numbers {
    /// Double precision.
    Double(Double),
    /// Single precision.
    Single(Single),
    /// Counts of steps.
    Fixed(Fixed),
}

macro_rules! float {
    ($name:ident, $module:ident, $float:ident, $word:literal) => {
        #[doc = concat!("A formula in ", $word, " precision.")]
        #[derive(Clone, Debug, PartialEq)]
        pub struct $name {
            /// Lower end of the range.
            pub from: $float,
            /// Upper end of the range.
            pub to: $float,
            /// Operating point.
            pub at: $float,
            /// Bound on the rounding of the value.
            pub rounding: $float,
            /// Coefficients of the polynomial, or of the mean.
            pub main: Vec<$float>,
            /// Coefficients of the squared half gap, and true for plus.
            pub half_gap_squared: Option<(Vec<$float>, bool)>,
        }

        impl $name {
            /// The formula, ready to be evaluated.
            #[must_use]
            pub fn formula(&self) -> $module::Formula<'_> {
                let form = match &self.half_gap_squared {
                    None => $module::Form::Polynomial(&self.main),
                    Some((half_gap_squared, upper)) => {
                        $module::Form::Paired { mean: &self.main, half_gap_squared, upper: *upper }
                    }
                };
                $module::Formula { from: self.from, to: self.to, at: self.at, rounding: self.rounding, form }
            }
        }
    };
}

float!(Double, double, f64, "double");
float!(Single, single, f32, "single");

/// A formula in counts.
#[derive(Clone, Debug, PartialEq)]
pub struct Fixed {
    /// One count of the control, in its unit.
    pub control_step: f64,
    /// One count of the value, in its unit.
    pub value_step: f64,
    /// Bits of the control's type.
    pub control_bits: u32,
    /// Bits of the value's type.
    pub value_bits: u32,
    /// Lower end of the range.
    pub from: i64,
    /// Upper end of the range.
    pub to: i64,
    /// Count from which the ladders count.
    pub origin: i64,
    /// Bound on the rounding of the value, whole steps.
    pub rounding: i64,
    /// Stretches of the inverses: the main one, and those below and above the cut.
    pub branches: [Option<Branch>; 3],
    ladders: Ladders,
}

#[derive(Clone, Debug, PartialEq)]
enum Ladders {
    Polynomial([Vec<Rung>; 2]),
    Paired([Vec<Rung>; 4], bool),
}

impl Fixed {
    /// The formula, ready to be evaluated.
    #[must_use]
    pub fn formula(&self) -> fixed::Formula<'_> {
        let form = match &self.ladders {
            Ladders::Polynomial([value, slope]) => fixed::Form::Polynomial { value, slope },
            Ladders::Paired([mean, mean_slope, half_gap_squared, half_gap_squared_slope], upper) => {
                fixed::Form::Paired {
                    mean,
                    mean_slope,
                    half_gap_squared,
                    half_gap_squared_slope,
                    upper: *upper,
                }
            }
        };
        fixed::Formula {
            from: self.from,
            to: self.to,
            origin: self.origin,
            rounding: self.rounding,
            bits: self.control_bits,
            form,
        }
    }
}

impl Loaded {
    /// The formula `formula` as `file` evaluates it.
    ///
    /// # Errors
    /// Words for what the record lacks: it is not one of version 1, it lists no
    /// such file or formula, or the file is in a language without number formats.
    pub fn new(record: &str, file: &str, formula: &str) -> Result<Self, String> {
        let record: Value =
            serde_json::from_str(record).map_err(|error| format!("the record is no JSON: {error}"))?;
        if record.get("record").and_then(Value::as_u64) != Some(1) {
            return Err("this is no record of version 1".into());
        }
        let outputs = record.get("outputs").and_then(Value::as_array);
        let output = outputs
            .and_then(|list| list.iter().find(|o| o.get("file").and_then(Value::as_str) == Some(file)))
            .ok_or_else(|| format!("the record lists no file {file}"))?;
        let entry = output
            .get("formulas")
            .and_then(|formulas| formulas.get(formula))
            .ok_or_else(|| format!("{file} has no formula {formula}"))?;
        let unit = record.pointer(&format!("/formulas/{formula}/unit")).and_then(Value::as_str);
        let at = real(&record, "/control/at")?;
        let numbers = match output.get("number").and_then(Value::as_str) {
            Some("f64") => Numbers::Double(double_from(entry, at)?),
            Some("f32") => Numbers::Single(single_from(entry, at)?),
            Some("fixed") => Numbers::Fixed(fixed_from(entry)?),
            _ => return Err(format!("{file} has no number format")),
        };
        Ok(Self { unit: unit.unwrap_or_default().into(), numbers })
    }
}

fn missing(what: &str) -> String {
    format!("the record has no proper {what}")
}

fn real(value: &Value, path: &str) -> Result<f64, String> {
    value.pointer(path).and_then(Value::as_f64).filter(|x| x.is_finite()).ok_or_else(|| missing(path))
}

fn reals(value: &Value, path: &str) -> Result<Vec<f64>, String> {
    let list = value.pointer(path).and_then(Value::as_array).ok_or_else(|| missing(path))?;
    list.iter()
        .map(|x| x.as_f64().filter(|x| x.is_finite()))
        .collect::<Option<_>>()
        .ok_or_else(|| missing(path))
}

fn whole(value: &Value, path: &str) -> Result<i64, String> {
    value.pointer(path).and_then(Value::as_i64).ok_or_else(|| missing(path))
}

fn wholes(value: &Value, path: &str) -> Result<Vec<i64>, String> {
    let list = value.pointer(path).and_then(Value::as_array).ok_or_else(|| missing(path))?;
    list.iter().map(Value::as_i64).collect::<Option<_>>().ok_or_else(|| missing(path))
}

fn bits(value: &Value, path: &str) -> Result<u32, String> {
    match whole(value, path)? {
        8 => Ok(8),
        16 => Ok(16),
        32 => Ok(32),
        _ => Err(missing(path)),
    }
}

fn double_from(entry: &Value, at: f64) -> Result<Double, String> {
    let paired = entry.pointer("/coefficients/mean").is_some();
    let (main, half_gap_squared) = if paired {
        let gap = reals(entry, "/coefficients/half_gap_squared")?;
        let upper = whole(entry, "/coefficients/sign")? > 0;
        (reals(entry, "/coefficients/mean")?, Some((gap, upper)))
    } else {
        (reals(entry, "/coefficients")?, None)
    };
    Ok(Double {
        from: real(entry, "/valid/from")?,
        to: real(entry, "/valid/to")?,
        at,
        rounding: real(entry, "/rounding")?,
        main,
        half_gap_squared,
    })
}

fn single_from(entry: &Value, at: f64) -> Result<Single, String> {
    let wide = double_from(entry, at)?;
    let narrow = |list: Vec<f64>| list.into_iter().map(|c| c as f32).collect::<Vec<f32>>();
    let near = wide.rounding as f32;
    Ok(Single {
        from: wide.from as f32,
        to: wide.to as f32,
        at: wide.at as f32,
        // The file's own constant is the bound rounded up to the format.
        rounding: if f64::from(near) < wide.rounding { near.next_up() } else { near },
        main: narrow(wide.main),
        half_gap_squared: wide.half_gap_squared.map(|(gap, upper)| (narrow(gap), upper)),
    })
}

fn fixed_from(entry: &Value) -> Result<Fixed, String> {
    let numbers = entry.get("coefficients").ok_or_else(|| missing("coefficients"))?;
    let ladder = |name: &str| -> Result<Vec<Rung>, String> {
        let list = |part: &str| wholes(numbers, &format!("/ladders/{name}/{part}"));
        let (constants, before, shifts) = (list("constants")?, list("before")?, list("shifts")?);
        if constants.len() != before.len() || constants.len() != shifts.len() {
            return Err(missing(name));
        }
        constants
            .into_iter()
            .zip(before)
            .zip(shifts)
            .map(|((constant, before), shift)| {
                let shift = u32::try_from(shift).ok().filter(|s| *s < 64).ok_or_else(|| missing(name))?;
                Ok(Rung { constant, before, shift })
            })
            .collect()
    };
    let branch = |name: &str| -> Result<Option<Branch>, String> {
        let parts = numbers.pointer(&format!("/branches/{name}"));
        let Some(parts) = parts.filter(|p| !p.is_null()) else { return Ok(None) };
        let rising = parts.pointer("/2").and_then(Value::as_bool).ok_or_else(|| missing(name))?;
        Ok(Some(Branch { low: whole(parts, "/0")?, high: whole(parts, "/1")?, rising }))
    };
    let ladders = if numbers.pointer("/ladders/mean").is_some() {
        let all = [
            ladder("mean")?,
            ladder("mean_slope")?,
            ladder("half_gap_squared")?,
            ladder("half_gap_squared_slope")?,
        ];
        Ladders::Paired(all, whole(numbers, "/ladders/sign")? > 0)
    } else {
        Ladders::Polynomial([ladder("value")?, ladder("slope")?])
    };
    Ok(Fixed {
        control_step: real(numbers, "/control_step")?,
        value_step: real(numbers, "/value_step")?,
        control_bits: bits(numbers, "/control_bits")?,
        value_bits: bits(numbers, "/value_bits")?,
        from: whole(numbers, "/from")?,
        to: whole(numbers, "/to")?,
        origin: whole(numbers, "/origin")?,
        rounding: whole(numbers, "/rounding")?,
        branches: [branch("main")?, branch("below")?, branch("above")?],
        ladders,
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    const RECORD: &str = r#"{"record": 1, "control": {"at": 0.1}, "formulas": {"line": {"unit": "THz"}}, "outputs": [
        {"file": "a_f32.c", "number": "f32", "formulas": {"line": {"rounding": 1e-7,
            "coefficients": {"mean": [1.0, 0.5], "half_gap_squared": [0.25, 0.0], "sign": -1},
            "valid": {"from": -1.0, "to": 1.0}}}},
        {"file": "a_fixed.c", "number": "fixed", "formulas": {"line": {"rounding": 1e-3,
            "coefficients": {"control_bits": 16, "value_bits": 32, "control_step": 0.1, "value_step": 1e-3,
                "from": -10, "to": 10, "origin": 1, "rounding": 1,
                "branches": {"main": [-10, 10, true], "below": null, "above": null},
                "ladders": {"value": {"constants": [5, 3], "before": [0, 0], "shifts": [0, 0]},
                            "slope": {"constants": [196608, 0], "before": [0, 0], "shifts": [0, 0]}}},
            "valid": {"from": -1.0, "to": 1.0}}}},
        {"file": "a.va", "number": null, "formulas": {"line": {}}}]}"#;

    #[test]
    fn each_format_is_read_with_its_own_numbers() {
        let one = Loaded::new(RECORD, "a_f32.c", "line").expect("a formula");
        assert_eq!(one.unit, "THz");
        let Numbers::Single(single) = one.numbers else { panic!("singles") };
        assert_eq!(single.formula().value(0.1), 0.5);
        assert!(f64::from(single.rounding) >= 1e-7);
        let Ok(Loaded { numbers: Numbers::Fixed(fixed), .. }) = Loaded::new(RECORD, "a_fixed.c", "line")
        else {
            panic!("counts")
        };
        assert_eq!(fixed.formula().value(3), 11);
        assert_eq!(fixed.formula().checked(11), Err(crate::OutOfRange::Above));
        assert_eq!(fixed.formula().inverse_on(11, &fixed.branches[0].expect("a stretch")), Ok(3));
    }

    #[test]
    fn what_is_not_there_is_said() {
        let says = |record: &str, file: &str, formula: &str, words: &str| {
            let error = Loaded::new(record, file, formula).expect_err("an error");
            assert!(error.contains(words), "{error}");
        };
        says("{", "a_f32.c", "line", "no JSON");
        says("{}", "a_f32.c", "line", "version 1");
        says(RECORD, "b.c", "line", "no file b.c");
        says(RECORD, "a_f32.c", "edge", "no formula edge");
        says(RECORD, "a.va", "line", "no number format");
        says(&RECORD.replace("1e-7", "\"x\""), "a_f32.c", "line", "/rounding");
        says(&RECORD.replace("\"shifts\": [0, 0]", "\"shifts\": [0, 64]"), "a_fixed.c", "line", "value");
    }
}
