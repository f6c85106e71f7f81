//! The nearest known words to a mistyped one.

/// The words of `known` that lie nearest to `word`, if any is near enough to have been meant; all of them
/// where several are equally near, in the order given.
pub(crate) fn nearest<'a>(word: &str, known: impl IntoIterator<Item = &'a str>) -> Vec<&'a str> {
    let longest = word.chars().count();
    // One slip in a short word, one in three letters in a longer one.
    let mut best = (longest / 3).clamp(1, 4);
    let mut found = Vec::new();
    for candidate in known {
        let steps = distance(word, candidate);
        if steps < best {
            best = steps;
            found.clear();
        }
        if steps == best && !found.contains(&candidate) {
            found.push(candidate);
        }
    }
    found
}

/// Edits from `left` to `right`: letters put in, left out, changed, or two neighbours swapped; a letter in
/// the wrong case is half a slip and counts as none.
fn distance(left: &str, right: &str) -> usize {
    let left: Vec<char> = left.chars().flat_map(char::to_lowercase).collect();
    let right: Vec<char> = right.chars().flat_map(char::to_lowercase).collect();
    let mut before: Vec<usize> = vec![0; right.len() + 1];
    let mut above: Vec<usize> = (0..=right.len()).collect();
    for row in 1..=left.len() {
        let mut here = vec![row; right.len() + 1];
        for column in 1..=right.len() {
            let changed = usize::from(left[row - 1] != right[column - 1]);
            let mut least = (above[column - 1] + changed)
                .min(above[column] + 1)
                .min(here[column - 1] + 1);
            let swapped = row > 1
                && column > 1
                && left[row - 1] == right[column - 2]
                && left[row - 2] == right[column - 1];
            if swapped {
                least = least.min(before[column - 2] + 1);
            }
            here[column] = least;
        }
        before = std::mem::replace(&mut above, here);
    }
    above[right.len()]
}

/// "a", "a or b", "a, b or c".
pub(crate) fn either(words: &[String]) -> String {
    match words.split_last() {
        Some((last, rest)) if !rest.is_empty() => format!("{} or {last}", rest.join(", ")),
        _ => words.concat(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn one_slip_finds_the_word_and_nonsense_finds_none() {
        let known = ["length", "mass", "velocity"];
        for slip in ["lenght", "lengt", "lengthh", "lemgth", "Length"] {
            assert_eq!(nearest(slip, known), ["length"], "{slip}");
        }
        assert!(nearest("temperature", known).is_empty());
        assert_eq!(nearest("b", ["a", "h"]), ["a", "h"]);
        assert_eq!(either(&["a", "h", "z"].map(str::to_string)), "a, h or z");
    }
}
