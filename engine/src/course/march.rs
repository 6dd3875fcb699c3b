//! Marches a block of patients through the timetable, one output time after the other, without storing any of them.

use multiversion::multiversion;

use super::Moment;
use super::timetable::{Fold, Timetable, Track};
use crate::kinetics::{Infused, Rates, Step, Structure};
use crate::math::{LANES, Row};
use crate::scenario::Role;

/// Distinct steps whose matrices are kept for a block; the others are computed where they are met.
pub const KEPT_STEPS: usize = 16;

/// Distinct times that an input runs whose results are kept for a block.
pub const KEPT_RUNS: usize = 8;

/// Output times that are computed at one go, so that amounts stay in registers from one to the next.
pub const AT_A_TIME: usize = 8;

/// The work of one block; belongs to a worker and is used again for the next block.
#[derive(Debug)]
pub struct March {
    structure: Structure,
    rates: Rates,
    steps: Kept<Step>,
    runs: Kept<Infused>,
    step: Step,
    fold: Step,
    infused: Infused,
    states: Vec<State>,
    /// What a unit dose leaves at once: into blood, and by mouth.
    entry: Entry,
    lag: Row,
    lagged: bool,
    shortest_lag: f64,
    longest_lag: f64,
}

/// What is kept for the most used spans of a block; the others are computed where they are met.
#[derive(Debug)]
struct Kept<T> {
    slots: Vec<Option<usize>>,
    items: Vec<T>,
    /// Spans of the items.
    spans: Vec<usize>,
}

impl<T: Clone + Default> Kept<T> {
    /// Of spans used more than once, the `most` most used; ties go to the earlier one.
    fn new(uses: &[usize], most: usize) -> Self {
        let mut spans: Vec<usize> = (0..uses.len()).filter(|&span| uses[span] > 1).collect();
        spans.sort_by_key(|&span| std::cmp::Reverse(uses[span]));
        spans.truncate(most);
        let mut slots = vec![None; uses.len()];
        for (slot, &span) in spans.iter().enumerate() {
            slots[span] = Some(slot);
        }
        Self { slots, items: vec![T::default(); spans.len()], spans }
    }

    fn get(&self, span: usize) -> Option<&T> {
        self.slots[span].map(|slot| &self.items[slot])
    }
}

/// What one shape has left in the body: amounts per unit given each time and per litre of central volume, so that the central one
/// is the concentration.
#[derive(Clone, Debug)]
struct State {
    gut: Row,
    central: Row,
    peripheral: Row,
    /// Concentration at the output times of one go.
    concentrations: Vec<Row>,
    /// Dose of a lagged track that has not reached every lane yet.
    pending: usize,
    started: bool,
}

/// A unit amount over the central volume, 1/L.
#[derive(Clone, Debug)]
struct Entry {
    blood: Row,
    /// Times the bioavailability.
    mouth: Row,
}

impl March {
    /// Prepares the work for a timetable.
    pub fn new(structure: Structure, timetable: &Timetable) -> Self {
        let steps = Kept::new(&timetable.uses, KEPT_STEPS);
        let runs = Kept::new(&timetable.runs, KEPT_RUNS);
        let state = State {
            gut: Row::ZERO,
            central: Row::ZERO,
            peripheral: Row::ZERO,
            concentrations: vec![Row::ZERO; AT_A_TIME],
            pending: 0,
            started: false,
        };
        Self {
            structure,
            rates: Rates::default(),
            steps,
            runs,
            step: Step::default(),
            fold: Step::default(),
            infused: Infused::default(),
            states: vec![state; timetable.tracks.len()],
            entry: Entry { blood: Row::ZERO, mouth: Row::ZERO },
            lag: Row::ZERO,
            lagged: timetable.tracks.iter().any(|track| !track.lagged.is_empty()),
            shortest_lag: 0.0,
            longest_lag: 0.0,
        }
    }

    /// Starts a block: rates, kept step matrices, empty compartments.
    ///
    /// # Panics
    /// If a parameter of the structure is missing.
    pub fn start<'a>(&mut self, timetable: &Timetable, parameter: impl Fn(Role) -> Option<&'a Row>) {
        let needed = |role| parameter(role).expect("the scenario's check made sure that the model has its parameters");
        self.rates.fill(&self.structure, needed);
        self.entry.blood = self.rates.per_volume;
        self.entry.mouth = self.rates.per_volume;
        if let Some(bioavailability) = parameter(Role::Bioavailability) {
            scale(&mut self.entry.mouth, bioavailability);
        }
        if self.lagged {
            self.lag = *needed(Role::LagTime);
            self.shortest_lag = self.lag.iter().copied().fold(f64::INFINITY, f64::min);
            self.longest_lag = self.lag.iter().copied().fold(0.0, f64::max);
        }
        for (matrix, &span) in self.steps.items.iter_mut().zip(&self.steps.spans) {
            matrix.fill(&self.structure, &self.rates, &Row::splat(timetable.spans[span]));
        }
        for (infused, &span) in self.runs.items.iter_mut().zip(&self.runs.spans) {
            infused.fill(&self.structure, &self.rates, timetable.spans[span]);
        }
        for state in &mut self.states {
            state.gut = Row::ZERO;
            state.central = Row::ZERO;
            state.peripheral = Row::ZERO;
            state.pending = 0;
            state.started = false;
        }
    }

    /// Advances every shape through the output times `range`, at most [`AT_A_TIME`]; to be called for all of them in order.
    pub fn advance(&mut self, timetable: &Timetable, range: std::ops::Range<usize>) {
        let start = range.start;
        for (track, state) in timetable.tracks.iter().zip(&mut self.states) {
            let mut index = start.max(track.first);
            while index < range.end {
                if state.started {
                    let span = timetable.steps[index - 1];
                    let mut end = index + 1;
                    let lags = (self.shortest_lag, self.longest_lag);
                    while end < range.end
                        && timetable.steps[end - 1] == span
                        && track.quiet(&timetable.moments, end - 1, state.pending, lags)
                    {
                        end += 1;
                    }
                    let matrix = if let Some(kept) = self.steps.get(span) {
                        kept
                    } else {
                        self.step.fill(&self.structure, &self.rates, &Row::splat(timetable.spans[span]));
                        &self.step
                    };
                    let State { gut, central, peripheral, concentrations, .. } = &mut *state;
                    let mut amounts = Amounts { gut, central, peripheral };
                    let rows = &mut concentrations[index - start..end - start];
                    run(track.oral, self.structure.peripheral.is_some(), matrix, &mut amounts, rows);
                    index = end - 1;
                }
                let entering = !state.started || !track.folds[index].is_empty() || !track.lagged.is_empty();
                state.started = true;
                let mut folding = Folding {
                    structure: &self.structure,
                    rates: &self.rates,
                    steps: &self.steps,
                    runs: &self.runs,
                    spans: &timetable.spans,
                    matrix: &mut self.fold,
                    infused: &mut self.infused,
                    entry: &self.entry,
                };
                for fold in &track.folds[index] {
                    folding.fold(track, fold, state);
                }
                if !track.lagged.is_empty() {
                    let lags = (self.shortest_lag, self.longest_lag);
                    folding.lagged(track, &timetable.moments, index, &self.lag, lags, state);
                }
                if entering {
                    state.concentrations[index - start] = state.central;
                }
                index += 1;
            }
        }
    }

    /// Concentration per unit amount of a shape at the output time `place` places after the first of those last advanced to; `None`
    /// before its first dose.
    pub fn concentration(&self, timetable: &Timetable, shape: usize, start: usize, place: usize) -> Option<&Row> {
        (start + place >= timetable.tracks[shape].first).then(|| &self.states[shape].concentrations[place])
    }
}

/// What folding an entry into a state needs.
struct Folding<'a> {
    structure: &'a Structure,
    rates: &'a Rates,
    steps: &'a Kept<Step>,
    runs: &'a Kept<Infused>,
    spans: &'a [f64],
    matrix: &'a mut Step,
    infused: &'a mut Infused,
    entry: &'a Entry,
}

impl Folding<'_> {
    /// The matrix of a span: kept, or computed now.
    fn of(&mut self, span: usize) -> &Step {
        if let Some(kept) = self.steps.get(span) {
            kept
        } else {
            self.matrix.fill(self.structure, self.rates, &Row::splat(self.spans[span]));
            self.matrix
        }
    }

    fn fold(&mut self, track: &Track, fold: &Fold, state: &mut State) {
        let peripheral = self.structure.peripheral.is_some();
        let entry = if track.oral { &self.entry.mouth } else { &self.entry.blood };
        match *fold {
            Fold::Dose { ago: None } if track.oral => add(&mut state.gut, entry),
            Fold::Dose { ago: None } => add(&mut state.central, entry),
            Fold::Dose { ago: Some(span) } => {
                let matrix = self.of(span);
                if track.oral {
                    add_product(&mut state.gut, entry, &matrix.gg);
                    add_product(&mut state.central, entry, &matrix.cg);
                    if peripheral {
                        add_product(&mut state.peripheral, entry, &matrix.pg);
                    }
                } else {
                    add_product(&mut state.central, entry, &matrix.cc);
                    if peripheral {
                        add_product(&mut state.peripheral, entry, &matrix.pc);
                    }
                }
            }
            Fold::Ran { ran, ago } => {
                let mut rate = *entry;
                scale(&mut rate, &Row::splat(1.0 / track.over.expect("an infusion has a length")));
                match self.runs.get(ran) {
                    Some(kept) => self.infused.clone_from(kept),
                    None => self.infused.fill(self.structure, self.rates, self.spans[ran]),
                }
                scale(&mut self.infused.central, &rate);
                scale(&mut self.infused.peripheral, &rate);
                let Some(span) = ago else {
                    add(&mut state.central, &self.infused.central);
                    if peripheral {
                        add(&mut state.peripheral, &self.infused.peripheral);
                    }
                    return;
                };
                let infused = self.infused.clone();
                let matrix = self.of(span);
                add_product(&mut state.central, &infused.central, &matrix.cc);
                if peripheral {
                    add_product(&mut state.central, &infused.peripheral, &matrix.cp);
                    add_product(&mut state.peripheral, &infused.central, &matrix.pc);
                    add_product(&mut state.peripheral, &infused.peripheral, &matrix.pp);
                }
            }
        }
    }

    /// Doses whose lag of each lane's own brings them in since the output time before.
    fn lagged(
        &mut self,
        track: &Track,
        times: &[Moment],
        index: usize,
        lag: &Row,
        (shortest, longest): (f64, f64),
        state: &mut State,
    ) {
        let now = times[index];
        let before = if index == 0 { Moment::NEVER } else { times[index - 1] };
        // Doses that have reached the last lane are done with.
        while state.pending < track.lagged.len() && longest <= before.since(track.lagged[state.pending]) {
            state.pending += 1;
        }
        for &dose in track.lagged[state.pending..].iter().take_while(|&&dose| shortest <= now.since(dose)) {
            let mut ago = Row::ZERO;
            let mut entering = Row::ZERO;
            enters(before.since(dose), now.since(dose), lag, &self.entry.mouth, &mut ago, &mut entering);
            self.matrix.fill_from_gut(self.structure, self.rates, &ago);
            add_product(&mut state.gut, &entering, &self.matrix.gg);
            add_product(&mut state.central, &entering, &self.matrix.cg);
            if self.structure.peripheral.is_some() {
                add_product(&mut state.peripheral, &entering, &self.matrix.pg);
            }
        }
    }
}

/// For each lane: how long ago a dose entered, and how much of it, if its lag ran out between the two times since the dose, the later
/// one included; else 0.
#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn enters(before: f64, now: f64, lag: &Row, entry: &Row, ago: &mut Row, entering: &mut Row) {
    for lane in 0..LANES {
        let enters = lag.0[lane] > before && lag.0[lane] <= now;
        ago.0[lane] = if enters { now - lag.0[lane] } else { 0.0 };
        entering.0[lane] = if enters { entry.0[lane] } else { 0.0 };
    }
}

/// Amounts that a run carries from one output time to the next.
struct Amounts<'a> {
    gut: &'a mut Row,
    central: &'a mut Row,
    peripheral: &'a mut Row,
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn run(gut: bool, peripheral: bool, matrix: &Step, amounts: &mut Amounts<'_>, rows: &mut [Row]) {
    match (gut, peripheral) {
        (false, false) => steps::<false, false>(matrix, amounts, rows),
        (false, true) => steps::<false, true>(matrix, amounts, rows),
        (true, false) => steps::<true, false>(matrix, amounts, rows),
        (true, true) => steps::<true, true>(matrix, amounts, rows),
    }
}

/// Lanes that go through all rows of a run together: few enough for their amounts and matrix to stay in registers.
const ABREAST: usize = 8;

/// One step for each of `rows`, which take the central amounts.
#[inline(always)]
fn steps<const GUT: bool, const PERIPHERAL: bool>(m: &Step, amounts: &mut Amounts<'_>, rows: &mut [Row]) {
    for first in (0..LANES).step_by(ABREAST) {
        let (cc, cp, cg) = (lanes(&m.cc, first), lanes(&m.cp, first), lanes(&m.cg, first));
        let (pp, pc, pg) = (lanes(&m.pp, first), lanes(&m.pc, first), lanes(&m.pg, first));
        let gg = lanes(&m.gg, first);
        let mut gut = lanes(amounts.gut, first);
        let mut central = lanes(amounts.central, first);
        let mut peripheral = lanes(amounts.peripheral, first);
        for row in &mut *rows {
            for lane in 0..ABREAST {
                let (g, c, p) = (gut[lane], central[lane], peripheral[lane]);
                let mut next = cc[lane] * c;
                if PERIPHERAL {
                    next += cp[lane] * p;
                    let kept = pp[lane] * p + pc[lane] * c;
                    peripheral[lane] = if GUT { kept + pg[lane] * g } else { kept };
                }
                if GUT {
                    next += cg[lane] * g;
                    gut[lane] = gg[lane] * g;
                }
                central[lane] = next;
            }
            row.0[first..first + ABREAST].copy_from_slice(&central);
        }
        amounts.gut.0[first..first + ABREAST].copy_from_slice(&gut);
        amounts.central.0[first..first + ABREAST].copy_from_slice(&central);
        amounts.peripheral.0[first..first + ABREAST].copy_from_slice(&peripheral);
    }
}

#[inline(always)]
fn lanes(row: &Row, first: usize) -> [f64; ABREAST] {
    row.0[first..first + ABREAST].try_into().expect("as many lanes as asked for")
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn scale(row: &mut Row, by: &Row) {
    for lane in 0..LANES {
        row.0[lane] *= by.0[lane];
    }
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn add(sum: &mut Row, row: &Row) {
    for lane in 0..LANES {
        sum.0[lane] += row.0[lane];
    }
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn add_product(sum: &mut Row, one: &Row, other: &Row) {
    for lane in 0..LANES {
        sum.0[lane] += one.0[lane] * other.0[lane];
    }
}
