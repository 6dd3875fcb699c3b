//! Everyday spellings of units, and the UCUM form that is meant.

use super::symbol;

/// Spelling and UCUM form, compared without regard to case.
const EVERYDAY: [(&str, &str); 64] = [
    ("mcg", "ug"),
    ("µg", "ug"),
    ("μg", "ug"),
    ("gr", "g"),
    ("gm", "g"),
    ("gms", "g"),
    ("gram", "g"),
    ("grams", "g"),
    ("kgs", "kg"),
    ("kilo", "kg"),
    ("kilogram", "kg"),
    ("kilograms", "kg"),
    ("mgs", "mg"),
    ("milligram", "mg"),
    ("milligrams", "mg"),
    ("microgram", "ug"),
    ("micrograms", "ug"),
    ("µmol", "umol"),
    ("μmol", "umol"),
    ("mcmol", "umol"),
    ("mole", "mol"),
    ("moles", "mol"),
    ("IU", "[IU]"),
    ("IE", "[IU]"),
    ("U", "[IU]"),
    ("unit", "[IU]"),
    ("units", "[IU]"),
    ("kIU", "k[IU]"),
    ("kU", "k[IU]"),
    ("mIU", "m[IU]"),
    ("mU", "m[IU]"),
    ("cc", "mL"),
    ("mls", "mL"),
    ("µl", "uL"),
    ("μl", "uL"),
    ("liter", "L"),
    ("liters", "L"),
    ("litre", "L"),
    ("litres", "L"),
    ("sec", "s"),
    ("secs", "s"),
    ("second", "s"),
    ("seconds", "s"),
    ("mins", "min"),
    ("minute", "min"),
    ("minutes", "min"),
    ("hr", "h"),
    ("hrs", "h"),
    ("hour", "h"),
    ("hours", "h"),
    ("day", "d"),
    ("days", "d"),
    ("w", "wk"),
    ("wks", "wk"),
    ("week", "wk"),
    ("weeks", "wk"),
    ("mos", "mo"),
    ("month", "mo"),
    ("months", "mo"),
    ("y", "a"),
    ("yr", "a"),
    ("yrs", "a"),
    ("year", "a"),
    ("years", "a"),
];

/// Spellings whose case tells, with the product or quotient that is meant.
const CONCENTRATIONS: [(&str, &str); 7] = [
    ("M", "mol/L"),
    ("mM", "mmol/L"),
    ("uM", "umol/L"),
    ("µM", "umol/L"),
    ("μM", "umol/L"),
    ("nM", "nmol/L"),
    ("pM", "pmol/L"),
];

/// Units that are known and not taken, with what to do.
const FOREIGN: [(&str, &str); 12] = [
    ("lb", "Write it in kg: 1 lb is 0.45359237 kg."),
    ("lbs", "Write it in kg: 1 lb is 0.45359237 kg."),
    ("pound", "Write it in kg: 1 lb is 0.45359237 kg."),
    ("pounds", "Write it in kg: 1 lb is 0.45359237 kg."),
    ("oz", "Write it in g: 1 oz is 28.349523125 g."),
    ("st", "Write it in kg: 1 st is 6.35029318 kg."),
    ("in", "Write it in cm: 1 in is 2.54 cm."),
    ("inch", "Write it in cm: 1 in is 2.54 cm."),
    ("inches", "Write it in cm: 1 in is 2.54 cm."),
    ("ft", "Write it in cm: 1 ft is 30.48 cm."),
    ("fl", "Write it in mL."),
    ("mEq", "Write it in mmol: divide by the charge."),
];

/// The UCUM form of an everyday spelling.
pub(super) fn ucum(text: &str) -> Option<String> {
    if let Some((_, form)) = CONCENTRATIONS.iter().find(|(spelling, _)| *spelling == text) {
        return Some((*form).to_owned());
    }
    let small = text.to_lowercase();
    let everyday = EVERYDAY.iter().find(|(spelling, _)| spelling.to_lowercase() == small);
    // "KG", "ML", "MIN": a symbol in the wrong case.
    everyday.map(|(_, form)| (*form).to_owned()).or_else(|| symbol::all().find(|name| name.to_lowercase() == small))
}

/// What to do about a unit that is known and not taken.
pub(super) fn foreign(text: &str) -> Option<&'static str> {
    FOREIGN.iter().find(|(spelling, _)| spelling.eq_ignore_ascii_case(text)).map(|(_, advice)| *advice)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::quantity::Unit;

    #[test]
    fn every_form_is_a_unit_and_no_spelling_is() {
        for (spelling, form) in EVERYDAY.iter().chain(&CONCENTRATIONS) {
            assert!(Unit::parse(form).is_ok(), "{form}");
            assert!(symbol::meaning(spelling).is_none(), "{spelling}");
        }
        assert!(FOREIGN.iter().all(|(spelling, _)| symbol::meaning(spelling).is_none()));
    }
}
