//! Units: products and quotients of powers of symbols.

use num_traits::{One, Pow};

use super::{Dimension, Exact, Unit, spelling, symbol};
use crate::diagnostic::{Diagnostic, Span};

/// Powers beyond this are refused; no quantity of the trade comes near, and exact factors stay short.
const HIGHEST_POWER: i8 = 9;
/// As above, for a whole unit.
const HIGHEST_DIMENSION: i8 = 30;
/// The one annotation that means something: per 1.73 m2 of body surface.
const INDEXED: &str = "{1.73_m2}";

impl Unit {
    /// Reads a unit: symbols with integer powers (`m2`, `h-1`), multiplied by `.` and divided by `/`, from left to right.
    ///
    /// | symbols | prefixes |
    /// | --- | --- |
    /// | `g` | k m u n p |
    /// | `mol` | m u n p |
    /// | `[IU]` | k m |
    /// | `L`, `l` | d m u |
    /// | `m` | c m |
    /// | `s` `min` `h` `d` `wk` `mo` `a` `%` `1` | none |
    ///
    /// Filtration indexed to body surface is `mL/min/{1.73_m2}`, and differs from `mL/min` in its dimension.
    ///
    /// # Errors
    /// A diagnostic whose span lies in `text`; an everyday spelling is mended.
    ///
    /// # Example
    /// ```
    /// use neap_engine::quantity::Unit;
    /// assert_eq!(Unit::parse("mL/min")?.dimension.name(), "volume per time");
    /// assert_eq!(Unit::parse("mcg").unwrap_err().mend.unwrap().replacement, "ug");
    /// # Ok::<(), Box<neap_engine::diagnostic::Diagnostic>>(())
    /// ```
    pub fn parse(text: &str) -> Result<Self, Box<Diagnostic>> {
        let unit = Self::parse_part(text, text.len() - text.trim_start().len())?;
        if unit.text.is_empty() {
            let at = Span { start: 0, end: text.len() };
            return Err(Diagnostic::error(at, "a unit is missing").help("A pure number has the unit `1`.").into());
        }
        Ok(unit)
    }

    /// Reads the unit that fills `text` from `start`; the empty unit is a pure number.
    pub(super) fn parse_part(text: &str, start: usize) -> Result<Self, Box<Diagnostic>> {
        let end = text.trim_end().len().max(start);
        let written = &text[start..end];
        if written.is_empty() {
            return Ok(Self { text: String::new(), dimension: Dimension::NONE, factor: Exact::one() });
        }
        if let Some(fault) = foreign_marks(written) {
            return Err(fault.shifted(start).into());
        }
        let mut factor = Exact::one();
        let mut dimension = Dimension::NONE;
        for (at, divided, part) in Parts::new(written) {
            let (one, of) = component(part).map_err(|fault| Box::new(fault.shifted(start + at)))?;
            factor = if divided { factor / one } else { factor * one };
            dimension = if divided { dimension.per(of) } else { dimension.times(of) };
            if !dimension.within(HIGHEST_DIMENSION) {
                let at = Span { start, end };
                return Err(Diagnostic::error(at, "this unit has absurdly high powers").into());
            }
        }
        Ok(Self { text: written.to_owned(), dimension, factor })
    }
}

/// The components of a unit: where each starts, whether it divides, and its text.
struct Parts<'t> {
    text: &'t str,
    at: usize,
    done: bool,
}

impl<'t> Parts<'t> {
    fn new(text: &'t str) -> Self {
        Self { text, at: 0, done: false }
    }
}

impl<'t> Iterator for Parts<'t> {
    type Item = (usize, bool, &'t str);

    fn next(&mut self) -> Option<Self::Item> {
        if self.done {
            return None;
        }
        let divided = self.text[self.at..].starts_with('/');
        // A product sign joins two components; at the very start it stays, to be refused as an empty component.
        let joined = self.at > 0 && self.text[self.at..].starts_with('.');
        let start = self.at + usize::from(divided || joined);
        let rest = &self.text[start..];
        // The point inside the braces of an annotation is not a product.
        let from = if rest.starts_with('{') { rest.find('}').unwrap_or(0) } else { 0 };
        let length = rest[from..].find(['.', '/']).map_or(rest.len(), |found| found + from);
        self.at = start + length;
        self.done = self.at >= self.text.len();
        Some((start, divided, &rest[..length]))
    }
}

/// One symbol with its power.
fn component(text: &str) -> Result<(Exact, Dimension), Box<Diagnostic>> {
    if text.is_empty() {
        let at = Span { start: 0, end: 0 };
        return Err(Diagnostic::error(at, "a unit is missing here").label("nothing to multiply or divide by").into());
    }
    if text == INDEXED {
        return Ok((Exact::one(), Dimension { indexed: -1, ..Dimension::NONE }));
    }
    if text == "1" {
        return Ok((Exact::one(), Dimension::NONE));
    }
    let length = text.find(|c: char| c.is_ascii_digit() || c == '-' || c == '+').unwrap_or(text.len());
    let (name, power) = text.split_at(length);
    let Some((factor, dimension)) = symbol::meaning(name) else {
        return Err(unknown(name, text).into());
    };
    let power = if power.is_empty() { Ok(1) } else { power.parse::<i8>() };
    match power {
        Ok(power) if power != 0 && power.unsigned_abs() <= HIGHEST_POWER.unsigned_abs() => {
            Ok((Pow::pow(factor, i32::from(power)), dimension.to_the(power)))
        }
        _ => {
            let at = Span { start: length, end: text.len() };
            let wanted = format!("a power is a whole number from 1 to {HIGHEST_POWER}, or its negative");
            Err(Diagnostic::error(at, wanted).help("Write `m2`, `h-1` or `/h`.").into())
        }
    }
}

fn unknown(name: &str, component: &str) -> Diagnostic {
    // Where there is no symbol at all, such as in "5", the whole component is the culprit.
    let at = Span { start: 0, end: if name.is_empty() { component.len() } else { name.len() } };
    let shown = &component[..at.end];
    if let Some(form) = spelling::ucum(name) {
        return Diagnostic::error(at, format!("the unit `{shown}` is written `{form}` in UCUM"))
            .label("everyday spelling")
            .mend(at, form);
    }
    if let Some(advice) = spelling::foreign(name) {
        return Diagnostic::error(at, format!("the unit `{shown}` is not taken here")).help(advice);
    }
    let fault = Diagnostic::error(at, format!("`{shown}` is not a known unit")).label("unknown unit");
    let near = symbol::all().min_by_key(|known| strsim::damerau_levenshtein(known, name));
    match near {
        Some(near) if name.len() > 1 && strsim::damerau_levenshtein(&near, name) == 1 => {
            fault.help(format!("Did you mean `{near}`?"))
        }
        _ => fault.help("Units are UCUM: `mg`, `ug/mL`, `L/h`, `mL/min`, `kg`, `a` for years."),
    }
}

/// Marks that UCUM does not use, found before the unit is cut into components.
fn foreign_marks(text: &str) -> Option<Diagnostic> {
    if let Some(fault) = unbraced_index(text) {
        return Some(fault);
    }
    let whole = Span { start: 0, end: text.len() };
    if text.contains(" per ") {
        let mended = text.replace(" per ", "/");
        return Some(Diagnostic::error(whole, "a quotient of units is written with `/`").mend(whole, mended));
    }
    if text.contains(char::is_whitespace) {
        let mended: String = text.split_whitespace().collect();
        let product = !text.contains(['/', '.']);
        let fault = Diagnostic::error(whole, "a unit has no blanks inside");
        return Some(if product { fault.label("one unit, without blanks") } else { fault.mend(whole, mended) });
    }
    for (mark, meant, said) in [
        ("^", "", "a power is written without `^`"),
        ("²", "2", "a power is written as a plain digit"),
        ("³", "3", "a power is written as a plain digit"),
        ("*", ".", "a product of units is written with `.`"),
        ("·", ".", "a product of units is written with `.`"),
        ("×", ".", "a product of units is written with `.`"),
    ] {
        if let Some(start) = text.find(mark) {
            let at = Span { start, end: start + mark.len() };
            return Some(Diagnostic::error(at, said).mend(whole, text.replace(mark, meant)));
        }
    }
    let start = text.find(['(', ')'])?;
    let at = Span { start, end: start + 1 };
    let help = "Divide from left to right: `mg/L/h` for milligram per litre and hour.";
    Some(Diagnostic::error(at, "a unit takes no parentheses").help(help))
}

/// `mL/min/1.73m2` and its relatives.
fn unbraced_index(text: &str) -> Option<Diagnostic> {
    let found = text.find("1.73")?;
    let before = text[..found].trim_end_matches('(');
    if text[found..].starts_with("1.73_m2}") && before.ends_with('{') {
        return None;
    }
    let at = Span { start: before.trim_end_matches('{').len(), end: text.len() };
    let said = format!("filtration indexed to body surface is written with `{INDEXED}`");
    Some(Diagnostic::error(at, said).label("everyday spelling").mend(at, INDEXED))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn mended(text: &str) -> String {
        let fault = Unit::parse(text).expect_err(text);
        let mend = fault.mend.unwrap_or_else(|| panic!("{text}: {} has no mend", fault.message));
        format!("{}{}{}", &text[..mend.span.start], mend.replacement, &text[mend.span.end..])
    }

    #[test]
    fn everyday_spellings_name_the_ucum_form() {
        for (text, form) in [
            ("mcg", "ug"),
            ("µg/mL", "ug/mL"),
            ("\u{3bc}g/mL", "ug/mL"),
            ("L/hr", "L/h"),
            ("mg/cc", "mg/mL"),
            ("IU/L", "[IU]/L"),
            ("mIU/mL", "m[IU]/mL"),
            ("yr", "a"),
            ("years", "a"),
            ("Kg", "kg"),
            ("ML/min", "mL/min"),
            ("mL/min/1.73m2", "mL/min/{1.73_m2}"),
            ("mL/min/1.73 m2", "mL/min/{1.73_m2}"),
            ("mL/min/(1.73 m^2)", "mL/min/{1.73_m2}"),
            ("mL/min/{1.73m2}", "mL/min/{1.73_m2}"),
            ("kg/m^2", "kg/m2"),
            ("kg/m²", "kg/m2"),
            ("mg*h/L", "mg.h/L"),
            ("mg·h/L", "mg.h/L"),
            ("mg per kg", "mg/kg"),
            ("mL / min", "mL/min"),
            ("uM", "umol/L"),
        ] {
            assert_eq!(mended(text), form, "{text}");
            assert!(Unit::parse(form).is_ok(), "{form}");
        }
    }

    #[test]
    fn the_culprit_alone_is_underlined() {
        let fault = Unit::parse("mg/L/hrs").expect_err("hrs");
        assert_eq!(fault.span, Some(Span { start: 5, end: 8 }));
        let fault = Unit::parse("mg/Q2").expect_err("Q");
        assert_eq!(fault.span, Some(Span { start: 3, end: 4 }));
        let fault = Unit::parse("m23").expect_err("power");
        assert_eq!(fault.span, Some(Span { start: 1, end: 3 }));
    }

    #[test]
    fn indexed_filtration_is_another_dimension() {
        let (absolute, indexed) = (Unit::parse("mL/min").expect("1"), Unit::parse("mL/min/{1.73_m2}").expect("2"));
        assert_ne!(absolute.dimension, indexed.dimension);
        assert_eq!(absolute.factor, indexed.factor);
        assert_eq!(indexed.dimension.indexed, 1);
    }

    #[test]
    fn malformed_units_are_refused() {
        for text in
            ["", "/", "mg/", "mg//L", ".mg", "mg.", "m0", "m-", "5", "mg5.5x", "{", "{}", "{1.73_m2", "}", "lb", "g99"]
        {
            assert!(Unit::parse(text).is_err(), "{text:?}");
        }
        let tall = vec!["m9"; 60].join(".");
        assert!(Unit::parse(&tall).is_err());
    }

    proptest::proptest! {
        #[test]
        fn no_text_breaks_the_reader(text in "\\PC{0,24}") {
            if let Err(fault) = crate::quantity::Quantity::parse(&text) {
                let span = fault.span.expect("a span");
                proptest::prop_assert!(text.get(span.start..span.end).is_some());
                if let Some(mend) = fault.mend {
                    proptest::prop_assert!(text.get(mend.span.start..mend.span.end).is_some());
                }
            }
        }

        #[test]
        fn no_almost_unit_breaks_the_reader(text in "[0-9+.,_eE -]{0,6}[kmunLghd./%1{}()0-9\\[\\]IU^-]{0,12}") {
            if let Err(fault) = crate::quantity::Quantity::parse(&text) {
                let span = fault.span.expect("a span");
                proptest::prop_assert!(text.get(span.start..span.end).is_some());
            }
        }
    }
}
