//! Which block of a sphere's levels a reference means.
//!
//! In: `where`. Out: a [`Block`]: the value of m and, where levels are counted
//! by it, of l.

use crate::diagnostic::{Diagnostic, Error, Result};
use crate::model::Request;
use crate::spec::{Radial, System};

/// Highest quantum number that a spec may ask for.
const HIGHEST: f64 = 1000.0;

/// A block.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Block {
    /// Modulus of the magnetic quantum number; its sign changes no level.
    pub m: usize,
    /// The angular momentum in which levels are counted, where it is given.
    pub l: Option<usize>,
}

impl Block {
    /// Reads the values that select the block.
    ///
    /// # Errors
    /// `m` missing, values that no state has, or `l` where the field is not zero at
    /// the operating point.
    pub fn read(system: &System, radial: &Radial, request: &Request<'_>) -> Result<Self> {
        let value = |name: &str| request.block.iter().find(|(key, _)| key == name).map(|(_, value)| *value);
        let Some(m) = value("m") else {
            let advice = if value("l").is_some() { "add `m`" } else { "add `where: {l: 0, m: 0}`" };
            return Err(Error::spec(
                Diagnostic::new(
                    "no-block",
                    format!("levels of `{}` are counted within `where`", system.name),
                )
                .expected("`where: {l: , m: }`, or `where: {m: }` where l is not a good quantum number")
                .action(advice),
            ));
        };
        let far = [Some(m), value("l")].into_iter().flatten().find(|x| x.abs() > HIGHEST);
        if let Some(number) = far {
            return Err(Error::spec(
                Diagnostic::new("no-such-block", format!("a quantum number of {number} is out of reach"))
                    .expected(format!("at most {HIGHEST}")),
            ));
        }
        let m = m.abs() as usize;
        let l = value("l").map(|l| l as usize);
        if let Some(l) = l {
            if m > l {
                return Err(Error::spec(
                    Diagnostic::new("no-such-block", format!("no state has l = {l} and m = {m}"))
                        .expected(format!("`m` from -{l} to {l}"))
                        .action("lower `m`, or raise `l`"),
                ));
            }
            let field = radial.field.as_ref().map_or(0.0, |field| field.value(request.at, 0.0));
            if field != 0.0 {
                return Err(Error::spec(
                    Diagnostic::new(
                        "not-conserved",
                        format!("l is no good quantum number of `{}` at the operating point", system.name),
                    )
                    .found(format!("a field of {field:e} V/nm there"))
                    .expected("no field at the operating point, where levels are counted by l")
                    .action(format!("count within `where: {{m: {m}}}`, or move `at`")),
                ));
            }
        }
        Ok(Self { m, l })
    }
}
