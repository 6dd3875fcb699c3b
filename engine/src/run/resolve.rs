//! From ranks to order statistics: a pilot brackets them, passes find them, and a miss is searched again.

use std::time::Instant;

use rayon::iter::{IndexedParallelIterator, IntoParallelIterator, IntoParallelRefMutIterator, ParallelIterator};

use super::pass::{Absorb, Aims, pass};
use super::worker::Clock;
use super::{Stage, Watch, pilot};
use crate::diagnostic::Fault;
use crate::math::Kept;
use crate::plan::{Plan, pilot_size, tiles};
use crate::scenario::Spread;
use crate::summary::{Found, Moments, Partial, Parts, Place, Ranks, Scratch, Search};

/// What is wanted of every series.
pub(super) struct Wanted<'a> {
    /// Percentiles of each signal.
    pub(super) signals: &'a [Ranks],
    /// Percentiles of each quantity of the population.
    pub(super) quantities: &'a [Ranks],
    /// Centres of the moments of each quantity; empty without moments.
    pub(super) centres: &'a [f64],
}

/// What was found.
#[derive(Default)]
pub(super) struct Answer {
    /// For each signal: the order statistics, in the order of the ranks asked for, and the parts of the window.
    pub(super) signals: Vec<Series>,
    /// For each quantity of the population.
    pub(super) quantities: Vec<Series>,
    /// For each quantity, where asked for.
    pub(super) moments: Vec<Moments>,
    /// Passes, and of them those that a miss made necessary.
    pub(super) passes: usize,
    pub(super) repeats: usize,
    /// Wall seconds in pilots and in selecting.
    pub(super) pilot: f64,
    pub(super) selecting: f64,
    pub(super) clock: Clock,
}

/// What was found of one series.
#[derive(Clone, Debug, Default)]
pub(super) struct Series {
    /// One entry a rank.
    pub(super) values: Vec<f64>,
    /// Patients below, within and above the window.
    pub(super) parts: Option<Parts>,
    /// Patients in each class.
    pub(super) tally: Vec<u64>,
}

/// A series on its way: what is still to be found and where to look.
struct Quest {
    search: Search,
    ranks: Vec<u64>,
    /// Index of each of `ranks` in the answer.
    slots: Vec<usize>,
    first: bool,
}

/// Finds what is wanted among the first `patients` patients.
pub(super) fn resolve(plan: &Plan, patients: u64, wanted: &Wanted<'_>, watch: &Watch) -> Result<Answer, Fault> {
    let mut answer = Answer::default();
    let searches = match pilot_size(patients) {
        None => None,
        Some(size) => {
            let start = Instant::now();
            let found = pilot::searches(plan, patients, size, wanted.signals, wanted.quantities, watch)?;
            answer.pilot = start.elapsed().as_secs_f64();
            Some(found)
        }
    };
    let (signal_ranks, quantity_ranks) = (ranks_of(wanted.signals), ranks_of(wanted.quantities));
    watch.enter(Stage::Patients);
    let (found_signals, found_quantities) = searches.unwrap_or_else(|| {
        let all = |least, window, signed| Search::new(&[Place::Between(least, f64::INFINITY)], window, signed, 1.0);
        (
            vec![all(0.0, plan.window, false); plan.signals()],
            vec![all(f64::NEG_INFINITY, None, true); plan.quantities()],
        )
    });
    let mut signals: Vec<Option<Quest>> =
        found_signals.into_iter().map(|search| Some(Quest::new(search, &signal_ranks))).collect();
    let mut quantities: Vec<Option<Quest>> = found_quantities
        .into_iter()
        .enumerate()
        .map(|(index, search)| match classes(plan, index) {
            None => Some(Quest::new(search, &quantity_ranks)),
            Some(classes) => {
                let places: Vec<Place> = (0..classes).map(|class| Place::At(class as f64)).collect();
                Some(Quest::new(Search::new(&places, None, true, 0.0), &[]))
            }
        })
        .collect();
    answer.signals = vec![Series { values: vec![f64::NAN; signal_ranks.len()], ..Series::default() }; signals.len()];
    answer.quantities =
        vec![Series { values: vec![f64::NAN; quantity_ranks.len()], ..Series::default() }; quantities.len()];
    let mut first = true;
    loop {
        let pending: Vec<usize> = (0..signals.len()).filter(|&index| signals[index].is_some()).collect();
        let shares: Vec<f64> =
            pending.iter().map(|&index| signals[index].as_ref().map_or(0.0, |quest| quest.search.share)).collect();
        // The quantities of the population go along with the first tile.
        let along: f64 = quantities.iter().flatten().map(|quest| quest.search.share).sum();
        let budget = plan.budget().saturating_sub((along * patients as f64 * 8.0) as u64);
        let mut rounds: Vec<Vec<usize>> = tiles(&shares, patients, plan.limits().threads, budget)
            .into_iter()
            .map(|tile| pending[tile].to_vec())
            .collect();
        if rounds.is_empty() {
            if quantities.iter().all(Option::is_none) {
                return Ok(answer);
            }
            rounds.push(Vec::new());
        }
        watch.expect(patients * rounds.len() as u64);
        for round in rounds {
            let with_moments = first && answer.passes == 0;
            let centres = if with_moments { wanted.centres } else { &[] };
            let (aims, until) = aims(plan, &signals, &round, &quantities, centres);
            // A little more than an even part: threads do not share exactly.
            let share = patients / rayon::current_num_threads() as u64 * 33 / 32;
            let sinks =
                pass(plan, patients, until, watch, &mut answer.clock, || Absorb::new(&aims, share), Absorb::count)?;
            let partials: Vec<Partial> = sinks.into_iter().map(|sink| sink.partial).collect();
            answer.passes += 1;
            answer.repeats += usize::from(!first);
            watch.enter(Stage::Selecting);
            let start = Instant::now();
            let offset = plan.signals();
            select(&partials, patients, &mut signals, 0, Some(&round), &mut answer.signals)?;
            select(&partials, patients, &mut quantities, offset, None, &mut answer.quantities)?;
            if with_moments {
                answer.moments = moments(partials);
            }
            answer.selecting += start.elapsed().as_secs_f64();
            watch.enter(Stage::Patients);
        }
        first = false;
    }
}

/// How many classes a quantity has; `None` for numbers.
fn classes(plan: &Plan, quantity: usize) -> Option<usize> {
    match &plan.scenario().population.covariates.get(quantity)?.spread {
        Spread::Classes { names, .. } => Some(names.len()),
        _ => None,
    }
}

impl Quest {
    fn new(search: Search, ranks: &[u64]) -> Self {
        Self { search, ranks: ranks.to_vec(), slots: (0..ranks.len()).collect(), first: true }
    }
}

/// What a pass looks at: the signals of its round, and the quantities that are still open; and the output time it ends before.
fn aims(
    plan: &Plan,
    signals: &[Option<Quest>],
    round: &[usize],
    quantities: &[Option<Quest>],
    centres: &[f64],
) -> (Aims, usize) {
    let times = plan.timetable.times.len();
    let mut searches = vec![None; signals.len()];
    let mut until = 0;
    for &index in round {
        searches[index] = signals[index].as_ref().map(|quest| quest.search.clone());
        until = until.max(index % times + 1);
    }
    searches.extend(quantities.iter().map(|quest| quest.as_ref().map(|quest| quest.search.clone())));
    (Aims { searches, signals: signals.len(), centres: centres.to_vec() }, until)
}

/// Finds what a pass has kept; quests that are done become `None`, missed ones get a new place to look. A place that is looked
/// at for the second time holds what is looked for, unless values are no numbers: that ends the run, which would else go on for
/// ever.
fn select(
    partials: &[Partial],
    patients: u64,
    quests: &mut [Option<Quest>],
    offset: usize,
    round: Option<&[usize]>,
    answers: &mut [Series],
) -> Result<(), Fault> {
    quests.par_iter_mut().zip(answers.par_iter_mut()).enumerate().try_for_each_init(
        Scratch::default,
        |scratch, (index, (slot, answer))| {
            if round.is_some_and(|round| round.binary_search(&index).is_err()) {
                return Ok(());
            }
            let Some(quest) = slot else { return Ok(()) };
            let kept: Vec<&Kept> = partials.iter().map(|partial| &partial.kept[offset + index]).collect();
            if quest.first {
                answer.parts = quest.search.parts(patients, &kept);
                answer.tally = quest.search.tally(&kept);
            }
            let found = quest.search.find(patients, &kept, &quest.ranks, scratch);
            let again = quest.missed(&found, answer, patients, offset > 0);
            if again.is_some() && !quest.first {
                return Err(Fault::Refused {
                    message: "some patients' values are beyond what can be reckoned with".to_owned(),
                    help: "bring amounts, volumes and rates into a sensible range".to_owned(),
                });
            }
            *slot = again;
            Ok(())
        },
    )
}

impl Quest {
    /// Takes over what was found; what was missed becomes a new quest.
    fn missed(&self, found: &[Found], answer: &mut Series, patients: u64, signed: bool) -> Option<Self> {
        let mut places: Vec<(f64, f64)> = Vec::new();
        let (mut ranks, mut slots, mut count) = (Vec::new(), Vec::new(), 0);
        for ((found, &slot), &rank) in found.iter().zip(&self.slots).zip(&self.ranks) {
            match *found {
                Found::Value(value) => answer.values[slot] = value,
                Found::Between(low, high, values) => {
                    let low = if signed { low } else { low.max(0.0) };
                    if places.last() != Some(&(low, high)) {
                        places.push((low, high));
                        count += values;
                    }
                    ranks.push(rank);
                    slots.push(slot);
                }
            }
        }
        if ranks.is_empty() {
            return None;
        }
        let places: Vec<Place> = places.iter().map(|&(low, high)| Place::Between(low, high)).collect();
        // Never widened: just outside may stand the ties of almost everyone.
        let search = Search::new(&places, None, true, count as f64 / patients as f64);
        Some(Self { search, ranks, slots, first: false })
    }
}

fn moments(partials: Vec<Partial>) -> Vec<Moments> {
    let mut all = Partial::default();
    for (index, mut partial) in partials.into_iter().enumerate() {
        partial.kept.clear();
        if index == 0 {
            all = partial;
        } else {
            all.merge(&partial);
        }
    }
    all.moments
}

/// Order statistics for a list of percentiles: the distinct ranks, rising.
pub(super) fn ranks_of(wanted: &[Ranks]) -> Vec<u64> {
    let mut ranks: Vec<u64> = wanted.iter().flat_map(Ranks::needed).collect();
    ranks.sort_unstable();
    ranks.dedup();
    ranks
}

/// Runs `work` on every index below `count`, in parallel, results in order.
pub(super) fn in_parallel<T: Send>(count: usize, work: impl Fn(usize) -> T + Sync + Send) -> Vec<T> {
    (0..count).into_par_iter().map(work).collect()
}
