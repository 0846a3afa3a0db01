//! The nearest allowed word, for error messages.

/// The candidate that is nearest to the word, if one is near enough to be meant.
pub(super) fn nearest<'a>(word: &str, candidates: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    let small = word.to_lowercase();
    let mut best: Option<(usize, &str)> = None;
    for candidate in candidates {
        let other = candidate.to_lowercase();
        let abbreviated = small.chars().count() >= 3 && other.starts_with(&small);
        let distance = if abbreviated { 1 } else { edit_distance(&small, &other) };
        // One slip in three letters is still the same word; more is another word.
        let reach = other.chars().count().max(small.chars().count()).div_ceil(3);
        // A one-letter word is near to every other one.
        let near = distance == 0 || (small.chars().count() > 1 && distance <= reach);
        if near && best.is_none_or(|(least, _)| distance < least) {
            best = Some((distance, candidate));
        }
    }
    best.map(|(_, candidate)| candidate)
}

/// Levenshtein distance in characters.
fn edit_distance(left: &str, right: &str) -> usize {
    // Only short words are compared; a long one is far from all of them and not worth the square of its length.
    const LONGEST: usize = 60;
    let right: Vec<char> = right.chars().collect();
    if left.chars().count() > LONGEST || right.len() > LONGEST {
        return usize::MAX;
    }
    let mut row: Vec<usize> = (0..=right.len()).collect();
    for (i, from) in left.chars().enumerate() {
        let mut diagonal = row[0];
        row[0] = i + 1;
        for (j, to) in right.iter().enumerate() {
            let replaced = diagonal + usize::from(from != *to);
            diagonal = row[j + 1];
            row[j + 1] = replaced.min(diagonal + 1).min(row[j] + 1);
        }
    }
    row[right.len()]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_slip_of_the_pen_finds_its_word_and_a_foreign_word_finds_none() {
        let keys = ["resistance", "current", "time_constant", "capacitance", "leakage"];
        assert_eq!(nearest("resistence", keys), Some("resistance"));
        assert_eq!(nearest("cap", keys), Some("capacitance"));
        assert_eq!(nearest("Leakage", keys), Some("leakage"));
        assert_eq!(nearest("colour", keys), None);
        assert_eq!(nearest(&"x".repeat(100_000), keys), None);
    }
}
