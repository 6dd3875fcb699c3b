//! Every table as data: its columns, their units and what they mean. The writers, the metadata of the files and the
//! data dictionary all read this one list.

use std::collections::HashMap;
use std::sync::Arc;

use arrow::datatypes::{DataType, Field, Schema, SchemaRef};

/// Key of a field's unit in its metadata.
pub const UNIT: &str = "unit";

/// Key of a field's description in its metadata.
pub const DESCRIPTION: &str = "description";

/// What a column holds.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kind {
    /// Text, UTF-8.
    Text,
    /// A whole number, 64 bits, signed: several readers know no unsigned ones.
    Whole,
    /// A number, 64-bit floating point.
    Number,
}

/// The unit of a column.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ColumnUnit {
    /// Text has none.
    None,
    /// Always this one, in UCUM; "1" for a plain number.
    Always(&'static str),
    /// The scenario's unit of concentration.
    Concentration,
    /// Told in the column `unit` of the same row.
    InRow,
}

/// One column.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Column {
    /// Its name.
    pub name: &'static str,
    /// What it holds.
    pub kind: Kind,
    /// Whether a value may be missing.
    pub nullable: bool,
    /// Its unit.
    pub unit: ColumnUnit,
    /// What it means, a sentence without a full stop.
    pub description: &'static str,
}

/// One table, one file of that name with the ending `.parquet`.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Table {
    /// Name of the file.
    pub file: &'static str,
    /// What one row is.
    pub row: &'static str,
    /// Columns in order; of `patients.parquet` those that every scenario has.
    pub columns: &'static [Column],
}

impl Table {
    /// The Arrow schema, with concentrations in `concentration`.
    pub fn schema(&self, concentration: &str) -> SchemaRef {
        let fields: Vec<Field> = self.columns.iter().map(|column| column.field(concentration)).collect();
        Arc::new(Schema::new(fields))
    }
}

impl Column {
    /// The Arrow field, with a concentration in `concentration`.
    pub fn field(&self, concentration: &str) -> Field {
        let unit = match self.unit {
            ColumnUnit::None => "",
            ColumnUnit::Always(unit) => unit,
            ColumnUnit::Concentration => concentration,
            ColumnUnit::InRow => "as the column unit says",
        };
        field(self.name, self.kind, self.nullable, unit, self.description)
    }
}

/// A field with its unit and description.
pub(super) fn field(name: &str, kind: Kind, nullable: bool, unit: &str, description: &str) -> Field {
    let data_type = match kind {
        Kind::Text => DataType::Utf8,
        Kind::Whole => DataType::Int64,
        Kind::Number => DataType::Float64,
    };
    Field::new(name, data_type, nullable).with_metadata(HashMap::from([
        (UNIT.to_owned(), unit.to_owned()),
        (DESCRIPTION.to_owned(), description.to_owned()),
    ]))
}

const fn text(name: &'static str, description: &'static str) -> Column {
    Column { name, kind: Kind::Text, nullable: false, unit: ColumnUnit::None, description }
}

const fn number(name: &'static str, unit: ColumnUnit, description: &'static str) -> Column {
    Column { name, kind: Kind::Number, nullable: false, unit, description }
}

const fn maybe(name: &'static str, unit: ColumnUnit, description: &'static str) -> Column {
    Column { name, kind: Kind::Number, nullable: true, unit, description }
}

const fn fraction(name: &'static str, description: &'static str) -> Column {
    number(name, ColumnUnit::Always("1"), description)
}

const ARM: Column = text("arm", "Name of the dosing arm");
const SUBGROUP: Column = text("subgroup", "Part of the population; \"all\" is everyone");
const SIGNAL: Column =
    text("signal", "What is followed over time; \"concentration\" is that of the central compartment");
const TIME: Column =
    number("time_h", ColumnUnit::Always("h"), "Time since the start; at a dose time the value just after the dose");

/// Percentile bands over time.
pub const BANDS: Table = Table {
    file: "bands.parquet",
    row: "one percentile of one signal at one time in one arm, over all patients; no single patient follows a band",
    columns: &[
        ARM,
        SUBGROUP,
        SIGNAL,
        TIME,
        number("percentile", ColumnUnit::Always("%"), "Which percentile of the patients, between 0 and 100"),
        number("value", ColumnUnit::Concentration, "The percentile (Hyndman and Fan's definition 7)"),
        maybe(
            "mc_lower",
            ColumnUnit::Concentration,
            "Lower end of its Monte Carlo interval; missing where too few patients",
        ),
        maybe(
            "mc_upper",
            ColumnUnit::Concentration,
            "Upper end of its Monte Carlo interval; missing where too few patients",
        ),
        text("method", "How the Monte Carlo interval is made, with its level; it holds sampling error only"),
    ],
};

/// Shares of the population below, within and above the window.
pub const SHARES: Table = Table {
    file: "shares.parquet",
    row: "the parts of the population below, within and above one window at one time in one arm",
    columns: &[
        ARM,
        SUBGROUP,
        SIGNAL,
        text("window", "The therapeutic window with its unit; both limits belong to it"),
        TIME,
        fraction("below", "Share of patients below the lower limit, from 0 to 1"),
        fraction("below_se", "Standard error of below: sqrt(p (1 - p) / n)"),
        fraction("below_mc_lower", "Lower end of the Monte Carlo interval of below"),
        fraction("below_mc_upper", "Upper end of the Monte Carlo interval of below"),
        fraction("within", "Share of patients within the limits, both included, from 0 to 1"),
        fraction("within_se", "Standard error of within: sqrt(p (1 - p) / n)"),
        fraction("within_mc_lower", "Lower end of the Monte Carlo interval of within"),
        fraction("within_mc_upper", "Upper end of the Monte Carlo interval of within"),
        fraction("above", "Share of patients above the upper limit, from 0 to 1"),
        fraction("above_se", "Standard error of above: sqrt(p (1 - p) / n)"),
        fraction("above_mc_lower", "Lower end of the Monte Carlo interval of above"),
        fraction("above_mc_upper", "Upper end of the Monte Carlo interval of above"),
        text("method", "How the Monte Carlo intervals are made, with their level; they hold sampling error only"),
    ],
};

/// The population as sampled, beside what was asked.
pub const POPULATION: Table = Table {
    file: "population.parquet",
    row: "one statistic of one covariate or parameter",
    columns: &[
        text("quantity", "The covariate or parameter; one class of a covariate is written sex = female"),
        text("unit", "Unit of asked and realised, in UCUM; 1 for a plain number"),
        text("statistic", "Which statistic, as in mean or percentile 5"),
        maybe(
            "asked",
            ColumnUnit::InRow,
            "What the scenario asks for, limits included; missing where no closed form says it",
        ),
        number("realised", ColumnUnit::InRow, "What the simulated patients have"),
        Column {
            name: "outside_studied",
            kind: Kind::Whole,
            nullable: true,
            unit: ColumnUnit::Always("1"),
            description: "Patients outside the range in which the model was built; missing where no range is stated",
        },
    ],
};

/// One row for each patient in each arm, on request. Covariates and parameters follow under their own names.
pub const PATIENTS: Table = Table {
    file: "patients.parquet",
    row: "one patient in one arm; the same patients are in every arm",
    columns: &[
        Column {
            name: "patient",
            kind: Kind::Whole,
            nullable: false,
            unit: ColumnUnit::Always("1"),
            description: "Number of the patient, from 1; the same patient in every arm",
        },
        ARM,
    ],
};

/// Every table there is, in the order in which they are written.
pub const TABLES: [&Table; 4] = [&BANDS, &SHARES, &POPULATION, &PATIENTS];

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_field_says_its_unit_and_meaning() {
        for table in TABLES {
            for field in table.schema("mg/L").fields() {
                assert!(!field.metadata()[DESCRIPTION].is_empty(), "{} {}", table.file, field.name());
                let text = field.data_type() == &DataType::Utf8;
                assert_eq!(field.metadata()[UNIT].is_empty(), text, "{} {}", table.file, field.name());
            }
        }
    }

    #[test]
    fn no_name_stands_twice_in_a_table() {
        for table in TABLES {
            for (index, column) in table.columns.iter().enumerate() {
                assert!(!table.columns[..index].iter().any(|other| other.name == column.name), "{}", column.name);
            }
        }
    }

    #[test]
    fn concentrations_carry_the_unit_of_the_scenario() {
        let schema = BANDS.schema("ug/L");
        assert_eq!(schema.field_with_name("value").unwrap().metadata()[UNIT], "ug/L");
        assert_eq!(schema.field_with_name("time_h").unwrap().metadata()[UNIT], "h");
    }
}
