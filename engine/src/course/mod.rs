//! Drives dosing and kinetics for a block of patients: the amounts of every dose shape at every output time.

mod march;
mod moment;
mod timetable;

pub use march::{AT_A_TIME, KEPT_RUNS, KEPT_STEPS, March};
pub use moment::Moment;
pub use timetable::{Fold, Span, Timetable, Track};
