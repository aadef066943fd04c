//! The name that was probably meant.

use strsim::damerau_levenshtein;

/// The valid name nearest to `given`, if it is near enough to be a slip: one edit in a name of up to four
/// letters, and one more for every three beyond, transpositions counting once.
pub(crate) fn nearest<'a>(given: &str, valid: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    let given = given.to_lowercase();
    let allowed = ((given.chars().count() + 1) / 3).max(1);
    valid
        .into_iter()
        .map(|name| (damerau_levenshtein(&given, name), name))
        .filter(|&(distance, _)| distance <= allowed)
        .min_by_key(|&(distance, _)| distance)
        .map(|(_, name)| name)
}

/// "valid are 'a', 'b'; did you mean 'a'?"
pub(crate) fn valid_and_nearest(given: &str, valid: &[&str]) -> String {
    let list = valid.iter().map(|name| format!("'{name}'")).collect::<Vec<_>>().join(", ");
    match nearest(given, valid.iter().copied()) {
        Some(name) => format!("valid are {list}; did you mean '{name}'?"),
        None => format!("valid are {list}"),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const NAMES: [&str; 4] = ["horizon", "harmonics", "season", "period"];

    #[test]
    fn slips_are_understood() {
        assert_eq!(nearest("horizont", NAMES), Some("horizon"));
        assert_eq!(nearest("sesaon", NAMES), Some("season"));
        assert_eq!(nearest("Harmonic", NAMES), Some("harmonics"));
    }

    #[test]
    fn other_words_are_not_bent() {
        assert_eq!(nearest("frequency", NAMES), None);
        assert_eq!(nearest("x", NAMES), None);
    }

    #[test]
    fn the_list_is_always_given() {
        assert_eq!(valid_and_nearest("perid", &["period"]), "valid are 'period'; did you mean 'period'?");
        assert_eq!(valid_and_nearest("zzz", &["a", "b"]), "valid are 'a', 'b'");
    }
}
