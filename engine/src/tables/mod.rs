//! From results to files: Arrow record batches, Parquet tables and a folder that is complete or absent.
//!
//! | file | one row is | columns |
//! | --- | --- | --- |
//! | `bands.parquet` | a percentile at a time in an arm | [`BANDS`] |
//! | `shares.parquet` | the parts of the population round the window at a time in an arm; only with a window | [`SHARES`] |
//! | `population.parquet` | a statistic of a covariate or parameter | [`POPULATION`] |
//! | `patients.parquet` | a patient in an arm; only on request | [`PATIENTS`], [`patients_schema`] |
//! | `run.json` | | how it all came about, with times |
//!
//! All but `run.json` have the same bytes for the same scenario, seed and version. The Parquet writer's own version does
//! not stand in them, but a new one may encode otherwise: then the bytes move, and the change log says so.

pub mod names;

mod folder;
mod patients;
mod provenance;
mod rows;
mod schema;
#[cfg(test)]
mod testing;

pub use folder::check_destination;
pub use patients::{check_patients, patients_schema};
pub use provenance::{CAUTIONS, PARAMETER_UNCERTAINTY, RUN_JSON, VERSION, diagnostic, sha256};
pub use rows::{BANDS_METHOD, EVERYONE, SHARES_METHOD, Share};
pub use schema::{BANDS, Column, ColumnUnit, DESCRIPTION, Kind, PATIENTS, POPULATION, SHARES, TABLES, Table, UNIT};

use std::fs::File;
use std::io::{self, Read, Seek, Write};
use std::path::Path;
use std::time::{Instant, SystemTime};

use arrow::array::RecordBatch;
use arrow::datatypes::SchemaRef;
use parquet::arrow::ArrowWriter;
use parquet::basic::{Compression, ZstdLevel};
use parquet::errors::ParquetError;
use parquet::file::properties::{WriterProperties, WriterVersion};
use sha2::{Digest, Sha256};

use crate::diagnostic::Fault;
use crate::run::{Results, Stage, Watch};
use crate::scenario::Scenario;
use folder::Folder;
use patients::Gather;
use provenance::{Written, hexadecimal, key_values, run_json};

/// Rows of a row group. A constant, so that the bytes do not depend on how rows arrive; about as many as readers like.
const ROW_GROUP: usize = 131_072;

/// Level of the zstd compression: beyond it files shrink little and writing slows much.
const ZSTD_LEVEL: i32 = 3;

/// How to write results.
#[derive(Clone, Copy, Debug)]
pub struct WriteOptions {
    /// Replace an earlier run's folder.
    pub replace: bool,
    /// Write `patients.parquet`.
    pub patients: bool,
    /// When the run began, for `run.json`.
    pub started: SystemTime,
}

impl Results {
    /// Percentile bands over time, in the unit of the scenario's output; the columns are those of [`BANDS`].
    pub fn bands(&self) -> RecordBatch {
        rows::bands(self)
    }

    /// Shares below, within and above the window over time; the columns are those of [`SHARES`], no rows without a window.
    pub fn shares(&self) -> RecordBatch {
        rows::shares(self)
    }

    /// The population as sampled beside what was asked; the columns are those of [`POPULATION`].
    pub fn population(&self) -> RecordBatch {
        rows::population(self)
    }

    /// Writes all tables to the folder `dir`, which appears whole or not at all.
    ///
    /// # Errors
    /// [`Fault::Refused`] as [`check_destination`] and [`check_patients`] say; [`Fault::Io`] with the path that could not be
    /// written; [`Fault::Interrupted`] when the watch says stop.
    pub fn write(&self, dir: &Path, options: &WriteOptions, watch: &Watch) -> Result<(), Fault> {
        let begun = Instant::now();
        watch.enter(Stage::Writing);
        let scenario = self.plan.scenario();
        if options.patients {
            check_patients(scenario)?;
        }
        let folder = Folder::begin(dir, options.replace)?;
        let mut written = vec![write_batch(&folder, &BANDS, &self.bands(), scenario, watch)?];
        if scenario.window.is_some() {
            written.push(write_batch(&folder, &SHARES, &self.shares(), scenario, watch)?);
        }
        written.push(write_batch(&folder, &POPULATION, &self.population(), scenario, watch)?);
        if options.patients {
            written.push(self.write_patients(&folder, watch)?);
        }
        let text = run_json(self, options.started, begun.elapsed(), &written);
        folder.file(RUN_JSON, |file| {
            file.write_all(text.as_bytes()).map_err(|cause| Fault::Io {
                doing: "write".to_owned(),
                path: folder.shown(RUN_JSON),
                cause,
            })
        })?;
        stop_if_asked(watch)?;
        folder.finish()
    }

    fn write_patients(&self, folder: &Folder, watch: &Watch) -> Result<Written, Fault> {
        let scenario = self.plan.scenario();
        let mut gather = Gather::new(scenario);
        write_table(folder, &PATIENTS, gather.schema(), scenario, |hand_on| {
            self.plan.for_each_block(watch, &mut |block| gather.take(block, hand_on))?;
            gather.flush(hand_on)
        })
    }
}

/// Writes one table that is in memory.
fn write_batch(
    folder: &Folder,
    table: &Table,
    batch: &RecordBatch,
    scenario: &Scenario,
    watch: &Watch,
) -> Result<Written, Fault> {
    write_table(folder, table, batch.schema(), scenario, |hand_on| {
        let mut from = 0;
        while from < batch.num_rows() {
            stop_if_asked(watch)?;
            let rows = ROW_GROUP.min(batch.num_rows() - from);
            hand_on(&batch.slice(from, rows))?;
            from += rows;
        }
        Ok(())
    })
}

/// Takes the batches of a table, in order.
type HandOn<'a> = dyn FnMut(&RecordBatch) -> Result<(), Fault> + 'a;

/// Writes one table from the batches that `feed` hands on.
fn write_table(
    folder: &Folder,
    table: &Table,
    schema: SchemaRef,
    scenario: &Scenario,
    feed: impl FnOnce(&mut HandOn<'_>) -> Result<(), Fault>,
) -> Result<Written, Fault> {
    let failed = |cause| Fault::Io { doing: "write".to_owned(), path: folder.shown(table.file), cause };
    folder.file(table.file, |file| {
        let mut rows = 0;
        {
            let mut writer = ArrowWriter::try_new(&mut *file, schema, Some(properties(scenario)))
                .map_err(|error| failed(io_error(error)))?;
            feed(&mut |batch| {
                rows += batch.num_rows() as u64;
                writer.write(batch).map_err(|error| failed(io_error(error)))
            })?;
            writer.close().map_err(|error| failed(io_error(error)))?;
        }
        let (bytes, sha256) = digest(file).map_err(failed)?;
        Ok(Written { file: table.file, rows, bytes, sha256 })
    })
}

/// How every table is encoded.
fn properties(scenario: &Scenario) -> WriterProperties {
    WriterProperties::builder()
        .set_writer_version(WriterVersion::PARQUET_1_0)
        .set_created_by(format!("neap {VERSION}"))
        .set_compression(Compression::ZSTD(ZstdLevel::try_new(ZSTD_LEVEL).unwrap_or_default()))
        .set_max_row_group_row_count(Some(ROW_GROUP))
        .set_key_value_metadata(Some(key_values(scenario)))
        .build()
}

/// Length and SHA-256 of a file that was just written.
fn digest(file: &mut File) -> io::Result<(u64, String)> {
    file.rewind()?;
    let mut hash = Sha256::new();
    let mut buffer = vec![0; 1 << 16];
    let mut bytes = 0;
    loop {
        match file.read(&mut buffer)? {
            0 => break,
            read => {
                hash.update(&buffer[..read]);
                bytes += read as u64;
            }
        }
    }
    Ok((bytes, hexadecimal(&hash.finalize())))
}

/// The failure beneath a failure of the Parquet writer.
fn io_error(error: ParquetError) -> io::Error {
    match error {
        ParquetError::External(inner) => match inner.downcast::<io::Error>() {
            Ok(cause) => *cause,
            Err(other) => io::Error::other(other),
        },
        other => io::Error::other(other),
    }
}

fn stop_if_asked(watch: &Watch) -> Result<(), Fault> {
    if watch.stopped() { Err(Fault::Interrupted) } else { Ok(()) }
}

#[cfg(test)]
mod tests {
    use std::fs;

    use parquet::arrow::arrow_reader::ParquetRecordBatchReaderBuilder;

    use super::*;

    fn options() -> WriteOptions {
        WriteOptions { replace: false, patients: false, started: SystemTime::UNIX_EPOCH }
    }

    fn written() -> (tempfile::TempDir, std::path::PathBuf) {
        let place = tempfile::tempdir().unwrap();
        let out = place.path().join("results");
        testing::results().write(&out, &options(), &Watch::new()).unwrap();
        (place, out)
    }

    #[test]
    fn tables_read_back_as_they_were() {
        let (_place, out) = written();
        let results = testing::results();
        for (table, batch) in
            [(&BANDS, results.bands()), (&SHARES, results.shares()), (&POPULATION, results.population())]
        {
            let file = File::open(out.join(table.file)).unwrap();
            let builder = ParquetRecordBatchReaderBuilder::try_new(file).unwrap();
            assert_eq!(builder.schema().fields(), batch.schema().fields(), "{}: metadata and all", table.file);
            let facts = builder.metadata().file_metadata();
            assert_eq!(facts.created_by(), Some(format!("neap {VERSION}").as_str()));
            let pairs = facts.key_value_metadata().unwrap();
            let value = |key: &str| pairs.iter().find(|pair| pair.key == key).unwrap().value.clone().unwrap();
            assert_eq!(value("scenario sha256"), sha256(&results.plan.scenario().source.text));
            assert_eq!(value("seed"), "41");
            assert_eq!(value("parameter uncertainty"), "not included");
            let read: Vec<RecordBatch> = builder.build().unwrap().collect::<Result<_, _>>().unwrap();
            assert_eq!(read.len(), 1);
            assert_eq!(read[0].columns(), batch.columns(), "{}", table.file);
        }
    }

    #[test]
    fn the_same_results_give_the_same_bytes() {
        let (_first, one) = written();
        let (_second, two) = written();
        for table in [BANDS, SHARES, POPULATION] {
            assert_eq!(fs::read(one.join(table.file)).unwrap(), fs::read(two.join(table.file)).unwrap());
        }
    }

    #[test]
    fn run_json_tells_how_it_came_about() {
        let (_place, out) = written();
        let run: serde_json::Value = serde_json::from_slice(&fs::read(out.join(RUN_JSON)).unwrap()).unwrap();
        assert_eq!(run["neap"], VERSION);
        assert_eq!(run["parameter_uncertainty"], PARAMETER_UNCERTAINTY);
        assert_eq!(run["cautions"].as_array().unwrap().len(), CAUTIONS.len());
        assert_eq!(run["seed"], 41);
        assert_eq!(run["tables"][0]["file"], "bands.parquet");
        assert_eq!(run["tables"][0]["rows"], 18);
        assert_eq!(run["tables"][0]["bytes"], fs::metadata(out.join("bands.parquet")).unwrap().len());
        assert_eq!(run["scenario"]["text"], testing::scenario().source.text);
    }

    #[test]
    fn no_window_no_table_of_shares() {
        let mut scenario = testing::scenario();
        scenario.window = None;
        let mut results = testing::results_of(scenario);
        results.arms.iter_mut().flat_map(|arm| &mut arm.times).for_each(|at| at.shares = None);
        let place = tempfile::tempdir().unwrap();
        let out = place.path().join("results");
        results.write(&out, &options(), &Watch::new()).unwrap();
        assert!(!out.join(SHARES.file).exists());
        assert_eq!(results.shares().num_rows(), 0);
    }

    #[test]
    fn a_stop_while_writing_leaves_nothing() {
        let place = tempfile::tempdir().unwrap();
        let watch = Watch::new();
        watch.stop();
        let fault = testing::results().write(&place.path().join("results"), &options(), &watch).unwrap_err();
        assert!(matches!(fault, Fault::Interrupted));
        assert_eq!(fs::read_dir(place.path()).unwrap().count(), 0);
    }

    #[test]
    fn the_cause_beneath_a_parquet_failure_is_kept() {
        let full = io::Error::from(io::ErrorKind::StorageFull);
        assert_eq!(io_error(ParquetError::External(Box::new(full))).kind(), io::ErrorKind::StorageFull);
    }
}
