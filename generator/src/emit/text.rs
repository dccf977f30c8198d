//! Words and numbers as every language prints them.

/// Longest piece of a spec's text that goes into a comment, in characters.
const LONGEST: usize = 240;

/// Text of the spec made safe for a comment of any language: one line, nothing
/// that ends or opens a comment, no trigraph, no invisible or reordering marks.
#[must_use]
pub fn plain(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    let mut count = 0;
    let mut last = ' ';
    for c in text.chars() {
        if count == LONGEST {
            out.push_str("...");
            break;
        }
        let c = match c {
            // A backslash at the end of a line would join it to the next.
            '\\' => '|',
            '\u{ad}'
            | '\u{34f}'
            | '\u{61c}'
            | '\u{115f}'..='\u{1160}'
            | '\u{180b}'..='\u{180f}'
            | '\u{200b}'..='\u{200f}'
            | '\u{2028}'..='\u{202f}'
            | '\u{2060}'..='\u{206f}'
            | '\u{3164}'
            | '\u{fe00}'..='\u{fe0f}'
            | '\u{feff}'
            | '\u{ffa0}'
            | '\u{fff0}'..='\u{ffff}'
            | '\u{e0000}'..='\u{e0fff}' => ' ',
            c if c.is_control() || c.is_whitespace() => ' ',
            c => c,
        };
        if c == ' ' && last == ' ' {
            continue;
        }
        if matches!((last, c), ('*', '/') | ('/', '*') | ('?', '?') | ('/', '/')) {
            out.push(' ');
        }
        out.push(c);
        last = c;
        count += 1;
    }
    out.trim_end().to_owned()
}

/// A real number as a hand would write it: no exponent between 1e-5 and 1e15.
#[must_use]
pub fn real(value: f64) -> String {
    written(value.abs(), &format!("{:e}", value.abs()), value.is_sign_negative())
}

/// A single-precision number, held as a double.
#[must_use]
pub fn real_single(value: f64) -> String {
    written(value.abs(), &format!("{:e}", value.abs() as f32), value.is_sign_negative())
}

/// `scientific` holds the shortest digits that read back exactly.
fn written(size: f64, scientific: &str, negative: bool) -> String {
    let body = match scientific.split_once('e') {
        Some((mantissa, exponent)) if size == 0.0 || (1e-5..1e15).contains(&size) => {
            let digits: String = mantissa.chars().filter(char::is_ascii_digit).collect();
            let point = exponent.parse::<i32>().unwrap_or(0) + 1;
            decimal(&digits, point)
        }
        _ if scientific.contains('.') => scientific.to_owned(),
        _ => scientific.replace('e', ".0e"),
    };
    if negative { format!("-{body}") } else { body }
}

/// Digits with the point after the first `point` of them.
fn decimal(digits: &str, point: i32) -> String {
    if point <= 0 {
        return format!("0.{}{digits}", "0".repeat(point.unsigned_abs() as usize));
    }
    let point = point as usize;
    if digits.len() <= point {
        format!("{digits}{}.0", "0".repeat(point - digits.len()))
    } else {
        let (whole, rest) = digits.split_at(point);
        format!("{whole}.{rest}")
    }
}

/// An error or a bound with two significant digits.
#[must_use]
pub fn rough(value: f64) -> String {
    if value == 0.0 {
        return "0".to_owned();
    }
    if (1e-3..1e5).contains(&value.abs()) {
        let digits = (1 - libm::floor(libm::log10(value.abs())) as i32).max(0) as usize;
        format!("{value:.digits$}")
    } else {
        format!("{value:.1e}")
    }
}

/// ` meV`, or nothing for a pure number.
#[must_use]
pub fn unit_after(unit: &str) -> String {
    if unit == "1" { String::new() } else { format!(" {}", plain(unit)) }
}

/// `meV`, or words for a pure number.
#[must_use]
pub fn unit_name(unit: &str) -> String {
    if unit == "1" { "a pure number".to_owned() } else { plain(unit) }
}

/// Unit of the coefficient of `d^power`.
#[must_use]
pub fn coefficient_unit(unit: &str, control: &str, power: usize) -> String {
    let control =
        if control.contains(['/', '*', '^']) { format!("({})", plain(control)) } else { plain(control) };
    match (power, unit, control.as_str()) {
        (0, ..) => unit_name(unit),
        (_, _, "1") => unit_name(unit),
        (1, ..) => format!("{}/{control}", plain(unit)),
        _ => format!("{}/{control}^{power}", plain(unit)),
    }
}

/// Breaks a paragraph into lines of at most `width` characters.
#[must_use]
pub fn wrap(text: &str, width: usize) -> Vec<String> {
    let mut lines = Vec::new();
    let mut line = String::new();
    for word in text.split(' ').filter(|w| !w.is_empty()) {
        if !line.is_empty() && line.chars().count() + 1 + word.chars().count() > width {
            lines.push(std::mem::take(&mut line));
        }
        if !line.is_empty() {
            line.push(' ');
        }
        line.push_str(word);
    }
    if !line.is_empty() {
        lines.push(line);
    }
    lines
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_read_back_to_the_same_bits() {
        let list = [
            1458.934408104531,
            -0.0005459111401161,
            1e-10,
            5e-324,
            f64::MAX,
            0.1,
            60.0,
            1e15,
            123456789012345.0,
            1e-5,
            9.99e-6,
            0.0,
            2.5e300,
        ];
        for value in list {
            let text = real(value);
            assert_eq!(text.parse::<f64>().map(f64::to_bits), Ok(value.to_bits()), "{text}");
            assert!(text.contains('.'), "{text}");
        }
        for value in [0.1_f32, 1458.9344, 1e-30, 3.4e38, -60.0, 16777216.0] {
            let text = real_single(f64::from(value));
            assert_eq!(text.parse::<f32>().map(f32::to_bits), Ok(value.to_bits()), "{text}");
        }
        assert_eq!(real(1458.934408104531), "1458.934408104531");
        assert_eq!(real(-0.0005459111401161), "-0.0005459111401161");
        assert_eq!(real(60.0), "60.0");
        assert_eq!(real(1e-10), "1.0e-10");
    }

    #[test]
    fn text_of_the_spec_cannot_leave_its_comment() {
        let hostile = "a */ int x; /* b ??/ c \\\n#error\r\u{202e}d\u{2028}// e *\u{0}/ f";
        let safe = plain(hostile);
        for bad in ["*/", "/*", "??", "\\", "\n", "\r", "\u{202e}", "\u{2028}", "\u{0}", "//"] {
            assert!(!safe.contains(bad), "{safe:?} holds {bad:?}");
        }
        assert!(plain(&"x".repeat(5000)).len() < 300);
    }

    #[test]
    fn errors_show_two_digits() {
        assert_eq!(rough(0.0120345), "0.012");
        assert_eq!(rough(4.44e-13), "4.4e-13");
        assert_eq!(rough(0.5), "0.50");
        assert_eq!(rough(123.4), "123");
    }
}
