//! Unit symbols: the table, and products of their powers.

use super::constants::{ATOMIC_MASS, BOHR, ELEMENTARY_CHARGE, HARTREE, PLANCK, SPEED_OF_LIGHT};
use super::{Dimension, Fault, Unit, suggest};

/// Longest text that can be a unit, in bytes.
const LONGEST: usize = 200;

/// Largest power that is written at a symbol.
const HIGHEST_POWER: i32 = 99;

struct Symbol {
    text: &'static str,
    dimension: Dimension,
    mantissa: f64,
    exponent: i32,
    prefixed: bool,
}

const fn si(text: &'static str, exponents: [i32; 7]) -> Symbol {
    Symbol { text, dimension: Dimension::whole(exponents), mantissa: 1.0, exponent: 0, prefixed: true }
}

const fn other(
    text: &'static str,
    exponents: [i32; 7],
    mantissa: f64,
    exponent: i32,
    prefixed: bool,
) -> Symbol {
    Symbol { text, dimension: Dimension::whole(exponents), mantissa, exponent, prefixed }
}

/// All symbols; exponents of m, kg, s, A, K, mol, cd. Commoner ones first, which
/// decides between equally near suggestions.
///
/// Source of the SI symbols: BIPM, *The International System of Units*, 9th
/// ed., tables 2 and 4; of the others: [`super::constants`].
static SYMBOLS: [Symbol; 40] = [
    si("m", [1, 0, 0, 0, 0, 0, 0]),
    other("eV", [2, 1, -2, 0, 0, 0, 0], ELEMENTARY_CHARGE, -19, true),
    si("V", [2, 1, -3, -1, 0, 0, 0]),
    si("T", [0, 1, -2, -1, 0, 0, 0]),
    si("Hz", [0, 0, -1, 0, 0, 0, 0]),
    si("K", [0, 0, 0, 0, 1, 0, 0]),
    si("s", [0, 0, 1, 0, 0, 0, 0]),
    si("A", [0, 0, 0, 1, 0, 0, 0]),
    si("J", [2, 1, -2, 0, 0, 0, 0]),
    si("C", [0, 0, 1, 1, 0, 0, 0]),
    other("g", [0, 1, 0, 0, 0, 0, 0], 1.0, -3, true),
    si("N", [1, 1, -2, 0, 0, 0, 0]),
    si("Pa", [-1, 1, -2, 0, 0, 0, 0]),
    si("W", [2, 1, -3, 0, 0, 0, 0]),
    si("F", [-2, -1, 4, 2, 0, 0, 0]),
    si("\u{3a9}", [2, 1, -3, -2, 0, 0, 0]),
    si("\u{2126}", [2, 1, -3, -2, 0, 0, 0]),
    si("ohm", [2, 1, -3, -2, 0, 0, 0]),
    si("Ohm", [2, 1, -3, -2, 0, 0, 0]),
    si("S", [-2, -1, 3, 2, 0, 0, 0]),
    si("Wb", [2, 1, -2, -1, 0, 0, 0]),
    si("H", [2, 1, -2, -2, 0, 0, 0]),
    si("rad", [0; 7]),
    si("sr", [0; 7]),
    si("mol", [0, 0, 0, 0, 0, 1, 0]),
    si("cd", [0, 0, 0, 0, 0, 0, 1]),
    si("lm", [0, 0, 0, 0, 0, 0, 1]),
    si("lx", [-2, 0, 0, 0, 0, 0, 1]),
    si("Bq", [0, 0, -1, 0, 0, 0, 0]),
    si("Gy", [2, 0, -2, 0, 0, 0, 0]),
    si("Sv", [2, 0, -2, 0, 0, 0, 0]),
    si("kat", [0, 0, -1, 0, 0, 1, 0]),
    other("G", [0, 1, -2, -1, 0, 0, 0], 1.0, -4, true),
    other("D", [1, 0, 1, 1, 0, 0, 0], 1.0 / SPEED_OF_LIGHT, -29, true),
    other("u", [0, 1, 0, 0, 0, 0, 0], ATOMIC_MASS, -27, false),
    other("deg", [0; 7], std::f64::consts::PI / 1.8, -2, false),
    other("Eh", [2, 1, -2, 0, 0, 0, 0], HARTREE, -18, false),
    other("a0", [1, 0, 0, 0, 0, 0, 0], BOHR, -11, false),
    other("Phi0", [2, 1, -2, -1, 0, 0, 0], PLANCK / (2.0 * ELEMENTARY_CHARGE), -15, false),
    // The pure number stands among the symbols so that `1/s` needs no rule of its own.
    other("1", [0; 7], 1.0, 0, false),
];

/// SI prefixes, commoner ones first.
static PREFIXES: [(&str, i32); 26] = [
    ("k", 3),
    ("m", -3),
    ("u", -6),
    ("\u{b5}", -6),
    ("\u{3bc}", -6),
    ("n", -9),
    ("M", 6),
    ("G", 9),
    ("p", -12),
    ("f", -15),
    ("c", -2),
    ("T", 12),
    ("d", -1),
    ("da", 1),
    ("h", 2),
    ("a", -18),
    ("z", -21),
    ("y", -24),
    ("r", -27),
    ("q", -30),
    ("P", 15),
    ("E", 18),
    ("Z", 21),
    ("Y", 24),
    ("R", 27),
    ("Q", 30),
];

/// Words that people write for a symbol.
static WORDS: [(&str, &str); 24] = [
    ("angstrom", "0.1 nm"),
    ("\u{c5}", "0.1 nm"),
    ("\u{212b}", "0.1 nm"),
    ("micron", "um"),
    ("meter", "m"),
    ("metre", "m"),
    ("volt", "V"),
    ("tesla", "T"),
    ("gauss", "G"),
    ("kelvin", "K"),
    ("hertz", "Hz"),
    ("joule", "J"),
    ("debye", "D"),
    ("Debye", "D"),
    ("hartree", "Eh"),
    ("Ha", "Eh"),
    ("bohr", "a0"),
    ("amu", "u"),
    ("Da", "u"),
    ("degree", "deg"),
    ("electronvolt", "eV"),
    ("phi0", "Phi0"),
    ("min", "60 s"),
    ("Ry", "0.5 Eh"),
];

/// The symbol read whole, else as prefix and symbol; with the prefix's power.
fn look_up(text: &str) -> Option<(&'static Symbol, i32)> {
    if let Some(symbol) = SYMBOLS.iter().find(|symbol| symbol.text == text) {
        return Some((symbol, 0));
    }
    PREFIXES.iter().find_map(|(prefix, power)| {
        let rest = text.strip_prefix(prefix)?;
        SYMBOLS.iter().find(|symbol| symbol.prefixed && symbol.text == rest).map(|symbol| (symbol, *power))
    })
}

/// What to write in place of an unknown symbol.
fn advice(text: &str) -> String {
    if let Some((_, instead)) =
        WORDS.iter().find(|(word, _)| *word == text || text.strip_suffix('s') == Some(word))
    {
        return format!("write `{instead}`");
    }
    let mut known: Vec<String> = SYMBOLS.iter().map(|symbol| symbol.text.to_owned()).collect();
    for symbol in SYMBOLS.iter().filter(|symbol| symbol.prefixed) {
        known.extend(PREFIXES.iter().map(|(prefix, _)| format!("{prefix}{}", symbol.text)));
    }
    match suggest::nearest(text, known.iter().map(String::as_str)) {
        Some(near) => format!("write `{near}`, if that is meant"),
        None => {
            "use an SI symbol, with an SI prefix or without, or eV, D, G, u, deg, Eh, a0, Phi0, 1".to_owned()
        }
    }
}

fn syntax(span: std::ops::Range<usize>, message: impl Into<String>) -> Fault {
    Fault::new("unit-syntax", span, message)
        .expected("symbols joined by `*` and `/`, with whole powers after `^`, such as `kV/cm` or `Hz/T^2`")
}

/// The product so far.
struct Product {
    dimension: Dimension,
    mantissa: f64,
    exponent: i32,
}

impl Product {
    fn multiply(&mut self, symbol: &Symbol, prefix: i32, power: i32) -> Option<()> {
        self.dimension = self.dimension.times(symbol.dimension.power(i64::from(power), 1)?)?;
        let one = symbol.exponent.checked_add(prefix)?.checked_mul(power)?;
        self.exponent = self.exponent.checked_add(one)?;
        for _ in 0..power.unsigned_abs() {
            // Most symbols have mantissa 1; the branch keeps the others' products exact where they cancel.
            if power > 0 {
                self.mantissa *= symbol.mantissa;
            } else {
                self.mantissa /= symbol.mantissa;
            }
        }
        (self.mantissa.is_finite() && self.mantissa > 1e-200 && self.exponent.abs() < 10_000).then_some(())
    }
}

/// See [`Unit::parse`].
pub(super) fn parse(text: &str) -> Result<Unit, Fault> {
    let trimmed = text.trim();
    let start = text.len() - text.trim_start().len();
    if trimmed.is_empty() {
        return Err(syntax(0..text.len(), "a unit is missing").action("write `1` for a pure number"));
    }
    if trimmed.len() > LONGEST {
        return Err(syntax(0..text.len(), "the unit is too long")
            .found(format!("{} bytes", trimmed.len()))
            .expected(format!("at most {LONGEST}")));
    }
    let mut product = Product { dimension: Dimension::NONE, mantissa: 1.0, exponent: 0 };
    let mut rest = trimmed;
    let mut sign = 1;
    loop {
        let place = start + trimmed.len() - rest.len();
        let length = symbol_length(rest);
        let name = &rest[..length];
        if name.is_empty() {
            let (span, found) = next_character(rest, place);
            return Err(syntax(span, "a unit symbol is missing here").found(found));
        }
        let Some((symbol, prefix)) = look_up(name) else {
            return Err(unknown(name, place));
        };
        rest = rest[length..].trim_start();
        let mut power = 1;
        if let Some(after) = rest.strip_prefix('^') {
            let place = start + trimmed.len() - after.len();
            let length = after.len()
                - after.trim_start_matches(['-', '+']).trim_start_matches(|c: char| c.is_ascii_digit()).len();
            power = after[..length]
                .parse::<i32>()
                .ok()
                .filter(|power| power.abs() <= HIGHEST_POWER)
                .ok_or_else(|| {
                    let (mut span, mut found) = next_character(after, place);
                    if length > 0 {
                        span = place..place + length;
                        found = format!("`{}`", &after[..length]);
                    }
                    syntax(span, format!("a whole power of at most {HIGHEST_POWER} is expected after `^`"))
                        .found(found)
                })?;
            rest = after[length..].trim_start();
        }
        if product.multiply(symbol, prefix, sign * power).is_none() {
            return Err(syntax(start..start + trimmed.len(), "the powers in this unit are too high"));
        }
        if rest.is_empty() {
            break;
        }
        sign = if let Some(after) = rest.strip_prefix('*') {
            rest = after.trim_start();
            1
        } else if let Some(after) = rest.strip_prefix('/') {
            rest = after.trim_start();
            -1
        } else {
            let (span, found) = next_character(rest, start + trimmed.len() - rest.len());
            return Err(syntax(span, "`*`, `/` or `^` is expected here")
                .found(found)
                .action("write `a/b/c` or `a/b*c^-1` for a over b and c; brackets are not used in units"));
        };
    }
    Ok(Unit {
        symbol: trimmed.to_owned(),
        dimension: product.dimension,
        mantissa: product.mantissa,
        exponent: product.exponent,
    })
}

fn unknown(name: &str, place: usize) -> Fault {
    Fault::new("unknown-unit", place..place + name.len(), format!("`{name}` is no known unit"))
        .found(format!("`{name}`"))
        .action(advice(name))
}

/// Bytes of the symbol at the start: a lone `1`, or a letter with the letters
/// and digits that follow.
fn symbol_length(text: &str) -> usize {
    let first = text.chars().next();
    if first.is_some_and(|c| c.is_ascii_digit()) {
        return text.find(|c: char| !c.is_alphanumeric() && c != '.').unwrap_or(text.len());
    }
    text.find(|c: char| !c.is_alphanumeric()).unwrap_or(text.len())
}

fn next_character(text: &str, place: usize) -> (std::ops::Range<usize>, String) {
    match text.chars().next() {
        Some(c) => (place..place + c.len_utf8(), format!("`{}`", c.escape_debug())),
        None => (place..place, "the end of the text".to_owned()),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::units::decimal;
    use proptest::prelude::*;

    /// Size in SI units.
    fn size(text: &str) -> f64 {
        let unit = parse(text).unwrap();
        decimal::shift(unit.mantissa, unit.exponent)
    }

    #[test]
    fn symbols_read_whole_first_then_with_a_prefix() {
        assert_eq!(size("cd"), 1.0);
        assert_eq!(size("Pa"), 1.0);
        assert_eq!(size("u"), 1.66053906892e-27);
        assert_eq!(size("um"), 1e-6);
        assert_eq!(size("\u{b5}m"), 1e-6);
        assert_eq!(size("\u{3bc}eV"), 1.602176634e-25);
        assert_eq!(size("mT"), 1e-3);
        assert_eq!(size("kg"), 1.0);
        assert_eq!(size("kG"), 0.1);
        assert_eq!(size("dam"), 10.0);
        assert!((size("D") / (1e-21 / 299_792_458.0) - 1.0).abs() < 3e-16);
        assert!((size("mD") / (1e-24 / 299_792_458.0) - 1.0).abs() < 3e-16);
        assert!((size("deg") / 0.017_453_292_519_943_295 - 1.0).abs() < 3e-16);
    }

    #[test]
    fn products_and_powers_combine() {
        assert_eq!(size("kV/cm"), 1e5);
        assert_eq!(size("MHz/mT"), 1e9);
        assert_eq!(size("cm^-1"), 100.0);
        assert_eq!(size("Hz / T ^2"), 1.0);
        assert_eq!(size("V/m/s"), size("V/m*s^-1"));
        assert_eq!(parse("V*A").unwrap().dimension, parse("J/s").unwrap().dimension);
        assert_eq!(parse("1/s").unwrap().dimension, Dimension::FREQUENCY);
        assert_eq!(parse("Wb").unwrap().dimension, parse("Phi0").unwrap().dimension);
        assert_eq!(parse("meV/(kV/cm)").unwrap_err().code, "unit-syntax");
    }

    #[test]
    fn unknown_symbols_name_the_nearest() {
        let of = |text: &str| parse(text).unwrap_err();
        assert_eq!(of("kv/cm").action.as_deref().unwrap(), "write `kV`, if that is meant");
        assert_eq!(of("kV/cn").span, 3..5);
        assert_eq!(of("mev").action.as_deref().unwrap(), "write `meV`, if that is meant");
        assert_eq!(of("kEh").code, "unknown-unit");
        assert_eq!(of("mdeg").code, "unknown-unit");
        assert_eq!(of("volts").action.as_deref().unwrap(), "write `V`");
        assert_eq!(of("2*m").code, "unknown-unit");
        assert_eq!(of("m^0.5").code, "unit-syntax");
        assert_eq!(of("m^").span, 2..2);
        assert_eq!(of("m^100").code, "unit-syntax");
        assert_eq!(of("").code, "unit-syntax");
        assert_eq!(of("m m").span, 2..3);
        assert_eq!(of(&"m*".repeat(5000)).code, "unit-syntax");
        assert_eq!(of("Ym^99*Ym^99*Ym^99*Ym^99*Ym^99").code, "unit-syntax");
    }

    proptest! {
        #[test]
        fn any_text_is_read_or_refused_with_a_span_inside(text in "\\PC{0,40}") {
            if let Err(fault) = parse(&text) {
                prop_assert!(text.get(fault.span.clone()).is_some(), "{:?}", fault.span);
            }
        }

        #[test]
        fn unit_like_text_is_read_or_refused_with_a_span_inside(text in "[mkgVTeu\u{b5}/*^ 0-9-]{0,24}") {
            if let Err(fault) = parse(&text) {
                prop_assert!(text.get(fault.span.clone()).is_some(), "{:?}", fault.span);
            }
        }
    }
}
