//! Which values each row of a sweep takes.
//!
//! In: `NAME=FROM:TO:COUNT`, `NAME=normal(MEAN, DEVIATION)` or
//! `NAME=uniform(FROM, TO)`, each number with or without a unit. Out: a
//! [`Plan`] that gives the values of any row by its number alone.

use std::ops::Range;

use super::random;
use crate::diagnostic::{Diagnostic, Error, Result};
use crate::units::{Quantity, Unit};

/// Largest number of rows.
const MOST_ROWS: u64 = 1 << 40;

/// How one constant varies, in its unit.
#[derive(Clone, Debug, PartialEq)]
pub enum Law {
    /// `count` values from the first to the last, both ends included.
    Grid {
        /// First.
        from: f64,
        /// Last.
        to: f64,
        /// How many.
        count: u64,
    },
    /// Normally distributed.
    Normal {
        /// Mean.
        mean: f64,
        /// Standard deviation.
        deviation: f64,
    },
    /// Uniformly distributed.
    Uniform {
        /// Lower end.
        from: f64,
        /// Upper end.
        to: f64,
    },
}

/// One varied constant.
#[derive(Clone, Debug, PartialEq)]
pub struct Vary {
    /// Constant's name.
    pub name: String,
    /// Unit of its values as text; empty where none was written.
    pub unit: String,
    /// How it varies.
    pub law: Law,
}

fn wrong(text: &str, what: impl Into<String>) -> Error {
    Error::spec(
        Diagnostic::new("vary-syntax", what)
            .found(format!("`--vary {text}`"))
            .expected("NAME=FROM:TO:COUNT, NAME=normal(MEAN, DEVIATION) or NAME=uniform(FROM, TO)")
            .action("for example `--vary width='8 nm:10 nm:21'`"),
    )
}

/// Two numbers in the unit of the first.
fn pair(text: &str, first: &str, second: &str) -> Result<(f64, f64, String)> {
    let read = |part: &str| {
        Quantity::parse(part).map_err(|_| wrong(text, format!("`{}` is no quantity", part.trim())))
    };
    let (a, b) = (read(first)?, read(second)?);
    let unit: Option<&Unit> = a.unit.as_ref().or(b.unit.as_ref());
    let Some(unit) = unit else {
        return Ok((a.number(), b.number(), String::new()));
    };
    let number = |quantity: &Quantity| {
        if quantity.is_bare() {
            return Ok(quantity.number());
        }
        quantity.in_unit(unit).map_err(|_| wrong(text, "the two numbers have units that do not agree"))
    };
    Ok((number(&a)?, number(&b)?, unit.symbol.clone()))
}

impl Vary {
    /// Reads the value of one `--vary`.
    ///
    /// # Errors
    /// Anything that is not one of the three forms.
    pub fn parse(text: &str) -> Result<Self> {
        let (name, law) = text.split_once('=').ok_or_else(|| wrong(text, "`=` is missing"))?;
        let (name, law) = (name.trim().to_owned(), law.trim());
        if name.is_empty() {
            return Err(wrong(text, "the constant's name is missing"));
        }
        let call = |word: &str| {
            law.strip_prefix(word)
                .and_then(|rest| rest.trim_start().strip_prefix('('))
                .and_then(|rest| rest.trim_end().strip_suffix(')'))
                .and_then(|rest| rest.split_once(','))
        };
        if let Some((mean, deviation)) = call("normal") {
            let (mean, deviation, unit) = pair(text, mean, deviation)?;
            if deviation < 0.0 {
                return Err(wrong(text, "the deviation is negative"));
            }
            return Ok(Self { name, unit, law: Law::Normal { mean, deviation } });
        }
        if let Some((from, to)) = call("uniform") {
            let (from, to, unit) = pair(text, from, to)?;
            return Ok(Self { name, unit, law: Law::Uniform { from, to } });
        }
        let parts: Vec<&str> = law.split(':').collect();
        let [from, to, count] = parts.as_slice() else {
            return Err(wrong(text, "this is neither a grid nor a distribution"));
        };
        let count: u64 = count
            .trim()
            .parse()
            .ok()
            .filter(|count| *count >= 1)
            .ok_or_else(|| wrong(text, format!("`{}` is no number of values", count.trim())))?;
        let (from, to, unit) = pair(text, from, to)?;
        Ok(Self { name, unit, law: Law::Grid { from, to, count } })
    }

    fn is_grid(&self) -> bool {
        matches!(self.law, Law::Grid { .. })
    }
}

/// All rows of a sweep.
#[derive(Clone, Debug, PartialEq)]
pub struct Plan {
    /// Varied constants, in the order of the call; the last grid runs fastest.
    pub vary: Vec<Vary>,
    /// Draws per grid point; 1 if nothing is random.
    draws: u64,
    /// Seed of the draws.
    seed: u64,
    /// Number of rows.
    pub rows: u64,
}

impl Plan {
    /// A plan; `draws` is how often each grid point is drawn.
    ///
    /// # Errors
    /// The same name twice, distributions without `draws` or the other way
    /// round, more rows than can be counted.
    pub fn new(vary: Vec<Vary>, draws: Option<u64>, seed: u64) -> Result<Self> {
        let message = |text: String| Error::spec(Diagnostic::new("sweep", text));
        for (idx, one) in vary.iter().enumerate() {
            if vary.iter().take(idx).any(|other| other.name == one.name) {
                return Err(message(format!("`{}` is varied twice", one.name)));
            }
        }
        let random = vary.iter().any(|one| !one.is_grid());
        let draws = match (random, draws) {
            (true, None) => return Err(message("random draws need `--draws COUNT`".to_owned())),
            (false, Some(_)) => {
                return Err(message("`--draws` needs a `normal` or `uniform` constant".to_owned()));
            }
            (_, draws) => draws.unwrap_or(1),
        };
        let mut rows = draws;
        for one in &vary {
            if let Law::Grid { count, .. } = one.law {
                rows = rows.saturating_mul(count);
            }
        }
        if rows == 0 || rows > MOST_ROWS {
            return Err(message(format!("the sweep has {rows} rows; 1 to {MOST_ROWS} are possible")));
        }
        Ok(Self { vary, draws, seed, rows })
    }

    /// Values of a row, in the order of `vary`.
    #[must_use]
    pub fn values(&self, row: u64) -> Vec<f64> {
        let mut point = row / self.draws;
        let mut values = vec![0.0; self.vary.len()];
        // The last grid runs fastest; draws of one point stand together.
        for (value, one) in values.iter_mut().zip(&self.vary).rev() {
            if let Law::Grid { from, to, count } = one.law {
                let idx = point % count;
                point /= count;
                *value = if idx + 1 == count && count > 1 {
                    to
                } else {
                    from + (to - from) * (idx as f64 / (count.max(2) - 1) as f64)
                };
            }
        }
        for (idx, (value, one)) in values.iter_mut().zip(&self.vary).enumerate() {
            // Two numbers of the stream per constant and row.
            let position = (row * self.vary.len() as u64 + idx as u64).wrapping_mul(2);
            match one.law {
                Law::Grid { .. } => {}
                Law::Normal { mean, deviation } => {
                    *value = mean + deviation * random::normal(self.seed, position);
                }
                Law::Uniform { from, to } => {
                    *value = from + (to - from) * random::unit(self.seed, position);
                }
            }
        }
        values
    }

    /// Rows of the k-th of n parts, k from 1: parts follow each other without
    /// gap or overlap.
    #[must_use]
    pub fn slice(&self, k: u64, n: u64) -> Range<u64> {
        let n = u128::from(n.max(1));
        let cut = |k: u64| {
            let at = u128::from(self.rows) * u128::from(k) / n;
            u64::try_from(at).unwrap_or(self.rows).min(self.rows)
        };
        cut(k.saturating_sub(1))..cut(k)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn plan(list: &[&str], draws: Option<u64>) -> Plan {
        let vary = list.iter().map(|text| Vary::parse(text).expect("reads")).collect();
        Plan::new(vary, draws, 7).expect("plans")
    }

    #[test]
    fn grids_hold_both_ends_and_the_last_runs_fastest() {
        let plan = plan(&["a=8 nm:10 nm:3", "b=0:1:2"], None);
        let rows: Vec<Vec<f64>> = (0..plan.rows).map(|row| plan.values(row)).collect();
        assert_eq!(rows, [[8.0, 0.0], [8.0, 1.0], [9.0, 0.0], [9.0, 1.0], [10.0, 0.0], [10.0, 1.0]]);
        assert_eq!(plan.vary[0].unit, "nm");
    }

    #[test]
    fn units_of_a_pair_are_converted_to_the_first() {
        let vary = Vary::parse("w = normal(9 nm, 100 pm)").expect("reads");
        assert_eq!(vary.law, Law::Normal { mean: 9.0, deviation: 0.1 });
        assert_eq!(Vary::parse("w=uniform(8, 9 nm)").expect("reads").unit, "nm");
    }

    #[test]
    fn slices_cover_every_row_once() {
        let plan = plan(&["a=0:1:10"], None);
        for n in 1..=13 {
            let mut rows = Vec::new();
            for k in 1..=n {
                rows.extend(plan.slice(k, n));
            }
            assert_eq!(rows, (0..10).collect::<Vec<_>>());
        }
    }

    #[test]
    fn draws_depend_on_their_row_and_seed_alone() {
        let plan = plan(&["a=normal(0, 1)", "b=uniform(2, 3)"], Some(1000));
        assert_eq!(plan.values(5), plan.values(5));
        let mut seen: Vec<u64> = (0..1000).map(|row| plan.values(row)[0].to_bits()).collect();
        seen.sort_unstable();
        seen.dedup();
        assert_eq!(seen.len(), 1000);
        assert!((0..1000).all(|row| (2.0..3.0).contains(&plan.values(row)[1])));
    }

    #[test]
    fn wrong_calls_are_refused() {
        for text in [
            "a",
            "=1:2:3",
            "a=1:2",
            "a=1:2:0",
            "a=1:2:x",
            "a=normal(1)",
            "a=normal(1,-1)",
            "a=x:2:3",
            "a=1 nm:2 eV:3",
        ] {
            assert!(Vary::parse(text).is_err(), "{text}");
        }
        let grid = Vary::parse("a=1:2:3").expect("reads");
        let random = Vary::parse("b=normal(1, 2)").expect("reads");
        assert!(Plan::new(vec![grid.clone(), grid.clone()], None, 0).is_err());
        assert!(Plan::new(vec![grid], Some(3), 0).is_err());
        assert!(Plan::new(vec![random], None, 0).is_err());
    }
}
