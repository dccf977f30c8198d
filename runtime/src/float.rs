//! Evaluation in binary floating point, once per width.

use crate::OutOfRange;
use crate::cuts;

macro_rules! format {
    ($module:ident, $float:ident, $word:literal, $bisections:literal) => {
        #[doc = concat!("Formulas in ", $word, " precision.")]
        pub mod $module {
            use super::{OutOfRange, cuts};
            use crate::root::$module as root;

            /// Halvings of the bracket before Newton's steps, where no closed form is used.
            pub const BISECTIONS: u32 = $bisections;
            /// Newton's steps after them.
            pub const NEWTON_STEPS: u32 = 3;

            /// A closed form of the offset `d = control - at`.
            #[derive(Clone, Copy, Debug, PartialEq)]
            pub enum Form<'a> {
                /// `c[0] + d (c[1] + d (c[2] + ...))`.
                Polynomial(&'a [$float]),
                /// Mean plus or minus the root of the squared half gap.
                Paired {
                    /// Coefficients of the mean.
                    mean: &'a [$float],
                    /// Coefficients of the squared half gap.
                    half_gap_squared: &'a [$float],
                    /// True for plus.
                    upper: bool,
                },
            }

            /// A formula with its range.
            #[derive(Clone, Copy, Debug, PartialEq)]
            pub struct Formula<'a> {
                /// Lower end of the range; belongs to it.
                pub from: $float,
                /// Upper end of the range; belongs to it.
                pub to: $float,
                /// Operating point.
                pub at: $float,
                /// Bound on the rounding of `value`.
                pub rounding: $float,
                /// The closed form.
                pub form: Form<'a>,
            }

            /// A stretch of the range on which the formula is monotonic.
            #[derive(Clone, Copy, Debug, PartialEq)]
            pub struct Branch {
                /// Lower end.
                pub low: $float,
                /// Upper end.
                pub high: $float,
                /// True if the value rises with the control.
                pub rising: bool,
                /// True if it is the stretch that runs through the operating point, which is no cut.
                pub through_at: bool,
            }

            /// The stretches that the inverses use.
            #[derive(Clone, Copy, Debug, PartialEq)]
            pub struct Branches {
                /// Holds the operating point.
                pub main: Branch,
                /// Ends at the cut nearest the operating point, if there is one inside the range.
                pub below: Option<Branch>,
                /// Begins there.
                pub above: Option<Branch>,
            }

            /// `c[0] + d (c[1] + d (c[2] + ...))`, one rounding per operation.
            ///
            /// Coefficients that are exactly zero are left out, `c[0]` aside: adding
            /// them would change no bit, since `c[0]` is added last.
            #[must_use]
            pub fn horner(coefficients: &[$float], d: $float) -> $float {
                nested(coefficients.iter().copied(), d)
            }

            /// The derivative of [`horner`]: `c[1] + d (2 c[2] + d (3 c[3] + ...))`.
            #[must_use]
            pub fn horner_slope(coefficients: &[$float], d: $float) -> $float {
                nested(coefficients.iter().enumerate().skip(1).map(|(k, c)| k as $float * c), d)
            }

            fn nested(
                coefficients: impl ExactSizeIterator<Item = $float> + DoubleEndedIterator,
                d: $float,
            ) -> $float {
                let mut sum = None;
                for (power, c) in coefficients.enumerate().rev() {
                    let left_out = c == 0.0 && power > 0;
                    sum = match sum {
                        None if left_out => None,
                        None => Some(c),
                        Some(inner) if left_out => Some(d * inner),
                        Some(inner) => Some(c + d * inner),
                    };
                }
                sum.unwrap_or(0.0)
            }

            fn held(x: $float, low: $float, high: $float) -> $float {
                if x < low {
                    low
                } else if x > high {
                    high
                } else {
                    x
                }
            }

            impl Formula<'_> {
                /// The formula, no check.
                #[must_use]
                pub fn value(&self, control: $float) -> $float {
                    let d = control - self.at;
                    match self.form {
                        Form::Polynomial(c) => horner(c, d),
                        Form::Paired { mean, half_gap_squared, upper } => {
                            let half_gap = root(horner(half_gap_squared, d));
                            if upper { horner(mean, d) + half_gap } else { horner(mean, d) - half_gap }
                        }
                    }
                }

                /// Its derivative with respect to the control.
                #[must_use]
                pub fn slope(&self, control: $float) -> $float {
                    let d = control - self.at;
                    match self.form {
                        Form::Polynomial(c) => horner_slope(c, d),
                        Form::Paired { mean, half_gap_squared, upper } => {
                            let slope = horner_slope(mean, d);
                            let half_gap = root(horner(half_gap_squared, d));
                            if half_gap > 0.0 {
                                let part = horner_slope(half_gap_squared, d) / (2.0 * half_gap);
                                if upper { slope + part } else { slope - part }
                            } else {
                                slope
                            }
                        }
                    }
                }

                /// The formula inside its range.
                ///
                /// # Errors
                /// [`OutOfRange::NotANumber`], [`OutOfRange::Below`] or [`OutOfRange::Above`].
                pub fn checked(&self, control: $float) -> Result<$float, OutOfRange> {
                    if control >= self.from {
                        if control <= self.to { Ok(self.value(control)) } else { Err(OutOfRange::Above) }
                    } else if control < self.from {
                        Err(OutOfRange::Below)
                    } else {
                        Err(OutOfRange::NotANumber)
                    }
                }

                /// The formula for many controls; as many as the shorter slice holds.
                pub fn many(&self, control: &[$float], value: &mut [$float]) {
                    for (out, x) in value.iter_mut().zip(control) {
                        *out = self.value(*x);
                    }
                }

                /// Cuts of the range at the zeros of the slope, and the stretches between
                /// them that the inverses use.
                #[must_use]
                pub fn branches(&self) -> Branches {
                    // Zeros are found in double precision for every width.
                    let (from, to, at) = (self.from as f64, self.to as f64, self.at as f64);
                    let (low, high) = (from - at, to - at);
                    let widened = |list: &[$float]| {
                        let mut out = [0.0_f64; cuts::MOST];
                        for (slot, c) in out.iter_mut().zip(list) {
                            *slot = *c as f64;
                        }
                        out
                    };
                    let zeros = match self.form {
                        Form::Polynomial(c) => {
                            let slope = cuts::derivative(&widened(c));
                            let length = slope.iter().rposition(|c| *c != 0.0).map_or(0, |last| last + 1);
                            cuts::roots(slope.get(..length).unwrap_or(&[]), low, high)
                        }
                        Form::Paired { mean, half_gap_squared, upper } => {
                            cuts::paired(&widened(mean), &widened(half_gap_squared), upper, low, high)
                        }
                    };
                    let inside = |d: &f64| {
                        let x = (at + d) as $float;
                        x > self.from && x < self.to
                    };
                    let nearest =
                        zeros.iter().filter(inside).reduce(|a, b| if b.abs() < a.abs() { b } else { a });
                    let point = |d: Option<f64>, end: $float| d.map_or(end, |d| (at + d) as $float);
                    // The stretch between two neighbouring cuts, or ends of the range.
                    let stretch = |low: Option<f64>, high: Option<f64>, through_at: bool| {
                        let (low, high) = (point(low, self.from), point(high, self.to));
                        Branch { low, high, rising: self.value(high) > self.value(low), through_at }
                    };
                    let last_below = |limit: f64| zeros.iter().filter(inside).filter(|d| *d < limit).last();
                    let first_above = |limit: f64| zeros.iter().filter(inside).find(|d| *d > limit);
                    let (below, above) = match nearest {
                        Some(cut) => (
                            Some(stretch(last_below(cut), Some(cut), cut > 0.0)),
                            Some(stretch(Some(cut), first_above(cut), cut < 0.0)),
                        ),
                        None => (None, None),
                    };
                    let main = match (nearest, below, above) {
                        (Some(cut), Some(below), _) if cut > 0.0 => below,
                        (Some(_), _, Some(above)) => above,
                        _ => stretch(None, None, self.slope(self.at) != 0.0),
                    };
                    Branches { main, below, above }
                }

                /// The control at which the formula gives `value`, on the stretch of the
                /// range that holds the operating point.
                ///
                /// # Errors
                /// [`OutOfRange::NotANumber`] or [`OutOfRange::NoSolution`].
                pub fn inverse(&self, value: $float) -> Result<$float, OutOfRange> {
                    self.inverse_on(value, &self.branches().main)
                }

                /// As [`inverse`](Self::inverse), on the stretch that ends at the cut nearest
                /// the operating point; without a cut, there is no solution.
                ///
                /// # Errors
                /// [`OutOfRange::NotANumber`] or [`OutOfRange::NoSolution`].
                pub fn inverse_below(&self, value: $float) -> Result<$float, OutOfRange> {
                    self.branches().below.map_or(Err(OutOfRange::NoSolution), |b| self.inverse_on(value, &b))
                }

                /// As [`inverse`](Self::inverse), on the stretch that begins at the cut
                /// nearest the operating point; without a cut, there is no solution.
                ///
                /// # Errors
                /// [`OutOfRange::NotANumber`] or [`OutOfRange::NoSolution`].
                pub fn inverse_above(&self, value: $float) -> Result<$float, OutOfRange> {
                    self.branches().above.map_or(Err(OutOfRange::NoSolution), |b| self.inverse_on(value, &b))
                }

                /// The inverse on a given branch.
                ///
                /// # Errors
                /// [`OutOfRange::NotANumber`] or [`OutOfRange::NoSolution`].
                pub fn inverse_on(&self, value: $float, branch: &Branch) -> Result<$float, OutOfRange> {
                    let (at_low, at_high) = (self.value(branch.low), self.value(branch.high));
                    let (least, most) = if branch.rising { (at_low, at_high) } else { (at_high, at_low) };
                    let (first, last) =
                        if branch.rising { (branch.low, branch.high) } else { (branch.high, branch.low) };
                    if value >= most {
                        if value <= most + self.rounding { Ok(last) } else { Err(OutOfRange::NoSolution) }
                    } else if value > least {
                        Ok(self.solve(value, branch))
                    } else if value >= least - self.rounding {
                        Ok(first)
                    } else if value < least {
                        Err(OutOfRange::NoSolution)
                    } else {
                        Err(OutOfRange::NotANumber)
                    }
                }

                fn solve(&self, value: $float, branch: &Branch) -> $float {
                    let x = match self.form {
                        Form::Polynomial(c) => match significant(c) {
                            &[c0, c1] => self.at + (value - c0) / c1,
                            &[c0, c1, c2] if c1 == 0.0 => {
                                let d = root((value - c0) / c2);
                                if branch.rising == (c2 > 0.0) { self.at + d } else { self.at - d }
                            }
                            &[c0, c1, c2] => {
                                let rise = value - c0;
                                let twice = root(c1 * c1 + 4.0 * c2 * rise);
                                let slope = if branch.rising { twice } else { -twice };
                                // The quotient that does not cancel.
                                if (c1 > 0.0) == branch.rising {
                                    self.at + 2.0 * rise / (c1 + slope)
                                } else {
                                    self.at + (slope - c1) / (2.0 * c2)
                                }
                            }
                            _ => self.search(value, branch),
                        },
                        Form::Paired { .. } => self.search(value, branch),
                    };
                    held(x, branch.low, branch.high)
                }

                fn search(&self, value: $float, branch: &Branch) -> $float {
                    let (mut low, mut high) = (branch.low, branch.high);
                    for _ in 0..BISECTIONS {
                        let middle = 0.5 * (low + high);
                        if (self.value(middle) < value) == branch.rising {
                            low = middle;
                        } else {
                            high = middle;
                        }
                    }
                    let mut x = 0.5 * (low + high);
                    for _ in 0..NEWTON_STEPS {
                        let slope = self.slope(x);
                        if slope != 0.0 {
                            x = held(x + (value - self.value(x)) / slope, low, high);
                        }
                    }
                    x
                }
            }

            /// The coefficients without trailing zeros.
            fn significant(coefficients: &[$float]) -> &[$float] {
                let length = coefficients.iter().rposition(|c| *c != 0.0).map_or(0, |last| last + 1);
                coefficients.get(..length).unwrap_or(coefficients)
            }
        }
    };
}

format!(double, f64, "double", 30);
format!(single, f32, "single", 14);

#[cfg(test)]
mod tests {
    use super::double::{Form, Formula};
    use crate::OutOfRange;

    const EVEN: Formula<'_> = Formula {
        from: -60.0,
        to: 60.0,
        at: 0.0,
        rounding: 1e-12,
        form: Form::Polynomial(&[1458.0, 0.0, -0.0005]),
    };

    #[test]
    fn ends_belong_to_the_range_and_infinities_do_not() {
        assert_eq!(EVEN.checked(60.0), Ok(1458.0 - 0.0005 * 3600.0));
        assert_eq!(EVEN.checked(f64::NEG_INFINITY), Err(OutOfRange::Below));
        assert_eq!(EVEN.checked(60.000_001), Err(OutOfRange::Above));
        assert_eq!(EVEN.checked(f64::NAN), Err(OutOfRange::NotANumber));
    }

    #[test]
    fn an_even_formula_has_two_branches_that_meet_at_its_vertex() {
        let value = EVEN.value(40.0);
        assert!((EVEN.inverse(value).expect("reached") - 40.0).abs() < 1e-9);
        assert!((EVEN.inverse_above(value).expect("reached") - 40.0).abs() < 1e-9);
        assert!((EVEN.inverse_below(value).expect("reached") + 40.0).abs() < 1e-9);
        assert_eq!(EVEN.inverse(1458.1), Err(OutOfRange::NoSolution));
        assert_eq!(EVEN.inverse(1458.0 + 5e-13), Ok(0.0));
        assert_eq!(EVEN.inverse(f64::INFINITY), Err(OutOfRange::NoSolution));
        assert_eq!(EVEN.inverse(f64::NAN), Err(OutOfRange::NotANumber));
    }

    /// All forms give back the value they are asked for.
    #[test]
    fn inverses_give_back_the_value() {
        let forms = [
            Form::Polynomial(&[10.0, 0.3]),
            Form::Polynomial(&[10.0, 0.3, 0.02]),
            Form::Polynomial(&[10.0, -0.3, 0.02]),
            Form::Polynomial(&[10.0, -0.3, 1e-9]),
            Form::Polynomial(&[10.0, 0.3, 0.02, -0.004]),
            Form::Polynomial(&[10.0, 0.0, 0.02, 0.0, 0.001]),
            Form::Paired { mean: &[10.0, 0.1], half_gap_squared: &[0.5, 0.0, 0.04], upper: true },
            Form::Paired { mean: &[10.0, 0.1], half_gap_squared: &[0.0, 0.0, 0.04], upper: false },
        ];
        for form in forms {
            let formula = Formula { from: -13.0, to: 17.0, at: 2.0, rounding: 1e-14, form };
            let branches = formula.branches();
            for branch in [Some(branches.main), branches.below, branches.above].into_iter().flatten() {
                assert!(branch.low < branch.high);
                for step in 0..=400 {
                    let x = branch.low + (branch.high - branch.low) * f64::from(step) / 400.0;
                    let value = formula.value(x);
                    let back = formula.inverse_on(value, &branch).expect("a value of the branch");
                    assert!((formula.value(back) - value).abs() < 1e-13, "{form:?} {x} {back}");
                    assert!(back >= branch.low && back <= branch.high);
                }
            }
        }
    }

    #[test]
    fn zero_coefficients_change_no_bit() {
        for step in -1000..=1000 {
            let d = f64::from(step) * 0.0137;
            let plain = 3.25 + d * (0.0 + d * (0.7 + d * 0.0));
            assert_eq!(super::double::horner(&[3.25, 0.0, 0.7, 0.0], d).to_bits(), plain.to_bits());
            let slope = 0.0 + d * (2.0 * 0.7);
            assert_eq!(super::double::horner_slope(&[3.25, 0.0, 0.7], d).to_bits(), slope.to_bits());
        }
    }
}
