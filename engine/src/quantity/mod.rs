//! Physical values with their units, exact until the last rounding.
//!
//! The units are a part of UCUM (the Unified Code for Units of Measure); see [`Unit::parse`]. Faults of a text are
//! [`Diagnostic`]s whose spans count from its first byte.

mod dimension;
mod number;
mod round;
mod spelling;
mod symbol;
mod unit;

use num_rational::BigRational;

use crate::diagnostic::Diagnostic;

pub use number::decimal;
pub use round::to_f64;

/// An exact rational number.
pub type Exact = BigRational;

/// Powers of the base units: mg, mol, \[IU\], dm (so that a litre is dm3) and h.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, PartialOrd, Ord)]
pub struct Dimension {
    /// Power of mass, in mg.
    pub mass: i8,
    /// Power of amount of substance, in mol.
    pub substance: i8,
    /// Power of arbitrary international units.
    pub units: i8,
    /// Power of length, in dm.
    pub length: i8,
    /// Power of time, in h.
    pub time: i8,
    /// Power of "per 1.73 m2 of body surface", which keeps indexed filtration apart from absolute.
    pub indexed: i8,
}

/// A unit as written, with what it means.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Unit {
    /// UCUM text, as the user wrote it.
    pub text: String,
    /// Its dimension.
    pub dimension: Dimension,
    /// Exactly how many base units one of it is.
    pub factor: Exact,
}

/// A number with a unit.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Quantity {
    /// The number, exactly as written.
    pub value: Exact,
    /// The unit.
    pub unit: Unit,
}

impl Quantity {
    /// Reads a number and its unit, as in `500 mg`, `500mg`, `-1.5e-3 /h`. A number alone has the empty unit.
    ///
    /// # Errors
    /// A diagnostic whose span lies in `text` and underlines no more than the culprit.
    ///
    /// # Example
    /// ```
    /// use neap_engine::quantity::Quantity;
    /// let half = Quantity::parse("0.5 g")?;
    /// assert_eq!(half.in_base(), Quantity::parse("500mg")?.in_base());
    /// # Ok::<(), Box<neap_engine::diagnostic::Diagnostic>>(())
    /// ```
    pub fn parse(text: &str) -> Result<Self, Box<Diagnostic>> {
        let (value, unit_at) = number::leading(text)?;
        let unit = Unit::parse_part(text, unit_at)?;
        Ok(Self { value, unit })
    }

    /// Where the unit starts in a text that [`Quantity::parse`] accepts; the end of the text where there is none.
    pub fn unit_start(text: &str) -> usize {
        number::leading(text).map_or(text.len(), |(_, unit_at)| unit_at)
    }

    /// The value in base units (mg, mol, \[IU\], L, h), exactly.
    pub fn exact(&self) -> Exact {
        &self.value * &self.unit.factor
    }

    /// The value in base units (mg, mol, \[IU\], L, h), correctly rounded.
    pub fn in_base(&self) -> f64 {
        to_f64(&self.exact())
    }

    /// The value in `unit`, correctly rounded. The dimensions are the caller's to compare.
    pub fn in_unit(&self, unit: &Unit) -> f64 {
        to_f64(&(self.exact() / &unit.factor))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn base(text: &str) -> f64 {
        Quantity::parse(text).expect("a quantity").in_base()
    }

    #[test]
    fn two_spellings_of_one_amount_have_the_same_bits() {
        for (one, other) in [
            ("0.5 g", "500 mg"),
            ("0.1 g", "100mg"),
            ("300 ug", "0.3 mg"),
            ("7 d", "168 h"),
            ("1 wk", "1.68e2 h"),
            ("90 min", "1.5 h"),
            ("100 mL/min", "6 L/h"),
            ("2 ug/mL", "2 mg/L"),
            ("12 mo", "1 a"),
            ("1 a", "8766 h"),
            ("70 kg", "70000 g"),
            ("0.1 h-1", "0.1 1/h"),
            ("0.1 /h", "0.1 h-1"),
            ("30 %", "0.3"),
            ("1.8 m2", "18000 cm2"),
            ("5 k[IU]", "5000 [IU]"),
            ("1 L", "1 l"),
            ("1 dL", "100 mL"),
            ("1 L", "1000 cm3"),
        ] {
            assert_eq!(base(one).to_bits(), base(other).to_bits(), "{one} and {other}");
            let dimensions = [one, other].map(|text| Quantity::parse(text).expect("a quantity").unit.dimension);
            assert_eq!(dimensions[0], dimensions[1], "{one} and {other}");
        }
    }

    #[test]
    fn values_cross_into_another_unit() {
        let unit = Unit::parse("kg").expect("a unit");
        assert_eq!(Quantity::parse("70500 g").expect("a quantity").in_unit(&unit), 70.5);
    }
}
