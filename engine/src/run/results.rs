//! What a run found: plain numbers, ready for tables and summaries.

use std::sync::Arc;

use crate::plan::Plan;

/// Confidence of every Monte Carlo interval.
pub const INTERVAL_LEVEL: f64 = 0.95;

/// Name of the default signal.
pub const CONCENTRATION: &str = "concentration";

/// What a run found.
#[derive(Clone, Debug)]
pub struct Results {
    /// The plan that was run; holds the scenario.
    pub plan: Arc<Plan>,
    /// Patients simulated.
    pub patients: u64,
    /// One entry an arm, in file order.
    pub arms: Vec<ArmResult>,
    /// The population as sampled, quantity by quantity in file order.
    pub population: Vec<Realised>,
    /// Where time went; outside the contract of identical bytes.
    pub effort: Effort,
}

/// One arm.
#[derive(Clone, Debug)]
pub struct ArmResult {
    /// Its name.
    pub name: String,
    /// One entry an output time, in order.
    pub times: Vec<AtTime>,
}

/// One arm at one time.
#[derive(Clone, Debug)]
pub struct AtTime {
    /// In h.
    pub time_h: f64,
    /// One entry a percentile, rising.
    pub bands: Vec<Band>,
    /// Patients below, within and above the window; `None` without a window.
    pub shares: Option<Counts>,
}

/// One percentile with its Monte Carlo interval, in the scenario's output unit of concentration.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Band {
    /// Between 0 and 100.
    pub percentile: f64,
    /// Hyndman-Fan type 7.
    pub value: f64,
    /// Lower bound by order statistics; `None` where the sample is too small to have one.
    pub mc_lower: Option<f64>,
    /// Upper bound, as the lower.
    pub mc_upper: Option<f64>,
}

/// Patients in each part of the window; the three add up to all patients.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Counts {
    /// `C < low`.
    pub below: u64,
    /// `low <= C <= high`.
    pub within: u64,
    /// `C > high`.
    pub above: u64,
}

/// One statistic of one quantity of the population.
#[derive(Clone, Debug, PartialEq)]
pub struct Realised {
    /// Name of the covariate or parameter; for a class `sex = female`.
    pub quantity: String,
    /// UCUM unit; "1" without one.
    pub unit: String,
    /// `mean`, `standard deviation`, `coefficient of variation`, `percentile 5` and so on, or `share`.
    pub statistic: String,
    /// What the scenario asks for, limits included; `None` where no closed form says it.
    pub asked: Option<f64>,
    /// What was sampled.
    pub realised: f64,
}

/// Where time went, in seconds of wall clock summed over threads where it says so.
#[derive(Clone, Debug, Default)]
pub struct Effort {
    /// Threads.
    pub threads: usize,
    /// Passes over the population, pilots not counted.
    pub passes: usize,
    /// Passes that a missed bracket made necessary.
    pub repeats: usize,
    /// Wall seconds in pilots.
    pub pilot: f64,
    /// Seconds summed over threads: drawing patients.
    pub sampling: f64,
    /// Seconds summed over threads: step matrices and concentrations.
    pub solving: f64,
    /// Seconds summed over threads: counting and keeping.
    pub counting: f64,
    /// Wall seconds: picking order statistics.
    pub selecting: f64,
    /// Wall seconds of the whole run, tables not included.
    pub total: f64,
}

/// One block of patients for `patients.parquet`: values by quantity, then by patient.
#[derive(Clone, Debug)]
pub struct PatientBlock {
    /// Number of the first patient, from 0.
    pub first: u64,
    /// Patients in it.
    pub count: usize,
    /// One column a covariate: the value, or the index of the class.
    pub covariates: Vec<Vec<f64>>,
    /// One column a parameter.
    pub parameters: Vec<Vec<f64>>,
}
