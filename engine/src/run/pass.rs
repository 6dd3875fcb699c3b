//! One pass over some patients by all threads of the pool.

use std::sync::Mutex;
use std::sync::atomic::{AtomicU64, Ordering};

use super::Watch;
use super::worker::{Clock, Sink, Worker};
use crate::diagnostic::Fault;
use crate::math::{LANES, Row};
use crate::model::Impossible;
use crate::plan::Plan;
use crate::summary::{Partial, Search};

/// One block in so many is timed.
const TIMED: u64 = 32;

/// Sends the first `patients` patients through the plan, up to output time `until`, into one sink a thread; the sinks come back
/// in no particular order. `prepare` makes a sink; `count` tells it how many lanes of the next block are patients.
pub(super) fn pass<S: Sink + Send>(
    plan: &Plan,
    patients: u64,
    until: usize,
    watch: &Watch,
    clock: &mut Clock,
    prepare: impl Fn() -> S + Sync,
    count: impl Fn(&mut S, usize) + Sync,
) -> Result<Vec<S>, Fault> {
    let blocks = patients.div_ceil(LANES as u64);
    let next = AtomicU64::new(0);
    let clocks = Mutex::new(Clock::default());
    let impossible = Mutex::new(None);
    let sinks = rayon::broadcast(|_| {
        let mut worker = Worker::new(plan);
        let mut sink = prepare();
        let mut mine = Clock::default();
        while !watch.stopped() {
            let block = next.fetch_add(1, Ordering::Relaxed);
            if block >= blocks {
                break;
            }
            let first = block * LANES as u64;
            let lanes = (patients - first).min(LANES as u64) as usize;
            count(&mut sink, lanes);
            let timed = block.is_multiple_of(TIMED).then_some(&mut mine);
            if let Some(found) = worker.block(&mut sink, first, lanes, until, timed) {
                let patient = first + found.lane as u64 + 1;
                let mut least = impossible.lock().expect("no thread panics while it compares");
                if least.is_none_or(|(known, _)| patient < known) {
                    *least = Some((patient, found));
                }
            }

            watch.advance(lanes as u64);
        }
        let mut all = clocks.lock().expect("no thread panics while it adds up seconds");
        all.sampling += mine.sampling;
        all.solving += mine.solving;
        all.counting += mine.counting;
        sink
    });
    if watch.stopped() {
        return Err(Fault::Interrupted);
    }
    if let Some((patient, found)) = impossible.into_inner().expect("no thread panicked") {
        return Err(impossible_parameter(plan, patient, found));
    }
    // The timed blocks stand for all.
    let scale = blocks as f64 / blocks.div_ceil(TIMED) as f64;
    let timed = clocks.into_inner().expect("no thread panicked");
    clock.sampling += timed.sampling * scale;
    clock.solving += timed.solving * scale;
    clock.counting += timed.counting * scale;
    Ok(sinks)
}

/// The same patient whatever the threads: the first one.
pub(super) fn impossible_parameter(plan: &Plan, patient: u64, found: Impossible) -> Fault {
    let (name, unit) = (found.role.name(plan.scenario().drug.model), found.role.unit());
    let value = found.value;
    Fault::Refused {
        message: format!("patient {patient} would have a `{name}` of {value} {unit}, which no body can have"),
        help:
            "narrow the limits of the covariates behind it, or let it depend on them by a power, which stays above zero"
                .to_owned(),
    }
}

/// What a pass looks at.
pub(super) struct Aims {
    /// Every search: series of concentrations arm by arm, then quantities of the population; `None` where another pass looks.
    pub(super) searches: Vec<Option<Search>>,
    /// How many of them are concentrations.
    pub(super) signals: usize,
    /// Centres of the moments of each quantity; empty without moments.
    pub(super) centres: Vec<f64>,
}

/// Absorbs blocks into a partial.
pub(super) struct Absorb<'a> {
    aims: &'a Aims,
    pub(super) partial: Partial,
    lanes: usize,
}

impl<'a> Absorb<'a> {
    /// Nothing yet, with room for what `patients` patients are expected to leave.
    pub(super) fn new(aims: &'a Aims, patients: u64) -> Self {
        Self { aims, partial: Partial::new(&aims.searches, aims.centres.len(), patients), lanes: 0 }
    }

    /// Tells how many lanes of the next block are patients.
    pub(super) fn count(&mut self, lanes: usize) {
        self.lanes = lanes;
        self.partial.patients += lanes as u64;
    }
}

impl Sink for Absorb<'_> {
    fn population(&mut self, covariates: &[Row], parameters: &[Row]) {
        for (index, row) in covariates.iter().chain(parameters).enumerate() {
            let series = self.aims.signals + index;
            if let Some(search) = &self.aims.searches[series] {
                self.partial.absorb(series, search, row, 1.0, self.lanes);
            }
            if let Some(centre) = self.aims.centres.get(index) {
                self.partial.moments[index].absorb(row, *centre, self.lanes);
            }
        }
    }

    fn wants(&self, series: usize) -> bool {
        self.aims.searches[series].is_some()
    }

    fn soon(&self, series: usize) {
        if let Some(search) = &self.aims.searches[series] {
            self.partial.prefetch(series, search);
        }
    }

    fn signal(&mut self, series: usize, row: &Row, scale: f64) {
        if let Some(search) = &self.aims.searches[series] {
            self.partial.absorb(series, search, row, scale, self.lanes);
        }
    }
}
