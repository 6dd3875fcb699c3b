//! Marches a block of patients through the timetable, one output time after the other, without storing any of them.

use multiversion::multiversion;

use super::timetable::{Fold, Timetable, Track};
use crate::kinetics::{Infused, Rates, Step, Structure};
use crate::math::{LANES, Row};
use crate::scenario::Role;

/// Distinct steps whose matrices are kept for a block; the others are computed where they are met.
pub const KEPT_STEPS: usize = 16;

/// The work of one block; belongs to a worker and is used again for the next block.
#[derive(Debug)]
pub struct March {
    structure: Structure,
    rates: Rates,
    /// Which kept matrix a span has.
    slots: Vec<Option<usize>>,
    kept: Vec<Step>,
    /// Spans of the kept matrices.
    kept_spans: Vec<usize>,
    step: Step,
    fold: Step,
    infused: Infused,
    states: Vec<State>,
    /// What a unit dose by mouth puts into the gut.
    entry: Row,
    lag: Row,
    lagged: bool,
}

/// Amounts of one shape, per unit given each time, and the concentration that follows.
#[derive(Clone, Debug)]
struct State {
    gut: Row,
    central: Row,
    peripheral: Row,
    concentration: Row,
    /// Dose of a lagged track that has not reached every lane yet.
    pending: usize,
    started: bool,
}

impl March {
    /// Prepares the work for a timetable.
    pub fn new(structure: Structure, timetable: &Timetable) -> Self {
        // The most used spans are kept; ties go to the earlier one.
        let mut order: Vec<usize> = (0..timetable.spans.len()).filter(|&span| timetable.uses[span] > 1).collect();
        order.sort_by_key(|&span| std::cmp::Reverse(timetable.uses[span]));
        order.truncate(KEPT_STEPS);
        let mut slots = vec![None; timetable.spans.len()];
        for (slot, &span) in order.iter().enumerate() {
            slots[span] = Some(slot);
        }
        let state = State {
            gut: Row::ZERO,
            central: Row::ZERO,
            peripheral: Row::ZERO,
            concentration: Row::ZERO,
            pending: 0,
            started: false,
        };
        Self {
            structure,
            rates: Rates::default(),
            slots,
            kept: vec![Step::default(); order.len()],
            kept_spans: order,
            step: Step::default(),
            fold: Step::default(),
            infused: Infused::default(),
            states: vec![state; timetable.tracks.len()],
            entry: Row::splat(1.0),
            lag: Row::ZERO,
            lagged: timetable.tracks.iter().any(|track| !track.lagged.is_empty()),
        }
    }

    /// Starts a block: rates, kept step matrices, empty compartments.
    pub fn start<'a>(&mut self, timetable: &Timetable, parameter: impl Fn(Role) -> Option<&'a Row>) {
        let needed = |role| parameter(role).expect("the scenario's check made sure that the model has its parameters");
        self.rates.fill(&self.structure, needed);
        self.entry = parameter(Role::Bioavailability).copied().unwrap_or(Row::splat(1.0));
        if self.lagged {
            self.lag = *needed(Role::LagTime);
        }
        for (matrix, &span) in self.kept.iter_mut().zip(&self.kept_spans) {
            matrix.fill(&self.structure, &self.rates, &Row::splat(timetable.spans[span]));
        }
        for state in &mut self.states {
            state.gut = Row::ZERO;
            state.central = Row::ZERO;
            state.peripheral = Row::ZERO;
            state.concentration = Row::ZERO;
            state.pending = 0;
            state.started = false;
        }
    }

    /// Advances every shape to output time `index`; to be called for each in order.
    pub fn advance(&mut self, timetable: &Timetable, index: usize) {
        let step = (index > 0).then(|| timetable.steps[index - 1]);
        let mut here: Option<usize> = None;
        let per_volume = &self.rates.per_volume;
        for (track, state) in timetable.tracks.iter().zip(&mut self.states) {
            if index < track.first {
                continue;
            }
            if let (Some(span), true) = (step, state.started) {
                let matrix = match self.slots[span] {
                    Some(slot) => &self.kept[slot],
                    None => {
                        if here != Some(span) {
                            self.step.fill(&self.structure, &self.rates, &Row::splat(timetable.spans[span]));
                            here = Some(span);
                        }
                        &self.step
                    }
                };
                match (track.oral, self.structure.peripheral.is_some()) {
                    (false, false) => advance_c(matrix, per_volume, state),
                    (true, false) => advance_gc(matrix, per_volume, state),
                    (false, true) => advance_cp(matrix, per_volume, state),
                    (true, true) => advance_gcp(matrix, per_volume, state),
                }
            }
            state.started = true;
            let mut folding = Folding {
                structure: &self.structure,
                rates: &self.rates,
                slots: &self.slots,
                kept: &self.kept,
                spans: &timetable.spans,
                matrix: &mut self.fold,
                infused: &mut self.infused,
                entry: &self.entry,
            };
            let mut entered = !track.folds[index].is_empty();
            for fold in &track.folds[index] {
                folding.fold(track, fold, state);
            }
            if !track.lagged.is_empty() {
                entered |= folding.lagged(track, &timetable.times, index, &self.lag, state);
            }
            if entered {
                multiply(&state.central, per_volume, &mut state.concentration);
            }
        }
    }

    /// Concentration per unit amount of a shape at the output time last advanced to; `None` before its first dose.
    pub fn concentration(&self, shape: usize) -> Option<&Row> {
        self.states[shape].started.then_some(&self.states[shape].concentration)
    }

    /// Amounts per unit amount in gut, central and peripheral compartment of a shape.
    pub fn amounts(&self, shape: usize) -> [&Row; 3] {
        let state = &self.states[shape];
        [&state.gut, &state.central, &state.peripheral]
    }
}

/// What folding an entry into a state needs.
struct Folding<'a> {
    structure: &'a Structure,
    rates: &'a Rates,
    slots: &'a [Option<usize>],
    kept: &'a [Step],
    spans: &'a [f64],
    matrix: &'a mut Step,
    infused: &'a mut Infused,
    entry: &'a Row,
}

impl Folding<'_> {
    /// The matrix of a span: kept, or computed now.
    fn of(&mut self, span: usize) -> &Step {
        if let Some(slot) = self.slots[span] {
            &self.kept[slot]
        } else {
            self.matrix.fill(self.structure, self.rates, &Row::splat(self.spans[span]));
            self.matrix
        }
    }

    fn fold(&mut self, track: &Track, fold: &Fold, state: &mut State) {
        let peripheral = self.structure.peripheral.is_some();
        match *fold {
            Fold::Dose { ago: None } if track.oral => add(&mut state.gut, self.entry),
            Fold::Dose { ago: None } => add(&mut state.central, &Row::splat(1.0)),
            Fold::Dose { ago: Some(span) } => {
                let entry = self.entry;
                let matrix = self.of(span);
                if track.oral {
                    add_product(&mut state.gut, entry, &matrix.gg);
                    add_product(&mut state.central, entry, &matrix.cg);
                    if peripheral {
                        add_product(&mut state.peripheral, entry, &matrix.pg);
                    }
                } else {
                    add(&mut state.central, &matrix.cc);
                    if peripheral {
                        add(&mut state.peripheral, &matrix.pc);
                    }
                }
            }
            Fold::Ran { ran, ago } => {
                self.infused.fill(self.structure, self.rates, self.spans[ran]);
                let rate = Row::splat(1.0 / track.over.expect("an infusion has a length"));
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
    /// Says whether any may have.
    fn lagged(&mut self, track: &Track, times: &[f64], index: usize, lag: &Row, state: &mut State) -> bool {
        let now = times[index];
        let before = if index == 0 { f64::NEG_INFINITY } else { times[index - 1] };
        let (shortest, longest) = lag.iter().fold((f64::INFINITY, 0.0f64), |(a, b), &l| (a.min(l), b.max(l)));
        // Doses that have reached the last lane are done with.
        while state.pending < track.lagged.len() && track.lagged[state.pending] + longest <= before {
            state.pending += 1;
        }
        let mut entered = false;
        for &dose in track.lagged[state.pending..].iter().take_while(|&&dose| dose + shortest <= now) {
            entered = true;
            let mut ago = Row::ZERO;
            let mut entering = Row::ZERO;
            enters(dose, lag, before, now, self.entry, &mut ago, &mut entering);
            self.matrix.fill_from_gut(self.structure, self.rates, &ago);
            add_product(&mut state.gut, &entering, &self.matrix.gg);
            add_product(&mut state.central, &entering, &self.matrix.cg);
            if self.structure.peripheral.is_some() {
                add_product(&mut state.peripheral, &entering, &self.matrix.pg);
            }
        }
        entered
    }
}

/// For each lane: how long ago a dose entered, and how much of it, if it entered after `before` and until `now`; else 0.
#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn enters(dose: f64, lag: &Row, before: f64, now: f64, entry: &Row, ago: &mut Row, entering: &mut Row) {
    for lane in 0..LANES {
        let time = dose + lag.0[lane];
        let enters = time > before && time <= now;
        ago.0[lane] = if enters { now - time } else { 0.0 };
        entering.0[lane] = if enters { entry.0[lane] } else { 0.0 };
    }
}

// The loops below read all they need before they write: rows lie 2 KiB apart, and a load that follows a store to the same place in
// another page waits for it.

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn advance_c(m: &Step, per_volume: &Row, state: &mut State) {
    for lane in 0..LANES {
        let central = m.cc.0[lane] * state.central.0[lane];
        let concentration = central * per_volume.0[lane];
        state.central.0[lane] = central;
        state.concentration.0[lane] = concentration;
    }
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn advance_gc(m: &Step, per_volume: &Row, state: &mut State) {
    for lane in 0..LANES {
        let (g, c) = (state.gut.0[lane], state.central.0[lane]);
        let gut = m.gg.0[lane] * g;
        let central = m.cc.0[lane] * c + m.cg.0[lane] * g;
        let concentration = central * per_volume.0[lane];
        state.gut.0[lane] = gut;
        state.central.0[lane] = central;
        state.concentration.0[lane] = concentration;
    }
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn advance_cp(m: &Step, per_volume: &Row, state: &mut State) {
    for lane in 0..LANES {
        let (c, p) = (state.central.0[lane], state.peripheral.0[lane]);
        let central = m.cc.0[lane] * c + m.cp.0[lane] * p;
        let peripheral = m.pp.0[lane] * p + m.pc.0[lane] * c;
        let concentration = central * per_volume.0[lane];
        state.central.0[lane] = central;
        state.peripheral.0[lane] = peripheral;
        state.concentration.0[lane] = concentration;
    }
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn advance_gcp(m: &Step, per_volume: &Row, state: &mut State) {
    for lane in 0..LANES {
        let (g, c, p) = (state.gut.0[lane], state.central.0[lane], state.peripheral.0[lane]);
        let gut = m.gg.0[lane] * g;
        let central = (m.cc.0[lane] * c + m.cp.0[lane] * p) + m.cg.0[lane] * g;
        let peripheral = (m.pp.0[lane] * p + m.pc.0[lane] * c) + m.pg.0[lane] * g;
        let concentration = central * per_volume.0[lane];
        state.gut.0[lane] = gut;
        state.central.0[lane] = central;
        state.peripheral.0[lane] = peripheral;
        state.concentration.0[lane] = concentration;
    }
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn multiply(one: &Row, other: &Row, product: &mut Row) {
    for lane in 0..LANES {
        product.0[lane] = one.0[lane] * other.0[lane];
    }
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
