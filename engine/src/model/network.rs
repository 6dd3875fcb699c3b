//! Compartments and flows: what the body does with the drug, not how it is solved.

use crate::scenario::{Model, Role};

/// One well-stirred compartment.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Compartment {
    /// Its name, as in `central`.
    pub name: String,
    /// The parameter that is its volume; `None` where only the amount matters, as in the gut.
    pub volume: Option<Role>,
}

/// A first-order flow, by the index of compartments.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Flow {
    /// One way, at a rate constant times the amount.
    Rate {
        /// Out of this compartment.
        from: usize,
        /// Into this one.
        to: usize,
        /// The rate constant, 1/h.
        rate: Role,
    },
    /// Out of the body, at a clearance times the concentration.
    Out {
        /// Out of this compartment, which has a volume.
        from: usize,
        /// The clearance, L/h.
        clearance: Role,
    },
    /// Both ways, at one clearance times the concentration on each side.
    Between {
        /// One side, with a volume.
        one: usize,
        /// The other, with a volume.
        other: usize,
        /// The clearance, L/h.
        clearance: Role,
    },
}

/// A set of compartments and flows.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Network {
    /// In any order.
    pub compartments: Vec<Compartment>,
    /// In any order.
    pub flows: Vec<Flow>,
}

impl Network {
    /// Adds a compartment and returns its index.
    pub fn compartment(&mut self, name: &str, volume: Option<Role>) -> usize {
        self.compartments.push(Compartment { name: name.to_owned(), volume });
        self.compartments.len() - 1
    }

    /// Adds a flow.
    pub fn flow(&mut self, flow: Flow) {
        self.flows.push(flow);
    }

    /// What a shorthand stands for; `absorbed` adds the gut.
    pub fn expand(model: Model, absorbed: bool) -> Self {
        let mut network = Self::default();
        let central = network.compartment("central", Some(Role::CentralVolume));
        if absorbed {
            let gut = network.compartment("gut", None);
            network.flow(Flow::Rate { from: gut, to: central, rate: Role::AbsorptionRate });
        }
        if model == Model::TwoCompartment {
            let peripheral = network.compartment("peripheral", Some(Role::PeripheralVolume));
            let clearance = Role::IntercompartmentalClearance;
            network.flow(Flow::Between { one: central, other: peripheral, clearance });
        }
        network.flow(Flow::Out { from: central, clearance: Role::Clearance });
        network
    }
}
