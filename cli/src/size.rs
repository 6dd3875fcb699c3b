//! Sizes of memory as people write them.

use std::fmt;

use crate::numbers::significant;

/// A number of bytes.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Size(pub(crate) u64);

/// Unit names with their bytes: IEC prefixes are powers of 1024, SI prefixes powers of 1000.
const UNITS: [(&str, u64); 9] = [
    ("B", 1),
    ("KiB", 1 << 10),
    ("MiB", 1 << 20),
    ("GiB", 1 << 30),
    ("TiB", 1 << 40),
    ("kB", 1_000),
    ("MB", 1_000_000),
    ("GB", 1_000_000_000),
    ("TB", 1_000_000_000_000),
];

/// Reads a size such as "512MiB", "1.5 GiB" or "2GB".
pub(crate) fn parse(text: &str) -> Result<Size, String> {
    let text = text.trim();
    let split = text.find(|c: char| !(c.is_ascii_digit() || c == '.')).unwrap_or(text.len());
    let (number, unit) = (&text[..split], text[split..].trim());
    let wanted = || format!("a size is a number and a unit such as MiB or GB, as in 512MiB; this is `{text}`");
    let &(_, bytes) = UNITS.iter().find(|(name, _)| name.eq_ignore_ascii_case(unit)).ok_or_else(wanted)?;
    // In whole numbers, so that no size is rounded before it is cut to bytes.
    let (whole, fraction) = number.split_once('.').unwrap_or((number, ""));
    if (whole.is_empty() && fraction.is_empty()) || fraction.len() > 12 || fraction.contains('.') {
        return Err(wanted());
    }
    let digits: u128 = format!("{whole}{fraction}").parse().map_err(|_| wanted())?;
    let scale = (0..fraction.len()).fold(1_u128, |scale, _| scale * 10);
    let total = digits.checked_mul(u128::from(bytes)).ok_or_else(wanted)? / scale;
    match u64::try_from(total) {
        Ok(0) => Err("a size must be at least one byte".to_owned()),
        Ok(total) => Ok(Size(total)),
        Err(_) => Err(format!("`{text}` is more than any memory")),
    }
}

impl fmt::Display for Size {
    /// In the largest binary unit of which there is at least one, with three significant digits: "1GiB", "1.5MiB".
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let &(name, bytes) = UNITS[..5].iter().rev().find(|(_, bytes)| self.0 >= *bytes).unwrap_or(&UNITS[0]);
        write!(f, "{}{name}", significant(self.0 as f64 / bytes as f64, if self.0 / bytes < 1000 { 3 } else { 4 }))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn reads_binary_and_decimal_units() {
        for (text, bytes) in [
            ("1GiB", 1 << 30),
            ("1 gib", 1 << 30),
            ("1.5MiB", 3 << 19),
            ("0.1kB", 100),
            ("2GB", 2_000_000_000),
            ("640 KiB", 655_360),
            ("7B", 7),
        ] {
            assert_eq!(parse(text), Ok(Size(bytes)), "{text}");
        }
    }

    #[test]
    fn refuses_what_is_no_size() {
        for text in ["", "1", "GiB", "1 GiBs", "-1GiB", "1.2.3GB", "1,5GB", ".", ".GB", "0B", "0.1B", "99999999999TiB"]
        {
            assert!(parse(text).is_err(), "{text}");
        }
    }

    #[test]
    fn shows_what_it_reads() {
        for text in ["1GiB", "1.5MiB", "7B", "640KiB"] {
            assert_eq!(parse(text).unwrap().to_string(), text);
        }
    }
}
