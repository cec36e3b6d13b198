//! What a misspelt word may have meant.

use super::lexer::MAX_LETTERS;

/// The candidate nearest to a word, if one is near: at most a third of the word's letters changed, two swapped
/// neighbours counting as one change (restricted edit distance, Damerau 1964). Ties go to the first candidate.
///
/// ```
/// use thalweg::language::suggest;
/// assert_eq!(suggest("lenght", ["width", "length"]), Some("length".to_string()));
/// assert_eq!(suggest("q", ["width", "length"]), None);
/// ```
pub fn suggest<'a>(word: &str, candidates: impl IntoIterator<Item = &'a str>) -> Option<String> {
    let letters: Vec<char> = word.chars().collect();
    if letters.len() > MAX_LETTERS {
        return None;
    }
    let limit = (letters.len() / 3).max(1);
    let mut best: Option<(usize, &str)> = None;
    for candidate in candidates {
        let other: Vec<char> = candidate.chars().collect();
        if candidate == word || other.len().abs_diff(letters.len()) > limit || letters.len() < 2 && other.len() < 2 {
            continue;
        }
        let lowered = |text: &[char]| text.iter().flat_map(|letter| letter.to_lowercase()).collect::<Vec<char>>();
        let distance = if lowered(&letters) == lowered(&other) { 0 } else { distance(&letters, &other) };
        if distance <= limit && distance < letters.len() && best.is_none_or(|(least, _)| distance < least) {
            best = Some((distance, candidate));
        }
    }
    best.map(|(_, candidate)| candidate.to_string())
}

fn distance(left: &[char], right: &[char]) -> usize {
    let mut before_last = vec![0; right.len() + 1];
    let mut last: Vec<usize> = (0..=right.len()).collect();
    for i in 1..=left.len() {
        let mut row = vec![i; right.len() + 1];
        for j in 1..=right.len() {
            let changed = usize::from(left[i - 1] != right[j - 1]);
            row[j] = (last[j] + 1).min(row[j - 1] + 1).min(last[j - 1] + changed);
            if i > 1 && j > 1 && left[i - 1] == right[j - 2] && left[i - 2] == right[j - 1] {
                row[j] = row[j].min(before_last[j - 2] + 1);
            }
        }
        before_last = std::mem::replace(&mut last, row);
    }
    last[right.len()]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn distances() {
        let count =
            |left: &str, right: &str| distance(&left.chars().collect::<Vec<_>>(), &right.chars().collect::<Vec<_>>());
        assert_eq!(count("abc", "abc"), 0);
        assert_eq!(count("abc", "acb"), 1);
        assert_eq!(count("kitten", "sitting"), 3);
        assert_eq!(count("", "ab"), 2);
    }

    #[test]
    fn case_alone_is_near() {
        assert_eq!(suggest("SQRT", ["sin", "sqrt"]), Some("sqrt".into()));
    }
}
