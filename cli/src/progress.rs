//! The bar on standard error: what is being done, how much of it, how fast, how long still. Only on a terminal.

use std::fmt;
use std::io::{self, IsTerminal};
use std::sync::atomic::{AtomicBool, Ordering};
use std::thread;
use std::time::Duration;

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressState, ProgressStyle};
use neap_engine::run::{Stage, Watch};

use crate::numbers::count;
use crate::printer::Look;

/// How often the bar looks.
const EVERY: Duration = Duration::from_millis(100);

/// Does `work` while a bar shows what `watch` says. Work that is done before the second look shows nothing.
pub(crate) fn shown<T>(watch: &Watch, look: Look, work: impl FnOnce() -> T) -> T {
    if !io::stderr().is_terminal() {
        return work();
    }
    let done = AtomicBool::new(false);
    thread::scope(|scope| {
        let looker = scope.spawn(|| follow(watch, look, &done));
        // Ends the looking when the work ends, also by a panic: a scope waits for its threads.
        let _end = OnDrop(|| {
            done.store(true, Ordering::Relaxed);
            looker.thread().unpark();
        });
        work()
    })
}

struct OnDrop<F: Fn()>(F);

impl<F: Fn()> Drop for OnDrop<F> {
    fn drop(&mut self) {
        (self.0)();
    }
}

fn follow(watch: &Watch, look: Look, done: &AtomicBool) {
    let mut bar = None;
    let mut looks = 0;
    while !done.load(Ordering::Relaxed) {
        thread::park_timeout(EVERY);
        looks += 1;
        if looks >= 2 && !done.load(Ordering::Relaxed) {
            let bar = bar.get_or_insert_with(|| make(look));
            bar.set_length(watch.total());
            bar.set_position(watch.done());
            bar.set_message(if watch.stopped() { "stopping" } else { doing(watch.stage()) });
        }
    }
    if let Some(bar) = bar {
        bar.finish_and_clear();
    }
}

fn make(look: Look) -> ProgressBar {
    let bar = ProgressBar::with_draw_target(None, ProgressDrawTarget::stderr());
    let template = "{msg}  {wide_bar} {human_pos} of {human_len} patients, {rate}/s, {eta} left";
    if let Ok(style) = ProgressStyle::with_template(template) {
        let style = style.with_key("rate", |state: &ProgressState, text: &mut dyn fmt::Write| {
            let _ = text.write_str(&count(state.per_sec() as u64));
        });
        bar.set_style(style.progress_chars(if look.unicode { "\u{2588}\u{2592}\u{2591}" } else { "=> " }));
    }
    bar
}

fn doing(stage: Stage) -> &'static str {
    match stage {
        Stage::Waiting => "getting ready",
        Stage::Pilot => "bracketing the percentiles",
        Stage::Patients => "simulating",
        Stage::Selecting => "picking percentiles",
        Stage::Writing => "writing tables",
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::testing;

    #[test]
    fn hands_on_what_the_work_made() {
        assert_eq!(shown(&Watch::new(), testing::look(false), || 7), 7);
    }

    #[test]
    fn the_looking_ends_with_the_work() {
        let done = AtomicBool::new(true);
        follow(&Watch::new(), testing::look(true), &done);
    }
}
