//! Expression text to syntax tree.
//!
//! In: one scalar text. Out: an [`Expression`], in which names are still names.
//! `^` is right associative and binds tighter than unary minus. Chains of sums
//! and products are kept flat, so that no valid text makes a deep tree.
//!
//! Not here: what a name stands for.

use std::ops::Range;

use super::Function;
use crate::units::{Fault, read_number};

/// Longest expression, in characters.
pub const LONGEST: usize = 10_000;

/// Deepest nesting of brackets, signs and powers.
pub const DEEPEST: usize = 200;

/// Longest name, in characters.
const LONGEST_NAME: usize = 40;

/// A parsed expression.
#[derive(Clone, Debug, PartialEq)]
pub struct Expression {
    pub(super) root: Node,
    pub(super) length: usize,
}

/// A piece of syntax with its stretch of the text.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Node {
    pub span: Range<usize>,
    pub kind: NodeKind,
}

/// What a piece of syntax is.
#[derive(Clone, Debug, PartialEq)]
pub(super) enum NodeKind {
    Number(f64),
    Name(String),
    /// `part.member` or `part.member(1, 2)`; with the member's own stretch.
    Member {
        part: String,
        member: String,
        arguments: Vec<usize>,
        member_span: Range<usize>,
    },
    Call(Called, Vec<Node>),
    Negative(Box<Node>),
    /// Terms, each with true if it is subtracted.
    Sum(Vec<(bool, Node)>),
    /// Factors, each with true if it divides.
    Product(Vec<(bool, Node)>),
    Power(Box<Node>, Box<Node>),
}

/// What can be called.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Called {
    Function(Function),
    Dot,
}

impl Expression {
    /// Parses a text.
    ///
    /// # Errors
    /// If the text is no expression of the language, longer than 10,000 characters
    /// or nested deeper than 200.
    pub fn parse(text: &str) -> Result<Self, Fault> {
        let length = text.chars().count();
        if length > LONGEST {
            return Err(Fault::new("expression-limit", 0..text.len(), "the expression is too long")
                .found(format!("{length} characters"))
                .expected(format!("at most {LONGEST}"))
                .action("give parts of it names under `constants`"));
        }
        let tokens = lex(text)?;
        let mut parser = Parser { tokens, position: 0, end: text.trim_end().len(), depth: 0 };
        let root = parser.sum()?;
        match parser.peek() {
            None => Ok(Self { root, length: text.len() }),
            Some(token) => Err(parser.unexpected(&token, &root)),
        }
    }

    /// Every name that stands for a value or a part, with its stretch, in order
    /// of appearance, repeats included.
    #[must_use]
    pub fn names(&self) -> Vec<(&str, Range<usize>)> {
        let mut out = Vec::new();
        self.root.collect_names(&mut out);
        out
    }

    /// The name, if the expression is nothing but one name.
    #[must_use]
    pub fn as_name(&self) -> Option<&str> {
        match &self.root.kind {
            NodeKind::Name(name) => Some(name),
            _ => None,
        }
    }
}

impl Node {
    fn collect_names<'a>(&'a self, out: &mut Vec<(&'a str, Range<usize>)>) {
        match &self.kind {
            NodeKind::Number(_) => {}
            NodeKind::Name(name) => out.push((name, self.span.clone())),
            NodeKind::Member { part, .. } => {
                out.push((part, self.span.start..self.span.start + part.len()));
            }
            NodeKind::Call(_, arguments) => arguments.iter().for_each(|node| node.collect_names(out)),
            NodeKind::Negative(inner) => inner.collect_names(out),
            NodeKind::Sum(list) | NodeKind::Product(list) => {
                list.iter().for_each(|(_, node)| node.collect_names(out));
            }
            NodeKind::Power(base, exponent) => {
                base.collect_names(out);
                exponent.collect_names(out);
            }
        }
    }
}

#[derive(Clone, Debug, PartialEq)]
enum Kind {
    Number(f64),
    Name(String),
    Mark(char),
}

#[derive(Clone, Debug)]
struct Token {
    kind: Kind,
    span: Range<usize>,
    /// True if a space stands before it.
    spaced: bool,
}

fn lex(text: &str) -> Result<Vec<Token>, Fault> {
    let mut tokens = Vec::new();
    let mut place = 0;
    let mut spaced = false;
    while let Some(c) = text.get(place..).and_then(|rest| rest.chars().next()) {
        let rest = text.get(place..).unwrap_or("");
        if c.is_whitespace() {
            place += c.len_utf8();
            spaced = true;
            continue;
        }
        let (kind, length) = if c.is_ascii_alphabetic() {
            let length = rest.find(|c: char| !c.is_ascii_alphanumeric() && c != '_').unwrap_or(rest.len());
            if length > LONGEST_NAME {
                return Err(Fault::new("expression-limit", place..place + length, "this name is too long")
                    .found(format!("{length} characters"))
                    .expected(format!("at most {LONGEST_NAME}")));
            }
            (Kind::Name(rest[..length].to_owned()), length)
        } else if c.is_ascii_digit()
            || (c == '.'
                && rest[1..].starts_with(|c: char| c.is_ascii_digit())
                && !matches!(tokens.last(), Some(Token { kind: Kind::Name(_), .. })))
        {
            let (number, length) = read_number(rest).unwrap_or((f64::NAN, 1));
            if !number.is_finite() {
                return Err(Fault::new("overflow", place..place + length, "the number is too large")
                    .found(format!("`{}`", &rest[..length.min(40)]))
                    .expected("a size below 1.8e308"));
            }
            (Kind::Number(number), length)
        } else if "+-*/^(),.".contains(c) {
            (Kind::Mark(c), 1)
        } else {
            let length = c.len_utf8();
            let fault = Fault::new(
                "expression-syntax",
                place..place + length,
                "this character has no meaning in an expression",
            )
            .found(format!("`{}`", c.escape_debug()));
            return Err(match c {
                '\u{2212}' | '\u{2013}' => fault.action("write `-` for minus"),
                '\u{d7}' | '\u{b7}' | '\u{22c5}' => fault.action("write `*` for a product"),
                '[' | '{' => fault.action("use round brackets"),
                '%' => fault.action("write `0.01*`"),
                '_' => fault.action("names start with a letter"),
                _ => fault.expected("names, numbers, `+ - * / ^`, brackets, commas"),
            });
        };
        tokens.push(Token { kind, span: place..place + length, spaced });
        spaced = false;
        place += length;
    }
    Ok(tokens)
}

struct Parser {
    tokens: Vec<Token>,
    position: usize,
    end: usize,
    depth: usize,
}

impl Parser {
    fn peek(&self) -> Option<Token> {
        self.tokens.get(self.position).cloned()
    }

    fn mark(&self) -> Option<char> {
        match self.tokens.get(self.position) {
            Some(Token { kind: Kind::Mark(c), .. }) => Some(*c),
            _ => None,
        }
    }

    fn enter(&mut self, span: &Range<usize>) -> Result<(), Fault> {
        self.depth += 1;
        if self.depth > DEEPEST {
            return Err(Fault::new("expression-limit", span.clone(), "the expression is nested too deeply")
                .expected(format!("at most {DEEPEST} brackets, signs and powers inside each other")));
        }
        Ok(())
    }

    fn sum(&mut self) -> Result<Node, Fault> {
        let first = self.product()?;
        self.chain(first, ['+', '-'], Self::product, NodeKind::Sum)
    }

    fn product(&mut self) -> Result<Node, Fault> {
        let first = self.unary()?;
        self.chain(first, ['*', '/'], Self::unary, NodeKind::Product)
    }

    fn chain(
        &mut self,
        first: Node,
        marks: [char; 2],
        operand: fn(&mut Self) -> Result<Node, Fault>,
        make: fn(Vec<(bool, Node)>) -> NodeKind,
    ) -> Result<Node, Fault> {
        let start = first.span.start;
        let mut end = first.span.end;
        let mut list = vec![(false, first)];
        while let Some(mark) = self.mark().filter(|mark| marks.contains(mark)) {
            self.position += 1;
            if mark == '*' && self.mark() == Some('*') {
                let span = self.tokens.get(self.position).map_or(end..end, |token| token.span.clone());
                return Err(Fault::new("expression-syntax", span, "`**` is no operator")
                    .action("write `^` for a power"));
            }
            let node = operand(self)?;
            end = node.span.end;
            list.push((mark == marks[1], node));
        }
        if list.len() == 1
            && let Some((_, only)) = list.pop()
        {
            return Ok(only);
        }
        Ok(Node { span: start..end, kind: make(list) })
    }

    fn unary(&mut self) -> Result<Node, Fault> {
        let Some(sign) = self.mark().filter(|mark| matches!(mark, '-' | '+')) else {
            return self.power();
        };
        let span = self.tokens.get(self.position).map_or(0..0, |token| token.span.clone());
        self.enter(&span)?;
        self.position += 1;
        let inner = self.unary()?;
        self.depth -= 1;
        if sign == '+' {
            return Ok(inner);
        }
        Ok(Node { span: span.start..inner.span.end, kind: NodeKind::Negative(Box::new(inner)) })
    }

    fn power(&mut self) -> Result<Node, Fault> {
        let base = self.atom()?;
        if self.mark() != Some('^') {
            return Ok(base);
        }
        let span = self.tokens.get(self.position).map_or(0..0, |token| token.span.clone());
        self.enter(&span)?;
        self.position += 1;
        let exponent = self.unary()?;
        self.depth -= 1;
        let span = base.span.start..exponent.span.end;
        Ok(Node { span, kind: NodeKind::Power(Box::new(base), Box::new(exponent)) })
    }

    fn atom(&mut self) -> Result<Node, Fault> {
        let Some(token) = self.peek() else {
            return Err(Fault::new("expression-syntax", self.end..self.end, "the expression ends too early")
                .found("the end of the text")
                .expected("a name, a number or an opening bracket"));
        };
        match token.kind {
            Kind::Number(number) => {
                self.position += 1;
                Ok(Node { span: token.span, kind: NodeKind::Number(number) })
            }
            Kind::Name(name) => {
                self.position += 1;
                match self.mark() {
                    Some('(') => self.call(&name, token.span),
                    Some('.') => self.member(name, token.span),
                    _ => {
                        if Called::of(&name).is_some() {
                            return Err(Fault::new(
                                "expression-syntax",
                                token.span,
                                format!("`{name}` needs its argument"),
                            )
                            .action(format!("write `{name}(...)`")));
                        }
                        Ok(Node { span: token.span, kind: NodeKind::Name(name) })
                    }
                }
            }
            Kind::Mark('(') => {
                self.enter(&token.span)?;
                self.position += 1;
                let inner = self.sum()?;
                self.close(&token.span, &inner)?;
                self.depth -= 1;
                Ok(inner)
            }
            Kind::Mark(mark) => Err(Fault::new("expression-syntax", token.span, "a value is missing here")
                .found(format!("`{mark}`"))
                .expected("a name, a number or an opening bracket")),
        }
    }

    /// Takes the closing bracket; returns the byte after it.
    fn close(&mut self, opened: &Range<usize>, before: &Node) -> Result<usize, Fault> {
        match self.peek() {
            Some(Token { kind: Kind::Mark(')'), span, .. }) => {
                self.position += 1;
                Ok(span.end)
            }
            Some(token) => Err(self.unexpected(&token, before)),
            None => Err(Fault::new("expression-syntax", opened.clone(), "this bracket is never closed")
                .expected("a closing bracket")),
        }
    }

    fn call(&mut self, name: &str, span: Range<usize>) -> Result<Node, Fault> {
        let Some(called) = Called::of(name) else {
            let known = Function::ALL.iter().map(|function| function.word()).chain(["dot"]);
            let fault = Fault::new("unknown-function", span, format!("`{name}` is no known function"))
                .expected(format!("one of {}, dot", Function::ALL.map(Function::word).join(", ")));
            return Err(match crate::units::nearest(name, known) {
                Some(near) => fault.action(format!("write `{near}(...)`, if that is meant")),
                None => fault.action(format!("write `{name}*(...)` for a product")),
            });
        };
        let opened = self.peek().map_or(span.clone(), |token| token.span);
        self.enter(&opened)?;
        self.position += 1;
        let mut arguments = Vec::new();
        let end = loop {
            let argument = self.sum()?;
            if self.mark() == Some(',') {
                self.position += 1;
                arguments.push(argument);
                continue;
            }
            let end = self.close(&opened, &argument)?;
            arguments.push(argument);
            break end;
        };
        self.depth -= 1;
        let span = span.start..end;
        let wanted = called.arguments();
        if arguments.len() != wanted {
            return Err(Fault::new(
                "expression-syntax",
                span,
                format!("`{name}` has the wrong number of arguments"),
            )
            .found(arguments.len().to_string())
            .expected(wanted.to_string()));
        }
        Ok(Node { span, kind: NodeKind::Call(called, arguments) })
    }

    fn member(&mut self, part: String, span: Range<usize>) -> Result<Node, Fault> {
        self.position += 1;
        let Some(Token { kind: Kind::Name(member), span: member_span, .. }) = self.peek() else {
            let place = self.peek().map_or(self.end..self.end, |token| token.span);
            return Err(Fault::new(
                "expression-syntax",
                place,
                format!("an operator's name is missing after `{part}.`"),
            )
            .expected(format!("for example `{part}.z`")));
        };
        self.position += 1;
        let mut end = member_span.end;
        let mut arguments = Vec::new();
        if self.mark() == Some('(') {
            let opened = self.peek().map_or(span.clone(), |token| token.span);
            self.position += 1;
            loop {
                arguments.push(self.index(&opened)?);
                match self.peek() {
                    Some(Token { kind: Kind::Mark(','), .. }) => self.position += 1,
                    Some(Token { kind: Kind::Mark(')'), span, .. }) => {
                        self.position += 1;
                        end = span.end;
                        break;
                    }
                    other => {
                        let place = other.map_or(self.end..self.end, |token| token.span);
                        return Err(Fault::new("expression-syntax", place, "`,` or `)` is expected here"));
                    }
                }
            }
        }
        let span = span.start..end;
        Ok(Node { span, kind: NodeKind::Member { part, member, arguments, member_span } })
    }

    fn index(&mut self, opened: &Range<usize>) -> Result<usize, Fault> {
        let token = self.peek();
        let place = token.as_ref().map_or(opened.clone(), |token| token.span.clone());
        match token {
            Some(Token { kind: Kind::Number(number), .. })
                if (1.0..=1e6).contains(&number) && libm::floor(number) == number =>
            {
                self.position += 1;
                Ok(number as usize)
            }
            _ => Err(Fault::new("expression-syntax", place, "a state's number is expected here")
                .expected("a whole number from 1")),
        }
    }

    /// A token that cannot follow `before`.
    fn unexpected(&self, token: &Token, before: &Node) -> Fault {
        match (&token.kind, &before.kind) {
            (Kind::Name(unit), _) if self.follows_number() => {
                Fault::new("unit-in-expression", token.span.clone(), "an expression holds no units")
                    .found(format!("`{unit}` after a number"))
                    .action(format!("give the quantity a name under `constants` and write that name here; for a product write `*{unit}`"))
            }
            (Kind::Mark(')'), _) => {
                Fault::new("expression-syntax", token.span.clone(), "this bracket was never opened")
            }
            (Kind::Mark('.'), _) if !token.spaced => {
                Fault::new("expression-syntax", token.span.clone(), "only a part's name has operators")
                    .expected("for example `S.z`")
            }
            (Kind::Mark(c), _) => {
                Fault::new("expression-syntax", token.span.clone(), format!("`{c}` is not expected here"))
            }
            _ => Fault::new("expression-syntax", token.span.clone(), "an operator is missing before this")
                .expected("`+`, `-`, `*`, `/` or `^`"),
        }
    }

    fn follows_number(&self) -> bool {
        self.position
            .checked_sub(1)
            .and_then(|before| self.tokens.get(before))
            .is_some_and(|token| matches!(token.kind, Kind::Number(_)))
    }
}

impl Called {
    fn of(name: &str) -> Option<Self> {
        if name == "dot" { Some(Self::Dot) } else { Function::of(name).map(Self::Function) }
    }

    fn arguments(self) -> usize {
        match self {
            Self::Function(Function::Min | Function::Max) | Self::Dot => 2,
            Self::Function(_) => 1,
        }
    }

    pub(super) fn word(self) -> &'static str {
        match self {
            Self::Function(function) => function.word(),
            Self::Dot => "dot",
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn shown(text: &str) -> String {
        Expression::parse(text).unwrap().to_string()
    }

    fn fault(text: &str) -> Fault {
        Expression::parse(text).unwrap_err()
    }

    #[test]
    fn powers_bind_tighter_than_minus_and_to_the_right() {
        assert_eq!(shown("-x^2"), "-x^2.0");
        assert_eq!(shown("(-x)^2"), "(-x)^2.0");
        assert_eq!(shown("a^b^c"), "a^b^c");
        assert_eq!(shown("(a^b)^c"), "(a^b)^c");
        assert_eq!(shown("2^-x"), "2.0^-x");
        assert_eq!(shown("a - (b - c)"), "a - (b - c)");
        assert_eq!(shown("a/(b*c)*d"), "a/(b*c)*d");
        assert_eq!(shown(".5*1e-3"), "0.5*0.001");
        assert_eq!(shown("h*A*dot(S, I) + st.jump(1, 2)"), "h*A*dot(S, I) + st.jump(1, 2)");
    }

    #[test]
    fn a_unit_in_an_expression_is_explained() {
        let found = fault("2 nm + well");
        assert_eq!((found.code, found.span.clone()), ("unit-in-expression", 2..4));
        assert!(found.action.unwrap().contains("constants"));
        assert_eq!(fault("sqrt(2meV)").span, 6..9);
    }

    #[test]
    fn mistakes_point_at_their_place() {
        assert_eq!(fault("a + ").span, 3..3);
        assert_eq!(fault("a + * b").span, 4..5);
        assert_eq!(fault("(a + b").span, 0..1);
        assert_eq!(fault("a) + b").span, 1..2);
        assert_eq!(fault("sqt(a)").action.as_deref(), Some("write `sqrt(...)`, if that is meant"));
        assert_eq!(fault("min(a)").found.as_deref(), Some("1"));
        assert_eq!(fault("a ** b").action.as_deref(), Some("write `^` for a power"));
        assert_eq!(fault("a b").code, "expression-syntax");
        assert_eq!(fault("S.").span, 2..2);
        assert_eq!(fault("st.jump(1.5, 2)").span, 8..11);
        assert_eq!(fault("1e999").code, "overflow");
        assert_eq!(fault("").span, 0..0);
        assert_eq!(fault("sqrt").code, "expression-syntax");
    }

    #[test]
    fn limits_hold() {
        let nested = |n: usize| format!("{}x{}", "(".repeat(n), ")".repeat(n));
        assert!(Expression::parse(&nested(200)).is_ok());
        assert_eq!(fault(&nested(201)).code, "expression-limit");
        assert_eq!(fault(&"-".repeat(9_999)).code, "expression-limit");
        assert_eq!(fault(&format!("x{}", "^x".repeat(4_000))).code, "expression-limit");
        assert_eq!(fault(&"x".repeat(10_001)).code, "expression-limit");
        assert_eq!(fault(&format!("1 + {}", "x".repeat(41))).span, 4..45);
        assert!(Expression::parse(&format!("x{}", "+x".repeat(4_999))).is_ok());
        // 10,000 characters of more than one byte are measured as characters.
        assert_eq!(fault(&"\u{e9}".repeat(10_000)).code, "expression-syntax");
    }

    /// Random syntax trees as text, with brackets everywhere.
    fn texts() -> impl Strategy<Value = String> {
        let leaf = prop_oneof![
            Just("x".to_owned()),
            Just("S.z".to_owned()),
            Just("p.couple(1, 2)".to_owned()),
            (0u32..100_000, 0u32..6).prop_map(|(n, e)| format!("{n}e-{e}")),
        ];
        leaf.prop_recursive(6, 60, 3, |inner| {
            prop_oneof![
                (inner.clone(), "[-+*/^]", inner.clone()).prop_map(|(a, op, b)| format!("({a}){op}({b})")),
                inner.clone().prop_map(|a| format!("-({a})")),
                inner.clone().prop_map(|a| format!("tanh({a})")),
                (inner.clone(), inner).prop_map(|(a, b)| format!("max({a}, {b})")),
            ]
        })
    }

    /// The tree without its places, in Lisp brackets; every grouping shows.
    fn grouped(node: &Node) -> String {
        let list = |word: &str, nodes: Vec<String>| format!("[{word} {}]", nodes.join(" "));
        match &node.kind {
            NodeKind::Number(number) => number.to_string(),
            NodeKind::Name(name) => name.clone(),
            NodeKind::Member { part, member, arguments, .. } => format!("{part}.{member}{arguments:?}"),
            NodeKind::Call(called, arguments) => list(called.word(), arguments.iter().map(grouped).collect()),
            NodeKind::Negative(inner) => list("neg", vec![grouped(inner)]),
            NodeKind::Sum(terms) => {
                list("sum", terms.iter().map(|(m, n)| format!("{m}{}", grouped(n))).collect())
            }
            NodeKind::Product(terms) => {
                list("mul", terms.iter().map(|(m, n)| format!("{m}{}", grouped(n))).collect())
            }
            NodeKind::Power(a, b) => list("pow", vec![grouped(a), grouped(b)]),
        }
    }

    proptest! {
        #[test]
        fn printing_and_parsing_give_the_same_tree(text in texts()) {
            let first = Expression::parse(&text).unwrap();
            let printed = first.to_string();
            let second = Expression::parse(&printed).unwrap();
            prop_assert_eq!(grouped(&first.root), grouped(&second.root), "{} | {}", text, printed);
        }

        #[test]
        fn any_text_is_parsed_or_refused_with_a_span_inside(text in "\\PC{0,60}") {
            if let Err(fault) = Expression::parse(&text) {
                prop_assert!(text.get(fault.span.clone()).is_some(), "{:?}", fault.span);
            }
        }

        #[test]
        fn mark_soup_is_parsed_or_refused_with_a_span_inside(text in "[-+*/^(),. xe1\u{b5}S]{0,60}") {
            if let Err(fault) = Expression::parse(&text) {
                prop_assert!(text.get(fault.span.clone()).is_some(), "{:?}", fault.span);
            }
        }
    }
}
