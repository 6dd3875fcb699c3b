//! The block: one constant number of lanes, one patient a lane.

/// Lanes of a block. The same everywhere and for ever: sums inside a block depend on it.
pub const LANES: usize = 256;

/// One value for each lane of a block.
#[derive(Clone, Copy, Debug, PartialEq)]
#[repr(C, align(64))]
pub struct Row(pub [f64; LANES]);

impl Row {
    /// All lanes zero.
    pub const ZERO: Self = Self([0.0; LANES]);

    /// All lanes `value`.
    pub const fn splat(value: f64) -> Self {
        Self([value; LANES])
    }
}

impl Default for Row {
    fn default() -> Self {
        Self::ZERO
    }
}

impl std::ops::Deref for Row {
    type Target = [f64; LANES];

    fn deref(&self) -> &Self::Target {
        &self.0
    }
}

impl std::ops::DerefMut for Row {
    fn deref_mut(&mut self) -> &mut Self::Target {
        &mut self.0
    }
}
