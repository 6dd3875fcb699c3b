//! A small run of the first patients, to know where to look in the large one. It decides how fast the answer comes, not what it is.

use std::ops::Range;

use super::Watch;
use super::pass::pass;
use super::worker::{Clock, Sink, Worker};
use crate::diagnostic::Fault;
use crate::math::{LANES, Row};
use crate::plan::Plan;
use crate::summary::{CELLS, Cells, Pilot, Ranks, Search};

/// Patients whose covariates and parameters are all kept to place the searches for their percentiles: one in so many, within
/// these bounds.
const POPULATION_PART: u64 = 256;
const POPULATION: (u64, u64) = (4096, 262_144);

/// What to search for in every series of `patients` patients: signals, then quantities.
pub(super) fn searches(
    plan: &Plan,
    patients: u64,
    size: u64,
    signals: &[Ranks],
    quantities: &[Ranks],
    watch: &Watch,
) -> Result<(Vec<Search>, Vec<Search>), Fault> {
    let pilot = Pilot::new(signals, patients, size);
    let mut found = Vec::with_capacity(plan.signals());
    // As many series at a time as histograms fit into half the budget.
    let bytes = (CELLS * size_of::<u32>() * plan.limits().threads + LANES * size_of::<f64>()) as u64;
    let at_a_time = (plan.budget() / 2 / bytes).max(1) as usize;
    let (series, times) = (plan.signals(), plan.timetable.times.len());
    for first in (0..series).step_by(at_a_time) {
        let range = first..series.min(first + at_a_time);
        let until = if range.len() >= times { times } else { range.clone().map(|s| s % times + 1).max().unwrap_or(0) };
        let samples = sample(plan, range, until);
        let cells: Vec<Cells> = samples.iter().map(|sample| Cells::covering(sample)).collect();
        let needed: Vec<bool> = samples.iter().map(|sample| sample.first() != sample.last()).collect();
        watch.expect(size);
        let prepare =
            || Count { first, cells: &cells, needed: &needed, histograms: vec![0; CELLS * samples.len()], lanes: 0 };
        let counts =
            pass(plan, size, until, watch, &mut Clock::default(), prepare, |count, lanes| count.lanes = lanes)?;
        for (index, (sample, cells)) in samples.iter().zip(&cells).enumerate() {
            let mut histogram = vec![0u32; CELLS];
            for count in &counts {
                let part = &count.histograms[CELLS * index..CELLS * (index + 1)];
                histogram.iter_mut().zip(part).for_each(|(sum, part)| *sum += part);
            }
            found.push(pilot.search(sample, *cells, &histogram, plan.window));
        }
    }
    let size = (patients / POPULATION_PART).clamp(POPULATION.0, POPULATION.1).min(size);
    let pilot = Pilot::new(quantities, patients, size);
    let population = population(plan, size).iter().map(|sorted| pilot.search_sorted(sorted)).collect();
    Ok((found, population))
}

/// Sorted values of each quantity of the first patients.
fn population(plan: &Plan, patients: u64) -> Vec<Vec<f64>> {
    let mut worker = Worker::new(plan);
    let mut values: Vec<Vec<f64>> = vec![Vec::with_capacity(patients as usize); plan.quantities()];
    for first in (0..patients).step_by(LANES) {
        worker.draw(first);
        let count = (patients - first).min(LANES as u64) as usize;
        for (values, row) in values.iter_mut().zip(worker.covariates.iter().chain(&worker.parameters)) {
            values.extend_from_slice(&row[..count]);
        }
    }
    for values in &mut values {
        values.sort_unstable_by(f64::total_cmp);
    }
    values
}

/// Sorted values of some series among the patients of the first block.
fn sample(plan: &Plan, series: Range<usize>, until: usize) -> Vec<Vec<f64>> {
    let mut sample = Sample { first: series.start, signals: vec![Vec::new(); series.len()] };
    Worker::new(plan).block(&mut sample, 0, LANES, until, None);
    for values in &mut sample.signals {
        values.sort_unstable_by(f64::total_cmp);
    }
    sample.signals
}

/// Concentrations of one block, from the series `first` on.
struct Sample {
    first: usize,
    signals: Vec<Vec<f64>>,
}

impl Sink for Sample {
    fn population(&mut self, _: &[Row], _: &[Row]) {}

    fn wants(&self, series: usize) -> bool {
        (self.first..self.first + self.signals.len()).contains(&series)
    }

    fn signal(&mut self, series: usize, row: &Row, scale: f64) {
        self.signals[series - self.first].extend(row.iter().map(|value| value * scale));
    }
}

/// Histograms of some series.
struct Count<'a> {
    first: usize,
    cells: &'a [Cells],
    needed: &'a [bool],
    histograms: Vec<u32>,
    lanes: usize,
}

impl Sink for Count<'_> {
    fn population(&mut self, _: &[Row], _: &[Row]) {}

    fn wants(&self, series: usize) -> bool {
        series.checked_sub(self.first).and_then(|index| self.needed.get(index)).copied().unwrap_or(false)
    }

    fn signal(&mut self, series: usize, row: &Row, scale: f64) {
        let index = series - self.first;
        let histogram = &mut self.histograms[CELLS * index..CELLS * (index + 1)];
        self.cells[index].absorb(row, scale, self.lanes, histogram);
    }
}
