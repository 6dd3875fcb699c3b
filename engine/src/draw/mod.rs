//! Random words and uniform numbers by name: a draw is a function of seed, cohort, quantity, patient and index.

mod philox;
mod stream;

pub use philox::{philox4x32, philox4x32_of_rounds};
pub use stream::{Stream, Words, uniform};
