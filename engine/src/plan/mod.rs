//! From a scenario to what will be computed: dose shapes, the timetable, series, pilots, passes, memory.

mod explain;
mod limits;
mod memory;

pub use explain::{ArmExplanation, Explanation};
pub use limits::{DEFAULT_MEMORY, Limits};
pub use memory::{DIRECT, pilot_size, tiles};

use std::sync::Arc;

use crate::cohort::Cohort;
use crate::course::Timetable;
use crate::diagnostic::Fault;
use crate::dosing::Protocol;
use crate::kinetics::Structure;
use crate::model::{Individuals, Network};
use crate::scenario::{Role, Scenario};
use crate::summary::WindowEdges;

/// What will be computed.
#[derive(Debug)]
pub struct Plan {
    scenario: Scenario,
    limits: Limits,
    /// Draws covariates.
    pub cohort: Cohort,
    /// Draws parameters.
    pub individuals: Individuals,
    /// Which solver structure the model has.
    pub structure: Structure,
    /// What each arm gives.
    pub protocol: Protocol,
    /// When what happens.
    pub timetable: Timetable,
    /// The window in kernel units; `None` without one.
    pub window: Option<WindowEdges>,
    /// Whether percentiles get their intervals: always, but where their price is measured.
    pub intervals: bool,
}

impl Plan {
    /// Plans a scenario.
    ///
    /// # Errors
    /// [`Fault::Refused`] where the budget is too small for the blocks in work.
    ///
    /// # Panics
    /// If a shorthand is not a structure that the solver knows; each is.
    pub fn new(scenario: Scenario, limits: &Limits) -> Result<Arc<Self>, Fault> {
        let protocol = Protocol::new(&scenario.arms);
        let individuals = Individuals::new(&scenario, 0);
        let absorbed = individuals.index(Role::AbsorptionRate).is_some();
        let network = Network::expand(scenario.drug.model, absorbed);
        let structure = Structure::recognise(&network).expect("a shorthand is a structure that the solver knows");
        let lagged = individuals.index(Role::LagTime).is_some();
        let timetable = Timetable::new(&protocol, &scenario.output.times, lagged);
        let window = scenario.window.as_ref().map(|window| WindowEdges::new(window.low, window.high));
        let plan = Self {
            cohort: Cohort::new(&scenario.population, 0),
            individuals,
            structure,
            protocol,
            timetable,
            window,
            intervals: true,
            limits: *limits,
            scenario,
        };
        let least = plan.least_memory();
        if limits.memory < least {
            return Err(Fault::Refused {
                message: format!("this scenario does not fit into {} bytes of memory", limits.memory),
                help: format!("give at least {} MiB, or use fewer threads, arms or times", least.div_ceil(1 << 20)),
            });
        }
        Ok(Arc::new(plan))
    }

    /// The scenario.
    pub fn scenario(&self) -> &Scenario {
        &self.scenario
    }

    /// What it may use.
    pub fn limits(&self) -> &Limits {
        &self.limits
    }

    /// How many series of concentrations there are: arms times output times, arm by arm.
    pub fn signals(&self) -> usize {
        self.scenario.arms.len() * self.timetable.times.len()
    }

    /// How many quantities of the population are summarised: covariates, then parameters.
    pub fn quantities(&self) -> usize {
        self.cohort.len() + self.individuals.len()
    }
}
