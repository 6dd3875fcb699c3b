//! Runs a plan: blocks times passes become results.

mod pass;
mod pilot;
mod population;
mod resolve;
mod results;
mod watch;
mod worker;

pub use results::{
    ArmResult, AtTime, Band, CONCENTRATION, Counts, Effort, INTERVAL_LEVEL, PatientBlock, Realised, Results,
};
pub use watch::{Stage, Watch};

use std::sync::Arc;
use std::time::Instant;

use num_bigint::BigInt;

use crate::diagnostic::Fault;
use crate::math::LANES;
use crate::plan::Plan;
use crate::quantity::{Exact, to_f64};
use crate::summary::Ranks;
use resolve::{Answer, Series, Wanted, in_parallel, ranks_of, resolve};
use worker::Worker;

/// Percentiles of the population's quantities.
const POPULATION_PERCENTILES: [i64; 3] = [5, 50, 95];

impl Plan {
    /// Runs the plan inside the caller's rayon pool.
    ///
    /// # Errors
    /// [`Fault::Interrupted`] when the watch says stop.
    pub fn run(self: &Arc<Self>, watch: &Watch) -> Result<Results, Fault> {
        let start = Instant::now();
        let patients = self.scenario().population.size;
        watch.enter(Stage::Pilot);
        let ranks = |percentile| {
            let ranks = Ranks::new(percentile, patients, INTERVAL_LEVEL);
            if self.intervals { ranks } else { Ranks { lower: None, upper: None, ..ranks } }
        };
        let signals: Vec<Ranks> = self.scenario().output.percentiles.iter().map(ranks).collect();
        let answer = self.answer(&signals, patients, watch)?;
        let effort = Effort {
            threads: rayon::current_num_threads(),
            passes: answer.passes,
            repeats: answer.repeats,
            pilot: answer.pilot,
            sampling: answer.clock.sampling,
            solving: answer.clock.solving,
            counting: answer.clock.counting,
            selecting: answer.selecting,
            total: start.elapsed().as_secs_f64(),
        };
        Ok(Results {
            plan: Arc::clone(self),
            patients,
            arms: self.arms(&signals, &answer.signals),
            population: population::realised(self, patients, &quantity_ranks(patients), &answer),
            effort,
        })
    }

    fn answer(&self, signals: &[Ranks], patients: u64, watch: &Watch) -> Result<Answer, Fault> {
        let quantities = quantity_ranks(patients);
        let centres = population::centres(self);
        let wanted = Wanted { signals, quantities: &quantities, centres: &centres };
        resolve(self, patients, &wanted, watch)
    }

    fn arms(&self, ranks: &[Ranks], found: &[Series]) -> Vec<ArmResult> {
        let scenario = self.scenario();
        let times = &self.timetable.times;
        let all = ranks_of(ranks);
        // From kernel units into the unit that the output is written in.
        let factor = to_f64(&scenario.output.concentration.factor);
        let amount = to_f64(&scenario.drug.amount_unit.per_litre().factor);
        let convert = |value: f64| if factor == amount { value } else { value * amount / factor };
        scenario
            .arms
            .iter()
            .enumerate()
            .map(|(arm, named)| ArmResult {
                name: named.name.clone(),
                times: times
                    .iter()
                    .enumerate()
                    .map(|(index, &time_h)| {
                        let series = &found[arm * times.len() + index];
                        let at = |rank: u64| {
                            let slot = all.binary_search(&rank).expect("the rank was asked for");
                            convert(series.values[slot])
                        };
                        let bands = ranks.iter().zip(&scenario.output.percentiles).map(|(ranks, percentile)| Band {
                            percentile: to_f64(percentile),
                            value: band_value(ranks, &at),
                            mc_lower: ranks.lower.map(at),
                            mc_upper: ranks.upper.map(at),
                        });
                        let shares = series.parts.map(|[below, within, above]| Counts { below, within, above });
                        AtTime { time_h, bands: bands.collect(), shares }
                    })
                    .collect(),
            })
            .collect()
    }

    /// The first `patients` patients of the population, summarised; for `neap check`. No concentrations are computed.
    ///
    /// # Errors
    /// [`Fault::Refused`] where one of them has a parameter that no body can have, as [`Plan::run`] does.
    pub fn sample(&self, patients: u64) -> Result<Vec<Realised>, Fault> {
        let patients = patients.min(self.scenario().population.size);
        let ranks = quantity_ranks(patients);
        population::sample(self, patients, &ranks)
    }

    /// Goes through the patients in order, a few blocks at a time, and hands each block to `take`.
    ///
    /// # Errors
    /// Whatever `take` returns; [`Fault::Interrupted`] when the watch says stop.
    pub fn for_each_block(
        &self,
        watch: &Watch,
        take: &mut dyn FnMut(&PatientBlock) -> Result<(), Fault>,
    ) -> Result<(), Fault> {
        /// Blocks drawn at a time: enough for every thread, little memory.
        const AT_A_TIME: u64 = 64;
        let patients = self.scenario().population.size;
        let blocks = patients.div_ceil(LANES as u64);
        for start in (0..blocks).step_by(AT_A_TIME as usize) {
            if watch.stopped() {
                return Err(Fault::Interrupted);
            }
            let drawn = in_parallel((blocks - start).min(AT_A_TIME) as usize, |block| {
                let first = (start + block as u64) * LANES as u64;
                let count = (patients - first).min(LANES as u64) as usize;
                let mut worker = Worker::new(self);
                worker.draw(first);
                let columns = |rows: &[crate::math::Row]| rows.iter().map(|row| row[..count].to_vec()).collect();
                let (covariates, parameters) = (columns(&worker.covariates), columns(&worker.parameters));
                PatientBlock { first, count, covariates, parameters }
            });
            drawn.iter().try_for_each(&mut *take)?;
        }
        Ok(())
    }
}

/// A percentile from its order statistics.
fn band_value(ranks: &Ranks, at: &impl Fn(u64) -> f64) -> f64 {
    let next = if ranks.fraction > 0.0 { at(ranks.at + 1) } else { 0.0 };
    ranks.interpolate(at(ranks.at), next)
}

fn quantity_ranks(patients: u64) -> Vec<Ranks> {
    POPULATION_PERCENTILES
        .iter()
        .map(|&p| Ranks::new(&Exact::from_integer(BigInt::from(p)), patients, INTERVAL_LEVEL))
        .collect()
}
