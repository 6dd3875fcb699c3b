//! What is given and when. Knows no solver.
//!
//! Dose rows that differ only in amount share one [`Shape`]: a linear model is solved once per shape, for a unit amount,
//! and multiplied, so arms that share a schedule cost one solution.

use crate::quantity::Exact;
use crate::scenario::{Amount, Arm, Route};

/// A unit amount by one route at each of some times.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Shape {
    /// The way in.
    pub route: Route,
    /// When, in h, strictly rising.
    pub times: Vec<Exact>,
}

/// An amount of one shape.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Given {
    /// Index of the shape.
    pub shape: usize,
    /// How much at each of its times.
    pub amount: Amount,
}

/// The shapes of a scenario and what each arm gives of them.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Protocol {
    /// Distinct shapes, in the order of their first use.
    pub shapes: Vec<Shape>,
    /// For each arm, its dose rows in file order.
    pub arms: Vec<Vec<Given>>,
}

impl Protocol {
    /// Finds the distinct shapes of some arms. Rows of amount 0 give nothing and are left out.
    pub fn new(arms: &[Arm]) -> Self {
        let mut protocol = Self::default();
        for arm in arms {
            let mut given = Vec::with_capacity(arm.doses.len());
            for dose in arm.doses.iter().filter(|dose| dose.amount != Amount::Flat(0.0)) {
                let shape = Shape { route: dose.route.clone(), times: dose.times.clone() };
                let index = protocol.shapes.iter().position(|known| *known == shape).unwrap_or_else(|| {
                    protocol.shapes.push(shape);
                    protocol.shapes.len() - 1
                });
                given.push(Given { shape: index, amount: dose.amount });
            }
            protocol.arms.push(given);
        }
        protocol
    }
}
