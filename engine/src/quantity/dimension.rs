//! What kind of thing a unit measures, and its name in words.

use super::Dimension;

impl Dimension {
    /// A pure number.
    pub const NONE: Self = Self { mass: 0, substance: 0, units: 0, length: 0, time: 0, indexed: 0 };
    /// Mass.
    pub const MASS: Self = Self { mass: 1, ..Self::NONE };
    /// Amount of substance.
    pub const SUBSTANCE: Self = Self { substance: 1, ..Self::NONE };
    /// International units.
    pub const UNITS: Self = Self { units: 1, ..Self::NONE };
    /// Length.
    pub const LENGTH: Self = Self { length: 1, ..Self::NONE };
    /// Volume.
    pub const VOLUME: Self = Self { length: 3, ..Self::NONE };
    /// Time.
    pub const TIME: Self = Self { time: 1, ..Self::NONE };
    /// Volume per time.
    pub const CLEARANCE: Self = Self { length: 3, time: -1, ..Self::NONE };
    /// Per time.
    pub const RATE: Self = Self { time: -1, ..Self::NONE };

    /// The powers in the order of the fields.
    fn powers(self) -> [i8; 6] {
        [self.mass, self.substance, self.units, self.length, self.time, self.indexed]
    }

    fn from_powers([mass, substance, units, length, time, indexed]: [i8; 6]) -> Self {
        Self { mass, substance, units, length, time, indexed }
    }

    /// The product. Powers stop at the ends of their range, far beyond what [`Unit::parse`](super::Unit::parse) takes.
    #[must_use]
    pub fn times(self, other: Self) -> Self {
        let (a, b) = (self.powers(), other.powers());
        Self::from_powers(std::array::from_fn(|i| a[i].saturating_add(b[i])))
    }

    /// The quotient.
    #[must_use]
    pub fn per(self, other: Self) -> Self {
        self.times(other.to_the(-1))
    }

    /// A whole power.
    #[must_use]
    pub fn to_the(self, power: i8) -> Self {
        Self::from_powers(self.powers().map(|own| own.saturating_mul(power)))
    }

    /// Whether every power is at most `bound` in size.
    pub(super) fn within(self, bound: i8) -> bool {
        self.powers().iter().all(|power| power.unsigned_abs() <= bound.unsigned_abs())
    }

    /// The name in words without an article, as in `volume per time`.
    pub fn name(self) -> String {
        let (length, space) = match self.length {
            3 | -3 => (self.length / 3, "volume"),
            2 | -2 => (self.length / 2, "area"),
            other => (other, "length"),
        };
        let parts = [
            (self.mass, "mass"),
            (self.substance, "amount of substance"),
            (self.units, "international units"),
            (length, space),
            (self.time, "time"),
        ];
        let above: Vec<String> = parts.iter().filter(|part| part.0 > 0).map(|&(p, word)| powered(word, p)).collect();
        let mut name = above.join(" times ");
        for &(power, word) in parts.iter().filter(|part| part.0 < 0) {
            name.push_str(" per ");
            name.push_str(&powered(word, -power));
        }
        let indexed = match self.indexed {
            0 => "",
            1.. => " indexed to 1.73 m2",
            _ => " times 1.73 m2",
        };
        match (name.trim_start(), indexed) {
            ("", "") => "number without a unit".to_owned(),
            ("", indexed) => format!("number{indexed}"),
            (name, indexed) => format!("{name}{indexed}"),
        }
    }

    /// The name in words with its article, as in `a volume per time`.
    pub fn phrase(self) -> String {
        let name = self.name();
        if name.starts_with("per ") {
            return format!("a number {name}");
        }
        if name.starts_with("international") {
            return format!("an amount in {name}");
        }
        let article = if name.starts_with(['a', 'e', 'i', 'o']) { "an" } else { "a" };
        format!("{article} {name}")
    }
}

fn powered(word: &str, power: i8) -> String {
    match power {
        1 => word.to_owned(),
        2 => format!("{word} squared"),
        3 => format!("{word} cubed"),
        _ => format!("{word} to the power {power}"),
    }
}

#[cfg(test)]
mod tests {
    use crate::quantity::Unit;

    #[test]
    fn dimensions_have_names_of_the_trade() {
        for (unit, name) in [
            ("kg", "mass"),
            ("mL/min", "volume per time"),
            ("mL/min/{1.73_m2}", "volume per time indexed to 1.73 m2"),
            ("mg/L", "mass per volume"),
            ("umol/L", "amount of substance per volume"),
            ("[IU]/L", "international units per volume"),
            ("h-1", "per time"),
            ("kg/m2", "mass per area"),
            ("mg.h/L", "mass times time per volume"),
            ("h2", "time squared"),
            ("%", "number without a unit"),
            ("mg/kg", "number without a unit"),
        ] {
            assert_eq!(Unit::parse(unit).expect(unit).dimension.name(), name, "{unit}");
        }
        assert_eq!(Unit::parse("mol").expect("mol").dimension.phrase(), "an amount of substance");
        assert_eq!(Unit::parse("/h").expect("/h").dimension.phrase(), "a number per time");
        assert_eq!(Unit::parse("L/h").expect("L/h").dimension.phrase(), "a volume per time");
    }
}
