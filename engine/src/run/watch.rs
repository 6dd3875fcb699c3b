//! Progress and stopping, polled by the caller and read by workers between blocks.

use std::sync::atomic::{AtomicBool, AtomicU8, AtomicU64, Ordering};

/// What a run is doing.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[repr(u8)]
pub enum Stage {
    /// Not begun.
    Waiting,
    /// A small run that brackets the percentiles.
    Pilot,
    /// The patients.
    Patients,
    /// Picking percentiles from what was kept.
    Selecting,
    /// Writing tables.
    Writing,
}

/// Progress of a run and the way to stop it. All orderings are relaxed: figures for people, and a flag.
#[derive(Debug, Default)]
pub struct Watch {
    done: AtomicU64,
    total: AtomicU64,
    stage: AtomicU8,
    stop: AtomicBool,
}

impl Watch {
    /// A fresh one.
    pub fn new() -> Self {
        Self::default()
    }

    /// Asks the run to stop; workers look between blocks, so it stops within milliseconds.
    pub fn stop(&self) {
        self.stop.store(true, Ordering::Relaxed);
    }

    /// Whether it was asked to stop.
    pub fn stopped(&self) -> bool {
        self.stop.load(Ordering::Relaxed)
    }

    /// Patients gone through, all passes together.
    pub fn done(&self) -> u64 {
        self.done.load(Ordering::Relaxed)
    }

    /// Patients to go through, all passes together; grows if a pass has to be repeated.
    pub fn total(&self) -> u64 {
        self.total.load(Ordering::Relaxed)
    }

    /// What it is doing.
    pub fn stage(&self) -> Stage {
        match self.stage.load(Ordering::Relaxed) {
            0 => Stage::Waiting,
            1 => Stage::Pilot,
            2 => Stage::Patients,
            3 => Stage::Selecting,
            _ => Stage::Writing,
        }
    }

    /// Sets what it is doing.
    pub fn enter(&self, stage: Stage) {
        self.stage.store(stage as u8, Ordering::Relaxed);
    }

    /// Adds to what there is to do.
    pub fn expect(&self, patients: u64) {
        self.total.fetch_add(patients, Ordering::Relaxed);
    }

    /// Adds to what is done.
    pub fn advance(&self, patients: u64) {
        self.done.fetch_add(patients, Ordering::Relaxed);
    }
}
