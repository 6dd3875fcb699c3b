//! The canonical structure of a network: what it is, whatever the order and names it was written with.

use crate::model::{Flow, Network};
use crate::scenario::Role;

/// A central compartment with elimination by clearance, and what is attached to it.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Structure {
    /// Volume of the central compartment.
    pub central_volume: Role,
    /// Its elimination.
    pub clearance: Role,
    /// The rate constant of absorption from a gut, if there is one.
    pub absorption_rate: Option<Role>,
    /// Clearance and volume of a peripheral compartment, if there is one.
    pub peripheral: Option<(Role, Role)>,
}

impl Structure {
    /// The parameters it needs.
    pub fn roles(&self) -> impl Iterator<Item = Role> {
        let (exchange, volume) = self.peripheral.unzip();
        [Some(self.central_volume), Some(self.clearance), self.absorption_rate, exchange, volume].into_iter().flatten()
    }

    /// Recognises a network; `None` where it is not one of these structures.
    pub fn recognise(network: &Network) -> Option<Self> {
        let mut out = None;
        let mut absorbed = None;
        let mut between = None;
        for flow in &network.flows {
            let twice = match *flow {
                Flow::Out { from, clearance } => out.replace((from, clearance)).is_some(),
                Flow::Rate { from, to, rate } => absorbed.replace((from, to, rate)).is_some(),
                Flow::Between { one, other, clearance } => between.replace((one, other, clearance)).is_some(),
            };
            if twice {
                return None;
            }
        }
        let (central, clearance) = out?;
        let central_volume = network.compartments[central].volume?;
        let absorption_rate = match absorbed {
            None => None,
            Some((from, to, rate)) if to == central && from != central => {
                network.compartments[from].volume.is_none().then_some(())?;
                Some(rate)
            }
            Some(_) => return None,
        };
        let peripheral = match between {
            None => None,
            Some((one, other, clearance)) => {
                let tissue = match (one == central, other == central) {
                    (true, false) => other,
                    (false, true) => one,
                    _ => return None,
                };
                Some((clearance, network.compartments[tissue].volume?))
            }
        };
        let attached = usize::from(absorption_rate.is_some()) + usize::from(peripheral.is_some());
        (network.compartments.len() == 1 + attached).then_some(Self {
            central_volume,
            clearance,
            absorption_rate,
            peripheral,
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::scenario::Model;

    #[test]
    fn shorthands_are_recognised_in_any_order() {
        let shorthand = Network::expand(Model::TwoCompartment, true);
        let mut written = Network::default();
        let tissue = written.compartment("tissue", Some(Role::PeripheralVolume));
        let depot = written.compartment("depot", None);
        let plasma = written.compartment("plasma", Some(Role::CentralVolume));
        written.flow(Flow::Out { from: plasma, clearance: Role::Clearance });
        written.flow(Flow::Between { one: tissue, other: plasma, clearance: Role::IntercompartmentalClearance });
        written.flow(Flow::Rate { from: depot, to: plasma, rate: Role::AbsorptionRate });
        assert_eq!(Structure::recognise(&written), Structure::recognise(&shorthand));
        assert!(Structure::recognise(&written).is_some());
    }

    #[test]
    fn other_networks_are_not() {
        let mut network = Network::expand(Model::OneCompartment, true);
        network.compartment("loose", None);
        assert_eq!(Structure::recognise(&network), None);
        let mut network = Network::expand(Model::OneCompartment, false);
        network.flow(Flow::Out { from: 0, clearance: Role::Clearance });
        assert_eq!(Structure::recognise(&network), None);
    }
}
