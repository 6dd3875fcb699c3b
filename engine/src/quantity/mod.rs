//! Physical values with their units, exact until the last rounding.

use num_rational::BigRational;

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

/// The nearest binary number.
pub fn to_f64(value: &Exact) -> f64 {
    use num_traits::ToPrimitive;
    value.to_f64().unwrap_or(f64::NAN)
}
