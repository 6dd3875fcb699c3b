//! The known name that a misspelt one was probably meant to be.

/// The name nearest to `written`, if it is near enough to be worth naming; the first of equally near ones.
pub(super) fn nearest<'n>(written: &str, known: impl IntoIterator<Item = &'n str>) -> Option<&'n str> {
    let plain = |name: &str| name.to_lowercase().replace(['-', ' '], "_");
    let target = plain(written);
    // A third of the letters wrong is still a likely slip; more is another word.
    let bound = (written.chars().count() / 3).clamp(1, 4);
    known
        .into_iter()
        .map(|name| (strsim::damerau_levenshtein(&plain(name), &target), name))
        .min_by_key(|&(distance, _)| distance)
        .filter(|&(distance, _)| distance <= bound)
        .map(|(_, name)| name)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn slips_are_recognised_and_strangers_are_not() {
        let known = ["clearance", "central_volume", "lag_time"];
        assert_eq!(nearest("clearence", known), Some("clearance"));
        assert_eq!(nearest("Lag-Time", known), Some("lag_time"));
        assert_eq!(nearest("centralvolume", known), Some("central_volume"));
        assert_eq!(nearest("potassium", known), None);
        assert_eq!(nearest("", known), None);
    }
}
