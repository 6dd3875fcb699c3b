//! What a plan will do and why, as data for `neap check`.

/// What a plan will do and why.
#[derive(Clone, Debug)]
pub struct Explanation {
    /// Which solver, as in "exact: first-order flows only".
    pub solver: String,
    /// Why this one, a sentence.
    pub reason: String,
    /// Half-lives that follow from the typical values, fastest first: what of, hours (infinite without elimination).
    pub half_lives: Vec<(String, f64)>,
    /// One entry an arm.
    pub arms: Vec<ArmExplanation>,
    /// Distinct dose shapes solved per patient: arms that differ in amount only share one.
    pub shapes: usize,
    /// Bytes that values kept in the widest pass are expected to take.
    pub kept_bytes: u64,
    /// Times the population is gone through, the pilots not counted.
    pub passes: usize,
    /// Patients in each pilot, smallest first; empty for small populations.
    pub pilots: Vec<u64>,
    /// Values computed: patients x output times x arms.
    pub values: u64,
    /// Seconds expected on this kind of machine, from the values and the threads; an order of magnitude.
    pub seconds: f64,
}

/// What one arm gives.
#[derive(Clone, Debug)]
pub struct ArmExplanation {
    /// The arm's name.
    pub name: String,
    /// One entry a dose row: sentences such as "500 mg by mouth at 0 h, then every 12 h, 14 doses, the last at 156 h".
    pub rows: Vec<String>,
    /// Amount given in all to a patient with typical covariates, in the scenario's amount unit.
    pub given: f64,
    /// Of it, what reaches the central compartment: times the typical bioavailability of oral doses.
    pub enters: f64,
}
