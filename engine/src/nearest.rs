//! The nearest known name to a misspelt one, for error messages.

/// The candidate that `name` is most likely a misspelling of.
///
/// Distance is the number of insertions, deletions, substitutions and swaps of neighbours (Damerau-Levenshtein).
/// Names equal but for case always count as near. Ties go to the candidate that shares the longer beginning,
/// then to the earlier one.
///
/// # Returns
///
/// `None` when nothing is close: more than about a third of the longer name would have to change.
///
/// # Examples
///
/// ```
/// use lysocline_engine::nearest::nearest;
///
/// assert_eq!(nearest("calcit", ["aragonite", "calcite", "gypsum"]), Some("calcite"));
/// assert_eq!(nearest("basalt", ["aragonite", "calcite", "gypsum"]), None);
/// ```
#[must_use]
pub fn nearest<'a>(name: &str, candidates: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    let rank = |candidate: &str| {
        let changes = if candidate.to_lowercase() == name.to_lowercase() {
            0
        } else {
            strsim::damerau_levenshtein(name, candidate)
        };
        (changes, usize::MAX - shared_beginning(name, candidate))
    };
    candidates
        .into_iter()
        .map(|candidate| (rank(candidate), candidate))
        .filter(|((changes, _), candidate)| *changes <= allowed_changes(name, candidate))
        .min_by_key(|(rank, _)| *rank)
        .map(|(_, candidate)| candidate)
}

fn allowed_changes(name: &str, candidate: &str) -> usize {
    name.chars().count().max(candidate.chars().count()).div_ceil(3)
}

fn shared_beginning(a: &str, b: &str) -> usize {
    a.chars().zip(b.chars()).take_while(|(a, b)| a == b).count()
}

#[cfg(test)]
mod tests {
    use super::nearest;

    #[track_caller]
    fn case(name: &str, candidates: &[&str], expected: Option<&str>) {
        assert_eq!(nearest(name, candidates.iter().copied()), expected);
    }

    #[test]
    fn misspellings() {
        case("clacite", &["calcite", "dolomite"], Some("calcite")); // swap
        case("tempurature", &["temperature", "pressure"], Some("temperature"));
        case("PH", &["pe", "pH"], Some("pH")); // case alone beats one substitution
        case("alkalinty", &["salinity", "alkalinity"], Some("alkalinity"));
        case("umol/kgg", &["nmol/kg", "umol/kg"], Some("umol/kg"));
        case("xyz", &["calcite"], None);
        case("", &["calcite"], None);
        case("calcite", &[], None);
    }
}
