//! A checked scenario: what is asked, with every physical value in one unit. Knows no sampling and no solver.
//!
//! Text becomes a [`Scenario`] or the full list of its faults, in file order ([`Scenario::parse`]); nothing is ever
//! half-read.
//!
//! # Units inside
//! Time in h, amounts in mg (or \[IU\], or mol, see [`Drug::amount_unit`]), volume in L, rates in 1/h; a covariate is
//! held in the unit in which its distribution was written ([`Covariate::unit`]).

mod arms;
mod chance;
mod correlations;
mod covariates;
mod document;
mod effects;
pub mod fields;
mod measure;
mod nearest;
mod output;
mod parameters;
mod population;
mod read;
mod reader;
mod roles;
mod schedule;
mod spread;
mod values;
mod variation;

#[cfg(test)]
mod tests;

use crate::diagnostic::{Diagnostic, Source};
use crate::quantity::{Dimension, Exact, Unit};

/// A scenario without faults.
#[derive(Clone, Debug)]
pub struct Scenario {
    /// The text and its name, for the provenance.
    pub source: Source,
    /// What the scenario is about.
    pub title: Option<String>,
    /// The question it is to answer.
    pub question: Option<String>,
    /// Who is enrolled.
    pub population: Population,
    /// How the body handles the drug.
    pub drug: Drug,
    /// The dosing arms, in file order.
    pub arms: Vec<Arm>,
    /// The therapeutic window; `None` gives no shares.
    pub window: Option<Window>,
    /// Whether parameters vary between subjects (`[variability] between_subject`).
    pub between_subject: bool,
    /// What to write.
    pub output: Output,
    /// Doubtful things, in file order.
    pub warnings: Vec<Diagnostic>,
    /// Every default that acts on the numbers, in a fixed order.
    pub defaults: Vec<Echo>,
}

/// A default that acted: shown, so that nobody has to guess it.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Echo {
    /// The key as it would stand in the file, as in `variability.between_subject`.
    pub key: String,
    /// The value taken.
    pub value: String,
}

/// Numbers given outside the file that stand in for the file's.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Overrides {
    /// How many virtual patients, instead of `population.size`.
    pub size: Option<u64>,
    /// Seed of every draw, instead of `population.seed`.
    pub seed: Option<u64>,
}

/// Who is enrolled.
#[derive(Clone, Debug)]
pub struct Population {
    /// How many virtual patients.
    pub size: u64,
    /// Seed of every draw.
    pub seed: u64,
    /// Covariates in file order; one that depends on another's class stands after it.
    pub covariates: Vec<Covariate>,
}

/// One property of a patient.
#[derive(Clone, Debug)]
pub struct Covariate {
    /// Name in the file, as in `weight`.
    pub name: String,
    /// The unit its values are held and reported in; `None` for categories.
    pub unit: Option<Unit>,
    /// How it is distributed.
    pub spread: Spread,
}

/// How a covariate is distributed.
#[derive(Clone, Debug)]
pub enum Spread {
    /// A number for everyone from one distribution.
    Number(Limited),
    /// A number from one distribution per class of another covariate.
    ByClass {
        /// Index of the covariate with categories, smaller than this one's.
        of: usize,
        /// One distribution per class, in the order of that covariate's classes.
        each: Vec<Limited>,
    },
    /// One of several unordered classes.
    Classes {
        /// Names in file order.
        names: Vec<String>,
        /// Their proportions, positive, adding up to 1.
        proportions: Vec<f64>,
    },
}

/// A distribution of one variable within limits.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Limited {
    /// Before the limits act.
    pub distribution: Distribution,
    /// Lower limit, or minus infinity.
    pub low: f64,
    /// Upper limit, or infinity.
    pub high: f64,
}

/// A distribution of one variable.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Distribution {
    /// Normal with mean and standard deviation.
    Normal {
        /// Mean.
        mean: f64,
        /// Standard deviation, above 0.
        sd: f64,
    },
    /// `exp` of a normal: every stated form (mean or median with cv, log-sd, log-variance; the 5th and 95th percentile) ends
    /// here.
    Lognormal {
        /// The median, which is `exp` of the logarithm's mean.
        median: f64,
        /// Standard deviation of the natural logarithm, above 0.
        log_sd: f64,
    },
    /// Uniform.
    Uniform {
        /// Lower end.
        from: f64,
        /// Upper end.
        to: f64,
    },
    /// Triangular.
    Triangular {
        /// Lower end.
        from: f64,
        /// The most likely value.
        mode: f64,
        /// Upper end.
        to: f64,
    },
    /// The same for everyone.
    Fixed {
        /// The value.
        value: f64,
    },
}

/// The drug and its parameters.
#[derive(Clone, Debug)]
pub struct Drug {
    /// Its name.
    pub name: String,
    /// The compartments.
    pub model: Model,
    /// mg, \[IU\] or mol: what amounts are counted in, once for the whole scenario.
    pub amount_unit: AmountUnit,
    /// Parameters in file order.
    pub parameters: Vec<Parameter>,
    /// Correlations of the random parts, each pair once: indices into `parameters`, first smaller than second.
    pub correlations: Vec<(usize, usize, f64)>,
}

/// What amounts are counted in.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum AmountUnit {
    /// Mass, in mg.
    Milligram,
    /// International units.
    International,
    /// Amount of substance, in mol.
    Mole,
}

impl AmountUnit {
    /// The unit of a concentration that the kernels compute in.
    pub fn per_litre(self) -> Unit {
        let (text, dimension) = match self {
            Self::Milligram => ("mg/L", Dimension { mass: 1, length: -3, ..Dimension::default() }),
            Self::International => ("[IU]/L", Dimension { units: 1, length: -3, ..Dimension::default() }),
            Self::Mole => ("mol/L", Dimension { substance: 1, length: -3, ..Dimension::default() }),
        };
        Unit { text: text.to_owned(), dimension, factor: Exact::from_integer(1.into()) }
    }
}

/// The shorthands for compartments and flows.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Model {
    /// Central alone.
    OneCompartment,
    /// Central and one peripheral.
    TwoCompartment,
}

/// A parameter of the drug: `value = (typical + additive terms) x factors x exp(random)` (for the log-normal; see [`Varies`]).
#[derive(Clone, Debug)]
pub struct Parameter {
    /// Which.
    pub role: Role,
    /// Where it was written, for messages about it.
    pub span: crate::diagnostic::Span,
    /// Value at the reference covariates without random part: L/h, L, 1/h, h, or a fraction.
    pub typical: f64,
    /// Additive terms.
    pub additive: Vec<Additive>,
    /// Factors.
    pub factors: Vec<Factor>,
    /// The random part.
    pub varies: Varies,
    /// Limits on the individual value, by inversion of the random part; infinite where not given.
    pub low: f64,
    /// As `low`.
    pub high: f64,
}

/// What a parameter is to the model.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Role {
    /// `clearance`, L/h.
    Clearance,
    /// `central_volume` (`volume` with one compartment), L.
    CentralVolume,
    /// `intercompartmental_clearance`, L/h.
    IntercompartmentalClearance,
    /// `peripheral_volume`, L.
    PeripheralVolume,
    /// `absorption_rate`, 1/h; oral doses.
    AbsorptionRate,
    /// `lag_time`, h; oral doses.
    LagTime,
    /// `bioavailability`, a fraction; oral doses.
    Bioavailability,
}

/// How a parameter varies between subjects.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Varies {
    /// The same for everyone with the same covariates.
    Not,
    /// Times `exp(log_sd e)`.
    Lognormal {
        /// Standard deviation of the logarithm.
        log_sd: f64,
    },
    /// Times `1 + cv e`, within limits.
    Normal {
        /// Coefficient of variation, as a fraction.
        cv: f64,
    },
    /// `logit(value) + logit_sd e`, for fractions.
    LogitNormal {
        /// Standard deviation on the logit scale.
        logit_sd: f64,
    },
}

/// An additive term: `slope x covariate`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Additive {
    /// Index of the covariate, a number.
    pub covariate: usize,
    /// In the parameter's unit per unit of the covariate.
    pub slope: f64,
}

/// A factor that a covariate puts on a parameter.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Factor {
    /// `(covariate / reference) ^ exponent`.
    Power {
        /// Index of the covariate, a positive number.
        covariate: usize,
        /// In the covariate's unit.
        reference: f64,
        /// Bare.
        exponent: f64,
    },
    /// `1 + slope (covariate - reference)`.
    Linear {
        /// Index of the covariate, a number.
        covariate: usize,
        /// In the covariate's unit.
        reference: f64,
        /// Per unit of the covariate.
        slope: f64,
    },
    /// `exp(rate (covariate - reference))`.
    Exponential {
        /// Index of the covariate, a number.
        covariate: usize,
        /// In the covariate's unit.
        reference: f64,
        /// Per unit of the covariate.
        rate: f64,
    },
    /// `times` for one class, 1 for the others.
    Class {
        /// Index of the covariate, with categories.
        covariate: usize,
        /// Index of the class.
        class: usize,
        /// The factor, above 0.
        times: f64,
    },
}

/// A dosing arm.
#[derive(Clone, Debug)]
pub struct Arm {
    /// Its name.
    pub name: String,
    /// Its dose rows, in file order.
    pub doses: Vec<Dose>,
}

/// One row of doses: the same amount by the same route at each of its times.
#[derive(Clone, Debug)]
pub struct Dose {
    /// How much each time.
    pub amount: Amount,
    /// The way in.
    pub route: Route,
    /// When, in h, strictly rising.
    pub times: Vec<Exact>,
}

/// How much is given.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Amount {
    /// The same for everyone, in the scenario's amount unit; 0 is a placebo.
    Flat(f64),
    /// So much for each unit of a covariate (`per = "weight"`).
    Per {
        /// Index of the covariate, a number.
        covariate: usize,
        /// Amount units per unit of the covariate.
        amount: f64,
    },
}

/// The way a dose goes in.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Route {
    /// At once into the central compartment.
    Bolus,
    /// At a constant rate into the central compartment over a time in h, above 0.
    Infusion {
        /// How long, in h.
        over: Exact,
    },
    /// At once into the gut, from which it is absorbed at first order.
    Oral,
}

/// The therapeutic window, for the central concentration: within means `low <= C <= high`.
#[derive(Clone, Debug)]
pub struct Window {
    /// In amount unit per L; `None` where the window is open below.
    pub low: Option<f64>,
    /// In amount unit per L; `None` where the window is open above.
    pub high: Option<f64>,
}

/// What to write.
#[derive(Clone, Debug)]
pub struct Output {
    /// Times in h, strictly rising, at least one, none negative.
    pub times: Vec<Exact>,
    /// Percentiles, strictly between 0 and 100, strictly rising.
    pub percentiles: Vec<Exact>,
    /// The unit in which concentrations are written: the window's, else mg/L (\[IU\]/L, mol/L).
    pub concentration: Unit,
    /// `patients = true`: write one row per patient.
    pub patients: bool,
}
