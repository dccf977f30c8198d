//! Rust modules of fixed-point formulas.

use super::*;
use crate::formula::{Fixed, FixedForm, Ladder};
use shiftwright_runtime::fixed::{Branch, Rung};

fn whole(value: i64) -> TokenStream {
    let literal = Literal::u64_unsuffixed(value.unsigned_abs());
    if value < 0 {
        quote! { -#literal }
    } else {
        quote! { #literal }
    }
}

fn real_number(value: f64) -> Result<TokenStream> {
    let literal: Literal = real(value.abs()).parse().map_err(Error::internal)?;
    Ok(if value.is_sign_negative() {
        quote! { -#literal }
    } else {
        quote! { #literal }
    })
}

/// Constants of a ladder: coefficients, what is added before the shifts, shifts.
fn constants(
    ladder: &Ladder,
    prefix: &str,
    what: &str,
    unit: &str,
    ty: &str,
    public: bool,
) -> Result<TokenStream> {
    let n = ladder.rungs.len();
    let list = |f: &dyn Fn(&Rung) -> i64| ladder.rungs.iter().map(|r| whole(f(r))).collect::<Vec<_>>();
    let coefficients = list(&|r| r.constant);
    let name = if prefix.is_empty() { "COEFFICIENTS".to_owned() } else { prefix.to_owned() };
    let part =
        |word: &str| ident(&if prefix.is_empty() { word.to_owned() } else { format!("{prefix}_{word}") });
    let (name, ty) = (ident(&name), ident(ty));
    let visible = if public {
        quote! { pub }
    } else {
        quote! {}
    };
    let about = doc(&format!("{what} by rising power of the count, scaled by the shifts below; {unit}."));
    let mut out = quote! { #about #visible const #name: [#ty; #n] = [#(#coefficients),*]; };
    if n > 1 {
        let m = n - 1;
        let (before, shifts) = (list(&|r| r.before), list(&|r| i64::from(r.shift)));
        let (before, shifts) = (before.get(..m).unwrap_or(&[]), shifts.get(..m).unwrap_or(&[]));
        let (before_name, shift_name) = (part("BEFORE"), part("SHIFTS"));
        out.extend(quote! {
            #[doc = " Added before each shift: half a unit, for rounding to nearest, and a fraction of the coefficient."]
            #visible const #before_name: [#ty; #m] = [#(#before),*];
            #[doc = " Bits shifted out after each product."]
            #visible const #shift_name: [u32; #m] = [#(#shifts),*];
        });
    }
    Ok(out)
}

/// A ladder climbed from `k`: statements, the last expression, and whether `k` occurs.
struct Climb {
    steps: TokenStream,
    last: TokenStream,
    counts: bool,
}

fn climb(ladder: &Ladder, prefix: &str) -> Result<Climb> {
    let used =
        ladder.rungs.iter().rposition(|r| *r != Rung { constant: 0, before: 0, shift: 0 }).unwrap_or(0);
    let name = |word: &str| if prefix.is_empty() { word.to_owned() } else { format!("{prefix}_{word}") };
    let coefficients = if prefix.is_empty() { "COEFFICIENTS" } else { prefix };
    let mut steps = String::new();
    let mut last = format!("{coefficients}[{used}]");
    for (power, rung) in ladder.rungs.iter().enumerate().take(used).rev() {
        let sum = if power + 1 == used {
            last
        } else {
            steps.push_str(&format!("let sum = {last};"));
            "sum".to_owned()
        };
        let bare = rung.constant == 0;
        let shifted = match (rung.shift, bare) {
            (0, _) => format!("k * {sum}"),
            (_, true) => format!("(k * {sum} + {}[{power}]) >> {}[{power}]", name("BEFORE"), name("SHIFTS")),
            (_, false) => {
                format!("((k * {sum} + {}[{power}]) >> {}[{power}])", name("BEFORE"), name("SHIFTS"))
            }
        };
        last = if bare { shifted } else { format!("{coefficients}[{power}] + {shifted}") };
    }
    Ok(Climb { steps: tokens(&steps)?, last: tokens(&last)?, counts: used > 0 })
}

/// One formula's module.
pub(super) fn module(outcome: &Outcome, formula: &Formula, fixed: &Fixed) -> Result<TokenStream> {
    let measured = &formula.measured;
    let (unit, control_unit) = (unit_name(&measured.unit), unit_name(&outcome.control.unit));
    let (x, y) = (format!("i{}", fixed.control_bits), format!("i{}", fixed.value_bits));
    let work = if fixed.wide { "i64" } else { "i32" };
    let argument = ident(&arguments(&outcome.control.symbol));
    let name = ident(&measured.name);
    let about = doc(&format!(
        "The formula `{}`, its value in steps of {} {unit}, its control in steps of {} {control_unit}.",
        measured.name,
        real(fixed.value_step),
        real(fixed.control_step)
    ));
    let imports = if fixed.roots() {
        quote! { use super::{OutOfRange, quotient, root}; }
    } else {
        quote! { use super::OutOfRange; }
    };
    let ends = ends(outcome, formula, fixed, &x, &y, work)?;
    let numbers = numbers(fixed, work)?;
    let bodies = bodies(fixed, &x, &y, work, &argument)?;
    let inverses = inverses(fixed, &x, &y)?;
    let (x, y) = (ident(&x), ident(&y));
    let module = quote! {
        #about
        #[allow(dead_code, clippy::unreadable_literal, clippy::cast_possible_truncation, clippy::unnecessary_cast)]
        pub mod #name {
            #imports
            #ends
            #numbers
            #bodies
            #[doc = " The formula inside its range, whose ends belong to it."]
            #[doc = ""]
            #[doc = " # Errors"]
            #[doc = ""]
            #[doc = " `Below` or `Above`."]
            pub fn checked(#argument: #x) -> Result<#y, OutOfRange> {
                if #argument < FROM {
                    Err(OutOfRange::Below)
                } else if #argument > TO {
                    Err(OutOfRange::Above)
                } else {
                    Ok(value(#argument))
                }
            }
            #[doc = " The formula for many controls, as many as the shorter slice holds."]
            pub fn many(#argument: &[#x], value: &mut [#y]) {
                for (value, &#argument) in value.iter_mut().zip(#argument) {
                    *value = self::value(#argument);
                }
            }
            #inverses
        }
    };
    // Array lengths print without their type.
    tokens(&module.to_string().replace("usize", ""))
}

fn ends(
    outcome: &Outcome,
    formula: &Formula,
    fixed: &Fixed,
    x: &str,
    y: &str,
    work: &str,
) -> Result<TokenStream> {
    let control_unit = unit_name(&outcome.control.unit);
    let unit = unit_name(&formula.measured.unit);
    let (x, _, work) = (ident(x), y, ident(work));
    let (from, to, origin) = (whole(fixed.from), whole(fixed.to), whole(fixed.origin));
    let (e0, rounding) = (whole(fixed.e0), whole(fixed.rounding));
    let at = real_number(fixed.at)?;
    let (physical_from, physical_to) = (real_number(formula.valid.from)?, real_number(formula.valid.to)?);
    let (control_step, value_step) = (real_number(fixed.control_step)?, real_number(fixed.value_step)?);
    let physical_e0 = real_number(formula.measured.series[0])?;
    let about = |text: String| doc(&text);
    let control_step_doc = about(format!("One count of the control, in {control_unit}."));
    let value_step_doc = about(format!("One count of the value, in {unit}."));
    let from_doc = about(format!("Lower end of the range, in {control_unit}."));
    let to_doc = about(format!("Upper end of the range, in {control_unit}."));
    let e0_doc = about(format!("Level at the operating point, in {unit}."));
    Ok(quote! {
        #[doc = " Lower end of the range, a count."]
        pub const FROM: #x = #from;
        #[doc = " Upper end of the range, a count."]
        pub const TO: #x = #to;
        #[doc = " Operating point in counts; it is folded into the coefficients."]
        pub const AT: f64 = #at;
        #[doc = " Level at the operating point, a count."]
        pub const E0: i64 = #e0;
        #[doc = " Bound on the rounding of [`value`], in counts."]
        pub const ROUNDING: i64 = #rounding;
        #control_step_doc
        pub const CONTROL_STEP: f64 = #control_step;
        #value_step_doc
        pub const VALUE_STEP: f64 = #value_step;
        #from_doc
        pub const PHYSICAL_FROM: f64 = #physical_from;
        #to_doc
        pub const PHYSICAL_TO: f64 = #physical_to;
        #e0_doc
        pub const PHYSICAL_E0: f64 = #physical_e0;
        #[doc = " Count from which the polynomials below are taken."]
        const ORIGIN: #work = #origin;
    })
}

fn numbers(fixed: &Fixed, work: &str) -> Result<TokenStream> {
    let mut out = TokenStream::new();
    let slope = "value steps per control step times 2^16";
    match &fixed.form {
        FixedForm::Polynomial { value, slope: ladder } => {
            out.extend(constants(value, "", "Coefficients", "value steps", work, true)?);
            out.extend(constants(ladder, "SLOPE", "Coefficients of the slope", slope, "i64", false)?);
        }
        FixedForm::Paired { mean, mean_slope, half_gap_squared, half_gap_squared_slope, upper } => {
            out.extend(constants(mean, "MEAN", "Mean", "value steps", "i64", true)?);
            out.extend(constants(
                half_gap_squared,
                "HALF_GAP_SQUARED",
                "Squared half gap",
                "value steps squared",
                "i64",
                true,
            )?);
            let sign = whole(if *upper { 1 } else { -1 });
            out.extend(quote! {
                #[doc = " Sign of the half gap."]
                pub const SIGN: i64 = #sign;
            });
            out.extend(constants(mean_slope, "MEAN_SLOPE", "Slope of the mean", slope, "i64", false)?);
            out.extend(constants(
                half_gap_squared_slope,
                "SQUARED_SLOPE",
                "Slope of the squared half gap",
                "value steps squared per control step times 2^16",
                "i64",
                false,
            )?);
        }
    }
    Ok(out)
}

fn bodies(fixed: &Fixed, x: &str, y: &str, work: &str, argument: &Ident) -> Result<TokenStream> {
    let (x_ty, y_ty, work_ty) = (ident(x), ident(y), ident(work));
    let widened = |ty: &Ident| {
        if *ty == x {
            quote! { held(#argument) }
        } else {
            quote! { #ty::from(held(#argument)) }
        }
    };
    let (narrow, wide) = (widened(&work_ty), widened(&ident("i64")));
    let origin = if fixed.wide {
        quote! { ORIGIN }
    } else {
        quote! { i64::from(ORIGIN) }
    };
    let k = if fixed.origin == 0 {
        quote! { let k = #narrow; }
    } else {
        quote! { let k = #narrow - ORIGIN; }
    };
    let k_wide = if fixed.origin == 0 {
        quote! { let k = #wide; }
    } else {
        quote! { let k = #wide - #origin; }
    };
    let cast = |text: TokenStream| {
        if y == work {
            text
        } else {
            quote! { (#text) as #y_ty }
        }
    };
    let offset = |k: &TokenStream, climbs: &[&Climb]| {
        if climbs.iter().any(|c| c.counts) {
            (quote! { #argument }, k.clone())
        } else {
            (quote! { _ }, quote! {})
        }
    };
    let (value, slope) = match &fixed.form {
        FixedForm::Polynomial { value, slope } => {
            let (value, slope) = (climb(value, "")?, climb(slope, "SLOPE")?);
            let ((a, k), (b, k_wide)) = (offset(&k, &[&value]), offset(&k_wide, &[&slope]));
            let (steps, last) = (&value.steps, cast(value.last.clone()));
            let (slope_steps, slope_last) = (&slope.steps, &slope.last);
            ((a, quote! { #k #steps #last }), (b, quote! { #k_wide #slope_steps #slope_last }))
        }
        FixedForm::Paired { mean, mean_slope, half_gap_squared, half_gap_squared_slope, upper } => {
            let (mean, squared) = (climb(mean, "MEAN")?, climb(half_gap_squared, "HALF_GAP_SQUARED")?);
            let (mean_slope, squared_slope) =
                (climb(mean_slope, "MEAN_SLOPE")?, climb(half_gap_squared_slope, "SQUARED_SLOPE")?);
            let ((a, k), (b, k_wide)) =
                (offset(&k, &[&mean, &squared]), offset(&k_wide, &[&mean_slope, &squared, &squared_slope]));
            let sign = if *upper {
                quote! { + }
            } else {
                quote! { - }
            };
            let sum = cast(quote! { mean #sign root(half_gap_squared) });
            let (minus, plus) = (quote! { slope - part }, quote! { slope + part });
            let (down, up) = if *upper { (minus, plus) } else { (plus, minus) };
            let (mean_steps, mean_last) = (&mean.steps, &mean.last);
            let (squared_steps, squared_last) = (&squared.steps, &squared.last);
            let (slope_steps, slope_last) = (&mean_slope.steps, &mean_slope.last);
            let (rise_steps, rise_last) = (&squared_slope.steps, &squared_slope.last);
            let value = quote! {
                #k
                #mean_steps
                let mean = #mean_last;
                #squared_steps
                let half_gap_squared = #squared_last;
                #sum
            };
            let slope = quote! {
                #k_wide
                #slope_steps
                let slope = #slope_last;
                #squared_steps
                let half_gap = root(#squared_last);
                if half_gap == 0 {
                    return slope;
                }
                #rise_steps
                let squared_slope = #rise_last;
                let part = quotient(squared_slope.unsigned_abs(), 2 * half_gap.unsigned_abs());
                if squared_slope < 0 { #down } else { #up }
            };
            ((a, value), (b, slope))
        }
    };
    let ((a, value), (b, slope)) = (value, slope);
    Ok(quote! {
        #[doc = " The formula; counts outside the range are held at its ends."]
        #[must_use]
        pub fn value(#a: #x_ty) -> #y_ty { #value }
        #[doc = " Derivative of [`value`]: value steps per control step, times 2^16."]
        #[must_use]
        pub fn slope(#b: #x_ty) -> i64 { #slope }
        fn held(#argument: #x_ty) -> #x_ty {
            #argument.clamp(FROM, TO)
        }
    })
}

fn inverses(fixed: &Fixed, x: &str, y: &str) -> Result<TokenStream> {
    let (x_ty, y_ty) = (ident(x), ident(y));
    let mut out = TokenStream::new();
    for (name, words, branch, same) in fixed.branches() {
        let name = ident(name);
        if same {
            let about = doc(&format!("As [`inverse`], on the stretch of the range {words}."));
            out.extend(quote! {
                #about
                #[doc = ""]
                #[doc = " # Errors"]
                #[doc = ""]
                #[doc = " `NoSolution`."]
                pub fn #name(value: #y_ty) -> Result<#x_ty, OutOfRange> {
                    inverse(value)
                }
            });
            continue;
        }
        let Branch { low, high, rising } = branch;
        let about = doc(&format!(
            "Count at which the formula comes nearest to `value`, on the stretch of the range {words}."
        ));
        let way = doc(&format!("There it {} from {low} to {high}.", if rising { "rises" } else { "falls" }));
        let (low, high) = (whole(low), whole(high));
        out.extend(quote! {
            #about
            #way
            #[doc = ""]
            #[doc = " # Errors"]
            #[doc = ""]
            #[doc = " `NoSolution`."]
            pub fn #name(value: #y_ty) -> Result<#x_ty, OutOfRange> {
                search(value, #low, #high, #rising)
            }
        });
    }
    let wide = if y == "i64" {
        quote! { value }
    } else {
        quote! { i64::from(value) }
    };
    let at = |end: TokenStream| quote! { i64::from(self::value(#end)) };
    let (first, last) = (at(quote! { bottom }), at(quote! { top }));
    let (at_low, at_high) = (at(quote! { low as #x_ty }), at(quote! { high as #x_ty }));
    // 32-bit counts may lie further apart than their own type holds.
    let (work, bits) = (ident(if x == "i32" { "i64" } else { "i32" }), fixed.control_bits);
    let steps = Literal::u32_unsuffixed(bits);
    out.extend(quote! {
        #[doc = " Finds the last count that is still under the value, bit by bit from the top, and"]
        #[doc = " takes the nearer of it and the next."]
        fn search(value: #y_ty, from: #x_ty, to: #x_ty, rising: bool) -> Result<#x_ty, OutOfRange> {
            let (bottom, top) = if rising { (from, to) } else { (to, from) };
            let wanted = #wide;
            let (least, most) = (#first, #last);
            if wanted < least - ROUNDING || wanted > most + ROUNDING {
                return Err(OutOfRange::NoSolution);
            }
            if wanted <= least {
                return Ok(bottom);
            }
            if wanted >= most {
                return Ok(top);
            }
            let (mut low, end) = (#work::from(from), #work::from(to));
            for bit in (0..#steps).rev() {
                let next = low + (1 << bit);
                if next < end {
                    let there = self::value(next as #x_ty);
                    if if rising { there < value } else { there >= value } {
                        low = next;
                    }
                }
            }
            let high = if low < end { low + 1 } else { low };
            let (under, over) = ((#at_low).abs_diff(wanted), (#at_high).abs_diff(wanted));
            Ok(if under <= over { low as #x_ty } else { high as #x_ty })
        }
    });
    Ok(out)
}

/// Integer square root and quotient, as in the runtime crate.
pub(super) fn root() -> TokenStream {
    quote! {
        #[doc = " Square root rounded to nearest, one bit at a time; 0 for a negative number."]
        #[allow(dead_code, clippy::cast_possible_wrap)]
        fn root(x: i64) -> i64 {
            let mut rest = if x < 0 { 0 } else { x.unsigned_abs() };
            let mut found: u64 = 0;
            let mut bit: u64 = 1 << 62;
            while bit != 0 {
                if rest >= found + bit {
                    rest -= found + bit;
                    found = (found >> 1) + bit;
                } else {
                    found >>= 1;
                }
                bit >>= 2;
            }
            if rest > found { found as i64 + 1 } else { found as i64 }
        }

        #[doc = " Quotient rounded to nearest, one bit at a time."]
        #[allow(dead_code, clippy::cast_possible_wrap)]
        fn quotient(numerator: u64, denominator: u64) -> i64 {
            let mut rest: u64 = 0;
            let mut found: u64 = 0;
            let mut bit: u64 = 1 << 63;
            while bit != 0 {
                rest <<= 1;
                if numerator & bit != 0 {
                    rest += 1;
                }
                if rest >= denominator {
                    rest -= denominator;
                    found |= bit;
                }
                bit >>= 1;
            }
            if rest >= denominator - rest { found as i64 + 1 } else { found as i64 }
        }
    }
}
