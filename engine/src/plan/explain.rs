//! What a plan will do and why, as data for `neap check`.

use super::{Plan, pilot_size, tiles};
use crate::cohort::Asked;
use crate::kinetics::Rates;
use crate::math::{Row, ln};
use crate::quantity::{Exact, to_f64};
use crate::scenario::{Amount, AmountUnit, Arm, Dose, Role, Route};

/// What a plan will do and why.
#[derive(Clone, Debug)]
pub struct Explanation {
    /// Which solver, as in "exact".
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
    /// Times the population is gone through, the pilot not counted.
    pub passes: usize,
    /// Patients in the pilot; `None` for small populations.
    pub pilot: Option<u64>,
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
    /// One entry a dose row: phrases such as "500 mg by mouth at 0 h, then every 12 h, 14 doses, the last at 156 h".
    pub rows: Vec<String>,
    /// Amount given in all to a patient with average covariates, in the scenario's amount unit.
    pub given: f64,
    /// Of it, what reaches the central compartment: times the typical bioavailability of oral doses.
    pub enters: f64,
}

/// Seconds a value takes one thread, and a patient beside its values; measured, an order of magnitude.
const SECONDS_PER_VALUE: f64 = 2.0e-9;
const SECONDS_PER_PATIENT: f64 = 1.0e-7;

/// Part of the values that brackets are expected to hold, per percentile and the square root of the pilot's size.
const KEPT: f64 = 3.7;

impl Plan {
    /// What it will do and why.
    pub fn explain(&self) -> Explanation {
        let scenario = self.scenario();
        let patients = scenario.population.size;
        let pilot = pilot_size(patients);
        let percentiles = scenario.output.percentiles.len() as f64;
        let share = pilot.map_or(1.0, |size| (KEPT * percentiles / (size as f64).sqrt()).min(1.0));
        let shares = vec![share; self.signals()];
        let tiles = tiles(&shares, patients, self.limits().threads, self.budget());
        let widest = tiles.iter().map(std::iter::ExactSizeIterator::len).max().unwrap_or(0);
        let values = patients * self.signals() as u64;
        let passes = tiles.len().max(1);
        let rows = (self.timetable.times.len() * self.protocol.shapes.len()) as f64;
        let work = patients as f64 * passes as f64 * (SECONDS_PER_PATIENT + 0.5 * SECONDS_PER_VALUE * rows)
            + values as f64 * SECONDS_PER_VALUE;
        Explanation {
            solver: "exact".to_owned(),
            reason: "every flow is first order, so amounts move by a step matrix of exponentials, without time steps to choose"
                .to_owned(),
            half_lives: self.half_lives(),
            arms: scenario.arms.iter().map(|arm| self.explain_arm(arm)).collect(),
            shapes: self.protocol.shapes.len(),
            kept_bytes: (widest as f64 * share * patients as f64 * 8.0) as u64,
            passes,
            pilot,
            values,
            seconds: work / self.limits().threads as f64,
        }
    }

    fn typical(&self, role: Role) -> Option<f64> {
        self.scenario().drug.parameters.iter().find(|parameter| parameter.role == role).map(|found| found.typical)
    }

    fn half_lives(&self) -> Vec<(String, f64)> {
        let rows: Vec<(Role, Row)> =
            self.scenario().drug.parameters.iter().map(|p| (p.role, Row::splat(p.typical))).collect();
        let row = |role| {
            rows.iter().find(|(found, _)| *found == role).map(|(_, row)| row).expect("the model has its parameters")
        };
        let mut rates = Rates::default();
        rates.fill(&self.structure, row);
        let half_life = |rate: f64| if rate > 0.0 { ln(2.0) / rate } else { f64::INFINITY };
        let mut lives = Vec::new();
        if let Some(absorption) = self.typical(Role::AbsorptionRate) {
            lives.push(("absorption".to_owned(), half_life(absorption)));
        }
        if self.structure.peripheral.is_some() {
            lives.push(("distribution".to_owned(), half_life(rates.alpha[0])));
            lives.push(("elimination (terminal)".to_owned(), half_life(rates.beta[0])));
        } else {
            lives.push(("elimination".to_owned(), half_life(rates.alpha[0])));
        }
        lives.sort_by(|a, b| a.1.total_cmp(&b.1));
        lives
    }

    fn explain_arm(&self, arm: &Arm) -> ArmExplanation {
        let (mut given, mut enters) = (0.0, 0.0);
        for dose in &arm.doses {
            let amount = self.average(&dose.amount) * dose.times.len() as f64;
            given += amount;
            let oral = dose.route == Route::Oral;
            enters += if oral { amount * self.typical(Role::Bioavailability).unwrap_or(1.0) } else { amount };
        }
        ArmExplanation {
            name: arm.name.clone(),
            rows: arm.doses.iter().map(|dose| self.phrase(dose)).collect(),
            given,
            enters,
        }
    }

    /// The amount for a patient with average covariates.
    fn average(&self, amount: &Amount) -> f64 {
        match *amount {
            Amount::Flat(amount) => amount,
            Amount::Per { covariate, amount } => {
                let all = &self.scenario().population.covariates;
                Asked::of(&all[covariate], all).map_or(f64::NAN, |asked| asked.mean * amount)
            }
        }
    }

    fn phrase(&self, dose: &Dose) -> String {
        let unit = match self.scenario().drug.amount_unit {
            AmountUnit::Milligram => "mg",
            AmountUnit::International => "[IU]",
            AmountUnit::Mole => "mol",
        };
        let amount = match dose.amount {
            Amount::Flat(amount) => format!("{amount} {unit}"),
            Amount::Per { covariate, amount } => {
                let covariate = &self.scenario().population.covariates[covariate];
                let per = covariate.unit.as_ref().map_or("1", |unit| unit.text.as_str());
                format!("{amount} {unit}/{per} of {}", covariate.name)
            }
        };
        let route = match &dose.route {
            Route::Bolus => "as a bolus".to_owned(),
            Route::Infusion { over } => format!("infused over {} h", to_f64(over)),
            Route::Oral => "by mouth".to_owned(),
        };
        let hours = |time: &Exact| format!("{} h", to_f64(time));
        let (first, last) = (&dose.times[0], &dose.times[dose.times.len() - 1]);
        let steps: Vec<Exact> = dose.times.windows(2).map(|pair| &pair[1] - &pair[0]).collect();
        let when = match steps.as_slice() {
            [] => format!("at {}, once", hours(first)),
            [step, rest @ ..] if rest.iter().all(|other| other == step) => format!(
                "at {}, then every {}, {} doses, the last at {}",
                hours(first),
                hours(step),
                dose.times.len(),
                hours(last)
            ),
            _ if dose.times.len() <= 8 => {
                let times: Vec<String> = dose.times.iter().map(hours).collect();
                format!("at {}", times.join(", "))
            }
            _ => format!("{} doses from {} to {}", dose.times.len(), hours(first), hours(last)),
        };
        format!("{amount} {route} {when}")
    }
}
