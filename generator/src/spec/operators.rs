//! Which operators each kind of part has, by their names in the language.

use super::PartKind;
use crate::expr::{OperatorSymbol, PartOperator};
use crate::units::{Fault, Unit, Value, constants, decimal, nearest};

impl PartKind {
    /// Names of the operators.
    #[must_use]
    pub fn operator_names(self) -> &'static [&'static str] {
        match self {
            Self::Spin(_) => &["x", "y", "z", "raise", "lower", "sq"],
            Self::Rotor => &["sq", "z", "cos", "cos2"],
            Self::Oscillator => &["number", "raise", "lower", "x", "p"],
            Self::Phase => &["number", "cos", "sin"],
            Self::Interval { .. } => &["x", "p"],
            Self::States(_) => &["projector", "jump", "couple"],
        }
    }

    /// True if `dot` takes the part.
    #[must_use]
    pub fn is_vector(self) -> bool {
        matches!(self, Self::Spin(_))
    }

    /// The operator of this name, with what its own unit is worth (see
    /// [`Parts`](super::Parts)).
    ///
    /// # Errors
    /// If the part has no such operator, or the arguments are not numbers of its
    /// states; the stretch of the fault is empty.
    pub fn operator(self, name: &str, arguments: &[usize]) -> Result<OperatorSymbol, Fault> {
        let names = self.operator_names();
        if !names.contains(&name) {
            let fault = Fault::new("unknown-operator", 0..0, format!("this part has no operator `{name}`"))
                .found(format!("`.{name}`"))
                .expected(format!("one of .{}", names.join(", .")));
            return Err(match nearest(name, names.iter().copied()) {
                Some(near) => fault.action(format!("write `.{near}`, if that is meant")),
                None => fault,
            });
        }
        let wanted = match name {
            "projector" => 1,
            "jump" | "couple" => 2,
            _ => 0,
        };
        if arguments.len() != wanted {
            return Err(Fault::new(
                "unknown-operator",
                0..0,
                format!("`.{name}` takes {wanted} numbers of states"),
            )
            .found(arguments.len().to_string()));
        }
        if let Self::States(count) = self
            && let Some(wrong) = arguments.iter().find(|&&state| state == 0 || state > count)
        {
            return Err(Fault::new("unknown-operator", 0..0, "there is no state of this number")
                .found(wrong.to_string())
                .expected(format!("a whole number from 1 to {count}")));
        }
        let operator = match (name, arguments) {
            ("x", _) => PartOperator::X,
            ("y", _) => PartOperator::Y,
            ("z", _) => PartOperator::Z,
            ("p", _) => PartOperator::P,
            ("raise", _) => PartOperator::Raise,
            ("lower", _) => PartOperator::Lower,
            ("sq", _) => PartOperator::Sq,
            ("number", _) => PartOperator::Number,
            ("cos", _) => PartOperator::Cos,
            ("cos2", _) => PartOperator::Cos2,
            ("sin", _) => PartOperator::Sin,
            ("projector", [state]) => PartOperator::Projector(*state),
            ("jump", [to, from]) => PartOperator::Jump(*to, *from),
            ("couple", [one, other]) => PartOperator::Couple(*one, *other),
            _ => return Err(Fault::new("unknown-operator", 0..0, format!("`.{name}` is no operator"))),
        };
        let coordinate =
            operator == PartOperator::X && matches!(self, Self::Oscillator | Self::Interval { .. });
        Ok(OperatorSymbol { operator, size: self.size_of(operator)?, coordinate })
    }

    /// One unit of the operator's matrix: 1 nm for `.x` and hbar/nm for `.p` of an
    /// interval of lengths, 1 for all others.
    fn size_of(self, operator: PartOperator) -> Result<Value, Fault> {
        let Self::Interval { length: true, .. } = self else {
            return Ok(Value::pure(1.0));
        };
        let nanometre = Unit::parse("nm")?.value(1.0);
        match (operator, constants::constant("hbar")) {
            (PartOperator::P, Some(hbar)) => {
                let dimension = hbar.dimension.over(nanometre.dimension).unwrap_or_default();
                Ok(Value { number: decimal::quotient(hbar.number, nanometre.number), dimension })
            }
            _ => Ok(nanometre),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::units::Dimension;

    #[test]
    fn a_length_has_momenta_in_hbar_per_nanometre() {
        let well = PartKind::Interval { from: 0.0, to: 9.0, length: true };
        let momentum = well.operator("p", &[]).unwrap().size;
        assert_eq!(momentum.dimension, Dimension::MOMENTUM);
        // p^2 / (2 me) at p = hbar/nm is Eh a0^2 / (2 nm^2), by CODATA 2022.
        let mass = constants::constant("me").unwrap().number;
        let energy = momentum.number * momentum.number / (2.0 * mass);
        assert!((energy / (27.211386245981 * 0.0529177210544 * 0.0529177210544 / 2.0) - 1.0).abs() < 1e-9);
        assert!(well.operator("x", &[]).unwrap().coordinate);
        assert!(!PartKind::Spin(1).operator("x", &[]).unwrap().coordinate);
    }

    #[test]
    fn operators_and_their_arguments_are_checked() {
        let states = PartKind::States(3);
        assert_eq!(states.operator("jump", &[3, 1]).unwrap().operator, PartOperator::Jump(3, 1));
        assert!(states.operator("jump", &[3]).is_err());
        assert!(states.operator("projector", &[4]).is_err());
        let fault = PartKind::Rotor.operator("cos22", &[]).unwrap_err();
        assert_eq!(fault.action.as_deref(), Some("write `.cos2`, if that is meant"));
        for kind in [PartKind::Spin(1), PartKind::Rotor, PartKind::Oscillator, PartKind::Phase] {
            for name in kind.operator_names() {
                assert!(kind.operator(name, &[]).is_ok(), "{name}");
            }
        }
    }
}
