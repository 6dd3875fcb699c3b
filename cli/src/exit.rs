//! What the exit code says. Nowhere else is a code chosen; the argument parser ends with [`BAD_INPUT`] by itself.

use neap_engine::diagnostic::Fault;

/// The scenario or the request is at fault; nothing was written.
pub(crate) const BAD_INPUT: u8 = 2;

/// Reading or writing failed.
pub(crate) const IO: u8 = 3;

/// The user stopped it (128 and the number of SIGINT, as shells count).
pub(crate) const INTERRUPTED: u8 = 130;

/// The exit code for a fault.
pub(crate) fn code(fault: &Fault) -> u8 {
    match fault {
        Fault::Scenario { .. } | Fault::Refused { .. } => BAD_INPUT,
        Fault::Io { .. } => IO,
        Fault::Interrupted => INTERRUPTED,
    }
}
