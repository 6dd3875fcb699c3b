//! `patients.parquet`: one row for each patient in each arm, streamed, so that its size is bounded by the disk only.

use std::sync::Arc;

use arrow::array::{ArrayRef, Float64Array, Int64Array, RecordBatch, StringArray};
use arrow::datatypes::{Field, Schema, SchemaRef};

use super::schema::{Kind, PATIENTS, field};
use crate::diagnostic::Fault;
use crate::run::PatientBlock;
use crate::scenario::{Scenario, Spread};

/// Patients handed to the Parquet writer at once. A constant: page boundaries follow it, and with them the bytes of the file.
const CHUNK: usize = 4096;

/// The schema of `patients.parquet` for this scenario.
pub fn patients_schema(scenario: &Scenario) -> SchemaRef {
    let mut fields: Vec<Field> = PATIENTS.columns.iter().map(|column| column.field("")).collect();
    for covariate in &scenario.population.covariates {
        fields.push(match &covariate.unit {
            Some(unit) => field(&covariate.name, Kind::Number, false, &unit.text, "Covariate of the patient"),
            None => field(&covariate.name, Kind::Text, false, "", "Class of the patient"),
        });
    }
    for parameter in &scenario.drug.parameters {
        let name = parameter.role.name(scenario.drug.model);
        let unit = parameter.role.unit();
        fields.push(field(name, Kind::Number, false, unit, "The patient's own value of the parameter"));
    }
    Arc::new(Schema::new(fields))
}

/// Whether every column of `patients.parquet` would have a name of its own; to be asked before a run.
///
/// # Errors
/// [`Fault::Refused`] where a covariate has the name of a parameter or of a column that every such table has.
pub fn check_patients(scenario: &Scenario) -> Result<(), Fault> {
    let schema = patients_schema(scenario);
    let names: Vec<&str> = schema.fields().iter().map(|field| field.name().as_str()).collect();
    match names.iter().enumerate().find(|(index, name)| names[..*index].contains(name)) {
        None => Ok(()),
        Some((_, name)) => Err(Fault::Refused {
            message: format!("the table of patients would have two columns `{name}`"),
            help: format!("rename the covariate `{name}`, or run without the table of patients"),
        }),
    }
}

/// Gathers blocks of any size into batches of [`CHUNK`] patients.
pub(super) struct Gather<'a> {
    scenario: &'a Scenario,
    schema: SchemaRef,
    first: u64,
    covariates: Vec<Vec<f64>>,
    parameters: Vec<Vec<f64>>,
    held: usize,
}

impl<'a> Gather<'a> {
    pub(super) fn new(scenario: &'a Scenario) -> Self {
        Self {
            scenario,
            schema: patients_schema(scenario),
            first: 0,
            covariates: vec![Vec::new(); scenario.population.covariates.len()],
            parameters: vec![Vec::new(); scenario.drug.parameters.len()],
            held: 0,
        }
    }

    pub(super) fn schema(&self) -> SchemaRef {
        Arc::clone(&self.schema)
    }

    /// Takes one block, the one after the last, and hands on every batch that is full.
    pub(super) fn take(
        &mut self,
        block: &PatientBlock,
        hand_on: &mut dyn FnMut(&RecordBatch) -> Result<(), Fault>,
    ) -> Result<(), Fault> {
        debug_assert_eq!(block.first, self.first + self.held as u64, "blocks come in order");
        let mut from = 0;
        while from < block.count {
            let to = block.count.min(from + CHUNK - self.held);
            for (held, new) in self.covariates.iter_mut().zip(&block.covariates) {
                held.extend_from_slice(&new[from..to]);
            }
            for (held, new) in self.parameters.iter_mut().zip(&block.parameters) {
                held.extend_from_slice(&new[from..to]);
            }
            self.held += to - from;
            from = to;
            if self.held == CHUNK {
                self.flush(hand_on)?;
            }
        }
        Ok(())
    }

    /// Hands on what is left.
    pub(super) fn flush(&mut self, hand_on: &mut dyn FnMut(&RecordBatch) -> Result<(), Fault>) -> Result<(), Fault> {
        if self.held == 0 {
            return Ok(());
        }
        let arms = self.scenario.arms.len();
        let numbers = |held: &[f64]| -> ArrayRef {
            Arc::new(Float64Array::from_iter_values(held.iter().flat_map(|&value| std::iter::repeat_n(value, arms))))
        };
        let mut columns: Vec<ArrayRef> = vec![
            Arc::new(Int64Array::from_iter_values(
                (0..self.held)
                    .flat_map(|index| std::iter::repeat_n((self.first + index as u64 + 1).cast_signed(), arms)),
            )),
            Arc::new(StringArray::from_iter_values(
                (0..self.held).flat_map(|_| self.scenario.arms.iter().map(|arm| arm.name.as_str())),
            )),
        ];
        for (covariate, held) in self.scenario.population.covariates.iter().zip(&self.covariates) {
            columns.push(match &covariate.spread {
                Spread::Classes { names, .. } => Arc::new(StringArray::from_iter_values(
                    held.iter().flat_map(|&class| std::iter::repeat_n(names[class as usize].as_str(), arms)),
                )),
                Spread::Number(_) | Spread::ByClass { .. } => numbers(held),
            });
        }
        columns.extend(self.parameters.iter().map(|held| numbers(held)));
        let batch = RecordBatch::try_new(self.schema(), columns).expect("columns stand in the order of the schema");
        self.first += self.held as u64;
        self.held = 0;
        self.covariates.iter_mut().chain(&mut self.parameters).for_each(Vec::clear);
        hand_on(&batch)
    }
}

#[cfg(test)]
mod tests {
    use arrow::array::AsArray;
    use arrow::datatypes::{Float64Type, Int64Type};

    use super::*;
    use crate::tables::schema::UNIT;
    use crate::tables::testing;

    fn block(first: u64, count: usize) -> PatientBlock {
        let numbers = |offset: f64| (0..count).map(|index| offset + (first + index as u64) as f64).collect::<Vec<_>>();
        PatientBlock {
            first,
            count,
            covariates: vec![numbers(0.5), (0..count).map(|index| ((first as usize + index) % 2) as f64).collect()],
            parameters: vec![numbers(1000.0), numbers(2000.0)],
        }
    }

    fn gather(sizes: &[usize]) -> Vec<RecordBatch> {
        let scenario = testing::scenario();
        let mut gather = Gather::new(&scenario);
        let mut batches = Vec::new();
        let mut hand_on = |batch: &RecordBatch| {
            batches.push(batch.clone());
            Ok(())
        };
        let mut first = 0;
        for &size in sizes {
            gather.take(&block(first, size), &mut hand_on).unwrap();
            first += size as u64;
        }
        gather.flush(&mut hand_on).unwrap();
        batches
    }

    #[test]
    fn rows_go_by_patient_then_arm() {
        let batches = gather(&[3]);
        let batch = &batches[0];
        let patients = batch.column_by_name("patient").unwrap().as_primitive::<Int64Type>();
        assert_eq!(patients.values(), &[1, 1, 2, 2, 3, 3]);
        let text = |name: &str| batch.column_by_name(name).unwrap().as_string::<i32>().clone();
        assert_eq!((text("arm").value(0), text("arm").value(1)), ("placebo", "500 mg"));
        assert_eq!((text("sex").value(0), text("sex").value(2)), ("female", "male"));
        let volume = batch.column_by_name("volume").unwrap().as_primitive::<Float64Type>();
        assert_eq!(volume.values(), &[2000.0, 2000.0, 2001.0, 2001.0, 2002.0, 2002.0]);
    }

    #[test]
    fn batches_do_not_depend_on_the_blocks() {
        let one = gather(&[2 * CHUNK + 7]);
        assert_eq!(one.len(), 3);
        assert_eq!(one, gather(&[100, CHUNK, CHUNK - 93]));
    }

    #[test]
    fn columns_carry_units() {
        let schema = patients_schema(&testing::scenario());
        let names: Vec<&str> = schema.fields().iter().map(|field| field.name().as_str()).collect();
        assert_eq!(names, ["patient", "arm", "weight", "sex", "clearance", "volume"]);
        assert_eq!(schema.field_with_name("weight").unwrap().metadata()[UNIT], "kg");
        assert_eq!(schema.field_with_name("clearance").unwrap().metadata()[UNIT], "L/h");
    }

    #[test]
    fn two_columns_of_one_name_are_refused() {
        let mut scenario = testing::scenario();
        check_patients(&scenario).unwrap();
        "arm".clone_into(&mut scenario.population.covariates[0].name);
        assert!(matches!(check_patients(&scenario), Err(Fault::Refused { .. })));
    }
}
