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
use crate::scenario::{Role, Route, Scenario};
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
    pub fn new(scenario: Scenario, limits: &Limits) -> Result<Arc<Self>, Fault> {
        let absorbed = scenario.drug.parameters.iter().any(|parameter| parameter.role == Role::AbsorptionRate);
        let network = Network::expand(scenario.drug.model, absorbed);
        Self::of_network(scenario, &network, limits)
    }

    /// Plans a scenario whose drug moves as `network` says, in place of the shorthand that the scenario names.
    ///
    /// # Errors
    /// [`Fault::Refused`] where the solver does not know the network's structure, the scenario lacks one of its parameters, doses by mouth have no gut to go to, or the
    /// budget is too small for the blocks in work.
    pub fn of_network(scenario: Scenario, network: &Network, limits: &Limits) -> Result<Arc<Self>, Fault> {
        let protocol = Protocol::new(&scenario.arms);
        let individuals = Individuals::new(&scenario, 0);
        let oral = protocol.shapes.iter().any(|shape| shape.route == Route::Oral);
        let known = |structure: &Structure| {
            structure.roles().all(|role| individuals.index(role).is_some())
                && (structure.absorption_rate.is_some() || !oral)
        };
        let structure = Structure::recognise(network).filter(known).ok_or_else(|| Fault::Refused {
            message: "these compartments and flows are not among those that can be solved, or lack a parameter"
                .to_owned(),
            help:
                "give a central compartment that is eliminated by a clearance, and at most a gut and a peripheral one"
                    .to_owned(),
        })?;
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
