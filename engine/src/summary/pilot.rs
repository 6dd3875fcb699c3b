//! From the first patients to the places where a run over all of them must look.

use super::{Cells, Place, Ranks, WindowEdges, series::Search};

/// Standard errors of the pilot by which each place is widened. A miss costs one more pass, not correctness: at 4.5 about one
/// run in a hundred has one among its 1,000 places.
const WIDTHS: f64 = 4.5;

/// A value that more than one in so many share is a tie.
const TIES: usize = 256;

/// Where in a pilot of some size the order statistics of a run lie, give or take the pilot's own error.
#[derive(Clone, Debug)]
pub struct Pilot {
    spans: Vec<(f64, f64)>,
    size: u64,
}

impl Pilot {
    /// A pilot of `size` patients for the order statistics of `patients` patients.
    ///
    /// # Panics
    /// Never: every percentile has an order statistic.
    pub fn new(wanted: &[Ranks], patients: u64, size: u64) -> Self {
        let place = |rank: u64| rank as f64 / (patients - 1) as f64 * (size - 1) as f64;
        let spans = wanted
            .iter()
            .map(|ranks| {
                let first = ranks.needed().next().expect("a percentile needs at least one order statistic");
                let last = ranks.needed().last().expect("a percentile needs at least one order statistic");
                let p = ranks.probability;
                let margin = WIDTHS * (size as f64 * p * (1.0 - p)).sqrt() + 2.0;
                (place(first) - margin, place(last) + margin)
            })
            .collect();
        Self { spans, size }
    }

    /// What to search for in a series of non-negative values: `sample` are its first values, sorted, which show ties;
    /// `histogram` is of the whole pilot.
    pub fn search(&self, sample: &[f64], cells: Cells, histogram: &[u32], window: Option<WindowEdges>) -> Search {
        let at = |place: f64| if place < 0.0 { None } else { cells.value(histogram, place) };
        self.place(sample, &at, 0.0, window, false)
    }

    /// What to search for in a series of values of any sign, whose whole pilot is `sorted`.
    pub fn search_sorted(&self, sorted: &[f64]) -> Search {
        let at = |place: f64| if place < 0.0 { None } else { sorted.get(place.ceil() as usize).copied() };
        self.place(sorted, &at, f64::NEG_INFINITY, None, true)
    }

    fn place(
        &self,
        sorted: &[f64],
        at: &impl Fn(f64) -> Option<f64>,
        least: f64,
        window: Option<WindowEdges>,
        signed: bool,
    ) -> Search {
        if let (Some(first), Some(last)) = (sorted.first(), sorted.last())
            && first == last
        {
            // Everyone alike, as before the first dose or without variability.
            return Search::new(&[Place::At(*first)], window, signed, 0.0);
        }
        // Values that few share are kept as any other: every tie costs comparisons, however rare it is.
        let few = (sorted.len() / TIES).max(1);
        let mut ties: Vec<f64> = sorted.windows(few + 1).filter(|run| run[0] == run[few]).map(|run| run[0]).collect();
        ties.dedup();
        let between: Vec<(f64, f64)> = self
            .spans
            .iter()
            .map(|&(low, high)| (at(low).unwrap_or(least), at(high).map_or(f64::INFINITY, f64::next_up)))
            .collect();
        let size = self.size as f64;
        let share = union(self.spans.iter().zip(&between).map(|(&(low, high), &(from, to))| {
            let low = if from == least { 0.0 } else { low };
            (low, if to == f64::INFINITY { size } else { high })
        }));
        Search::new(&places(&between, &ties), window, signed, (share / size).min(1.0))
    }
}

/// Total length of some intervals, overlaps counted once; they come in rising order of their starts.
fn union(intervals: impl Iterator<Item = (f64, f64)>) -> f64 {
    let (mut total, mut end) = (0.0, 0.0f64);
    for (low, high) in intervals {
        total += (high - low.max(end)).max(0.0);
        end = end.max(high);
    }
    total
}

/// Intervals with the points of ties cut out of them, in rising order.
fn places(between: &[(f64, f64)], ties: &[f64]) -> Vec<Place> {
    let mut joined: Vec<(f64, f64)> = Vec::new();
    let mut sorted = between.to_vec();
    sorted.sort_by(|a, b| a.0.total_cmp(&b.0));
    for (low, high) in sorted {
        match joined.last_mut() {
            Some(last) if low <= last.1 => last.1 = last.1.max(high),
            _ => joined.push((low, high)),
        }
    }
    let mut out = Vec::new();
    for (low, high) in joined {
        let mut start = low;
        for &tie in ties.iter().filter(|&&tie| low <= tie && tie < high) {
            if start < tie {
                out.push(Place::Between(start, tie));
            }
            out.push(Place::At(tie));
            start = tie.next_up();
        }
        if start < high {
            out.push(Place::Between(start, high));
        }
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ties_are_cut_out() {
        let got = places(&[(1.0, 3.0), (2.0, 5.0), (7.0, 7.0f64.next_up())], &[2.5, 7.0]);
        let expected =
            [Place::Between(1.0, 2.5), Place::At(2.5), Place::Between(2.5f64.next_up(), 5.0), Place::At(7.0)];
        assert_eq!(got, expected);
    }

    #[test]
    fn overlaps_count_once() {
        assert_eq!(union([(0.0, 2.0), (1.0, 3.0), (5.0, 6.0)].into_iter()), 4.0);
    }
}
