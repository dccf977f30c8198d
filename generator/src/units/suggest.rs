//! The known word nearest to an unknown one.

/// Longest word that is compared; longer ones are no slips of the finger.
const LONGEST: usize = 64;

/// The candidate that a reader most likely meant, or `None` if nothing is near.
///
/// Equal without regard to case counts as nearest; else at most one change
/// (insertion, deletion, replacement, swap of neighbours) in up to four
/// characters, two in up to eight, three above. The first of several equally
/// near candidates wins.
#[must_use]
pub fn nearest<'a>(word: &str, candidates: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    let letters: Vec<char> = word.chars().take(LONGEST + 1).collect();
    if letters.is_empty() || letters.len() > LONGEST {
        return None;
    }
    let allowed = match letters.len() {
        1..=4 => 1,
        5..=8 => 2,
        _ => 3,
    };
    let mut best: Option<(usize, &str)> = None;
    for candidate in candidates {
        let other: Vec<char> = candidate.chars().take(LONGEST + 1).collect();
        let score = if candidate.eq_ignore_ascii_case(word) { 0 } else { 1 + 2 * distance(&letters, &other) };
        // A single letter is one change from every other one: no suggestion then.
        let near = score == 0 || (score <= 1 + 2 * allowed && letters.len().max(other.len()) > 1);
        if near && best.is_none_or(|(least, _)| score < least) {
            best = Some((score, candidate));
        }
    }
    best.map(|(_, candidate)| candidate)
}

/// Changes between two words, a swap of neighbours counting as one.
fn distance(a: &[char], b: &[char]) -> usize {
    let mut before: Vec<usize> = Vec::new();
    let mut last: Vec<usize> = (0..=b.len()).collect();
    for (row, x) in a.iter().enumerate() {
        let mut next = vec![row + 1];
        for (column, y) in b.iter().enumerate() {
            let mut least =
                (last[column] + usize::from(x != y)).min(last[column + 1] + 1).min(next[column] + 1);
            if row > 0 && column > 0 && Some(x) == b.get(column - 1) && a.get(row - 1) == Some(y) {
                least = least.min(before[column - 1] + 1);
            }
            next.push(least);
        }
        before = std::mem::replace(&mut last, next);
    }
    last.last().copied().unwrap_or(0)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn slips_find_their_word() {
        let known = ["thickness", "edge", "mass", "kV", "mT"];
        assert_eq!(nearest("thikness", known), Some("thickness"));
        assert_eq!(nearest("egde", known), Some("edge"));
        assert_eq!(nearest("kv", known), Some("kV"));
        assert_eq!(nearest("colour", known), None);
        assert_eq!(nearest("", known), None);
        assert_eq!(nearest(&"x".repeat(10_000), known), None);
    }
}
