//! Percentiles, shares and their Monte Carlo errors. Knows no patients and no drugs.
//!
//! Percentiles are exact order statistics of all values, yet the values are never stored. A pilot brackets each order
//! statistic; a pass over all patients counts what lies below each bracket and keeps only what falls inside; the rest is
//! selection. A missed bracket shows in the counts, and the place where the order statistic really is gets searched in one
//! more pass. Brackets therefore decide how fast an answer comes, never what it is.

mod histogram;
mod interval;
mod partial;
mod pilot;
mod ranks;
mod select;
mod series;

pub use histogram::{CELLS, Cells};
pub use interval::{order_statistic_ranks, wilson};
pub use partial::{Moments, Partial};
pub use pilot::Pilot;
pub use ranks::Ranks;
pub use select::Scratch;
pub use series::{Found, Parts, Place, Search, WindowEdges};
