//! Basis states in an order that makes the matrices narrow bands where they can
//! be.
//!
//! Source: E. Cuthill and J. McKee, *Reducing the bandwidth of sparse symmetric
//! matrices*, Proc. 24th Nat. Conf. ACM (1969); reversed as usual.

use super::space::Group;
use super::sparse::Sparse;

/// A band wider than this share of the order is no gain.
const SHARE: usize = 6;

/// Puts the states of all matrices in an order of smaller bandwidth, if there is
/// one that is worth it.
pub(super) fn narrow(groups: &mut [Group]) {
    let order = groups.first().map_or(0, |group| group.matrix.order());
    let before = width(groups, &(0..order).collect::<Vec<_>>());
    let stored: usize = groups.iter().flat_map(|group| &group.matrix.rows).map(Vec::len).sum();
    // A row has at most two bandwidths of elements, so full matrices need no search.
    if before <= 2 || stored > groups.len() * order * (2 * order / SHARE + 1) {
        return;
    }
    let permutation = cuthill_mckee(groups, order);
    let mut place = vec![0; order];
    for (new, &old) in permutation.iter().enumerate() {
        place[old] = new;
    }
    let after = width(groups, &place);
    if after >= before || after * SHARE > order {
        return;
    }
    for group in groups {
        let rows = permutation
            .iter()
            .map(|&old| {
                let mut row: Vec<_> =
                    group.matrix.rows[old].iter().map(|&(column, x)| (place[column], x)).collect();
                row.sort_unstable_by_key(|(column, _)| *column);
                row
            })
            .collect();
        group.matrix = Sparse { rows };
    }
}

/// Largest distance from the diagonal when each state stands at its `place`.
fn width(groups: &[Group], place: &[usize]) -> usize {
    groups
        .iter()
        .flat_map(|group| group.matrix.elements())
        .map(|(row, column, _)| place[row].abs_diff(place[column]))
        .max()
        .unwrap_or(0)
}

fn cuthill_mckee(groups: &[Group], order: usize) -> Vec<usize> {
    let neighbours: Vec<Vec<usize>> = (0..order)
        .map(|state| {
            let mut list: Vec<usize> = groups
                .iter()
                .flat_map(|group| &group.matrix.rows[state])
                .map(|&(column, _)| column)
                .filter(|&column| column != state)
                .collect();
            list.sort_unstable();
            list.dedup();
            list
        })
        .collect();
    let mut starts: Vec<usize> = (0..order).collect();
    starts.sort_by_key(|&state| (neighbours[state].len(), state));
    let mut seen = vec![false; order];
    let mut out = Vec::with_capacity(order);
    for start in starts {
        if seen[start] {
            continue;
        }
        seen[start] = true;
        let mut next = out.len();
        out.push(start);
        while let Some(&state) = out.get(next) {
            next += 1;
            let mut fresh: Vec<usize> =
                neighbours[state].iter().copied().filter(|&other| !seen[other]).collect();
            fresh.sort_by_key(|&other| (neighbours[other].len(), other));
            for other in fresh {
                seen[other] = true;
                out.push(other);
            }
        }
    }
    out.reverse();
    out
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::C64;

    /// A ladder whose rungs join far states becomes a band of width 2.
    #[test]
    fn a_ladder_becomes_a_narrow_band() {
        let half = 40;
        let matrix = Sparse::from_fn(2 * half, |row, column| {
            let (rail, rung) = (row / half == column / half, row % half);
            let joined = if rail { rung.abs_diff(column % half) <= 1 } else { rung == column % half };
            C64::new(f64::from(u8::from(joined)), 0.0)
        });
        let trace: f64 = (0..2 * half).map(|idx| matrix.get(idx, idx).re).sum();
        let mut groups = vec![Group { coefficient: None, matrix }];
        narrow(&mut groups);
        assert!(width(&groups, &(0..2 * half).collect::<Vec<_>>()) <= 3);
        assert_eq!((0..2 * half).map(|idx| groups[0].matrix.get(idx, idx).re).sum::<f64>(), trace);
    }
}
