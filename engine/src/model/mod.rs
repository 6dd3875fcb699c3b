//! The model: compartments and flows, and the parameters that each patient brings to them. What, not how.

mod network;
mod parameters;

pub use network::{Compartment, Flow, Network};
pub use parameters::Individuals;

use crate::scenario::{Model, Role};

/// The name a parameter has in a scenario of this model.
pub fn role_name(role: Role, model: Model) -> &'static str {
    match role {
        Role::Clearance => "clearance",
        Role::CentralVolume if model == Model::OneCompartment => "volume",
        Role::CentralVolume => "central_volume",
        Role::IntercompartmentalClearance => "intercompartmental_clearance",
        Role::PeripheralVolume => "peripheral_volume",
        Role::AbsorptionRate => "absorption_rate",
        Role::LagTime => "lag_time",
        Role::Bioavailability => "bioavailability",
    }
}

/// The unit a parameter is held in.
pub fn role_unit(role: Role) -> &'static str {
    match role {
        Role::Clearance | Role::IntercompartmentalClearance => "L/h",
        Role::CentralVolume | Role::PeripheralVolume => "L",
        Role::AbsorptionRate => "/h",
        Role::LagTime => "h",
        Role::Bioavailability => "1",
    }
}
