//! When what happens, for every shape at once: between two output times the state advances by one step, and what entered
//! in between is folded in, decayed by the rest of the step.

use num_traits::Zero;

use super::Moment;
use crate::dosing::{Protocol, Shape};
use crate::quantity::{Exact, to_f64};
use crate::scenario::Route;

/// Index of a distinct length of time, so that equal lengths share their exponentials.
pub type Span = usize;

/// Something that entered since the output time before.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Fold {
    /// A unit amount, this long ago; `None` is at the output time itself.
    Dose {
        /// Since it entered.
        ago: Option<Span>,
    },
    /// A constant input that ran for `ran`, and ended this long ago; `None` where it still runs or just ended.
    Ran {
        /// How long it ran since the output time before.
        ran: Span,
        /// Since it ended.
        ago: Option<Span>,
    },
}

/// What happens to one shape up to each output time.
#[derive(Clone, Debug)]
pub struct Track {
    /// For each output time, what entered since the one before.
    pub folds: Vec<Vec<Fold>>,
    /// Nominal dose times in h, for lanes whose lag moves them; empty where nothing is lagged.
    pub lagged: Vec<Moment>,
    /// First output time at which anything can have entered.
    pub first: usize,
    /// Whether it goes through the gut.
    pub oral: bool,
    /// Length of the input, for infusions: the unit amount over it is the rate.
    pub over: Option<f64>,
}

impl Track {
    /// Whether nothing enters at output time `index`, by the shortest and the longest lag of a block and the first dose that is not
    /// done with.
    pub(super) fn quiet(
        &self,
        times: &[Moment],
        index: usize,
        pending: usize,
        (shortest, longest): (f64, f64),
    ) -> bool {
        let before = if index == 0 { Moment::NEVER } else { times[index - 1] };
        self.folds[index].is_empty()
            && !self.lagged[pending.min(self.lagged.len())..]
                .iter()
                .take_while(|&&dose| shortest <= times[index].since(dose))
                .any(|&dose| longest > before.since(dose))
    }
}

/// The whole schedule.
#[derive(Clone, Debug)]
pub struct Timetable {
    /// Output times in h.
    pub times: Vec<f64>,
    /// The same to more digits.
    pub moments: Vec<Moment>,
    /// The step that leads to each output time but the first.
    pub steps: Vec<Span>,
    /// The distinct lengths of time, in h.
    pub spans: Vec<f64>,
    /// How often each is used as a step or since a dose.
    pub uses: Vec<usize>,
    /// How often each is used as the time that an input ran.
    pub runs: Vec<usize>,
    /// One track a shape.
    pub tracks: Vec<Track>,
}

struct Spans {
    exact: std::collections::BTreeMap<Exact, Span>,
    uses: Vec<usize>,
    runs: Vec<usize>,
}

impl Spans {
    fn find(&mut self, length: &Exact) -> Span {
        let next = self.uses.len();
        let span = *self.exact.entry(length.clone()).or_insert(next);
        if span == next {
            self.uses.push(0);
            self.runs.push(0);
        }
        span
    }

    fn of(&mut self, length: &Exact) -> Span {
        let span = self.find(length);
        self.uses[span] += 1;
        span
    }

    fn ran(&mut self, length: &Exact) -> Span {
        let span = self.find(length);
        self.runs[span] += 1;
        span
    }

    fn ago(&mut self, length: &Exact) -> Option<Span> {
        (!length.is_zero()).then(|| self.of(length))
    }
}

impl Timetable {
    /// Works out the schedule of some shapes at some output times; `lagged` says that oral doses have a lag of each
    /// patient's own.
    pub fn new(protocol: &Protocol, times: &[Exact], lagged: bool) -> Self {
        let mut spans = Spans { exact: std::collections::BTreeMap::new(), uses: Vec::new(), runs: Vec::new() };
        let steps = times.windows(2).map(|pair| spans.of(&(&pair[1] - &pair[0]))).collect();
        let tracks = protocol.shapes.iter().map(|shape| track(shape, times, lagged, &mut spans)).collect();
        let mut lengths = vec![0.0; spans.uses.len()];
        for (length, span) in &spans.exact {
            lengths[*span] = to_f64(length);
        }
        Self {
            times: times.iter().map(to_f64).collect(),
            moments: times.iter().map(Moment::new).collect(),
            steps,
            spans: lengths,
            uses: spans.uses,
            runs: spans.runs,
            tracks,
        }
    }
}

fn track(shape: &Shape, times: &[Exact], lagged: bool, spans: &mut Spans) -> Track {
    let mut folds = vec![Vec::new(); times.len()];
    let oral = shape.route == Route::Oral;
    let first = times.iter().position(|time| *time >= shape.times[0]).unwrap_or(times.len());
    let mut over = None;
    match &shape.route {
        Route::Oral if lagged => {
            let lagged = shape.times.iter().map(Moment::new).collect();
            return Track { folds, lagged, first, oral, over };
        }
        Route::Oral | Route::Bolus => {
            for dose in &shape.times {
                let index = times.partition_point(|time| time < dose);
                if index < times.len() {
                    folds[index].push(Fold::Dose { ago: spans.ago(&(&times[index] - dose)) });
                }
            }
        }
        Route::Infusion { over: length } => {
            over = Some(to_f64(length));
            for start in &shape.times {
                let end = start + length;
                // The first output time after the start sees the first part.
                let mut index = times.partition_point(|time| time <= start);
                let mut from = start.clone();
                while index < times.len() && from < end {
                    let until = if times[index] < end { &times[index] } else { &end };
                    let ran = spans.ran(&(until - &from));
                    folds[index].push(Fold::Ran { ran, ago: spans.ago(&(&times[index] - until)) });
                    from = until.clone();
                    index += 1;
                }
            }
        }
    }
    Track { folds, lagged: Vec::new(), first, oral, over }
}
