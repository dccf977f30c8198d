//! Syntax tree back to text.

use std::fmt;

use super::Expression;
use super::text::{Node, NodeKind};

impl fmt::Display for Expression {
    /// Text that parses to the same tree, with the fewest brackets.
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        self.root.print(out, 0)
    }
}

impl Node {
    /// Binding strength: sum 1, product 2, minus 3, power 4, atom 5.
    fn strength(&self) -> u8 {
        match self.kind {
            NodeKind::Sum(_) => 1,
            NodeKind::Product(_) => 2,
            NodeKind::Negative(_) => 3,
            NodeKind::Power(..) => 4,
            _ => 5,
        }
    }

    fn print(&self, out: &mut fmt::Formatter<'_>, least: u8) -> fmt::Result {
        if self.strength() < least {
            out.write_str("(")?;
            self.print(out, 0)?;
            return out.write_str(")");
        }
        match &self.kind {
            NodeKind::Number(number) => write!(out, "{number:?}"),
            NodeKind::Name(name) => out.write_str(name),
            NodeKind::Member { part, member, arguments, .. } => {
                write!(out, "{part}.{member}")?;
                for (idx, argument) in arguments.iter().enumerate() {
                    write!(out, "{}{argument}", if idx == 0 { "(" } else { ", " })?;
                }
                out.write_str(if arguments.is_empty() { "" } else { ")" })
            }
            NodeKind::Call(called, arguments) => {
                write!(out, "{}(", called.word())?;
                for (idx, argument) in arguments.iter().enumerate() {
                    out.write_str(if idx == 0 { "" } else { ", " })?;
                    argument.print(out, 0)?;
                }
                out.write_str(")")
            }
            NodeKind::Negative(inner) => {
                out.write_str("-")?;
                inner.print(out, 3)
            }
            NodeKind::Sum(list) => Self::print_chain(out, list, [" + ", " - "], 2),
            NodeKind::Product(list) => Self::print_chain(out, list, ["*", "/"], 3),
            NodeKind::Power(base, exponent) => {
                base.print(out, 5)?;
                out.write_str("^")?;
                exponent.print(out, 3)
            }
        }
    }

    fn print_chain(
        out: &mut fmt::Formatter<'_>,
        list: &[(bool, Self)],
        marks: [&str; 2],
        least: u8,
    ) -> fmt::Result {
        for (idx, (second, node)) in list.iter().enumerate() {
            if idx > 0 {
                out.write_str(marks[usize::from(*second)])?;
            }
            node.print(out, least)?;
        }
        Ok(())
    }
}
