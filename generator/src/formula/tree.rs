//! Expressions of named constants and variables, as far as formulas need them.
//!
//! Built here, walked by the printers. A tree says which operations happen in
//! which order; every operation rounds once.

/// An expression.
#[derive(Clone, Debug, PartialEq)]
pub enum Expr {
    /// A constant or a variable.
    Name(String),
    /// A small whole number, exact in every format.
    Whole(u32),
    /// Sum.
    Add(Box<Expr>, Box<Expr>),
    /// Product.
    Mul(Box<Expr>, Box<Expr>),
}

impl Expr {
    /// A named constant or variable.
    #[must_use]
    pub fn name(name: impl Into<String>) -> Self {
        Self::Name(name.into())
    }

    /// The names that occur, in order of first occurrence.
    #[must_use]
    pub fn names(&self) -> Vec<&str> {
        let mut out = Vec::new();
        self.collect(&mut out);
        out
    }

    fn collect<'a>(&'a self, out: &mut Vec<&'a str>) {
        match self {
            Self::Name(name) => {
                if !out.contains(&name.as_str()) {
                    out.push(name);
                }
            }
            Self::Whole(_) => {}
            Self::Add(a, b) | Self::Mul(a, b) => {
                a.collect(out);
                b.collect(out);
            }
        }
    }

    /// Writes the expression out; `whole` prints whole numbers in the language's way.
    ///
    /// Brackets stand round every sum inside a product and every product that
    /// is a right operand of a product, so that the printed order is the tree's.
    #[must_use]
    pub fn print(&self, whole: &dyn Fn(u32) -> String) -> String {
        self.printed(whole, false)
    }

    /// As [`print`](Self::print), with brackets also round every product inside a
    /// sum, for readers who want no precedence of operators taken for granted.
    #[must_use]
    pub fn print_bracketed(&self, whole: &dyn Fn(u32) -> String) -> String {
        self.printed(whole, true)
    }

    fn printed(&self, whole: &dyn Fn(u32) -> String, products: bool) -> String {
        let plain = |e: &Self| e.printed(whole, products);
        let bracketed = |e: &Self| format!("({})", e.printed(whole, products));
        match self {
            Self::Name(name) => name.clone(),
            Self::Whole(n) => whole(*n),
            Self::Add(a, b) => {
                let left = if products && matches!(**a, Self::Mul(..)) { bracketed(a) } else { plain(a) };
                let sum = matches!(**b, Self::Add(..));
                let right =
                    if sum || (products && matches!(**b, Self::Mul(..))) { bracketed(b) } else { plain(b) };
                format!("{left} + {right}")
            }
            Self::Mul(a, b) => {
                let left = if matches!(**a, Self::Add(..)) { bracketed(a) } else { plain(a) };
                let right =
                    if matches!(**b, Self::Add(..) | Self::Mul(..)) { bracketed(b) } else { plain(b) };
                format!("{left} * {right}")
            }
        }
    }
}

fn nested(terms: Vec<Option<Expr>>, d: &Expr) -> Option<Expr> {
    let mut sum: Option<Expr> = None;
    for (power, term) in terms.into_iter().enumerate().rev() {
        sum = match (sum, term) {
            (None, term) => term,
            (Some(inner), None) if power > 0 => Some(Expr::Mul(Box::new(d.clone()), Box::new(inner))),
            (Some(inner), Some(term)) => {
                let product = Expr::Mul(Box::new(d.clone()), Box::new(inner));
                Some(Expr::Add(Box::new(term), Box::new(product)))
            }
            // The outermost term is always there.
            (Some(inner), None) => Some(inner),
        };
    }
    sum
}

/// `c0 + d * (c1 + d * c2)`; coefficients that are zero vanish, except the
/// outermost, whose addition makes the bits those of the full nesting.
#[must_use]
pub fn horner(names: &[String], coefficients: &[f64], d: &str) -> Option<Expr> {
    let terms = names
        .iter()
        .zip(coefficients)
        .enumerate()
        .map(|(power, (name, c))| (power == 0 || *c != 0.0).then(|| Expr::name(name.as_str())))
        .collect();
    nested(terms, &Expr::name(d))
}

/// `c1 + d * (2 * c2 + d * (3 * c3))`, simplified like [`horner`]; `None` for a constant.
#[must_use]
pub fn horner_slope(names: &[String], coefficients: &[f64], d: &str) -> Option<Expr> {
    let terms = names
        .iter()
        .zip(coefficients)
        .enumerate()
        .skip(1)
        .map(|(power, (name, c))| {
            let name = Expr::name(name.as_str());
            match power {
                1 => Some(name),
                _ if *c == 0.0 => None,
                _ => Some(Expr::Mul(Box::new(Expr::Whole(power as u32)), Box::new(name))),
            }
        })
        .collect();
    nested(terms, &Expr::name(d))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn names() -> Vec<String> {
        (0..5).map(|k| format!("c{k}")).collect()
    }

    fn whole(n: u32) -> String {
        format!("{n}.0")
    }

    #[test]
    fn values_nest_from_the_highest_power_inwards() {
        let print = |c: &[f64]| horner(&names(), c, "d").map(|e| e.print(&whole));
        assert_eq!(print(&[1.0, 1.0, 1.0]).as_deref(), Some("c0 + d * (c1 + d * c2)"));
        assert_eq!(print(&[1.0, 0.0, 1.0]).as_deref(), Some("c0 + d * (d * c2)"));
        assert_eq!(print(&[0.0, 1.0, 0.0]).as_deref(), Some("c0 + d * c1"));
        assert_eq!(print(&[1.0, 0.0, 1.0, 0.0, 1.0]).as_deref(), Some("c0 + d * (d * (c2 + d * (d * c4)))"));
        assert_eq!(print(&[0.0, 0.0]).as_deref(), Some("c0"));
    }

    #[test]
    fn brackets_may_stand_round_every_product() {
        let print = |c: &[f64]| horner_slope(&names(), c, "d").map(|e| e.print_bracketed(&whole));
        assert_eq!(
            print(&[1.0, 1.0, 1.0, 1.0]).as_deref(),
            Some("c1 + (d * ((2.0 * c2) + (d * (3.0 * c3))))")
        );
    }

    #[test]
    fn slopes_multiply_by_the_power_first() {
        let print = |c: &[f64]| horner_slope(&names(), c, "d").map(|e| e.print(&whole));
        assert_eq!(print(&[1.0, 1.0, 1.0, 1.0]).as_deref(), Some("c1 + d * (2.0 * c2 + d * (3.0 * c3))"));
        assert_eq!(print(&[1.0, 0.0, 1.0]).as_deref(), Some("c1 + d * (2.0 * c2)"));
        assert_eq!(
            print(&[1.0, 0.0, 1.0, 0.0, 1.0]).as_deref(),
            Some("c1 + d * (2.0 * c2 + d * (d * (4.0 * c4)))")
        );
        assert_eq!(print(&[1.0]), None);
    }
}
