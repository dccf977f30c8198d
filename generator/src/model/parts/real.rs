//! Real storage for matrices that a diagonal change of phases makes real.
//!
//! Each basis state gets the phase 1 or i. Real elements must join states of equal
//! phase and imaginary ones states of different phase; that is a colouring of
//! the graph of all elements in two colours, or there is none.

use super::space::Group;
use super::terms::Term;

/// The terms in real storage, if such phases exist.
pub(super) fn real_terms(groups: &[Group]) -> Option<Vec<Term<f64>>> {
    let order = groups.first().map_or(0, |group| group.matrix.order());
    let mut turned: Vec<Option<bool>> = vec![None; order];
    for start in 0..order {
        if turned[start].is_some() {
            continue;
        }
        turned[start] = Some(false);
        let mut queue = vec![start];
        while let Some(state) = queue.pop() {
            let own = turned[state]?;
            for &(column, x) in groups.iter().flat_map(|group| &group.matrix.rows[state]) {
                if x.re != 0.0 && x.im != 0.0 {
                    return None;
                }
                let other = own ^ (x.im != 0.0);
                match turned.get_mut(column)? {
                    Some(known) if *known == other => {}
                    Some(_) => return None,
                    slot => {
                        *slot = Some(other);
                        queue.push(column);
                    }
                }
            }
        }
    }
    let turned: Vec<bool> = turned.into_iter().map(|flag| flag.unwrap_or(false)).collect();
    let terms = groups
        .iter()
        .map(|group| {
            let rows = group
                .matrix
                .rows
                .iter()
                .enumerate()
                .map(|(row, list)| {
                    list.iter()
                        .map(|&(column, x)| {
                            // Element times conj(phase of row) times phase of column.
                            let value = match (turned[row], turned[column]) {
                                (false, true) => -x.im,
                                (true, false) => x.im,
                                _ => x.re,
                            };
                            (column, value)
                        })
                        .collect()
                })
                .collect();
            Term { coefficient: group.coefficient.clone(), rows }
        })
        .collect();
    Some(terms)
}
