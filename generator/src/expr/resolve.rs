//! Names to numbers, with the check of dimensions.
//!
//! In: an [`Expression`] and an [`Environment`]. Out: a [`Resolved`]: the tree in
//! coherent units (see [`crate::units`]), and its dimension.

use std::ops::Range;

use super::text::{Called, Node, NodeKind};
use super::{Environment, Expression, Function, Symbol, Tree};
use crate::units::{Dimension, Fault, Unit, Value, constants, nearest};

/// Longest chain that keeps the order of its operations as written; longer ones
/// are halved, so that no text makes a deep tree.
const CHAIN: usize = 8;

/// Largest power of an operator.
const HIGHEST_POWER: f64 = 64.0;

/// A resolved expression.
#[derive(Clone, Debug, PartialEq)]
pub struct Resolved {
    /// The tree, in coherent units.
    pub tree: Tree,
    /// Its dimension; `None` for a bare 0, which has any.
    pub dimension: Option<Dimension>,
    /// Length of the text, for faults about the whole of it.
    length: usize,
}

impl Resolved {
    /// The number, if the expression holds neither control nor position nor
    /// operator. A bare 0 counts as a pure number.
    #[must_use]
    pub fn value(&self) -> Option<Value> {
        let number = self.tree.as_number()?;
        Some(Value { number, dimension: self.dimension.unwrap_or(Dimension::NONE) })
    }

    /// The tree with its result in `unit`.
    ///
    /// # Errors
    /// If the dimension is another.
    pub fn in_unit(self, unit: &Unit) -> Result<Tree, Fault> {
        if let Some(dimension) = self.dimension.filter(|dimension| *dimension != unit.dimension) {
            return Err(Fault::new("dimension", 0..self.length, "the expression has the wrong dimension")
                .found(dimension.describe())
                .expected(format!("{}, such as `{}`", unit.dimension.describe(), unit.symbol)));
        }
        let factor = unit.coherent();
        let scaled = if factor.mantissa == 1.0 { self.tree } else { self.tree.scaled(1.0 / factor.mantissa) };
        let shift = crate::units::decimal::shift(1.0, -factor.exponent);
        Ok(if shift == 1.0 { scaled } else { scaled.scaled(shift) })
    }
}

impl Expression {
    /// Resolves every name and checks the dimensions.
    ///
    /// # Errors
    /// If a name is unknown or out of place, dimensions do not fit, a constant part
    /// is not a finite number, or an operator stands where none may.
    pub fn resolve(&self, environment: &dyn Environment) -> Result<Resolved, Fault> {
        let resolver = Resolver { environment };
        let typed = resolver.node(&self.root, false)?;
        if typed.tree.as_number().is_some_and(|number| !number.is_finite()) {
            return Err(not_finite(&self.root.span));
        }
        Ok(Resolved { tree: typed.tree, dimension: typed.dimension, length: self.length })
    }
}

/// A resolved piece.
#[derive(Clone, Debug)]
struct Typed {
    tree: Tree,
    dimension: Option<Dimension>,
    /// What operators it holds.
    operators: Operators,
}

/// Operators inside a piece.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Operators {
    None,
    /// Only the coordinate of this part.
    Coordinate(usize),
    /// Anything else.
    Other,
}

impl Operators {
    fn with(self, other: Self) -> Self {
        match (self, other) {
            (Self::None, any) | (any, Self::None) => any,
            (a, b) if a == b => a,
            _ => Self::Other,
        }
    }
}

struct Resolver<'a> {
    environment: &'a dyn Environment,
}

fn not_finite(span: &Range<usize>) -> Fault {
    Fault::new("not-finite", span.clone(), "this is not a finite number")
        .action("look for a division by zero, a root or logarithm of a negative number, or an overflow")
}

fn dimension_fault(span: &Range<usize>, message: impl Into<String>) -> Fault {
    Fault::new("dimension", span.clone(), message)
}

fn describe(dimension: Option<Dimension>) -> String {
    dimension.unwrap_or(Dimension::NONE).describe()
}

impl Resolver<'_> {
    /// `inside`: in the argument of a function, where a coordinate counts as a
    /// real number.
    fn node(&self, node: &Node, inside: bool) -> Result<Typed, Fault> {
        let typed = match &node.kind {
            NodeKind::Number(number) => Typed {
                tree: Tree::Number(*number),
                dimension: (*number != 0.0).then_some(Dimension::NONE),
                operators: Operators::None,
            },
            NodeKind::Name(name) => self.name(name, &node.span)?,
            NodeKind::Member { part, member, arguments, member_span } => {
                self.member(part, member, arguments, node, member_span)?
            }
            NodeKind::Negative(inner) => {
                let inner = self.node(inner, inside)?;
                Typed { tree: inner.tree.negated(), ..inner }
            }
            NodeKind::Sum(terms) => self.sum(terms, inside)?,
            NodeKind::Product(factors) => self.product(factors, inside)?,
            NodeKind::Power(base, exponent) => self.power(node, base, exponent, inside)?,
            NodeKind::Call(Called::Dot, arguments) => self.dot(arguments)?,
            NodeKind::Call(Called::Function(function), arguments) => {
                self.call(*function, arguments, &node.span)?
            }
        };
        if typed.tree.as_number().is_some_and(|number| !number.is_finite()) {
            return Err(not_finite(&node.span));
        }
        Ok(typed)
    }

    fn symbol(&self, name: &str, span: &Range<usize>) -> Result<Symbol, Fault> {
        if let Some(value) = constants::constant(name) {
            return Ok(Symbol::Constant(value));
        }
        self.environment.look_up(name).ok_or_else(|| {
            let names = self.environment.names();
            let known = names.iter().map(String::as_str).chain(constants::NAMES);
            let fault = Fault::new("unknown-name", span.clone(), format!("`{name}` is not known here"));
            match nearest(name, known) {
                Some(near) => fault.action(format!("write `{near}`, if that is meant")),
                None => fault.action(format!("define `{name}` under `constants`")),
            }
        })
    }

    fn name(&self, name: &str, span: &Range<usize>) -> Result<Typed, Fault> {
        let scalar = |tree: Tree, value: Value| Typed {
            tree: tree.times(Tree::Number(value.number)),
            dimension: Some(value.dimension),
            operators: Operators::None,
        };
        match self.symbol(name, span)? {
            Symbol::Constant(value) => Ok(scalar(Tree::Number(1.0), value)),
            Symbol::Control(value) => Ok(scalar(Tree::Control, value)),
            Symbol::Position(value) => Ok(scalar(Tree::Position, value)),
            Symbol::Part { vector, .. } => Err(Fault::new(
                "operator-misplaced",
                span.clone(),
                format!("`{name}` is a part, not an operator"),
            )
            .action(if vector {
                format!("write `{name}.x`, `{name}.y`, `{name}.z`, `{name}.sq`, or `dot({name}, ...)`")
            } else {
                format!("write one of its operators, `{name}.` and the operator's name")
            })),
            Symbol::Forbidden(reason) => {
                Err(Fault::new("name-misplaced", span.clone(), format!("`{name}` may not stand here"))
                    .action(reason))
            }
        }
    }

    fn member(
        &self,
        part: &str,
        member: &str,
        arguments: &[usize],
        node: &Node,
        member_span: &Range<usize>,
    ) -> Result<Typed, Fault> {
        let part_span = node.span.start..node.span.start + part.len();
        let index = match self.symbol(part, &part_span)? {
            Symbol::Part { index, .. } => index,
            Symbol::Forbidden(reason) => {
                return Err(Fault::new("name-misplaced", part_span, format!("`{part}` may not stand here"))
                    .action(reason));
            }
            _ => {
                return Err(Fault::new(
                    "operator-misplaced",
                    part_span,
                    format!("`{part}` is no part and has no operators"),
                ));
            }
        };
        let found = self.environment.operator(index, member, arguments).map_err(|mut fault| {
            fault.span = member_span.start..node.span.end.max(member_span.end);
            fault
        })?;
        let operators = if found.coordinate { Operators::Coordinate(index) } else { Operators::Other };
        Ok(Typed {
            tree: Tree::Operator { part: index, operator: found.operator }
                .times(Tree::Number(found.size.number)),
            dimension: Some(found.size.dimension),
            operators,
        })
    }

    fn sum(&self, terms: &[(bool, Node)], inside: bool) -> Result<Typed, Fault> {
        if terms.len() > CHAIN {
            let (left, right) = terms.split_at(terms.len() / 2);
            let a = self.sum(left, inside)?;
            let b = self.sum(right, inside)?;
            let span = right.first().map_or(0..0, |(_, node)| node.span.clone());
            return Self::added(a, b, false, &span);
        }
        let mut out = Typed { tree: Tree::Number(0.0), dimension: None, operators: Operators::None };
        for (minus, node) in terms {
            let term = self.node(node, inside)?;
            out = Self::added(out, term, *minus, &node.span)?;
        }
        Ok(out)
    }

    fn added(a: Typed, b: Typed, minus: bool, span: &Range<usize>) -> Result<Typed, Fault> {
        if let (Some(left), Some(right)) = (a.dimension, b.dimension)
            && left != right
        {
            let word = if minus { "subtracted from" } else { "added to" };
            return Err(dimension_fault(
                span,
                format!("{} cannot be {word} {}", right.describe(), left.describe()),
            )
            .found(right.describe())
            .expected(left.describe()));
        }
        Ok(Typed {
            tree: if minus { a.tree.minus(b.tree) } else { a.tree.plus(b.tree) },
            dimension: a.dimension.or(b.dimension),
            operators: a.operators.with(b.operators),
        })
    }

    fn product(&self, factors: &[(bool, Node)], inside: bool) -> Result<Typed, Fault> {
        if factors.len() > CHAIN {
            // A slash belongs to its own factor only, so the halves simply multiply.
            let (left, right) = factors.split_at(factors.len() / 2);
            let a = self.product(left, inside)?;
            let b = self.product(right, inside)?;
            let span = right.first().map_or(0..0, |(_, node)| node.span.clone());
            return Self::multiplied(a, b, false, &span);
        }
        let mut out =
            Typed { tree: Tree::Number(1.0), dimension: Some(Dimension::NONE), operators: Operators::None };
        for (over, node) in factors {
            let factor = self.node(node, inside)?;
            if *over && factor.operators != Operators::None && !inside {
                return Err(Fault::new(
                    "operator-misplaced",
                    node.span.clone(),
                    "there is no division by an operator",
                ));
            }
            out = Self::multiplied(out, factor, *over, &node.span)?;
            if out.tree.as_number().is_some_and(|number| !number.is_finite()) {
                return Err(not_finite(&node.span));
            }
        }
        Ok(out)
    }

    fn multiplied(a: Typed, b: Typed, over: bool, span: &Range<usize>) -> Result<Typed, Fault> {
        let dimension = match (a.dimension, b.dimension) {
            (Some(left), Some(right)) => {
                let combined = if over { left.over(right) } else { left.times(right) };
                Some(
                    combined
                        .ok_or_else(|| dimension_fault(span, "the powers in this dimension are too high"))?,
                )
            }
            _ => None,
        };
        Ok(Typed {
            tree: if over { a.tree.over(b.tree) } else { a.tree.times(b.tree) },
            dimension,
            operators: a.operators.with(b.operators),
        })
    }

    fn power(&self, node: &Node, base: &Node, exponent: &Node, inside: bool) -> Result<Typed, Fault> {
        let base_typed = self.node(base, inside)?;
        let exponent_typed = self.node(exponent, inside)?;
        if exponent_typed.dimension.is_some_and(|dimension| !dimension.is_none()) {
            return Err(dimension_fault(&exponent.span, "an exponent must be a pure number")
                .found(describe(exponent_typed.dimension)));
        }
        if !inside && (base_typed.operators != Operators::None || exponent_typed.operators != Operators::None)
        {
            let whole = exponent_typed
                .tree
                .as_number()
                .filter(|&number| (0.0..=HIGHEST_POWER).contains(&number) && libm::floor(number) == number);
            if exponent_typed.operators != Operators::None || whole.is_none() {
                return Err(Fault::new(
                    "operator-misplaced",
                    exponent.span.clone(),
                    "powers of operators are whole numbers",
                )
                .expected(format!("a whole number from 0 to {HIGHEST_POWER}"))
                .action("for a function of `.x` use sqrt, exp or ln"));
            }
        }
        let dimension = match base_typed.dimension {
            None => None,
            Some(dimension) if dimension.is_none() => Some(dimension),
            Some(dimension) => {
                let (numerator, denominator) =
                    exponent_typed.tree.as_number().and_then(rational).ok_or_else(|| {
                        dimension_fault(
                            &exponent.span,
                            format!("the exponent of {} must be a rational constant", dimension.describe()),
                        )
                        .expected("a number such as `2`, `-1`, `0.5` or `(1/3)`, denominators up to 12")
                    })?;
                Some(dimension.power(numerator, denominator).ok_or_else(|| {
                    dimension_fault(&node.span, "the powers in this dimension are too high or too fine")
                })?)
            }
        };
        Ok(Typed {
            tree: base_typed.tree.raised(exponent_typed.tree),
            dimension: if dimension.is_none() && base_typed.dimension.is_none() { None } else { dimension },
            operators: base_typed.operators.with(exponent_typed.operators),
        })
    }

    fn dot(&self, arguments: &[Node]) -> Result<Typed, Fault> {
        let mut parts = Vec::new();
        for node in arguments {
            let index = match &node.kind {
                NodeKind::Name(name) => match self.symbol(name, &node.span)? {
                    Symbol::Part { index, vector: true } => Some(index),
                    _ => None,
                },
                _ => None,
            };
            parts.push(index.ok_or_else(|| {
                Fault::new("operator-misplaced", node.span.clone(), "`dot` takes the names of two spins")
                    .expected("for example `dot(S, I)`")
            })?);
        }
        match parts.as_slice() {
            [a, b] => Ok(Typed {
                tree: Tree::Dot(*a, *b),
                dimension: Some(Dimension::NONE),
                operators: Operators::Other,
            }),
            _ => Err(Fault::new("expression-syntax", 0..0, "`dot` takes two arguments")),
        }
    }

    fn call(&self, function: Function, arguments: &[Node], span: &Range<usize>) -> Result<Typed, Fault> {
        let mut operators = Operators::None;
        let mut dimension: Option<Dimension> = None;
        let mut trees = Vec::new();
        for node in arguments {
            let typed = self.node(node, true)?;
            operators = operators.with(typed.operators);
            if let (Some(first), Some(second)) = (dimension, typed.dimension)
                && first != second
            {
                return Err(dimension_fault(
                    &node.span,
                    format!("`{}` compares quantities of one dimension", function.word()),
                )
                .found(second.describe())
                .expected(first.describe()));
            }
            dimension = dimension.or(typed.dimension);
            trees.push(typed.tree);
        }
        if operators == Operators::Other {
            return Err(Fault::new(
                "operator-misplaced",
                span.clone(),
                format!("`{}` takes no such operator", function.word()),
            )
            .expected("a real expression with one `.x` of one interval or oscillator"));
        }
        let dimension = match function {
            Function::Abs | Function::Min | Function::Max => dimension,
            Function::Sqrt => match dimension {
                None => None,
                Some(dimension) => Some(dimension.power(1, 2).ok_or_else(|| {
                    dimension_fault(span, "the powers in this dimension are too fine for a root")
                })?),
            },
            _ => {
                if dimension.is_some_and(|dimension| !dimension.is_none()) {
                    return Err(dimension_fault(
                        span,
                        format!("the argument of `{}` must be a pure number", function.word()),
                    )
                    .found(describe(dimension)));
                }
                Some(Dimension::NONE)
            }
        };
        let call = Tree::Call(function, trees);
        let constant =
            matches!(&call, Tree::Call(_, list) if list.iter().all(|tree| tree.as_number().is_some()));
        let tree = if constant { Tree::Number(call.value(f64::NAN, f64::NAN)) } else { call };
        Ok(Typed { tree, dimension, operators })
    }
}

/// The fraction with a denominator up to 12 that a number stands for.
fn rational(number: f64) -> Option<(i64, i64)> {
    if number.abs() > 1000.0 {
        return None;
    }
    (1..=12i64).find_map(|denominator| {
        let scaled = number * denominator as f64;
        let numerator = libm::round(scaled);
        // The quotient as the language computes it, so only true fractions pass.
        ((scaled - numerator).abs() <= 4.0 * f64::EPSILON * scaled.abs())
            .then_some((numerator as i64, denominator))
    })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::expr::{OperatorSymbol, PartOperator};

    /// A stand-in for the spec: two lengths, an energy, a field control in kV/cm,
    /// positions in nm, a spin `S` (part 0) and an oscillator `q` (part 1).
    struct Names;

    fn unit(text: &str) -> Unit {
        Unit::parse(text).unwrap()
    }

    impl Environment for Names {
        fn look_up(&self, name: &str) -> Option<Symbol> {
            Some(match name {
                "well" => Symbol::Constant(unit("nm").value(9.0)),
                "barrier" => Symbol::Constant(unit("meV").value(232.0)),
                "F" => Symbol::Control(unit("kV/cm").value(1.0)),
                "z" => Symbol::Position(unit("nm").value(1.0)),
                "S" => Symbol::Part { index: 0, vector: true },
                "q" => Symbol::Part { index: 1, vector: false },
                "G0" => Symbol::Forbidden("write the number".to_owned()),
                _ => return None,
            })
        }

        fn operator(&self, part: usize, name: &str, _: &[usize]) -> Result<OperatorSymbol, Fault> {
            let operator = match name {
                "x" => PartOperator::X,
                "z" => PartOperator::Z,
                _ => return Err(Fault::new("unknown-operator", 0..0, "no such operator")),
            };
            Ok(OperatorSymbol { operator, size: Value::pure(1.0), coordinate: part == 1 && name == "x" })
        }

        fn names(&self) -> Vec<String> {
            ["well", "barrier", "F", "z", "S", "q"].map(str::to_owned).to_vec()
        }
    }

    fn resolve(text: &str) -> Result<Resolved, Fault> {
        Expression::parse(text)?.resolve(&Names)
    }

    fn number(text: &str, target: &str) -> f64 {
        resolve(text).unwrap().in_unit(&unit(target)).unwrap().as_number().unwrap()
    }

    fn refused(text: &str) -> (&'static str, Range<usize>) {
        let fault = resolve(text).unwrap_err();
        (fault.code, fault.span)
    }

    #[test]
    fn constants_keep_their_decimal_digits() {
        assert_eq!(number("well", "nm"), 9.0);
        assert_eq!(number("barrier", "eV"), 0.232);
        assert_eq!(number("2*well", "um"), 0.018);
        assert_eq!(number("0", "eV"), 0.0);
        // hbar^2/(2 me) = Eh a0^2/2, with CODATA 2022 values of the hartree in eV and the bohr in nm.
        let kinetic = 27.211386245981 * 0.0529177210544 * 0.0529177210544 / 2.0;
        assert!((number("hbar^2/(2*me*well^2)", "eV") / (kinetic / 81.0) - 1.0).abs() < 1e-9);
        assert!((number("(well^3)^(1/3)", "nm") - 9.0).abs() < 1e-13);
        assert_eq!(number("sqrt(well*well)", "nm"), 9.0);
        assert_eq!(number("max(well, 2*well) - min(well, 2*well)", "nm"), 9.0);
        assert_eq!(number("2^3^2", "1"), 512.0);
        assert_eq!(number("-2^2", "1"), -4.0);
        assert_eq!(number("8/4/2", "1"), 1.0);
    }

    #[test]
    fn the_control_carries_its_unit() {
        let field = resolve("F").unwrap().in_unit(&unit("V/nm")).unwrap();
        assert_eq!(field, Tree::Number(1e-4).times(Tree::Control));
        let bias = resolve("(barrier/e - F*well)/well").unwrap().in_unit(&unit("V/nm")).unwrap();
        assert!((bias.value(100.0, 0.0) - (0.232 / 9.0 - 0.01)).abs() < 1e-16);
        let edge = resolve("barrier*(z/well)^2").unwrap().in_unit(&unit("meV")).unwrap();
        assert!((edge.value(0.0, 4.5) - 58.0).abs() < 1e-13);
    }

    #[test]
    fn dimensions_are_checked_where_they_meet() {
        assert_eq!(refused("well + barrier"), ("dimension", 7..14));
        assert_eq!(refused("sin(well)"), ("dimension", 0..9));
        assert_eq!(refused("2^well"), ("dimension", 2..6));
        assert_eq!(refused("well^pi"), ("dimension", 5..7));
        assert_eq!(refused("well^F"), ("dimension", 5..6));
        assert_eq!(refused("max(well, barrier)"), ("dimension", 10..17));
        assert_eq!(resolve("well").unwrap().in_unit(&unit("eV")).unwrap_err().code, "dimension");
        assert!(resolve("0 + barrier").is_ok());
        assert!(resolve("max(0, z)").is_ok());
        assert_eq!(refused("well^1001").0, "dimension");
    }

    #[test]
    fn names_and_numbers_are_checked() {
        assert_eq!(refused("wel"), ("unknown-name", 0..3));
        assert_eq!(resolve("wel").unwrap_err().action.as_deref(), Some("write `well`, if that is meant"));
        assert_eq!(refused("1/0"), ("not-finite", 2..3));
        assert_eq!(refused("sqrt(-1)"), ("not-finite", 0..8));
        assert_eq!(refused("G0 + 1"), ("name-misplaced", 0..2));
        assert_eq!(refused("exp(1000)"), ("not-finite", 0..9));
    }

    #[test]
    fn operators_stand_only_where_they_may() {
        assert!(resolve("S.z^2 + 3 + dot(S, S)").is_ok());
        assert!(resolve("exp(-q.x^2/2)*S.z").is_ok());
        assert!(resolve("1/sqrt(1 + 1/(1 + q.x^2))").is_err());
        assert!(resolve("sqrt(1/(1 + q.x^2))").is_ok());
        assert_eq!(refused("1/S.z"), ("operator-misplaced", 2..5));
        assert_eq!(refused("S.z^0.5"), ("operator-misplaced", 4..7));
        assert_eq!(refused("S.z^-1"), ("operator-misplaced", 4..6));
        assert_eq!(refused("2^S.z"), ("operator-misplaced", 2..5));
        assert_eq!(refused("exp(S.x)"), ("operator-misplaced", 0..8));
        assert_eq!(refused("exp(q.x*S.z)"), ("operator-misplaced", 0..12));
        assert_eq!(refused("S + 1"), ("operator-misplaced", 0..1));
        assert_eq!(refused("dot(S, q)"), ("operator-misplaced", 7..8));
        assert_eq!(refused("S.zz"), ("unknown-operator", 2..4));
        assert_eq!(refused("F.z"), ("operator-misplaced", 0..1));
    }

    /// A worst case of each kind of growth, within the limits of the language; the
    /// time is bounded by the test run's own patience, the depth by its stack.
    #[test]
    fn the_longest_texts_resolve() {
        let sum = format!("F{}", "+F".repeat(4_999));
        let tree = resolve(&sum).unwrap().tree;
        assert!((tree.value(1.0, 0.0) - 5_000.0 * 1e5).abs() < 1.0);
        let product = format!("F{}", "/F".repeat(4_998));
        assert!(resolve(&product).is_err(), "a dimension of power -4997 is beyond all use");
        let nested = format!("{}z/well{}", "sin(1 + 2*".repeat(199), ")".repeat(199));
        let tree = resolve(&nested).unwrap().tree;
        assert!(tree.taylor_position(0.0, 1.0).iter().all(|c| !c.is_nan()));
    }
}
