//! The nearest right name for a misspelt one.

/// Longer names are compared for equality only.
const LONGEST_NAME: usize = 200;

/// The candidate that a person most likely meant, if any is near.
///
/// A name that differs only by case or white space comes first; else the nearest by edits (a swap counts as one), where
/// at most a third of the longer name differs.
///
/// ```
/// use aforesaid::text::suggest::nearest;
/// assert_eq!(nearest("Week 6", ["week 6", "month 6"]), Some("week 6"));
/// assert_eq!(nearest("treshold", ["threshold", "because"]), Some("threshold"));
/// assert_eq!(nearest("colour", ["threshold", "because"]), None);
/// ```
pub fn nearest<'c>(name: &str, candidates: impl IntoIterator<Item = &'c str>) -> Option<&'c str> {
    let folded = fold(name);
    let mut best: Option<(usize, &str)> = None;
    for candidate in candidates {
        let other = fold(candidate);
        if other == folded {
            return Some(candidate);
        }
        let (one, two) = (folded.chars().count(), other.chars().count());
        let longer = one.max(two);
        if longer > LONGEST_NAME || one.abs_diff(two) * 3 > longer {
            continue;
        }
        let distance = strsim::damerau_levenshtein(&folded, &other);
        if distance * 3 <= longer && best.is_none_or(|(least, _)| distance < least) {
            best = Some((distance, candidate));
        }
    }
    best.map(|(_, candidate)| candidate)
}

/// Whether two names differ only by case or white space.
pub fn same_but_for_case_or_space(one: &str, other: &str) -> bool {
    one != other && fold(one) == fold(other)
}

/// A name without what is easily mistyped (case, white space, dashes): equal for names that a person may take for one, so
/// that many names are compared by sorting these.
pub fn fold(name: &str) -> String {
    name.split_whitespace().collect::<Vec<_>>().join(" ").replace(['_', '-'], " ").to_lowercase()
}
