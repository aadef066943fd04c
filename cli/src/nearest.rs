//! The nearest of several names to one that was mistyped.

/// The name nearest to `given`, if it is near enough to be what was meant.
pub(crate) fn nearest<'a>(given: &str, names: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    let given = given.to_ascii_lowercase();
    names
        .into_iter()
        .map(|name| (strsim::jaro_winkler(&given, &name.to_ascii_lowercase()), name))
        .filter(|(likeness, _)| *likeness > 0.8)
        .max_by(|a, b| a.0.total_cmp(&b.0))
        .map(|(_, name)| name)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn slips_are_recognised_and_other_words_are_not() {
        let names = ["components", "forecast", "diagnostics"];
        assert_eq!(nearest("forcast", names), Some("forecast"));
        assert_eq!(nearest("Diagnostic", names), Some("diagnostics"));
        assert_eq!(nearest("wensleydale", names), None);
    }
}
