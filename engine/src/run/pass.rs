//! One pass over some patients by all threads of the pool.

use std::sync::Mutex;
use std::sync::atomic::{AtomicU64, Ordering};

use super::Watch;
use super::worker::{Aims, Clock, Worker};
use crate::diagnostic::Fault;
use crate::math::LANES;
use crate::plan::Plan;
use crate::summary::Partial;

/// One block in so many is timed.
const TIMED: u64 = 32;

/// Sends the first `patients` patients through the plan; one partial a thread comes back, in no particular order.
pub(super) fn pass(
    plan: &Plan,
    aims: &Aims,
    patients: u64,
    watch: &Watch,
    clock: &mut Clock,
) -> Result<Vec<Partial>, Fault> {
    let blocks = patients.div_ceil(LANES as u64);
    let next = AtomicU64::new(0);
    let searches = aims.searches();
    let clocks = Mutex::new(Clock::default());
    let partials = rayon::broadcast(|_| {
        let mut worker = Worker::new(plan);
        let mut partial = Partial::new(&searches, aims.centres.len());
        let mut mine = Clock::default();
        while !watch.stopped() {
            let block = next.fetch_add(1, Ordering::Relaxed);
            if block >= blocks {
                break;
            }
            let first = block * LANES as u64;
            let count = (patients - first).min(LANES as u64) as usize;
            let timed = block.is_multiple_of(TIMED).then_some(&mut mine);
            worker.block(aims, first, count, &mut partial, timed);
            watch.advance(count as u64);
        }
        let mut all = clocks.lock().expect("no thread panics while it adds up seconds");
        all.sampling += mine.sampling;
        all.solving += mine.solving;
        all.counting += mine.counting;
        partial
    });
    if watch.stopped() {
        return Err(Fault::Interrupted);
    }
    // The timed blocks stand for all.
    let scale = blocks as f64 / blocks.div_ceil(TIMED) as f64;
    let timed = clocks.into_inner().expect("no thread panicked");
    clock.sampling += timed.sampling * scale;
    clock.solving += timed.solving * scale;
    clock.counting += timed.counting * scale;
    Ok(partials)
}
