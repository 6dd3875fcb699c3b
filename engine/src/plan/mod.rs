//! From a scenario to what will be computed: dose shapes, steps, passes, memory.

mod explain;
mod limits;

pub use explain::{ArmExplanation, Explanation};
pub use limits::{DEFAULT_MEMORY, Limits};

use std::sync::Arc;

use crate::diagnostic::Fault;
use crate::scenario::Scenario;

/// What will be computed.
#[derive(Debug)]
pub struct Plan {
    scenario: Arc<Scenario>,
    limits: Limits,
}

impl Plan {
    /// Plans a scenario.
    ///
    /// # Errors
    /// [`Fault::Refused`] where the budget is too small for even one block of patients.
    pub fn new(scenario: Scenario, limits: &Limits) -> Result<Arc<Self>, Fault> {
        Ok(Arc::new(Self { scenario: Arc::new(scenario), limits: *limits }))
    }

    /// The scenario.
    pub fn scenario(&self) -> &Scenario {
        &self.scenario
    }

    /// What it may use.
    pub fn limits(&self) -> &Limits {
        &self.limits
    }

    /// What it will do and why.
    pub fn explain(&self) -> Explanation {
        todo!()
    }
}
