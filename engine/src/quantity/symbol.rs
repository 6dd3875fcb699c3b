//! The symbols that units are made of.

use super::{Dimension, Exact};

/// A symbol and what one of it is in base units.
pub(super) struct Symbol {
    /// UCUM text.
    name: &'static str,
    /// Which prefixes it takes here.
    prefixes: &'static str,
    /// Base units of one, as a fraction.
    factor: (u64, u64),
    dimension: Dimension,
}

/// Every symbol. The year is the Julian year of 365.25 days and the month its twelfth, as UCUM has them.
const SYMBOLS: [Symbol; 15] = [
    symbol("g", "kmunp", (1000, 1), Dimension::MASS),
    symbol("mol", "munp", (1, 1), Dimension::SUBSTANCE),
    symbol("[IU]", "km", (1, 1), Dimension::UNITS),
    symbol("L", "dmu", (1, 1), Dimension::VOLUME),
    symbol("l", "dmu", (1, 1), Dimension::VOLUME),
    symbol("s", "", (1, 3600), Dimension::TIME),
    symbol("min", "", (1, 60), Dimension::TIME),
    symbol("h", "", (1, 1), Dimension::TIME),
    symbol("d", "", (24, 1), Dimension::TIME),
    symbol("wk", "", (168, 1), Dimension::TIME),
    symbol("mo", "", (1461, 2), Dimension::TIME),
    symbol("a", "", (8766, 1), Dimension::TIME),
    symbol("m", "cm", (10, 1), Dimension::LENGTH),
    symbol("%", "", (1, 100), Dimension::NONE),
    symbol("1", "", (1, 1), Dimension::NONE),
];

const fn symbol(name: &'static str, prefixes: &'static str, factor: (u64, u64), dimension: Dimension) -> Symbol {
    Symbol { name, prefixes, factor, dimension }
}

/// What a symbol with its prefix means; `None` where it is unknown.
pub(super) fn meaning(text: &str) -> Option<(Exact, Dimension)> {
    let plain = SYMBOLS.iter().find(|symbol| symbol.name == text).map(|symbol| (symbol, (1, 1)));
    let (symbol, prefix) = plain.or_else(|| {
        let first = text.chars().next()?;
        let rest = &text[first.len_utf8()..];
        let symbol = SYMBOLS.iter().find(|symbol| symbol.name == rest && symbol.prefixes.contains(first))?;
        Some((symbol, prefix(first)?))
    })?;
    let exact = |(above, below): (u64, u64)| Exact::new(above.into(), below.into());
    Some((exact(symbol.factor) * exact(prefix), symbol.dimension))
}

fn prefix(letter: char) -> Option<(u64, u64)> {
    Some(match letter {
        'k' => (1000, 1),
        'd' => (1, 10),
        'c' => (1, 100),
        'm' => (1, 1000),
        'u' => (1, 1_000_000),
        'n' => (1, 1_000_000_000),
        'p' => (1, 1_000_000_000_000),
        _ => return None,
    })
}

/// Every symbol with every prefix that it takes.
pub(super) fn all() -> impl Iterator<Item = String> {
    SYMBOLS.iter().flat_map(|symbol| {
        let prefixed = symbol.prefixes.chars().map(|prefix| format!("{prefix}{}", symbol.name));
        std::iter::once(symbol.name.to_owned()).chain(prefixed)
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn no_two_symbols_are_written_alike() {
        let mut names: Vec<String> = all().collect();
        names.sort();
        let count = names.len();
        names.dedup();
        assert_eq!(names.len(), count);
        assert!(names.iter().all(|name| meaning(name).is_some()));
    }
}
