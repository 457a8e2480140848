//! Which known name a misspelt one may have meant.

/// The known name nearest to `word`. A name with hardly a letter in common is no suggestion, and there is none then.
pub fn nearest<'a>(word: &str, known: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    let nearest = known.into_iter().min_by_key(|name| distance(word, name))?;
    (distance(word, nearest) <= 3.min(word.chars().count() / 2)).then_some(nearest)
}

/// How many letters must be put in, left out or exchanged to make one word of the other (Levenshtein).
pub fn distance(left: &str, right: &str) -> usize {
    let right: Vec<char> = right.chars().collect();
    let mut row: Vec<usize> = (0..=right.len()).collect();
    for (index, letter) in left.chars().enumerate() {
        let mut diagonal = row[0];
        row[0] = index + 1;
        for (column, &other) in right.iter().enumerate() {
            let exchanged = diagonal + usize::from(letter != other);
            diagonal = row[column + 1];
            row[column + 1] = exchanged.min(row[column] + 1).min(diagonal + 1);
        }
    }
    row[right.len()]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn distances() {
        assert_eq!((distance("", "abc"), distance("kitten", "sitting"), distance("top", "top")), (3, 3, 0));
    }

    #[test]
    fn a_suggestion_has_letters_in_common() {
        assert_eq!(nearest("clok", ["reset", "clock"]), Some("clock"));
        assert_eq!(nearest("ab", ["xy", "cd"]), None);
        assert_eq!(nearest("ab", []), None);
    }
}
