//! The tables as a reader finds them: names, types, order of rows, values.

use std::fs::File;
use std::path::Path;
use std::time::SystemTime;

use arrow::array::{Array, Float64Array, Int64Array, RecordBatch, StringArray};
use arrow::compute::concat_batches;
use neap_engine::run::{Results, Watch};
use neap_engine::summary::wilson;
use neap_engine::tables::WriteOptions;
use neap_tests::{patients, run};
use parquet::arrow::arrow_reader::ParquetRecordBatchReaderBuilder;

const SCENARIO: &str = r#"
neap = 1
[population]
size = 9_001
seed = 3
[population.weight]
distribution = "normal"
mean = "75 kg"
sd = "12 kg"
limits = ["45 kg", "120 kg"]
[population.sex]
distribution = "categories"
proportions = { female = 0.4, male = 0.6 }
[drug]
name = "Compound T (invented)"
model = "one-compartment"
[drug.parameter.clearance]
typical = "5 L/h"
cv = "30 %"
scale = [{ covariate = "weight", reference = "70 kg", exponent = 0.75 }, { covariate = "sex", is = "female", times = 0.9 }]
[drug.parameter.volume]
typical = "40 L"
[[arm]]
name = "second in the alphabet, first in the file"
[[arm.dose]]
amount = "100 mg"
route = "bolus"
[[arm]]
name = "a"
[[arm.dose]]
amount = "200 mg"
route = "bolus"
[window]
low = "1000 ug/L"
high = "3000 ug/L"
[output]
times = ["0 h", "6 h", "12 h"]
percentiles = [5, 50, 95]
"#;

/// Names of the columns as the design fixes them.
const COLUMNS: [(&str, &[&str]); 4] = [
    ("bands", &["arm", "subgroup", "signal", "time_h", "percentile", "value", "mc_lower", "mc_upper", "method"]),
    (
        "shares",
        &[
            "arm",
            "subgroup",
            "signal",
            "window",
            "time_h",
            "below",
            "below_se",
            "below_mc_lower",
            "below_mc_upper",
            "within",
            "within_se",
            "within_mc_lower",
            "within_mc_upper",
            "above",
            "above_se",
            "above_mc_lower",
            "above_mc_upper",
            "method",
        ],
    ),
    ("population", &["quantity", "unit", "statistic", "asked", "realised", "outside_studied"]),
    ("patients", &["patient", "arm", "weight", "sex", "clearance", "volume"]),
];

fn written() -> (Results, tempfile::TempDir) {
    let results = run(SCENARIO);
    let folder = tempfile::tempdir().expect("a temporary folder");
    let options = WriteOptions { replace: false, patients: true, started: SystemTime::now() };
    results.write(&folder.path().join("out"), &options, &Watch::new()).expect("it is written");
    (results, folder)
}

fn open(folder: &Path, table: &str) -> ParquetRecordBatchReaderBuilder<File> {
    let file = File::open(folder.join("out").join(format!("{table}.parquet"))).expect("the table is there");
    ParquetRecordBatchReaderBuilder::try_new(file).expect("it is Parquet")
}

fn read(folder: &Path, table: &str) -> RecordBatch {
    let builder = open(folder, table);
    let schema = builder.schema().clone();
    let batches: Vec<RecordBatch> = builder.build().expect("a reader").map(|batch| batch.expect("a batch")).collect();
    concat_batches(&schema, &batches).expect("one schema")
}

fn texts<'a>(batch: &'a RecordBatch, name: &str) -> Vec<&'a str> {
    let column = batch.column_by_name(name).expect("the column is there");
    let column = column.as_any().downcast_ref::<StringArray>().expect("text");
    (0..column.len()).map(|row| column.value(row)).collect()
}

fn numbers(batch: &RecordBatch, name: &str) -> Vec<Option<f64>> {
    let column = batch.column_by_name(name).expect("the column is there");
    column.as_any().downcast_ref::<Float64Array>().expect("numbers").iter().collect()
}

#[test]
fn columns_have_their_names_units_and_descriptions() {
    let (_, folder) = written();
    for (table, names) in COLUMNS {
        let batch = read(folder.path(), table);
        let schema = batch.schema();
        let found: Vec<&str> = schema.fields().iter().map(|field| field.name().as_str()).collect();
        assert_eq!(found, names, "{table}");
        for field in schema.fields() {
            let metadata = field.metadata();
            assert!(metadata.contains_key("unit"), "{table}.{} has no unit", field.name());
            assert!(!metadata["description"].is_empty(), "{table}.{} has no description", field.name());
        }
    }
    let bands = read(folder.path(), "bands").schema();
    assert_eq!(bands.field_with_name("value").unwrap().metadata()["unit"], "ug/L", "the window's unit is the output's");
    assert_eq!(bands.field_with_name("time_h").unwrap().metadata()["unit"], "h");
}

#[test]
fn files_carry_hash_seed_and_version() {
    let (_, folder) = written();
    for (table, _) in COLUMNS {
        let builder = open(folder.path(), table);
        let pairs = builder.metadata().file_metadata().key_value_metadata().expect("the file says where it is from");
        let said: Vec<String> =
            pairs.iter().map(|pair| format!("{}={}", pair.key, pair.value.as_deref().unwrap_or(""))).collect();
        for part in ["seed=3", "sha256="] {
            assert!(said.iter().any(|said| said.contains(part)), "{table}: no {part} in {said:?}");
        }
        assert!(said.iter().any(|said| said.ends_with(env!("CARGO_PKG_VERSION"))), "{table}: {said:?}");
    }
}

#[test]
fn bands_are_the_results_in_order() {
    let (results, folder) = written();
    let batch = read(folder.path(), "bands");
    let (arms, times) = (texts(&batch, "arm"), numbers(&batch, "time_h"));
    let (percentiles, values) = (numbers(&batch, "percentile"), numbers(&batch, "value"));
    let (lower, upper) = (numbers(&batch, "mc_lower"), numbers(&batch, "mc_upper"));
    let mut row = 0;
    for arm in &results.arms {
        for at in &arm.times {
            for band in &at.bands {
                assert_eq!(arms[row], arm.name);
                assert_eq!((times[row], percentiles[row]), (Some(at.time_h), Some(band.percentile)));
                assert_eq!((values[row], lower[row], upper[row]), (Some(band.value), band.mc_lower, band.mc_upper));
                row += 1;
            }
        }
    }
    assert_eq!(row, batch.num_rows());
    assert!(texts(&batch, "subgroup").iter().all(|group| *group == "all"));
    assert!(texts(&batch, "signal").iter().all(|signal| *signal == "concentration"));
    // 100 mg into 40 L are 2500 ug/L at once, for everyone. The product and the change of unit round once each.
    assert!((values[0].unwrap() - 2500.0).abs() <= 2.0 * f64::EPSILON * 2500.0, "{:?}", values[0]);
}

#[test]
fn shares_are_the_counts_with_their_errors() {
    let (results, folder) = written();
    let batch = read(folder.path(), "shares");
    let n = results.patients;
    let mut row = 0;
    for at in results.arms.iter().flat_map(|arm| &arm.times) {
        let counts = at.shares.expect("there is a window");
        for (name, count) in [("below", counts.below), ("within", counts.within), ("above", counts.above)] {
            let of = |end: &str| numbers(&batch, &format!("{name}{end}"))[row].expect("no share is missing");
            let share = count as f64 / n as f64;
            assert_eq!(of(""), share);
            assert!((of("_se") - (share * (1.0 - share) / n as f64).sqrt()).abs() <= 1e-16);
            let (lower, upper) = wilson(count, n, 0.95);
            assert_eq!((of("_mc_lower"), of("_mc_upper")), (lower, upper));
        }
        row += 1;
    }
    assert_eq!(row, batch.num_rows());
    assert!(texts(&batch, "window").iter().all(|window| window.contains("1000") && window.contains("3000")));
}

#[test]
fn patients_are_everyone_in_every_arm() {
    let (results, folder) = written();
    let batch = read(folder.path(), "patients");
    let all = patients(&results.plan);
    assert_eq!(batch.num_rows(), all.count * 2);
    let column = batch.column_by_name("patient").unwrap().as_any().downcast_ref::<Int64Array>().expect("whole numbers");
    let (weights, sexes) = (numbers(&batch, "weight"), texts(&batch, "sex"));
    let clearances = numbers(&batch, "clearance");
    let mut of_arm = [0, 0];
    for (row, arm) in texts(&batch, "arm").iter().enumerate() {
        let index = usize::from(*arm == "a");
        let patient = column.value(row) as usize - 1;
        of_arm[index] += 1;
        assert_eq!(weights[row], Some(all.covariates[0][patient]));
        assert_eq!(sexes[row], ["female", "male"][all.covariates[1][patient] as usize]);
        assert_eq!(clearances[row], Some(all.parameters[0][patient]));
    }
    assert_eq!(of_arm, [all.count, all.count]);
}

#[test]
fn the_population_table_has_every_quantity() {
    let (results, folder) = written();
    let batch = read(folder.path(), "population");
    assert_eq!(batch.num_rows(), results.population.len());
    let (realised, asked) = (numbers(&batch, "realised"), numbers(&batch, "asked"));
    for (row, fact) in results.population.iter().enumerate() {
        assert_eq!((realised[row], asked[row]), (Some(fact.realised), fact.asked));
        assert_eq!(texts(&batch, "quantity")[row], fact.quantity);
    }
    let named = texts(&batch, "quantity");
    for name in ["weight", "sex = female", "sex = male", "clearance", "volume"] {
        assert!(named.contains(&name), "{name}");
    }
}
