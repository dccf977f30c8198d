/// Why there is no answer.
#[allow(dead_code)]
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum OutOfRange {
    /// The control lies below the range.
    Below,
    /// The control lies above the range.
    Above,
    /// An argument is not a number.
    NotANumber,
    /// The formula does not reach the value on this branch.
    NoSolution,
    /// A family parameter lies outside its box.
    OutsideFamily,
}

/// SHA-256 of the spec.
#[allow(dead_code)]
pub const SPEC_SHA256: &str = "{{ sha256 }}";
{% macro parameters() %}{% for p in family %}, {{ p.name }}: f64{% endfor %}{% endmacro %}
{% macro passed() %}{% for p in family %}, {{ p.name }}{% endfor %}{% endmacro %}
{% macro normalised() %}{% for p in family %}let {{ p.t }} = ({{ p.name }} - {{ p.middle }}) / {{ p.half }};{% endfor %}{% endmacro %}
{% macro nothing() %}let _ = ({% for p in family %}{{ p.t }}, {% endfor %}d,);{% endmacro %}
{% for f in formulas %}

/// The formula `{{ f.name }}` in {{ f.unit }}, its control in {{ f.control_unit }}.
#[allow(dead_code, unused_parens, clippy::unreadable_literal, clippy::excessive_precision, clippy::suboptimal_flops, clippy::similar_names, clippy::many_single_char_names)]
pub mod {{ f.name }} {
    use super::OutOfRange;
    /// Lower end of the range, in {{ f.control_unit }}; it holds over the whole box.
    pub const FROM: f64 = {{ f.from }};
    /// Upper end of the range, in {{ f.control_unit }}.
    pub const TO: f64 = {{ f.to }};
    /// Operating point, in {{ f.control_unit }}.
    pub const AT: f64 = {{ f.at }};
    /// Level at the operating point and the centre of the box, in {{ f.unit }}.
    pub const E0: f64 = {{ f.e0 }};
    /// Bound on the rounding of [`value`], in {{ f.unit }}.
    pub const ROUNDING: f64 = {{ f.rounding }};
{% for p in family %}
    /// Lower end of the box in {{ p.spec }}, in {{ p.unit }}.
    pub const {{ p.upper }}_FROM: f64 = {{ p.from }};
    /// Upper end of the box in {{ p.spec }}, in {{ p.unit }}.
    pub const {{ p.upper }}_TO: f64 = {{ p.to }};
{% endfor %}
    /// The formula, no check.
    #[must_use]
    pub fn value({{ argument }}: f64{{ parameters() }}) -> f64 {
        {{ normalised() }}
        let d = {{ argument }} - AT;
{% for c in f.coefficients %}{% if not c.zero %}
        let c{{ c.power }} = {{ c.value }};
{% endif %}{% endfor %}
        {{ nothing() }}
        {{ f.value }}
    }
    /// Derivative of [`value`] with respect to the control, no check.
    #[must_use]
    pub fn slope({{ argument }}: f64{{ parameters() }}) -> f64 {
        {{ normalised() }}
        let d = {{ argument }} - AT;
{% for c in f.coefficients %}
{% if c.power > 0 and not c.zero %}
        let c{{ c.power }} = {{ c.value }};
{% endif %}
{% endfor %}
        {{ nothing() }}
        {{ f.slope }}
    }
{% for p in family %}
    /// Derivative of [`value`] with respect to {{ p.spec }}, no check.
    #[must_use]
    pub fn slope_{{ p.spec }}({{ argument }}: f64{{ parameters() }}) -> f64 {
        {{ normalised() }}
        let d = {{ argument }} - AT;
{% for c in f.coefficients %}
{% if not c.zero %}
        let c{{ c.power }} = {{ c.slopes[p.axis] }};
{% endif %}
{% endfor %}
        {{ nothing() }}
        ({{ f.value }}) / {{ p.half }}
    }
{% endfor %}
    /// The formula inside its range and box, whose ends belong to them.
    ///
    /// # Errors
    ///
    /// `NotANumber`, `OutsideFamily`, `Below` or `Above`.
    pub fn checked({{ argument }}: f64{{ parameters() }}) -> Result<f64, OutOfRange> {
        refused({{ argument }}{{ passed() }})?;
        if {{ argument }} < FROM {
            Err(OutOfRange::Below)
        } else if {{ argument }} > TO {
            Err(OutOfRange::Above)
        } else {
            Ok(value({{ argument }}{{ passed() }}))
        }
    }
    /// The formula for many controls, as many as the shorter slice holds; no check.
    pub fn many({{ argument }}: &[f64]{{ parameters() }}, value: &mut [f64]) {
        for (value, &{{ argument }}) in value.iter_mut().zip({{ argument }}) {
            *value = self::value({{ argument }}{{ passed() }});
        }
    }
    /// Control at which the formula gives `value`, on the stretch of the range that holds the operating point.
    ///
    /// # Errors
    ///
    /// `NotANumber`, `OutsideFamily` or `NoSolution`.
    pub fn inverse(value: f64{{ parameters() }}) -> Result<f64, OutOfRange> {
        refused(value{{ passed() }})?;
        let slope = slope(AT{{ passed() }});
        let low = if slope > 0.0 || slope < 0.0 { turn(FROM{{ passed() }}) } else { AT };
        on(value{{ passed() }}, low, turn(TO{{ passed() }}))
    }
{% if f.both %}
    /// As [`inverse`], on the stretch below the turning point, which is the operating point.
    ///
    /// # Errors
    ///
    /// `NotANumber`, `OutsideFamily` or `NoSolution`.
    pub fn inverse_below(value: f64{{ parameters() }}) -> Result<f64, OutOfRange> {
        refused(value{{ passed() }})?;
        on(value{{ passed() }}, turn(FROM{{ passed() }}), AT)
    }
    /// As [`inverse`], on the stretch above it.
    ///
    /// # Errors
    ///
    /// `NotANumber`, `OutsideFamily` or `NoSolution`.
    pub fn inverse_above(value: f64{{ parameters() }}) -> Result<f64, OutOfRange> {
        refused(value{{ passed() }})?;
        on(value{{ passed() }}, AT, turn(TO{{ passed() }}))
    }
{% endif %}
    fn refused(x: f64{{ parameters() }}) -> Result<(), OutOfRange> {
        if x.is_nan(){% for p in family %} || {{ p.name }}.is_nan(){% endfor %} {
            Err(OutOfRange::NotANumber)
        } else if {% for p in family %}{{ p.name }} < {{ p.upper }}_FROM || {{ p.name }} > {{ p.upper }}_TO{% if not loop.last %} || {% endif %}{% endfor %} {
            Err(OutOfRange::OutsideFamily)
        } else {
            Ok(())
        }
    }
    /// The nearest zero of the slope from the operating point towards an end of the range, or that end.
    fn turn(end: f64{{ parameters() }}) -> f64 {
        let step = (end - AT) / {{ looks }}.0;
        let mut low;
        let mut high = AT + 0.001 * step;
        let rises = slope(high{{ passed() }}) > 0.0;
        for k in 1..={{ looks }}u8 {
            low = high;
            high = if k == {{ looks }} { end } else { AT + f64::from(k) * step };
            if (slope(high{{ passed() }}) > 0.0) != rises {
                for _ in 0..{{ halvings }} {
                    let middle = 0.5 * (low + high);
                    if (slope(middle{{ passed() }}) > 0.0) == rises { low = middle; } else { high = middle; }
                }
                return 0.5 * (low + high);
            }
        }
        end
    }
    /// The control of a value on a stretch on which the formula rises or falls.
    fn on(value: f64{{ parameters() }}, from: f64, to: f64) -> Result<f64, OutOfRange> {
        let first = self::value(from{{ passed() }});
        let last = self::value(to{{ passed() }});
        let rising = last > first;
        let (bottom, top) = if rising { (first, last) } else { (last, first) };
        if value >= top {
            if value <= top + ROUNDING { Ok(if rising { to } else { from }) } else { Err(OutOfRange::NoSolution) }
        } else if value > bottom {
            let (mut low, mut high) = (from, to);
            for _ in 0..{{ halvings }} {
                let middle = 0.5 * (low + high);
                if (self::value(middle{{ passed() }}) < value) == rising { low = middle; } else { high = middle; }
            }
            let mut x = 0.5 * (low + high);
            for _ in 0..{{ newton }} {
                let slope = slope(x{{ passed() }});
                if slope > 0.0 || slope < 0.0 {
                    let next = x + (value - self::value(x{{ passed() }})) / slope;
                    x = if next < low { low } else if next > high { high } else { next };
                }
            }
            Ok(x)
        } else if value >= bottom - ROUNDING {
            Ok(if rising { from } else { to })
        } else if value < bottom {
            Err(OutOfRange::NoSolution)
        } else {
            Err(OutOfRange::NotANumber)
        }
    }
}
{% endfor %}
