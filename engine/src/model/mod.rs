//! The model: compartments and flows, and the parameters that each patient brings to them. What, not how.

mod network;
mod parameters;

pub use network::{Compartment, Flow, Network};
pub use parameters::{Impossible, Individuals};
