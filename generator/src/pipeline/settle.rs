//! One level, refined until its series has settled.
//!
//! In: a system, a level reference and the control. Out: a [`Settled`]: the
//! level at the finer of the last two refinements, with the change between them
//! in its uncertainty.
//!
//! Source of the rule: the record's definition of uncertainty; the change
//! between two refinements bounds the error of the coarser one, since
//! convergence is faster than any power, so four times the change is a
//! generous estimate for the finer.

use crate::diagnostic::{Diagnostic, Error, Result};
use crate::model::{self, Built};
use crate::outcome::Note;
use crate::series::{self, AnyLevel};
use crate::spec::{LevelRef, System};

/// Refinements tried before the program gives up.
const REFINEMENTS: usize = 7;

/// Relative change above which E0 is refined further.
const SETTLED_ENERGY: f64 = 1e-10;

/// The same for the coefficients that the formula uses.
const SETTLED_USED: f64 = 2e-10;

/// The same for the coefficients above the formula's order.
const SETTLED_UNUSED: f64 = 2e-7;

/// Factor between an estimate of an error and the stated uncertainty.
pub const SAFETY: f64 = 4.0;

/// What a level is solved for.
#[derive(Clone, Copy, Debug)]
pub struct Purpose {
    /// Operating point, control unit.
    pub at: f64,
    /// Where exact levels will be asked for.
    pub reach: (f64, f64),
    /// Highest level of this block that the spec asks for.
    pub highest_level: usize,
    /// Highest power that a formula uses.
    pub order: usize,
    /// True if contributions, mixing and neighbouring levels are wanted too.
    pub listed: bool,
}

/// A settled level.
#[derive(Clone)]
pub struct Settled {
    /// The finer model.
    pub built: Built,
    /// The one before it; `None` for a finite system.
    pub coarse: Option<Built>,
    /// The level in the finer model.
    pub level: AnyLevel,
    /// Refinement of the finer model.
    pub refinement: usize,
    /// Uncertainty of E0 to E5 with the change in it, model units.
    pub uncertainty: [f64; 6],
    /// Remarks about how well it settled.
    pub notes: Vec<Note>,
}

/// Solves `level` of `system`, starting at refinement `first`.
///
/// # Errors
/// Those of the model and series stages; a basis that cannot be enlarged
/// further ends the search with what it has, noted, unless not even E0 has
/// settled to 1e-6.
pub fn settle(system: &System, level: &LevelRef, purpose: Purpose, first: usize) -> Result<Settled> {
    let build = |refinement: usize| {
        model::build(
            system,
            &model::Request {
                at: purpose.at,
                reach: purpose.reach,
                level: purpose.highest_level.max(level.level),
                block: &level.block,
                refinement,
            },
        )
        .map_err(|error| locate(error, level))
    };
    let full = |built: &Built| {
        let solve = if purpose.listed { series::solve } else { series::coefficients };
        solve(built, level.level).map_err(|e| locate(e, level))
    };
    let mut coarse_built = build(first)?;
    // Of the coarser model only the series counts.
    let mut coarse = if coarse_built.refinable {
        series::coefficients(&coarse_built, level.level).map_err(|e| locate(e, level))?
    } else {
        full(&coarse_built)?
    };
    if !coarse_built.refinable {
        let uncertainty = *coarse.uncertainty();
        return Ok(Settled {
            built: coarse_built,
            coarse: None,
            level: coarse,
            refinement: first,
            uncertainty,
            notes: Vec::new(),
        });
    }
    let mut refinement = first;
    loop {
        refinement += 1;
        let built = build(refinement)?;
        let fine = full(&built)?;
        let (old, new) = (coarse.energies(), fine.energies());
        let mut uncertainty = *fine.uncertainty();
        for power in 0..uncertainty.len() {
            if fine.zero()[power].is_none() {
                uncertainty[power] = uncertainty[power].max(SAFETY * (new[power] - old[power]).abs());
            }
        }
        let unsettled = (0..5).find(|&power| {
            let limit = if power == 0 {
                SETTLED_ENERGY
            } else if power <= purpose.order {
                SETTLED_USED
            } else {
                SETTLED_UNUSED
            };
            // A coefficient far below the terms it is summed from cannot settle
            // relative to itself; the terms are its natural scale.
            let part = if power <= purpose.order { 1e-13 } else { 1e-11 };
            let floor = part * fine.largest_term()[power];
            uncertainty[power] > (limit * new[power].abs()).max(floor)
        });
        let last = refinement >= first + REFINEMENTS || !built.refinable;
        match unsettled {
            Some(power) if last => {
                if uncertainty[0] > 1e-6 * new[0].abs().max(fine.largest_term()[0]) {
                    return Err(Error::accuracy(
                        Diagnostic::new(
                            "not-settled",
                            format!(
                                "level {} of `{}` does not settle as the basis grows",
                                level.level, system.name
                            ),
                        )
                        .at(Some(level.place.clone()))
                        .found(format!(
                            "E0 = {:e} uncertain by {:e} with {} basis states",
                            new[0], uncertainty[0], built.size
                        ))
                        .expected("an uncertainty below 1e-6 of the level")
                        .action(
                            "check that the Hamiltonian is bounded from below and that the level is bound",
                        ),
                    ));
                }
                let notes = vec![Note {
                    code: "unsettled".into(),
                    text: format!(
                        "coefficient {power} of `{}` level {} still changes in the {} digit as the basis grows; \
                         its uncertainty says by how much",
                        system.name,
                        level.level,
                        ordinal_digit(uncertainty[power], new[power]),
                    ),
                }];
                return Ok(Settled {
                    built,
                    coarse: Some(coarse_built),
                    level: fine,
                    refinement,
                    uncertainty,
                    notes,
                });
            }
            Some(_) => {
                coarse_built = built;
                coarse = fine;
            }
            None => {
                return Ok(Settled {
                    built,
                    coarse: Some(coarse_built),
                    level: fine,
                    refinement,
                    uncertainty,
                    notes: Vec::new(),
                });
            }
        }
    }
}

/// Points an error without a place at the level reference that caused it.
fn locate(error: Error, level: &LevelRef) -> Error {
    let put = |list: Vec<Diagnostic>| {
        list.into_iter()
            .map(|mut one| {
                one.place = one.place.or_else(|| Some(level.place.clone()));
                one
            })
            .collect()
    };
    match error {
        Error::Spec(list) => Error::Spec(put(list)),
        Error::Accuracy(list) => Error::Accuracy(put(list)),
        Error::System(list) => Error::System(list),
    }
}

/// Which significant digit an uncertainty reaches, as a word.
fn ordinal_digit(uncertainty: f64, value: f64) -> String {
    if value == 0.0 || uncertainty == 0.0 {
        return "first".into();
    }
    let digit =
        (libm::floor(libm::log10(value.abs())) - libm::floor(libm::log10(uncertainty))).max(0.0) as usize + 1;
    match digit {
        1 => "first".into(),
        2 => "second".into(),
        3 => "third".into(),
        n => format!("{n}th"),
    }
}
