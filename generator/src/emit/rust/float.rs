//! Rust modules of floating-point formulas.

use super::*;

/// A literal with its sign.
fn number(value: f64, wide: bool) -> Result<TokenStream> {
    let text = if wide { real(value.abs()) } else { real_single(value.abs()) };
    let literal: Literal = text.parse().map_err(Error::internal)?;
    Ok(if value.is_sign_negative() {
        quote! { -#literal }
    } else {
        quote! { #literal }
    })
}

fn numbers(values: &[f64], wide: bool) -> Result<Vec<TokenStream>> {
    values.iter().map(|v| number(*v, wide)).collect()
}

/// Local names of a list of coefficients.
fn names(letter: &str, count: usize) -> Vec<String> {
    (0..count).map(|k| format!("{letter}{k}")).collect()
}

/// `let [c0, _, c2] = COEFFICIENTS;` with the names that some expression uses.
fn unpack(letter: &str, constant: &str, count: usize, used: &[&str]) -> TokenStream {
    let slots = names(letter, count).into_iter().map(|name| {
        if used.contains(&name.as_str()) {
            let name = ident(&name);
            quote! { #name }
        } else {
            quote! { _ }
        }
    });
    let constant = ident(constant);
    quote! { let [#(#slots),*] = #constant; }
}

fn expression(expr: &Expr) -> Result<TokenStream> {
    tokens(&expr.print(&|n| format!("{n}.0")))
}

/// `let d = f - AT;`, or nothing where no expression uses `d`.
fn offset(argument: &Ident, exprs: &[&Option<Expr>]) -> (TokenStream, TokenStream) {
    let used = exprs.iter().any(|e| e.as_ref().is_some_and(|e| e.names().contains(&"d")));
    if used { (quote! { #argument }, quote! { let d = #argument - AT; }) } else { (quote! { _ }, quote! {}) }
}

/// One formula's module.
pub(super) fn module(outcome: &Outcome, formula: &Formula, float: &Float, wide: bool) -> Result<TokenStream> {
    let (unit, control_unit) = (unit_name(&formula.measured.unit), unit_name(&outcome.control.unit));
    let ty = ident(if wide { "f64" } else { "f32" });
    let argument = ident(&arguments(&outcome.control.symbol));
    let constants = constants(outcome, formula, float, wide, &ty)?;
    let functions = values(float, &ty, &argument)?;
    let inverses = inverses(float, &ty)?;
    let name = ident(&formula.measured.name);
    let about =
        doc(&format!("The formula `{}` in {unit}, its control in {control_unit}.", formula.measured.name));
    let imports = if float.roots() {
        quote! { use super::{OutOfRange, root}; }
    } else {
        quote! { use super::OutOfRange; }
    };
    Ok(quote! {
        #about
        #[allow(dead_code, clippy::unreadable_literal)]
        pub mod #name {
            #imports
            #constants
            #functions
            #[doc = " The formula inside its range, whose ends belong to it."]
            #[doc = ""]
            #[doc = " # Errors"]
            #[doc = ""]
            #[doc = " `NotANumber`, `Below` or `Above`."]
            pub fn checked(#argument: #ty) -> Result<#ty, OutOfRange> {
                if #argument >= FROM {
                    if #argument <= TO {
                        Ok(value(#argument))
                    } else {
                        Err(OutOfRange::Above)
                    }
                } else if #argument < FROM {
                    Err(OutOfRange::Below)
                } else {
                    Err(OutOfRange::NotANumber)
                }
            }
            #[doc = " The formula for many controls, as many as the shorter slice holds; no check."]
            pub fn many(#argument: &[#ty], value: &mut [#ty]) {
                for (value, &#argument) in value.iter_mut().zip(#argument) {
                    *value = self::value(#argument);
                }
            }
            #inverses
        }
    })
}

fn constants(
    outcome: &Outcome,
    formula: &Formula,
    float: &Float,
    wide: bool,
    ty: &Ident,
) -> Result<TokenStream> {
    let measured = &formula.measured;
    let (unit, control_unit) = (unit_name(&measured.unit), unit_name(&outcome.control.unit));
    let (from, to, at) = (number(float.from, wide)?, number(float.to, wide)?, number(float.at, wide)?);
    let e0 = number(float.e0, true)?;
    let rounding = number(float.rounding, wide)?;
    let from_doc = doc(&format!("Lower end of the range, in {control_unit}."));
    let to_doc = doc(&format!("Upper end of the range, in {control_unit}."));
    let at_doc = doc(&format!("Operating point, in {control_unit}."));
    let e0_doc = doc(&format!("Level at the operating point, in {unit}."));
    let rounding_doc = doc(&format!("Bound on the rounding of [`value`], in {unit}."));
    let mut out = quote! {
        #from_doc
        pub const FROM: #ty = #from;
        #to_doc
        pub const TO: #ty = #to;
        #at_doc
        pub const AT: #ty = #at;
        #e0_doc
        pub const E0: f64 = #e0;
        #rounding_doc
        pub const ROUNDING: #ty = #rounding;
    };
    if !wide {
        let (from, to) = (number(formula.valid.from, true)?, number(formula.valid.to, true)?);
        out.extend(quote! {
            #[doc = " [`FROM`] in double precision."]
            pub const PHYSICAL_FROM: f64 = #from;
            #[doc = " [`TO`] in double precision."]
            pub const PHYSICAL_TO: f64 = #to;
        });
    }
    let powers = |unit: &str, count: usize| {
        (0..count)
            .map(|k| format!("`{}`", coefficient_unit(unit, &outcome.control.unit, k)))
            .collect::<Vec<_>>()
            .join(", ")
    };
    match &float.form {
        FloatForm::Polynomial(c) => {
            let about = doc(&format!(
                "Coefficients by rising power of the offset, in {}.",
                powers(&measured.unit, c.len())
            ));
            let (list, n) = (numbers(c, wide)?, c.len());
            out.extend(quote! { #about pub const COEFFICIENTS: [#ty; #n] = [#(#list),*]; });
        }
        FloatForm::Paired { mean, half_gap_squared, upper } => {
            let squared = if measured.unit == "1" { "1".to_owned() } else { format!("{}^2", measured.unit) };
            let mean_doc = doc(&format!(
                "Mean by rising power of the offset, in {}.",
                powers(&measured.unit, mean.len())
            ));
            let h_doc = doc(&format!(
                "Squared half gap by rising power of the offset, in {}.",
                powers(&squared, half_gap_squared.len())
            ));
            let (m, n) = (mean.len(), half_gap_squared.len());
            let (mean, h) = (numbers(mean, wide)?, numbers(half_gap_squared, wide)?);
            let sign = number(if *upper { 1.0 } else { -1.0 }, wide)?;
            out.extend(quote! {
                #mean_doc
                pub const MEAN: [#ty; #m] = [#(#mean),*];
                #h_doc
                pub const HALF_GAP_SQUARED: [#ty; #n] = [#(#h),*];
                #[doc = " Sign of the half gap."]
                pub const SIGN: #ty = #sign;
            });
        }
    }
    for (name, cut) in cuts(float) {
        let (name, cut) = (ident(&name), number(cut, wide)?);
        let about = doc(&format!("A zero of the slope, in {control_unit}."));
        out.extend(quote! { #about pub const #name: #ty = #cut; });
    }
    // Array lengths print without their type.
    let text = out.to_string().replace("usize", "");
    tokens(&text)
}

fn values(float: &Float, ty: &Ident, argument: &Ident) -> Result<TokenStream> {
    let slope_doc = doc("Derivative of [`value`] with respect to the control, no check.");
    let value_doc = doc("The formula, no check.");
    match &float.form {
        FloatForm::Polynomial(c) => {
            let names = names("c", c.len());
            let (value, slope) = (horner(&names, c, "d"), horner_slope(&names, c, "d"));
            let body = |expr: &Option<Expr>| -> Result<(TokenStream, TokenStream)> {
                let (argument, offset) = offset(argument, &[expr]);
                Ok((
                    argument,
                    match expr {
                        Some(expr) => {
                            let unpack = unpack("c", "COEFFICIENTS", c.len(), &expr.names());
                            let expr = expression(expr)?;
                            quote! { #unpack #offset #expr }
                        }
                        None => quote! { 0.0 },
                    },
                ))
            };
            let ((a, value), (b, slope)) = (body(&value)?, body(&slope)?);
            Ok(quote! {
                #value_doc
                #[must_use]
                pub fn value(#a: #ty) -> #ty { #value }
                #slope_doc
                #[must_use]
                pub fn slope(#b: #ty) -> #ty { #slope }
            })
        }
        FloatForm::Paired { mean, half_gap_squared, upper } => {
            let (m, h) = (names("m", mean.len()), names("h", half_gap_squared.len()));
            let trees = (horner(&m, mean, "d"), horner(&h, half_gap_squared, "d"));
            let slopes = (horner_slope(&m, mean, "d"), horner_slope(&h, half_gap_squared, "d"));
            let used = |exprs: &[&Option<Expr>]| -> Vec<String> {
                exprs.iter().filter_map(|e| e.as_ref()).flat_map(|e| e.names()).map(str::to_owned).collect()
            };
            let unpacked = |exprs: &[&Option<Expr>]| {
                let used = used(exprs);
                let used: Vec<&str> = used.iter().map(String::as_str).collect();
                let mut out = TokenStream::new();
                if used.iter().any(|n| n.starts_with('m')) {
                    out.extend(unpack("m", "MEAN", mean.len(), &used));
                }
                out.extend(unpack("h", "HALF_GAP_SQUARED", half_gap_squared.len(), &used));
                out
            };
            let written = |expr: &Option<Expr>| expr.as_ref().map_or_else(|| Ok(quote! { 0.0 }), expression);
            let sign = if *upper {
                quote! { + }
            } else {
                quote! { - }
            };
            let (mean_value, gap_value) = (written(&trees.0)?, written(&trees.1)?);
            let (mean_slope, gap_slope) = (written(&slopes.0)?, written(&slopes.1)?);
            let (a, offset_a) = offset(argument, &[&trees.0, &trees.1]);
            let (b, offset_b) = offset(argument, &[&trees.1, &slopes.0, &slopes.1]);
            let (unpack_a, unpack_b) =
                (unpacked(&[&trees.0, &trees.1]), unpacked(&[&trees.1, &slopes.0, &slopes.1]));
            Ok(quote! {
                #value_doc
                #[must_use]
                pub fn value(#a: #ty) -> #ty {
                    #unpack_a
                    #offset_a
                    let mean = #mean_value;
                    let half_gap_squared = #gap_value;
                    mean #sign root(half_gap_squared)
                }
                #slope_doc
                #[doc = ""]
                #[doc = " Where the gap is closed it is the slope of the mean."]
                #[must_use]
                pub fn slope(#b: #ty) -> #ty {
                    #unpack_b
                    #offset_b
                    let mean_slope = #mean_slope;
                    let half_gap = root(#gap_value);
                    if half_gap > 0.0 {
                        let squared_slope = #gap_slope;
                        mean_slope #sign squared_slope / (2.0 * half_gap)
                    } else {
                        mean_slope
                    }
                }
            })
        }
    }
}

fn inverses(float: &Float, ty: &Ident) -> Result<TokenStream> {
    let mut out = TokenStream::new();
    for (name, words, branch, same) in branches(float) {
        let name = ident(name);
        let (about, body) = if same {
            let about = doc(&format!("As [`inverse`], on the stretch of the range {words}."));
            (quote! { #about }, quote! { inverse(value) })
        } else {
            let (low, high) = (ident(&end(float, branch.low)), ident(&end(float, branch.high)));
            let about = doc(&format!(
                "Control at which the formula gives `value`, on the stretch of the range {words}."
            ));
            let way = if branch.rising { "rises" } else { "falls" };
            let way = doc(&format!("There it {way} from [`{low}`] to [`{high}`]."));
            let rising = branch.rising;
            (quote! { #about #way }, quote! { on(value, #low, #high, #rising) })
        };
        out.extend(quote! {
            #about
            #[doc = ""]
            #[doc = " # Errors"]
            #[doc = ""]
            #[doc = " `NotANumber` or `NoSolution`."]
            pub fn #name(value: #ty) -> Result<#ty, OutOfRange> {
                #body
            }
        });
    }
    let on = on(float, ty);
    out.extend(quote! {
        #on
        fn held(x: #ty, low: #ty, high: #ty) -> #ty {
            if x < low {
                low
            } else if x > high {
                high
            } else {
                x
            }
        }
    });
    if float.searches() {
        let halvings = Literal::u32_unsuffixed(if ty == "f64" {
            shiftwright_runtime::double::BISECTIONS
        } else {
            shiftwright_runtime::single::BISECTIONS
        });
        let steps = Literal::u32_unsuffixed(shiftwright_runtime::double::NEWTON_STEPS);
        out.extend(quote! {
            #[doc = " Halves the bracket a fixed number of times, then takes a few of Newton's steps inside it."]
            fn search(value: #ty, mut low: #ty, mut high: #ty, rising: bool) -> #ty {
                for _ in 0..#halvings {
                    let middle = 0.5 * (low + high);
                    if (self::value(middle) < value) == rising {
                        low = middle;
                    } else {
                        high = middle;
                    }
                }
                let mut x = 0.5 * (low + high);
                for _ in 0..#steps {
                    let slope = slope(x);
                    if slope != 0.0 {
                        x = held(x + (value - self::value(x)) / slope, low, high);
                    }
                }
                x
            }
        });
    }
    Ok(out)
}

/// The inverse on a stretch, which the public ones share.
fn on(float: &Float, ty: &Ident) -> TokenStream {
    let solved = match &float.form {
        FloatForm::Polynomial(c) if !float.searches() => {
            let n = c.len();
            match (float.degree(), c.as_slice()) {
                (1, _) => {
                    let unpack = unpack("c", "COEFFICIENTS", n, &["c0", "c1"]);
                    quote! { #unpack Ok(held(AT + (value - c0) / c1, from, to)) }
                }
                (_, [_, c1, c2, ..]) if *c1 == 0.0 => {
                    let unpack = unpack("c", "COEFFICIENTS", n, &["c0", "c2"]);
                    let [plus, minus] = [quote! { AT + d }, quote! { AT - d }];
                    let (first, second) = if *c2 > 0.0 { (plus, minus) } else { (minus, plus) };
                    quote! {
                        #unpack
                        let d = root((value - c0) / c2);
                        Ok(held(if rising { #first } else { #second }, from, to))
                    }
                }
                (_, [_, c1, ..]) => {
                    let unpack = unpack("c", "COEFFICIENTS", n, &["c0", "c1", "c2"]);
                    let [alike, other] =
                        [quote! { 2.0 * rise / (c1 + slope) }, quote! { (slope - c1) / (2.0 * c2) }];
                    // The quotient in which nothing cancels.
                    let (first, second) = if *c1 > 0.0 { (alike, other) } else { (other, alike) };
                    quote! {
                        #unpack
                        let rise = value - c0;
                        let root = root(c1 * c1 + 4.0 * c2 * rise);
                        let slope = if rising { root } else { -root };
                        let d = if rising { #first } else { #second };
                        Ok(held(AT + d, from, to))
                    }
                }
                _ => quote! { Ok(held(AT, from, to)) },
            }
        }
        _ => quote! { Ok(held(search(value, from, to, rising), from, to)) },
    };
    quote! {
        #[doc = " The inverse on the stretch between `from` and `to`, on which the formula rises or falls."]
        fn on(value: #ty, from: #ty, to: #ty, rising: bool) -> Result<#ty, OutOfRange> {
            let (first, last) = if rising { (from, to) } else { (to, from) };
            let (bottom, top) = (self::value(first), self::value(last));
            if value >= top {
                if value <= top + ROUNDING {
                    Ok(last)
                } else {
                    Err(OutOfRange::NoSolution)
                }
            } else if value > bottom {
                #solved
            } else if value >= bottom - ROUNDING {
                Ok(first)
            } else if value < bottom {
                Err(OutOfRange::NoSolution)
            } else {
                Err(OutOfRange::NotANumber)
            }
        }
    }
}

/// The square root, as in the runtime crate.
pub(super) fn root(wide: bool) -> TokenStream {
    let (ty, bits, fraction, bias, below) = if wide {
        (ident("f64"), ident("u64"), 52, 1023, 1022)
    } else {
        (ident("f32"), ident("u32"), 23, 127, 126)
    };
    let [fraction, bias, below] = [fraction, bias, below].map(Literal::i32_unsuffixed);
    quote! {
        #[doc = " Correctly rounded square root, one bit at a time; 0 for anything that is not above 0."]
        #[allow(dead_code, clippy::cast_sign_loss, clippy::cast_possible_truncation, clippy::cast_possible_wrap)]
        fn root(x: #ty) -> #ty {
            const TOP: #bits = 1 << #fraction;
            if !(x > 0.0 && x < #ty::INFINITY) {
                return if x > 0.0 { x } else { 0.0 };
            }
            let mut exponent = (x.to_bits() >> #fraction) as i32;
            let mut rest = x.to_bits() & (TOP - 1);
            if exponent == 0 {
                exponent = 1;
                while rest < TOP {
                    rest <<= 1;
                    exponent -= 1;
                }
            } else {
                rest |= TOP;
            }
            exponent -= #bias;
            if exponent & 1 != 0 {
                rest <<= 1;
            }
            rest <<= 1;
            let mut found: #bits = 0;
            let mut twice: #bits = 0;
            let mut bit = TOP << 1;
            while bit != 0 {
                let trial = twice + bit;
                if trial <= rest {
                    twice = trial + bit;
                    rest -= trial;
                    found += bit;
                }
                rest <<= 1;
                bit >>= 1;
            }
            found += found & 1;
            #ty::from_bits((found >> 1) + ((exponent >> 1) + #below) as #bits * TOP)
        }
    }
}
