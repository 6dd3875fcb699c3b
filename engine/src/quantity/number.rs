//! Decimal numbers, kept exactly.

use num_bigint::BigInt;

use super::Exact;
use crate::diagnostic::{Diagnostic, Span};

/// Powers of ten beyond this are refused, so that a short text cannot ask for a number that fills the memory.
const LARGEST_EXPONENT: i32 = 300;
/// Longer numbers are refused for the same reason: exact arithmetic costs the square of the length.
const MOST_DIGITS: usize = 100;

/// Reads a whole text as a decimal number: sign, digits, fraction and exponent, nothing else; `None` for anything else.
pub fn decimal(text: &str) -> Option<Exact> {
    match leading(text) {
        Ok((value, end)) if end == text.len() && !text.ends_with(char::is_whitespace) => Some(value),
        _ => None,
    }
}

/// Reads the number at the start of `text`; gives it and where the unit starts, blanks passed over.
pub(super) fn leading(text: &str) -> Result<(Exact, usize), Box<Diagnostic>> {
    let start = text.len() - text.trim_start().len();
    let parts = Parts::of(text, start);
    if parts.whole.is_empty() {
        return Err(without_digits(text, start, &parts).into());
    }
    if let Some(mend) = grouped(text, start) {
        return Err(mend.into());
    }
    if parts.point && parts.fraction.is_empty() {
        let at = Span { start, end: parts.end };
        return Err(Diagnostic::error(at, "a digit must follow the decimal point").mend(at, parts.whole).into());
    }
    let digits = parts.whole.len() + parts.fraction.len();
    let exponent: Option<i32> = parts.exponent.map_or(Some(0), |text| text.parse().ok());
    let exponent = exponent.filter(|e| e.abs() <= LARGEST_EXPONENT);
    let (Some(exponent), true) = (exponent, digits <= MOST_DIGITS) else {
        let at = Span { start, end: parts.end };
        return Err(Diagnostic::error(at, "this number is beyond all measure")
            .label("out of range")
            .help(format!("Numbers have at most {MOST_DIGITS} digits and powers of ten up to {LARGEST_EXPONENT}."))
            .into());
    };
    let places = i32::try_from(parts.fraction.len()).unwrap_or(i32::MAX);
    let digits: BigInt = format!("{}{}{}", parts.sign, parts.whole, parts.fraction).parse().unwrap_or_default();
    let value = Exact::from_integer(digits) * power_of_ten(exponent - places);
    let blanks = text[parts.end..].len() - text[parts.end..].trim_start().len();
    Ok((value, parts.end + blanks))
}

/// What a number is made of.
struct Parts<'t> {
    sign: &'static str,
    whole: &'t str,
    point: bool,
    fraction: &'t str,
    exponent: Option<&'t str>,
    end: usize,
}

impl<'t> Parts<'t> {
    fn of(text: &'t str, start: usize) -> Self {
        let mut at = start;
        let sign = match text.as_bytes().get(at) {
            Some(b'-') => "-",
            _ => "",
        };
        if matches!(text.as_bytes().get(at), Some(b'-' | b'+')) {
            at += 1;
        }
        let whole = digits(text, at);
        at += whole.len();
        let point = text.as_bytes().get(at) == Some(&b'.');
        let fraction = if point { digits(text, at + 1) } else { "" };
        if point {
            at += 1 + fraction.len();
        }
        let mut exponent = None;
        if matches!(text.as_bytes().get(at), Some(b'e' | b'E')) {
            let signed = usize::from(matches!(text.as_bytes().get(at + 1), Some(b'-' | b'+')));
            let power = digits(text, at + 1 + signed);
            if !power.is_empty() {
                let end = at + 1 + signed + power.len();
                exponent = Some(&text[at + 1..end]);
                at = end;
            }
        }
        Self { sign, whole, point, fraction, exponent, end: at }
    }
}

fn digits(text: &str, at: usize) -> &str {
    let rest = text.get(at..).unwrap_or("");
    &rest[..rest.bytes().take_while(u8::is_ascii_digit).count()]
}

fn power_of_ten(exponent: i32) -> Exact {
    let power = BigInt::from(10).pow(exponent.unsigned_abs());
    if exponent >= 0 { Exact::from_integer(power) } else { Exact::new(1.into(), power) }
}

fn without_digits(text: &str, start: usize, parts: &Parts) -> Diagnostic {
    if !parts.fraction.is_empty() {
        let at = Span { start, end: parts.end };
        let mend = format!("{}0.{}", parts.sign, parts.fraction);
        return Diagnostic::error(at, "a digit must stand before the decimal point")
            .help("A bare point is easily overlooked.")
            .mend(at, mend);
    }
    let word = text[start..].split_whitespace().next().unwrap_or("");
    let at = Span { start, end: start + word.len() };
    Diagnostic::error(at, "a number with a unit must start with the number")
        .label("no number here")
        .help("Write the number, then the unit, as in \"500 mg\".")
}

/// Digits cut into groups by an underscore, a comma or a blank, or a decimal comma.
fn grouped(text: &str, start: usize) -> Option<Diagnostic> {
    let taken = text[start..].bytes().take_while(|b| b.is_ascii_digit() || b"+-.,_ eE".contains(b)).count();
    let run = text[start..start + taken].trim_end_matches(|c: char| !c.is_ascii_digit());
    let at = Span { start, end: start + run.len() };
    let follows = text[at.end..].chars().next();
    if run.contains('_') {
        return Some(Diagnostic::error(at, "a number with a unit takes no underscores").mend(at, run.replace('_', "")));
    }
    if run.contains(',') {
        let mut mended = run.to_owned();
        let fault = Diagnostic::error(at, "a number takes a decimal point, not a comma");
        // "1,000.5" and "1,000,000" are groups; "1,5" is a fraction; "1,000" could be either, so no edit is offered.
        let groups = run.contains('.') || run.matches(',').count() > 1;
        if !groups && run.len() - run.find(',').unwrap_or(0) == 4 {
            return Some(fault.label("thousands or a fraction?"));
        }
        mended = mended.replace(',', if groups { "" } else { "." });
        return Some(fault.mend(at, mended));
    }
    // "0.02 1/h" is a number and a unit that starts with 1.
    let blank = run.trim().find(' ')?;
    let after = run[blank..].trim_start();
    if after == "1" && matches!(follows, Some('/' | '.') | None) || !after.starts_with(|c: char| c.is_ascii_digit()) {
        return None;
    }
    Some(Diagnostic::error(at, "a number has no blanks inside").mend(at, run.replace(' ', "")))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn fault(text: &str) -> (String, Option<String>) {
        let fault = leading(text).expect_err(text);
        (fault.message, fault.mend.map(|mend| mend.replacement))
    }

    #[test]
    fn numbers_are_kept_exactly() {
        let third = |text| decimal(text).expect(text);
        assert_eq!(third("0.1") + third("0.2"), third("0.3"));
        assert_eq!(third("-1.5e-3"), Exact::new((-3).into(), 2000.into()));
        assert_eq!(third("+2E2"), Exact::from_integer(200.into()));
        for text in ["", "1 ", "e5", "1e", "0x10", "inf", "nan", "1.", ".5", "1e301", "--1"] {
            assert_eq!(decimal(text), None, "{text:?}");
        }
    }

    #[test]
    fn the_unit_starts_after_the_blanks() {
        assert_eq!(leading("500  mg").map(|(_, at)| at).ok(), Some(5));
        assert_eq!(leading("500mg").map(|(_, at)| at).ok(), Some(3));
        assert_eq!(leading("0.02 1/h").map(|(_, at)| at).ok(), Some(5));
        assert_eq!(leading("3.2 1").map(|(_, at)| at).ok(), Some(4));
    }

    #[test]
    fn cuts_and_commas_are_mended() {
        assert_eq!(fault("1_000 mg").1.as_deref(), Some("1000"));
        assert_eq!(fault("1,5 mg").1.as_deref(), Some("1.5"));
        assert_eq!(fault("1,000,000 mg").1.as_deref(), Some("1000000"));
        assert_eq!(fault("1,000 mg").1, None);
        assert_eq!(fault("1 000 mg").1.as_deref(), Some("1000"));
        assert_eq!(fault(".5 mg").1.as_deref(), Some("0.5"));
        assert_eq!(fault("5. mg").1.as_deref(), Some("5"));
        assert_eq!(fault("1e999 mg").0, "this number is beyond all measure");
        assert_eq!(fault(&format!("{} mg", "9".repeat(101))).0, "this number is beyond all measure");
        assert_eq!(fault("mg").0, "a number with a unit must start with the number");
        assert_eq!(fault("").0, "a number with a unit must start with the number");
    }
}
