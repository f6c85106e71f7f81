//! The known name that a mistyped one most likely meant.

/// The closest of `known` to `given`, if it is close enough to be worth suggesting.
pub fn nearest<'a>(given: &str, known: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    known
        .into_iter()
        .map(|name| (distance(given, name), name))
        .filter(|(distance, name)| *distance <= 2.max(name.len() / 3))
        .min_by_key(|(distance, _)| *distance)
        .map(|(_, name)| name)
}

/// Insertions, deletions and replacements that turn one text into the other (Levenshtein 1966).
fn distance(a: &str, b: &str) -> usize {
    let mut row: Vec<usize> = (0..=b.len()).collect();
    for (i, x) in a.bytes().take(64).enumerate() {
        let mut diagonal = std::mem::replace(&mut row[0], i + 1);
        for (j, y) in b.bytes().enumerate() {
            let replaced = diagonal + usize::from(!x.eq_ignore_ascii_case(&y));
            diagonal = row[j + 1];
            row[j + 1] = replaced.min(diagonal + 1).min(row[j] + 1);
        }
    }
    row[b.len()] + a.len().saturating_sub(64)
}

#[cfg(test)]
mod tests {
    use super::nearest;

    #[test]
    fn a_typo_finds_the_name_it_meant() {
        let known = ["position", "velocity", "mass", "metallicity"];
        assert_eq!(nearest("velocty", known), Some("velocity"));
        assert_eq!(nearest("Mass", known), Some("mass"));
        assert_eq!(nearest("temperature_of_stars", known), None);
    }
}
