//! One worker: draws a block of patients, marches it through the timetable, and absorbs it.

use std::time::Instant;

use crate::course::March;
use crate::math::{LANES, Row};
use crate::plan::Plan;
use crate::scenario::Amount;
use crate::summary::{Partial, Search};

/// Seconds of a worker, by what it did.
#[derive(Clone, Copy, Debug, Default)]
pub(super) struct Clock {
    pub(super) sampling: f64,
    pub(super) solving: f64,
    pub(super) counting: f64,
}

/// What a pass looks at.
pub(super) struct Aims {
    /// Series of concentrations, arm by arm; `None` where another pass looks.
    pub(super) signals: Vec<Option<Search>>,
    /// Quantities of the population; empty where this pass does not look at them.
    pub(super) quantities: Vec<Search>,
    /// Centres of the moments of each quantity; empty without moments.
    pub(super) centres: Vec<f64>,
    /// One past the last output time that any series needs.
    pub(super) until: usize,
}

impl Aims {
    /// Every search in one list: signals, then quantities.
    pub(super) fn searches(&self) -> Vec<Option<Search>> {
        self.signals.iter().cloned().chain(self.quantities.iter().cloned().map(Some)).collect()
    }
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

    /// Draws, solves and absorbs the first `count` patients of the block.
    pub(super) fn block(
        &mut self,
        aims: &Aims,
        first: u64,
        count: usize,
        partial: &mut Partial,
        clock: Option<&mut Clock>,
    ) {
        match clock {
            None => self.untimed(aims, first, count, partial),
            Some(clock) => self.timed(aims, first, count, partial, clock),
        }
    }

    fn untimed(&mut self, aims: &Aims, first: u64, count: usize, partial: &mut Partial) {
        self.draw(first);
        self.absorb_population(aims, count, partial);
        self.start();
        for index in 0..aims.until {
            self.march.advance(&self.plan.timetable, index);
            self.absorb_signals(aims, index, count, partial);
        }
        partial.patients += count as u64;
    }

    /// As [`Worker::untimed`], asking the clock at every output time: dear, so only some blocks go this way.
    fn timed(&mut self, aims: &Aims, first: u64, count: usize, partial: &mut Partial, clock: &mut Clock) {
        let start = Instant::now();
        self.draw(first);
        let drawn = Instant::now();
        clock.sampling += (drawn - start).as_secs_f64();
        self.absorb_population(aims, count, partial);
        let absorbed = Instant::now();
        clock.counting += (absorbed - drawn).as_secs_f64();
        self.start();
        let mut then = Instant::now();
        clock.solving += (then - absorbed).as_secs_f64();
        for index in 0..aims.until {
            self.march.advance(&self.plan.timetable, index);
            let solved = Instant::now();
            self.absorb_signals(aims, index, count, partial);
            let counted = Instant::now();
            clock.solving += (solved - then).as_secs_f64();
            clock.counting += (counted - solved).as_secs_f64();
            then = counted;
        }
        partial.patients += count as u64;
    }

    fn start(&mut self) {
        let (plan, parameters) = (self.plan, &self.parameters);
        self.march.start(&plan.timetable, |role| plan.individuals.index(role).map(|index| &parameters[index]));
    }

    fn absorb_population(&mut self, aims: &Aims, count: usize, partial: &mut Partial) {
        let offset = aims.signals.len();
        let rows = self.covariates.iter().chain(&self.parameters);
        for (index, (search, row)) in aims.quantities.iter().zip(rows.clone()).enumerate() {
            partial.absorb(offset + index, search, row, 1.0, count);
        }
        for ((moments, centre), row) in partial.moments.iter_mut().zip(&aims.centres).zip(rows) {
            moments.absorb(row, *centre, count);
        }
    }

    fn absorb_signals(&mut self, aims: &Aims, index: usize, count: usize, partial: &mut Partial) {
        let times = self.plan.timetable.times.len();
        for arm in 0..self.plan.protocol.arms.len() {
            let series = arm * times + index;
            if let Some(search) = &aims.signals[series] {
                let (row, scale) = concentration(self.plan, &self.march, &self.covariates, arm, &mut self.mix);
                partial.absorb(series, search, row, scale, count);
            }
        }
    }
}

/// Concentration of an arm at the output time that the march stands at, as a row and a factor on all of it.
fn concentration<'r>(
    plan: &Plan,
    march: &'r March,
    covariates: &[Row],
    arm: usize,
    mix: &'r mut Row,
) -> (&'r Row, f64) {
    let given = &plan.protocol.arms[arm];
    if let [only] = given.as_slice()
        && let Amount::Flat(amount) = only.amount
        && let Some(row) = march.concentration(only.shape)
    {
        return (row, amount);
    }
    *mix = Row::ZERO;
    for given in given {
        let Some(row) = march.concentration(given.shape) else { continue };
        match given.amount {
            Amount::Flat(amount) => add(mix, row, amount),
            Amount::Per { covariate, amount } => add_per(mix, row, &covariates[covariate], amount),
        }
    }
    (mix, 1.0)
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
