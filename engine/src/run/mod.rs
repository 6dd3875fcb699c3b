//! Runs a plan: blocks times passes become results.

mod results;
mod watch;

pub use results::{
    ArmResult, AtTime, Band, CONCENTRATION, Counts, Effort, INTERVAL_LEVEL, PatientBlock, Realised, Results,
};
pub use watch::{Stage, Watch};

use crate::diagnostic::Fault;
use crate::plan::Plan;

impl Plan {
    /// Runs the plan inside the caller's rayon pool.
    ///
    /// # Errors
    /// [`Fault::Interrupted`] when the watch says stop.
    pub fn run(self: &std::sync::Arc<Self>, watch: &Watch) -> Result<Results, Fault> {
        todo!("{}", watch.done())
    }

    /// The first `patients` patients of the population, summarised; for `neap check`.
    pub fn sample(&self, patients: u64) -> Vec<Realised> {
        todo!("{patients}")
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
        let _ = (watch, take);
        todo!()
    }
}
