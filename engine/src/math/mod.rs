//! Portable mathematics: the same bits on every machine, at every vector width, debug or release.
//!
//! Scalar functions here use only `+ - * /`, square root, comparison and integer operations, never a fused
//! multiply-add, and are inlined into plain loops that are compiled for several vector widths.

mod row;

pub use row::{LANES, Row};
