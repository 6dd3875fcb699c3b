//! From a small run of the first patients to the places where a large one must look.

use super::{Place, Ranks, WindowEdges, series::Search};

/// Standard errors of the pilot by which each place is widened. A miss costs one more pass, not correctness: at 4.5 about one
/// run in a hundred has one among its 1,000 places.
const WIDTHS: f64 = 4.5;

/// Order statistics looked at within each place, to notice ties.
const PROBES: u64 = 4;

/// Which order statistics of a pilot tell where those of the whole run lie.
#[derive(Clone, Debug)]
pub struct Pilot {
    /// Ranks in the pilot, rising, from 0.
    pub ranks: Vec<u64>,
    spans: Vec<Span>,
    size: u64,
}

/// The part of the pilot's ranks round one percentile; `None` where it is open to that side.
#[derive(Clone, Copy, Debug)]
struct Span {
    low: Option<u64>,
    high: Option<u64>,
}

impl Span {
    fn probes(self, size: u64) -> impl Iterator<Item = u64> {
        let (low, high) = (self.low.unwrap_or(0), self.high.unwrap_or(size - 1));
        (0..=PROBES).map(move |probe| low + (high - low) * probe / PROBES)
    }
}

impl Pilot {
    /// A pilot of `size` patients for order statistics of `patients` patients.
    pub fn new(wanted: &[Ranks], patients: u64, size: u64) -> Self {
        let place = |rank: u64| rank as f64 / (patients - 1) as f64 * (size - 1) as f64;
        let spans: Vec<Span> = wanted
            .iter()
            .map(|ranks| {
                let first = ranks.needed().next().expect("a percentile needs at least one order statistic");
                let last = ranks.needed().last().expect("a percentile needs at least one order statistic");
                let p = ranks.probability;
                let margin = WIDTHS * (size as f64 * p * (1.0 - p)).sqrt() + 2.0;
                let (low, high) = (place(first) - margin, place(last) + margin);
                Span {
                    low: (low >= 0.0).then_some(low as u64),
                    high: (high <= (size - 1) as f64).then_some(high as u64 + 1).filter(|&rank| rank < size),
                }
            })
            .collect();
        let mut ranks: Vec<u64> = spans.iter().flat_map(|span| span.probes(size)).collect();
        ranks.sort_unstable();
        ranks.dedup();
        Self { ranks, spans, size }
    }

    /// The pilot's ranks round percentile `index`, both ends included.
    pub fn span(&self, index: usize) -> (u64, u64) {
        let span = self.spans[index];
        (span.low.unwrap_or(0), span.high.unwrap_or(self.size - 1))
    }

    /// What to search for in a series whose pilot has `values` at the pilot's ranks.
    pub fn search(&self, values: &[f64], window: Option<WindowEdges>, signed: bool) -> Search {
        let value = |rank: u64| values[self.ranks.binary_search(&rank).expect("one of the pilot's ranks")];
        let least = if signed { f64::NEG_INFINITY } else { 0.0 };
        let mut between: Vec<(f64, f64)> = Vec::new();
        let mut ties: Vec<f64> = Vec::new();
        let mut kept: Vec<(u64, u64)> = Vec::new();
        for span in &self.spans {
            let probes: Vec<f64> = span.probes(self.size).map(value).collect();
            ties.extend(probes.windows(2).filter(|pair| pair[0] == pair[1]).map(|pair| pair[0]));
            let low = span.low.map_or(least, |_| probes[0]);
            let high = span.high.map_or(f64::INFINITY, |_| probes[probes.len() - 1].next_up());
            between.push((low, high));
            if probes[0] != probes[probes.len() - 1] || span.low.is_none() || span.high.is_none() {
                kept.push((span.low.unwrap_or(0), span.high.unwrap_or(self.size - 1)));
            }
        }
        ties.sort_by(f64::total_cmp);
        ties.dedup();
        let share = union(kept.iter().map(|&(low, high)| (low as f64, high as f64 + 1.0))) / self.size as f64;
        Search::new(&places(&between, &ties), window, signed, share)
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
pub(super) fn places(between: &[(f64, f64)], ties: &[f64]) -> Vec<Place> {
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
