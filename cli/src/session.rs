//! What surrounds the engine's work: threads, signals, progress.

use std::sync::Arc;

use neap_engine::diagnostic::Fault;
use neap_engine::plan::Limits;
use neap_engine::run::Watch;
use rayon::ThreadPoolBuilder;

use crate::printer::Look;
use crate::{exit, progress};

/// Does `work` in a pool of as many threads as the limits allow, showing its progress. SIGINT and SIGTERM stop it within
/// milliseconds; a second signal ends the process at once.
///
/// SIGHUP is left as it was: a run under `nohup` outlives its terminal, any other ends with it.
pub(crate) fn during<T: Send>(
    limits: &Limits,
    look: Look,
    work: impl FnOnce(&Watch) -> Result<T, Fault> + Send,
) -> Result<T, Fault> {
    let pool = ThreadPoolBuilder::new().num_threads(limits.threads).build().map_err(|error| Fault::Refused {
        message: format!("{} threads cannot be started: {error}", limits.threads),
        help: "ask for fewer with `--threads`".to_owned(),
    })?;
    let watch = Arc::new(Watch::new());
    stop_on_signals(Arc::clone(&watch))?;
    progress::shown(&watch, look, || pool.install(|| work(&watch)))
}

#[cfg(unix)]
fn stop_on_signals(watch: Arc<Watch>) -> Result<(), Fault> {
    use signal_hook::consts::{SIGINT, SIGTERM};
    let refused = |cause| Fault::Io { doing: "listen for signals".to_owned(), path: "of this process".into(), cause };
    let mut signals = signal_hook::iterator::Signals::new([SIGINT, SIGTERM]).map_err(refused)?;
    std::thread::spawn(move || {
        for _ in signals.forever() {
            if watch.stopped() {
                std::process::exit(exit::INTERRUPTED.into());
            }
            watch.stop();
        }
    });
    Ok(())
}

/// Elsewhere the system ends the process by itself; a folder is still whole or absent.
#[cfg(not(unix))]
fn stop_on_signals(_: Arc<Watch>) -> Result<(), Fault> {
    let _ = exit::INTERRUPTED;
    Ok(())
}
