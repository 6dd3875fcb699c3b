//! Results as record batches.

use std::sync::Arc;

use arrow::array::{ArrayRef, Float64Array, Int64Array, RecordBatch, StringArray};

use super::names;
use super::schema::{BANDS, POPULATION, SHARES, Table};
use crate::run::{CONCENTRATION, Counts, INTERVAL_LEVEL, Results};
use crate::scenario::Window;
use crate::summary::wilson;

/// How the intervals of percentiles are made.
pub const BANDS_METHOD: &str = "order statistics 95 %";

/// How the intervals of shares are made.
pub const SHARES_METHOD: &str = "Wilson 95 %";

/// The subgroup that is everyone.
pub const EVERYONE: &str = "all";

/// A share of the patients with its Monte Carlo error.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Share {
    /// From 0 to 1.
    pub value: f64,
    /// Standard error, `sqrt(p (1 - p) / n)`.
    pub standard_error: f64,
    /// Lower end of the Wilson interval at [`INTERVAL_LEVEL`].
    pub lower: f64,
    /// Upper end.
    pub upper: f64,
}

impl Share {
    /// Of nobody, which is certain.
    const NOBODY: Self = Self { value: 0.0, standard_error: 0.0, lower: 0.0, upper: 0.0 };

    /// The share that `count` of `patients` is.
    pub fn of(count: u64, patients: u64) -> Self {
        let value = count as f64 / patients as f64;
        let (lower, upper) = wilson(count, patients, INTERVAL_LEVEL);
        Self { value, standard_error: (value * (1.0 - value) / patients as f64).sqrt(), lower, upper }
    }

    /// The shares below, within and above; `None` on a side where the window is open, since nobody can be there.
    pub fn parts(counts: Counts, patients: u64, window: &Window) -> [Option<Self>; 3] {
        [
            window.low.map(|_| Self::of(counts.below, patients)),
            Some(Self::of(counts.within, patients)),
            window.high.map(|_| Self::of(counts.above, patients)),
        ]
    }
}

/// Percentile bands, by arm, then time, then percentile.
pub(super) fn bands(results: &Results) -> RecordBatch {
    let rows = || {
        results.arms.iter().flat_map(|arm| {
            arm.times.iter().flat_map(move |at| at.bands.iter().map(move |band| (arm.name.as_str(), at.time_h, band)))
        })
    };
    let count = rows().count();
    batch(
        &BANDS,
        results,
        vec![
            text(rows().map(|(arm, ..)| arm)),
            text(std::iter::repeat_n(EVERYONE, count)),
            text(std::iter::repeat_n(CONCENTRATION, count)),
            number(rows().map(|(_, time, _)| time)),
            number(rows().map(|(.., band)| band.percentile)),
            number(rows().map(|(.., band)| band.value)),
            maybe(rows().map(|(.., band)| band.mc_lower)),
            maybe(rows().map(|(.., band)| band.mc_upper)),
            text(std::iter::repeat_n(BANDS_METHOD, count)),
        ],
    )
}

/// Shares below, within and above the window, by arm, then time; no rows without a window.
pub(super) fn shares(results: &Results) -> RecordBatch {
    let rows = || {
        results
            .arms
            .iter()
            .flat_map(|arm| arm.times.iter().filter_map(move |at| Some((arm.name.as_str(), at.time_h, at.shares?))))
    };
    let count = rows().count();
    let scenario = results.plan.scenario();
    let window = names::window(scenario).unwrap_or_default();
    let open = Window { low: None, high: None };
    let limits = scenario.window.as_ref().unwrap_or(&open);
    let mut columns = vec![
        text(rows().map(|(arm, ..)| arm)),
        text(std::iter::repeat_n(EVERYONE, count)),
        text(std::iter::repeat_n(CONCENTRATION, count)),
        text(std::iter::repeat_n(window.as_str(), count)),
        number(rows().map(|(_, time, _)| time)),
    ];
    for part in 0..3 {
        let shares: Vec<Share> = rows()
            .map(|(.., counts)| Share::parts(counts, results.patients, limits)[part].unwrap_or(Share::NOBODY))
            .collect();
        columns.push(number(shares.iter().map(|share| share.value)));
        columns.push(number(shares.iter().map(|share| share.standard_error)));
        columns.push(number(shares.iter().map(|share| share.lower)));
        columns.push(number(shares.iter().map(|share| share.upper)));
    }
    columns.push(text(std::iter::repeat_n(SHARES_METHOD, count)));
    batch(&SHARES, results, columns)
}

/// The population as sampled, in the order of [`Results::population`].
pub(super) fn population(results: &Results) -> RecordBatch {
    let rows = || results.population.iter();
    batch(
        &POPULATION,
        results,
        vec![
            text(rows().map(|row| row.quantity.as_str())),
            text(rows().map(|row| row.unit.as_str())),
            text(rows().map(|row| row.statistic.as_str())),
            maybe(rows().map(|row| row.asked)),
            number(rows().map(|row| row.realised)),
            Arc::new(rows().map(|_| None::<i64>).collect::<Int64Array>()),
        ],
    )
}

fn batch(table: &Table, results: &Results, columns: Vec<ArrayRef>) -> RecordBatch {
    let schema = table.schema(&results.plan.scenario().output.concentration.text);
    RecordBatch::try_new(schema, columns).expect("columns stand in the order of the schema, all of one length")
}

fn text<'a>(values: impl Iterator<Item = &'a str>) -> ArrayRef {
    Arc::new(StringArray::from_iter_values(values))
}

fn number(values: impl Iterator<Item = f64>) -> ArrayRef {
    Arc::new(Float64Array::from_iter_values(values))
}

fn maybe(values: impl Iterator<Item = Option<f64>>) -> ArrayRef {
    Arc::new(values.collect::<Float64Array>())
}

#[cfg(test)]
mod tests {
    use arrow::array::{Array, AsArray};
    use arrow::datatypes::Float64Type;

    use super::*;
    use crate::tables::testing;

    #[test]
    fn bands_go_by_arm_then_time_then_percentile() {
        let results = testing::results();
        let bands = results.bands();
        assert_eq!(bands.num_rows(), 2 * 3 * 3);
        let of = |name: &str| bands.column_by_name(name).unwrap().as_primitive::<Float64Type>().clone();
        let arms = bands.column_by_name("arm").unwrap().as_string::<i32>().clone();
        assert_eq!((arms.value(0), arms.value(9)), ("placebo", "500 mg"));
        assert_eq!(&of("time_h").values()[..4], &[0.0, 0.0, 0.0, 6.0]);
        assert_eq!(&of("percentile").values()[..4], &[5.0, 50.0, 95.0, 5.0]);
        assert!(of("mc_lower").is_null(0), "too few patients for the lowest percentile");
        assert_eq!(of("value").value(17), results.arms[1].times[2].bands[2].value);
    }

    #[test]
    fn shares_carry_their_errors() {
        let results = testing::results();
        let shares = results.shares();
        assert_eq!(shares.num_rows(), 2 * 3);
        let of = |name: &str| shares.column_by_name(name).unwrap().as_primitive::<Float64Type>().clone();
        assert_eq!((of("below").value(5), of("within").value(5), of("above").value(5)), (0.25, 0.5, 0.25));
        assert_eq!(of("within_se").value(5), (0.25_f64 / 4.0).sqrt());
        // Wilson's interval of 2 in 4 at z = 1.959964: centre 1/2, half-width z sqrt(1/16 + z^2 / 64) / (1 + z^2 / 4).
        assert!((of("within_mc_lower").value(5) - 0.150_0).abs() < 1e-4);
        assert!((of("within_mc_upper").value(5) - 0.850_0).abs() < 1e-4);
        assert_eq!(shares.column_by_name("window").unwrap().as_string::<i32>().value(0), "2 to 8 mg/L");
    }

    #[test]
    fn nobody_is_certain_where_the_window_is_open() {
        let counts = Counts { below: 0, within: 3, above: 1 };
        let parts = Share::parts(counts, 4, &Window { low: None, high: Some(8.0) });
        assert_eq!(parts.map(|part| part.map(|share| share.value)), [None, Some(0.75), Some(0.25)]);
        let mut scenario = testing::scenario();
        scenario.window = Some(Window { low: None, high: Some(8.0) });
        let shares = testing::results_of(scenario).shares();
        let upper = shares.column_by_name("below_mc_upper").unwrap().as_primitive::<Float64Type>();
        assert!(upper.values().iter().all(|upper| *upper == 0.0));
    }

    #[test]
    fn population_keeps_what_was_asked_beside_what_came() {
        let population = testing::results().population();
        assert_eq!(population.num_rows(), 2);
        assert!(population.column_by_name("asked").unwrap().is_null(1));
        assert!(population.column_by_name("outside_studied").unwrap().is_null(0));
    }
}
