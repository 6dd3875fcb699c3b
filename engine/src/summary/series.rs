//! One series: what is known of where its order statistics lie, what to count and keep to find them, and what was found.

use crate::math::{Kept, Sieve};

use super::select::{Scratch, Span, Wanted, select};

/// Edges of a window: shares are counts at or above them.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct WindowEdges {
    /// Values below are below the window.
    pub low: f64,
    /// The first number above the window.
    pub beyond: f64,
}

impl WindowEdges {
    /// Of a window `low <= value <= high`; a side that is missing is open.
    pub fn new(low: Option<f64>, high: Option<f64>) -> Self {
        Self { low: low.unwrap_or(f64::NEG_INFINITY), beyond: high.map_or(f64::NAN, f64::next_up) }
    }
}

/// Where some order statistics are expected.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Place {
    /// From the first up to but not including the second (or to infinity and with it).
    Between(f64, f64),
    /// All at one value: ties are counted, not kept.
    At(f64),
}

/// What to count and keep of a series in one pass.
#[derive(Clone, Debug)]
pub struct Search {
    sieve: Sieve,
    /// Values held at one point: edges `2 i` and `2 i + 1` after the window's.
    points: Vec<f64>,
    window: bool,
    /// Part of the patients whose values are expected to be kept.
    pub share: f64,
}

/// From here on the upper half of a value's bits orders values to a relative 1e-6; below, numbers grow sparse.
const LEAST_WIDE: f64 = 1e-300;

/// Patients below, within and above a window.
pub type Parts = [u64; 3];

impl Search {
    /// Looks in `places`, in rising order, which may touch but not overlap; `share` is the part of the values expected there.
    /// `signed` says that values may be negative, or that places must not be widened.
    pub fn new(places: &[Place], window: Option<WindowEdges>, signed: bool, share: f64) -> Self {
        let brackets: Vec<(f64, f64)> = places
            .iter()
            .filter_map(|place| match *place {
                Place::Between(low, high) => Some((low, high)),
                Place::At(_) => None,
            })
            .collect();
        let points: Vec<f64> = places
            .iter()
            .filter_map(|place| match *place {
                Place::At(value) => Some(value),
                Place::Between(..) => None,
            })
            .collect();
        let mut edges = Vec::new();
        if let Some(window) = window {
            edges.extend([window.low, window.beyond]);
        }
        edges.extend(points.iter().flat_map(|value| [*value, value.next_up()]));
        // Ties within brackets are kept out by comparing whole values; next to 0 the upper half of a value tells too little.
        let coarse = brackets.iter().any(|&(low, high)| (low > 0.0 && low < LEAST_WIDE) || high < LEAST_WIDE);
        let exact = signed || coarse || (!points.is_empty() && !brackets.is_empty());
        let sieve = if exact { Sieve::exact(&brackets, &edges) } else { Sieve::wide(&brackets, &edges) };
        Self { sieve, points, window: window.is_some(), share }
    }

    /// The sieve that a pass applies to this series.
    pub fn sieve(&self) -> &Sieve {
        &self.sieve
    }

    /// Patients below, within and above the window; `None` without one.
    pub fn parts(&self, patients: u64, kept: &[&Kept]) -> Option<Parts> {
        self.window.then(|| {
            let from = |edge: usize| kept.iter().map(|kept| kept.from_edge[edge]).sum::<u64>();
            let (low, beyond) = (from(0), from(1));
            [patients - low, low - beyond, beyond]
        })
    }

    /// Patients at each point.
    pub fn tally(&self, kept: &[&Kept]) -> Vec<u64> {
        let offset = if self.window { 2 } else { 0 };
        let from = |edge: usize| kept.iter().map(|kept| kept.from_edge[edge]).sum::<u64>();
        (0..self.points.len()).map(|point| from(offset + 2 * point) - from(offset + 2 * point + 1)).collect()
    }

    /// The order statistics of `ranks` (rising, from 0), or where each must be looked for instead.
    pub fn find(&self, patients: u64, kept: &[&Kept], ranks: &[u64], scratch: &mut Scratch) -> Vec<Found> {
        let mut found = vec![Found::Between(f64::NEG_INFINITY, f64::INFINITY, patients); ranks.len()];
        // Everything that is known, in rising order: a value and how many values lie below it.
        let mut known: Vec<(f64, u64)> = Vec::new();
        let lists: Vec<&[f64]> = kept.iter().flat_map(|kept| kept.lists()).collect();
        let (mut spans, mut wanted, mut start) = (Vec::new(), Vec::new(), 0);
        for (index, &(low, high)) in self.sieve.brackets().iter().enumerate() {
            let below = patients - kept.iter().map(|kept| kept.from_bracket[index]).sum::<u64>();
            let inside = kept.iter().map(|kept| kept.in_bracket[index]).sum::<u64>();
            let above = below + inside;
            let places = ranks.partition_point(|&rank| rank < below)..ranks.partition_point(|&rank| rank < above);
            wanted.extend(places.map(|place| Wanted { position: start + (ranks[place] - below) as usize, place }));
            spans.push(Span { low, high, start, inside: inside as usize });
            // Values are kept within brackets only, which rise.
            start += inside as usize;
            known.push((low, below));
            known.push((high, above));
        }
        select(&lists, &self.sieve, &spans, &wanted, scratch, &mut |place, value| found[place] = Found::Value(value));
        let offset = if self.window { 2 } else { 0 };
        for (index, &value) in self.points.iter().enumerate() {
            let from = |edge: usize| kept.iter().map(|kept| kept.from_edge[edge]).sum::<u64>();
            let (below, above) = (patients - from(offset + 2 * index), patients - from(offset + 2 * index + 1));
            for (rank, found) in ranks.iter().zip(&mut found) {
                if (below..above).contains(rank) {
                    *found = Found::Value(value);
                }
            }
            known.push((value, below));
            known.push((value.next_up(), above));
        }
        for (&rank, found) in ranks.iter().zip(&mut found) {
            if let Found::Between(low, high, count) = found {
                let (mut below, mut above) = (0, patients);
                for &(value, lower) in &known {
                    if lower <= rank && value > *low {
                        (*low, below) = (value, lower);
                    }
                    if lower > rank && value < *high {
                        (*high, above) = (value, lower);
                    }
                }
                *count = above - below;
            }
        }
        found
    }
}

/// An order statistic, or where it is: from the first up to but not including the second, among so many values.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Found {
    /// The value.
    Value(f64),
    /// The bracket was missed; it lies here.
    Between(f64, f64, u64),
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::math::{LANES, Row};

    /// Thousand lots of values from 0 to 10, some of them equal.
    fn rows() -> Vec<Row> {
        let mut state = 17u64;
        let mut row = || {
            let mut row = Row::ZERO;
            for lane in row.iter_mut() {
                state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
                *lane = if state >> 62 == 0 { 4.0 } else { (state >> 11) as f64 / (1u64 << 53) as f64 * 10.0 };
            }
            row
        };
        (0..20).map(|_| row()).collect()
    }

    fn pass(search: &Search, rows: &[Row]) -> Kept {
        let mut kept = search.sieve().nothing(0);
        for row in rows {
            search.sieve().sift(row, 1.0, LANES, &mut kept);
        }
        kept
    }

    #[test]
    fn a_missed_order_statistic_is_found_where_the_counts_say() {
        let rows = rows();
        let patients = (rows.len() * LANES) as u64;
        let mut sorted: Vec<f64> = rows.iter().flat_map(|row| row.0).collect();
        sorted.sort_by(f64::total_cmp);
        let ranks: Vec<u64> = (0..patients).step_by(331).collect();
        // Two places that hold next to nothing of what is wanted, one of them a point.
        for first in [vec![Place::Between(9.0, 9.1)], vec![Place::Between(1.0, 2.0), Place::At(4.0)], Vec::new()] {
            let search = Search::new(&first, Some(WindowEdges::new(Some(2.0), Some(8.0))), false, 0.1);
            let kept = pass(&search, &rows);
            let below = sorted.iter().filter(|&&value| value < 2.0).count() as u64;
            let above = sorted.iter().filter(|&&value| value > 8.0).count() as u64;
            assert_eq!(search.parts(patients, &[&kept]), Some([below, patients - below - above, above]));
            let found = search.find(patients, &[&kept], &ranks, &mut Scratch::default());
            assert!(found.iter().any(|found| matches!(found, Found::Between(..))), "{first:?} misses something");
            for (found, &rank) in found.iter().zip(&ranks) {
                let truth = sorted[rank as usize];
                match *found {
                    Found::Value(value) => assert_eq!(value, truth),
                    Found::Between(low, high, count) => {
                        assert!(low <= truth && (truth < high || high == f64::INFINITY), "{rank} in {low} to {high}");
                        let again = Search::new(&[Place::Between(low.max(0.0), high)], None, false, 1.0);
                        let kept = pass(&again, &rows);
                        assert!(kept.kept() as u64 >= count);
                        let found = again.find(patients, &[&kept], &[rank], &mut Scratch::default());
                        assert_eq!(found, [Found::Value(truth)], "rank {rank} in one more pass");
                    }
                }
            }
        }
    }
}
