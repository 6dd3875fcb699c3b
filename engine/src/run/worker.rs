//! One worker: draws a block of patients, marches it through the timetable, and absorbs it.

use std::time::Instant;

use crate::course::{AT_A_TIME, March};
use crate::math::{LANES, Row};
use crate::model::Impossible;
use crate::plan::Plan;
use crate::scenario::Amount;

/// Seconds of a worker, by what it did.
#[derive(Clone, Copy, Debug, Default)]
pub(super) struct Clock {
    pub(super) sampling: f64,
    pub(super) solving: f64,
    pub(super) counting: f64,
}

pub(super) struct Worker<'a> {
    plan: &'a Plan,
    pub(super) covariates: Vec<Row>,
    pub(super) parameters: Vec<Row>,
    scratch: Vec<Row>,
    march: March,
    mix: Row,
}

impl<'a> Worker<'a> {
    pub(super) fn new(plan: &'a Plan) -> Self {
        Self {
            plan,
            covariates: vec![Row::ZERO; plan.cohort.len()],
            parameters: vec![Row::ZERO; plan.individuals.len()],
            scratch: vec![Row::ZERO; plan.individuals.scratch()],
            march: March::new(plan.structure, &plan.timetable),
            mix: Row::ZERO,
        }
    }

    /// Draws the block whose first patient is `first`.
    pub(super) fn draw(&mut self, first: u64) {
        self.plan.cohort.fill(first, &mut self.covariates);
        self.plan.individuals.fill(first, &self.covariates, &mut self.parameters, &mut self.scratch);
    }

    /// Draws and solves the block whose first patient is `first`, and hands it to `sink`. Where one of the first `count` patients
    /// has a parameter that no body can have, that is told instead of solving the block.
    pub(super) fn block(
        &mut self,
        sink: &mut impl Sink,
        first: u64,
        count: usize,
        until: usize,
        clock: Option<&mut Clock>,
    ) -> Option<Impossible> {
        // Asking the clock at every go is dear, so only some blocks are timed.
        let mut clock = Stopwatch::new(clock);
        self.draw(first);
        let impossible = self.plan.individuals.impossible(&self.parameters, count);
        if impossible.is_some() {
            return impossible;
        }
        clock.lap(|clock| &mut clock.sampling);
        sink.population(&self.covariates, &self.parameters);
        clock.lap(|clock| &mut clock.counting);
        let (plan, parameters) = (self.plan, &self.parameters);
        self.march.start(&plan.timetable, |role| plan.individuals.index(role).map(|index| &parameters[index]));
        let times = plan.timetable.times.len();
        for start in (0..until).step_by(AT_A_TIME) {
            let end = until.min(start + AT_A_TIME);
            self.march.advance(&plan.timetable, start..end);
            clock.lap(|clock| &mut clock.solving);
            for index in start..end {
                for arm in 0..plan.protocol.arms.len() {
                    let series = arm * times + index;
                    if index + 2 < until {
                        sink.soon(series + 2);
                    }
                    if sink.wants(series) {
                        let rows =
                            Rows { march: &self.march, covariates: &self.covariates, start, place: index - start };
                        let (row, scale) = rows.concentration(plan, arm, &mut self.mix);
                        sink.signal(series, row, scale);
                    }
                }
            }
            clock.lap(|clock| &mut clock.counting);
        }
        None
    }
}

/// Takes what a worker computes, row by row.
pub(super) trait Sink {
    /// Covariates and parameters of the block.
    fn population(&mut self, covariates: &[Row], parameters: &[Row]);

    /// Whether this series of concentrations is looked at.
    fn wants(&self, series: usize) -> bool;

    /// This series of concentrations comes soon.
    fn soon(&self, _series: usize) {}

    /// Concentrations of a series: each lane of `row` times `scale`.
    fn signal(&mut self, series: usize, row: &Row, scale: f64);
}

/// Adds laps to a clock, if there is one.
struct Stopwatch<'a> {
    clock: Option<(&'a mut Clock, Instant)>,
}

impl<'a> Stopwatch<'a> {
    fn new(clock: Option<&'a mut Clock>) -> Self {
        Self { clock: clock.map(|clock| (clock, Instant::now())) }
    }

    fn lap(&mut self, part: impl Fn(&mut Clock) -> &mut f64) {
        if let Some((clock, then)) = &mut self.clock {
            let now = Instant::now();
            *part(clock) += (now - *then).as_secs_f64();
            *then = now;
        }
    }
}

/// What a block has at one output time.
struct Rows<'r> {
    march: &'r March,
    covariates: &'r [Row],
    /// First output time that the march last advanced to, and how many after it this one is.
    start: usize,
    place: usize,
}

impl<'r> Rows<'r> {
    /// Concentration of an arm, as a row and a factor on all of it.
    fn concentration(&self, plan: &Plan, arm: usize, mix: &'r mut Row) -> (&'r Row, f64) {
        let of = |shape| self.march.concentration(&plan.timetable, shape, self.start, self.place);
        let given = &plan.protocol.arms[arm];
        if let [only] = given.as_slice()
            && let Amount::Flat(amount) = only.amount
            && let Some(row) = of(only.shape)
        {
            return (row, amount);
        }
        *mix = Row::ZERO;
        for given in given {
            let Some(row) = of(given.shape) else { continue };
            match given.amount {
                Amount::Flat(amount) => add(mix, row, amount),
                Amount::Per { covariate, amount } => add_per(mix, row, &self.covariates[covariate], amount),
            }
        }
        (mix, 1.0)
    }
}

#[multiversion::multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn add(sum: &mut Row, row: &Row, amount: f64) {
    for lane in 0..LANES {
        sum.0[lane] += row.0[lane] * amount;
    }
}

#[multiversion::multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn add_per(sum: &mut Row, row: &Row, covariate: &Row, amount: f64) {
    for lane in 0..LANES {
        sum.0[lane] += row.0[lane] * (amount * covariate.0[lane]);
    }
}
