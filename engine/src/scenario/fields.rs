//! The one table of keys: it drives the reader, the hints for unknown keys, and whatever describes the format to others.

use crate::quantity::Dimension;

/// A key of the scenario file.
#[derive(Clone, Copy, Debug)]
pub struct Field {
    /// The tables in which it may stand: dotted, with `*` for a name that the file chooses, without the numbers of lists.
    pub tables: &'static [&'static str],
    /// The key itself.
    pub key: &'static str,
    /// What its value is.
    pub kind: Kind,
    /// Whether it must stand.
    pub need: Need,
    /// What it says, one sentence without a full stop.
    pub about: &'static str,
}

/// What the value of a key is.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Kind {
    /// Text for people.
    Text,
    /// The name of something that stands elsewhere in the file.
    Name,
    /// Several such names.
    Names,
    /// `true` or `false`.
    Flag,
    /// A bare whole number.
    Count,
    /// A bare number.
    Number,
    /// Several bare numbers.
    Numbers,
    /// A fraction written with `%`.
    Share,
    /// One of these words; the second list belongs to the design and not to this version.
    Word(&'static [&'static str], &'static [&'static str]),
    /// A number with a unit of this dimension, and an example.
    Quantity(Dimension, &'static str),
    /// Several of them.
    Quantities(Dimension, &'static str),
    /// A number with a unit whose dimension follows from its surroundings.
    Fitting,
    /// Two of them, low and high.
    Pair,
    /// Output times: a range or a list.
    Times,
    /// A proportion for each class.
    Proportions,
    /// A table.
    Table,
    /// A list of tables.
    Tables,
    /// Not described, because this version refuses it.
    Open,
}

/// Whether a key must stand.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Need {
    /// It must.
    Required,
    /// It may, or its neighbours decide.
    Optional,
    /// It belongs to the design and not to this version: refused, never ignored.
    Later,
}

use Kind::{
    Count, Fitting, Flag, Name, Names, Number, Numbers, Open, Pair, Proportions, Quantities, Quantity, Share, Table,
    Tables, Text, Times, Word,
};
use Need::{Later, Optional, Required};

/// Where a distribution may be written.
const SPREADS: &[&str] = &["population.*", "population.*.each.*"];
const COVARIATE: &[&str] = &["population.*"];
const POPULATION: &[&str] = &["population"];
const DRUG: &[&str] = &["drug"];
const PARAMETER: &[&str] = &["drug.parameter.*"];
const SCALE: &[&str] = &["drug.parameter.*.scale"];
const EFFECTS: &[&str] = &["drug.parameter.*.scale", "drug.parameter.*.plus"];
const CORRELATION: &[&str] = &["drug.correlation"];
const ARM: &[&str] = &["arm"];
const DOSE: &[&str] = &["arm.dose"];
const WINDOW: &[&str] = &["window"];
const SWITCHES: &[&str] = &["variability"];
const OUTPUT: &[&str] = &["output"];
const RANGE: &[&str] = &["output.times"];

/// The distributions of one variable.
pub(super) const DISTRIBUTIONS: &[&str] = &["lognormal", "normal", "uniform", "triangular", "fixed", "categories"];

/// Every key, in the order in which a scenario is usually written.
pub const FIELDS: &[Field] = &[
    field(&[""], "neap", Count, Required, "Version of the format, 1"),
    field(&[""], "title", Text, Optional, "What the scenario is about"),
    field(&[""], "question", Text, Optional, "The question it is to answer"),
    field(&[""], "population", Table, Required, "Who is enrolled"),
    field(&[""], "drug", Table, Required, "How the body handles the drug"),
    field(&[""], "arm", Tables, Required, "A dosing arm"),
    field(&[""], "window", Table, Optional, "The therapeutic window of the central concentration"),
    field(&[""], "variability", Table, Optional, "Which sources of variability act"),
    field(&[""], "output", Table, Required, "What to write"),
    field(&[""], "goal", Open, Later, "What each patient should reach"),
    field(&[""], "signal", Open, Later, "A readout other than the central concentration"),
    field(&[""], "mic", Open, Later, "Minimum inhibitory concentrations"),
    field(&[""], "sweep", Open, Later, "A grid of regimens"),
    field(&[""], "assay", Open, Later, "The laboratory's error and limit"),
    field(POPULATION, "size", Count, Required, "How many virtual patients"),
    field(POPULATION, "seed", Count, Required, "Seed of every draw"),
    field(POPULATION, "draws", Word(&["independent"], &["sobol"]), Optional, "How patients fill the space of chance"),
    field(POPULATION, "correlation", Open, Later, "Correlation between covariates"),
    field(POPULATION, "eligible", Open, Later, "Who may enrol"),
    field(POPULATION, "table", Open, Later, "Rows of a real table to resample"),
    field(SPREADS, "distribution", Word(DISTRIBUTIONS, &["table"]), Optional, "The distribution's name"),
    field(SPREADS, "mean", Fitting, Optional, "Mean before the limits act"),
    field(SPREADS, "median", Fitting, Optional, "Median before the limits act"),
    field(SPREADS, "cv", Share, Optional, "Standard deviation over mean"),
    field(SPREADS, "sd", Fitting, Optional, "Standard deviation"),
    field(SPREADS, "log_sd", Number, Optional, "Standard deviation of the natural logarithm"),
    field(SPREADS, "log_variance", Number, Optional, "Variance of the natural logarithm"),
    field(SPREADS, "range90", Pair, Optional, "The 5th and the 95th percentile of people"),
    field(SPREADS, "from", Fitting, Optional, "Lower end"),
    field(SPREADS, "mode", Fitting, Optional, "The most likely value"),
    field(SPREADS, "to", Fitting, Optional, "Upper end"),
    field(SPREADS, "value", Fitting, Optional, "The value of everyone"),
    field(SPREADS, "limits", Pair, Optional, "Lowest and highest value, by inversion of the distribution"),
    field(COVARIATE, "proportions", Proportions, Optional, "The share of each class"),
    field(COVARIATE, "by", Name, Optional, "The covariate whose classes have a distribution each"),
    field(COVARIATE, "each", Table, Optional, "The distribution of each class"),
    field(COVARIATE, "formula", Open, Later, "A published formula that gives the covariate"),
    field(DRUG, "name", Text, Optional, "The drug's name"),
    field(
        DRUG,
        "model",
        Word(&["one-compartment", "two-compartment"], &["three-compartment", "network"]),
        Required,
        "The compartments",
    ),
    field(DRUG, "parameter", Table, Required, "The drug's parameters"),
    field(DRUG, "correlation", Tables, Optional, "Correlation of two parameters' random parts"),
    field(DRUG, "covariance", Open, Later, "Covariance of the random parts"),
    field(DRUG, "studied", Open, Later, "Where the model was built"),
    field(DRUG, "residual", Open, Later, "The model's unexplained error"),
    field(DRUG, "route", Open, Later, "What differs by route"),
    field(DRUG, "salt_factor", Open, Later, "Active moiety over salt"),
    field(DRUG, "molar_mass", Open, Later, "Mass of a mole"),
    field(DRUG, "compartment", Open, Later, "A compartment of a written-out network"),
    field(DRUG, "flow", Open, Later, "A flow of a written-out network"),
    field(DRUG, "central", Open, Later, "The compartment whose concentration is read"),
    field(PARAMETER, "typical", Fitting, Required, "Value at the reference covariates with no random part"),
    field(PARAMETER, "cv", Share, Optional, "Coefficient of variation between subjects"),
    field(PARAMETER, "log_sd", Number, Optional, "Standard deviation of the logarithm between subjects"),
    field(PARAMETER, "log_variance", Number, Optional, "Variance of the logarithm between subjects"),
    field(PARAMETER, "logit_sd", Number, Optional, "Standard deviation on the logit scale between subjects"),
    field(
        PARAMETER,
        "varies",
        Word(&["lognormal", "normal", "logit-normal"], &[]),
        Optional,
        "The form of the random part",
    ),
    field(PARAMETER, "limits", Pair, Optional, "Lowest and highest individual value"),
    field(PARAMETER, "scale", Tables, Optional, "Factors that covariates put on it"),
    field(PARAMETER, "plus", Tables, Optional, "Terms that covariates add to it"),
    field(EFFECTS, "covariate", Name, Required, "The covariate that acts"),
    field(EFFECTS, "slope", Fitting, Optional, "Change per unit of the covariate"),
    field(SCALE, "reference", Fitting, Optional, "Where the factor is 1"),
    field(SCALE, "exponent", Number, Optional, "Power of covariate over reference"),
    field(SCALE, "rate", Fitting, Optional, "Exponential change per unit of the covariate"),
    field(SCALE, "is", Name, Optional, "The class on which the factor acts"),
    field(SCALE, "times", Number, Optional, "The factor of that class"),
    field(SCALE, "half_at", Open, Later, "Age at half maturation"),
    field(SCALE, "hill", Open, Later, "Steepness of maturation"),
    field(CORRELATION, "between", Names, Required, "Two parameters that vary"),
    field(CORRELATION, "value", Number, Required, "Their correlation"),
    field(ARM, "name", Text, Required, "The arm's name"),
    field(ARM, "dose", Tables, Required, "A row of doses"),
    field(DOSE, "amount", Fitting, Required, "How much each time"),
    field(DOSE, "per", Name, Optional, "The covariate that multiplies the amount"),
    field(DOSE, "route", Word(&["bolus", "infusion", "oral"], &["steady-release", "held"]), Required, "The way in"),
    field(DOSE, "over", Quantity(Dimension::TIME, "2 h"), Optional, "How long an infusion lasts"),
    field(DOSE, "first_at", Quantity(Dimension::TIME, "0 h"), Optional, "When the first dose is given"),
    field(DOSE, "at", Quantities(Dimension::TIME, "6 h"), Optional, "When each dose is given"),
    field(DOSE, "every", Quantity(Dimension::TIME, "12 h"), Optional, "The dosing interval"),
    field(DOSE, "count", Count, Optional, "How many doses, the first included"),
    field(DOSE, "until", Quantity(Dimension::TIME, "168 h"), Optional, "No dose at this time or later"),
    field(DOSE, "round_to", Open, Later, "The step to which an amount is rounded"),
    field(DOSE, "at_least", Open, Later, "The least amount"),
    field(DOSE, "at_most", Open, Later, "The greatest amount"),
    field(DOSE, "daily_at_most", Open, Later, "The greatest amount a day"),
    field(DOSE, "into", Open, Later, "The compartment that receives the dose"),
    field(DOSE, "hold", Open, Later, "The concentration at which a compartment is held"),
    field(WINDOW, "low", Fitting, Optional, "Lowest concentration within the window"),
    field(WINDOW, "high", Fitting, Optional, "Highest concentration within the window"),
    field(WINDOW, "name", Open, Later, "The window's name"),
    field(WINDOW, "signal", Open, Later, "The signal that the window is for"),
    field(SWITCHES, "between_subject", Flag, Optional, "Whether parameters vary between subjects"),
    field(SWITCHES, "between_occasion", Flag, Optional, "Whether parameters vary between occasions"),
    field(SWITCHES, "residual", Flag, Optional, "Whether the unexplained error acts"),
    field(OUTPUT, "times", Times, Required, "When the concentrations are summarised"),
    field(OUTPUT, "percentiles", Numbers, Optional, "Percentiles of the bands"),
    field(OUTPUT, "patients", Flag, Optional, "Whether to write a row for every patient"),
    field(OUTPUT, "accuracy", Open, Later, "Tolerance of the integrator"),
    field(RANGE, "from", Quantity(Dimension::TIME, "0 h"), Required, "First time"),
    field(RANGE, "to", Quantity(Dimension::TIME, "168 h"), Required, "No time after this one"),
    field(RANGE, "step", Quantity(Dimension::TIME, "1 h"), Required, "Between two times"),
];

/// Parameter names that belong to the design and not to this version.
pub(super) const LATER_PARAMETERS: [&str; 6] = [
    "intercompartmental_clearance_2",
    "peripheral_volume_2",
    "maximum_rate",
    "half_saturation",
    "effect_site_rate",
    "unbound_fraction",
];

const fn field(
    tables: &'static [&'static str],
    key: &'static str,
    kind: Kind,
    need: Need,
    about: &'static str,
) -> Field {
    Field { tables, key, kind, need, about }
}

/// The keys of a table.
pub fn of(table: &str) -> impl Iterator<Item = &'static Field> {
    FIELDS.iter().filter(move |field| field.tables.contains(&table))
}

/// One key of a table.
pub(super) fn find(table: &str, key: &str) -> Option<&'static Field> {
    of(table).find(|field| field.key == key)
}

impl Kind {
    /// What is wanted, in words, with an example where that helps.
    pub(super) fn phrase(self) -> String {
        match self {
            Text => "text in quotes".to_owned(),
            Name => "a name in quotes".to_owned(),
            Names => "a list of names in quotes".to_owned(),
            Flag => "true or false".to_owned(),
            Count => "a bare whole number".to_owned(),
            Number => "a bare number".to_owned(),
            Numbers => "a list of bare numbers".to_owned(),
            Share => "a percentage, as in \"30 %\"".to_owned(),
            Word(now, _) => format!("one of {}", quoted(now)),
            Quantity(dimension, example) => format!("{}, as in \"{example}\"", dimension.phrase()),
            Quantities(_, example) => format!("a list of times, as in [\"0 h\", \"{example}\"]"),
            Fitting => "a number with its unit, in quotes".to_owned(),
            Pair => "two values with their units, as in [\"40 kg\", \"140 kg\"]".to_owned(),
            Times => "a range or a list of times".to_owned(),
            Proportions => "a proportion for each class, as in { female = 0.5, male = 0.5 }".to_owned(),
            Table => "a table".to_owned(),
            Tables => "a list of tables".to_owned(),
            Open => "something that this version does not know".to_owned(),
        }
    }
}

/// Words in quotes, joined as in a sentence.
pub(super) fn quoted(words: &[&str]) -> String {
    words.iter().map(|word| format!("\"{word}\"")).collect::<Vec<_>>().join(", ")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn no_key_stands_twice_in_a_table() {
        for field in FIELDS {
            for table in field.tables {
                assert_eq!(of(table).filter(|other| other.key == field.key).count(), 1, "{table}.{}", field.key);
            }
        }
    }

    #[test]
    fn every_field_says_what_it_is_about() {
        assert!(FIELDS.iter().all(|field| !field.about.is_empty() && !field.about.ends_with('.')));
    }
}
