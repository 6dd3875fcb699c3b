//! How a model is solved: exactly, by one step matrix a distinct step.
//!
//! A first-order network moves amounts by a matrix exponential, whose entries are all non-negative. For the shorthands the
//! entries have closed forms, written here with divided differences of exponentials, so that no two nearly equal numbers
//! are ever subtracted: products and sums of non-negative terms keep their relative accuracy, at equal rates, in far tails
//! and over thousands of steps, without a branch. The state is amounts, so a solution can be resumed from anywhere.

mod rates;
mod step;
mod structure;

pub use rates::Rates;
pub use step::{Infused, Step};
pub use structure::Structure;
