//! The engine of `neap`: samples virtual patients, solves their kinetics exactly, and summarises the population as
//! percentile bands and shares within a therapeutic window.
//!
//! Data flows one way: a module imports only from those declared above it (a test in the `tests` member reads the
//! imports and enforces it). The engine is silent: no terminal, no argument parsing, no thread pool of its own, no
//! signal handler. It runs inside whatever rayon pool its caller installed.
//!
//! The same scenario, seed and version give the same bytes in every table, whatever the threads, the memory budget, the
//! vector width, debug or release.
//!
//! `neap` designs studies; it prescribes for nobody.

pub mod math;

pub mod diagnostic;
pub mod quantity;

pub mod scenario;

pub mod draw;

pub mod cohort;

pub mod model;

pub mod dosing;

pub mod kinetics;

pub mod course;

pub mod summary;

pub mod plan;

pub mod run;

pub mod tables;
