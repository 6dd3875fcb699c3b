//! Numbers as people read them. Rounding for display only; tables hold the full values.

/// `value` with at most `digits` significant digits, without trailing zeros: 74.95, 0.05, 12000.
pub(crate) fn significant(value: f64, digits: usize) -> String {
    if !value.is_finite() {
        return if value.is_nan() { "unknown".to_owned() } else { value.to_string() };
    }
    let (rounded, exponent) = split(value, digits);
    if value != 0.0 && !(-5..9).contains(&exponent) {
        return format!("{rounded:e}");
    }
    format!("{rounded}")
}

/// `value` rounded to `digits` significant digits, and its power of ten.
pub(crate) fn split(value: f64, digits: usize) -> (f64, i32) {
    let text = format!("{value:.*e}", digits.saturating_sub(1));
    let exponent = text.split_once('e').and_then(|(_, exponent)| exponent.parse().ok()).unwrap_or(0);
    (text.parse().unwrap_or(value), exponent)
}

/// A count with its thousands marked: 10,000.
pub(crate) fn count(value: u64) -> String {
    let digits = value.to_string();
    let mut text = String::new();
    for (index, digit) in digits.chars().enumerate() {
        if index > 0 && (digits.len() - index).is_multiple_of(3) {
            text.push(',');
        }
        text.push(digit);
    }
    text
}

/// A count with its noun, which takes an s: "1 patient", "10,000 patients".
pub(crate) fn counted(value: u64, noun: &str) -> String {
    format!("{} {noun}{}", count(value), if value == 1 { "" } else { "s" })
}

/// A fraction with its interval, in percent: "71.3 % (70.4 to 72.2)". Decimals follow the width of the interval, so that
/// the last digit shown is one that the simulation can know.
pub(crate) fn percent(value: f64, lower: f64, upper: f64) -> String {
    let half_width = 50.0 * (upper - lower);
    let decimals = match half_width {
        h if h >= 5.0 => 0,
        h if h >= 0.1 => 1,
        h if h >= 0.01 => 2,
        _ => 3,
    };
    format!("{:.decimals$} % ({:.decimals$} to {:.decimals$})", 100.0 * value, 100.0 * lower, 100.0 * upper)
}

/// An ordinal: 5th, 50th, 2.5th, 91st.
pub(crate) fn ordinal(value: f64) -> String {
    let text = significant(value, 6);
    let whole = value as u64;
    let ending = match (whole % 10, whole % 100) {
        _ if value.fract() != 0.0 => "th",
        (_, 11..=13) => "th",
        (1, _) => "st",
        (2, _) => "nd",
        (3, _) => "rd",
        _ => "th",
    };
    format!("{text}{ending}")
}

/// A length of time that is only an estimate.
pub(crate) fn about(seconds: f64) -> String {
    match seconds {
        s if !s.is_finite() => "an unknown time".to_owned(),
        s if s < 1.0 => "less than a second".to_owned(),
        s if s < 90.0 => format!("about {} s", significant(s, 1)),
        s if s < 5400.0 => format!("about {} min", significant(s / 60.0, 1)),
        s => format!("about {} h", significant(s / 3600.0, 2)),
    }
}

/// Names in a sentence: "a", "a and b", "a, b and c".
pub(crate) fn listed(names: &[String]) -> String {
    match names {
        [] => String::new(),
        [one] => one.clone(),
        [first @ .., last] => format!("{} and {last}", first.join(", ")),
    }
}

/// `text` in lines of at most `width` characters, broken between words, each after `indent` blanks.
pub(crate) fn wrapped(text: &str, width: usize, indent: usize) -> String {
    let mut lines = String::new();
    let mut used = 0;
    for word in text.split_whitespace() {
        let length = word.chars().count();
        if used > 0 && used + 1 + length > width {
            lines.push('\n');
            used = 0;
        }
        if used == 0 {
            lines.push_str(&" ".repeat(indent));
            used = indent;
        } else {
            lines.push(' ');
            used += 1;
        }
        lines.push_str(word);
        used += length;
    }
    lines.push('\n');
    lines
}

/// `value` in the unit, where "1" is a plain number: "75 kg", "0.8".
pub(crate) fn with_unit(value: f64, unit: &str) -> String {
    match unit {
        "1" | "" => significant(value, 4),
        unit => format!("{} {unit}", significant(value, 4)),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn significant_digits_without_noise() {
        assert_eq!(significant(74.951_2, 4), "74.95");
        assert_eq!(significant(0.1 + 0.2, 4), "0.3");
        assert_eq!(significant(12_000.0, 4), "12000");
        assert_eq!(significant(0.0, 4), "0");
        assert_eq!(significant(-2.5, 4), "-2.5");
        assert_eq!(significant(1.5e-9, 4), "1.5e-9");
        assert_eq!(significant(f64::NAN, 4), "unknown");
    }

    #[test]
    fn decimals_follow_the_interval() {
        assert_eq!(percent(0.5, 0.15, 0.85), "50 % (15 to 85)");
        assert_eq!(percent(0.713, 0.704, 0.722), "71.3 % (70.4 to 72.2)");
        assert_eq!(percent(0.713_1, 0.712_6, 0.713_6), "71.31 % (71.26 to 71.36)");
        assert_eq!(percent(0.0, 0.0, 0.000_4), "0.00 % (0.00 to 0.04)");
    }

    #[test]
    fn lines_break_between_words() {
        assert_eq!(wrapped("one two three", 9, 2), "  one two\n  three\n");
        assert_eq!(wrapped("unbreakable", 4, 1), " unbreakable\n");
    }

    #[test]
    fn words() {
        assert_eq!(count(1_234_567), "1,234,567");
        assert_eq!(count(999), "999");
        assert_eq!(counted(1, "patient"), "1 patient");
        assert_eq!(ordinal(5.0), "5th");
        assert_eq!(ordinal(91.0), "91st");
        assert_eq!(ordinal(12.0), "12th");
        assert_eq!(ordinal(2.5), "2.5th");
        assert_eq!(about(0.2), "less than a second");
        assert_eq!(about(310.0), "about 5 min");
        assert_eq!(listed(&["a".to_owned(), "b".to_owned(), "c".to_owned()]), "a, b and c");
    }
}
