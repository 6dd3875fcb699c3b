//! Picking several order statistics out of unordered values.
//!
//! A span of values whose ends and number are known says about where its order statistics lie, as if they were evenly spread. One
//! pass over all values picks out what lies near those places in every span; what is left is narrowed again, and at last ordered.
//! In the manner of Floyd and Rivest 1975 (Commun ACM 18:165-172; from memory), with interpolation instead of a sample.

use crate::math::{Kept, Sieve};

/// So few values are ordered as they are.
const SMALL: usize = 1024;

/// Up to so many values are brought together first.
const JOINED: usize = 1 << 15;

/// How often values are narrowed at most.
const STEPS: usize = 4;

/// Standard deviations of the order statistics of evenly spread values by which a place is widened.
const WIDTHS: f64 = 4.0;

/// How far a span's distribution may bend away from the straight line, at its middle a quarter of this.
const BEND: f64 = 0.1;

/// Buffers to be used again.
#[derive(Debug, Default)]
pub struct Scratch {
    kept: Kept,
    before: Kept,
    all: Vec<f64>,
    keys: Vec<u64>,
}

/// Some values that are next to each other in order: from `low` up to but not including `high`, or to infinity and with it.
#[derive(Clone, Copy, Debug)]
pub(super) struct Span {
    pub(super) low: f64,
    pub(super) high: f64,
    /// How many values lie below, of those there are to pick from.
    pub(super) start: usize,
    pub(super) inside: usize,
}

/// The value with so many below it among those there are to pick from.
#[derive(Clone, Copy, Debug)]
pub(super) struct Wanted {
    pub(super) position: usize,
    /// Index of the answer.
    pub(super) place: usize,
}

/// Hands every value of `wanted` (rising, each within one of the rising `spans` of `lists`) to `found` with its place. `kind` is a
/// sieve for such values.
pub(super) fn select(
    lists: &[&[f64]],
    kind: &Sieve,
    spans: &[Span],
    wanted: &[Wanted],
    scratch: &mut Scratch,
    found: &mut impl FnMut(usize, f64),
) {
    if wanted.is_empty() {
        return;
    }
    let total: usize = lists.iter().map(|list| list.len()).sum();
    if total <= JOINED && lists.len() > 1 {
        // Many short lists are mostly remainders, which are sifted one by one.
        let mut all = std::mem::take(&mut scratch.all);
        all.clear();
        for list in lists {
            all.extend_from_slice(list);
        }
        select(&[&all], kind, spans, wanted, scratch, found);
        scratch.all = all;
        return;
    }
    let mut missed = Vec::new();
    let sieve = kind.like(&windows(spans, wanted, true));
    let (mut inner, mut left) = narrow(lists, &sieve, wanted, &mut scratch.kept, &mut missed);
    for _ in 1..STEPS {
        if scratch.kept.kept() <= SMALL {
            break;
        }
        std::mem::swap(&mut scratch.kept, &mut scratch.before);
        let sieve = kind.like(&windows(&inner, &left, false));
        let lists: Vec<&[f64]> = scratch.before.lists().collect();
        (inner, left) = narrow(&lists, &sieve, &left, &mut scratch.kept, &mut missed);
    }
    order(&scratch.kept, &left, &mut scratch.keys, found);
    // What was not where it was expected is looked for in the whole of its span.
    missed.sort_unstable();
    let missed: Vec<Wanted> =
        wanted.iter().copied().filter(|wanted| missed.binary_search(&wanted.place).is_ok()).collect();
    for missed in missed.chunk_by(|one, other| span_of(spans, *one) == span_of(spans, *other)) {
        let Span { low, high, .. } = spans[span_of(spans, missed[0])];
        let (_, left) = narrow(lists, &kind.like(&[(low, high)]), missed, &mut scratch.kept, &mut Vec::new());
        order(&scratch.kept, &left, &mut scratch.keys, found);
    }
}

fn span_of(spans: &[Span], wanted: Wanted) -> usize {
    spans.partition_point(|span| span.start <= wanted.position) - 1
}

/// Where to look: in one window a span if `joined`, else near every wanted value.
fn windows(spans: &[Span], wanted: &[Wanted], joined: bool) -> Vec<(f64, f64)> {
    let mut windows: Vec<(f64, f64)> = Vec::new();
    for near in wanted.chunk_by(|one, other| joined && span_of(spans, *one) == span_of(spans, *other)) {
        let span = spans[span_of(spans, near[0])];
        let (low, high) = span.window(near[0].position, near[near.len() - 1].position);
        match windows.last_mut() {
            Some(last) if low <= last.1 => last.1 = last.1.max(high),
            _ => windows.push((low, high)),
        }
    }
    windows
}

impl Span {
    /// Where the values from position `first` to `last` are expected.
    fn window(&self, first: usize, last: usize) -> (f64, f64) {
        let width = self.high - self.low;
        if !width.is_finite() {
            return (self.low, self.high);
        }
        let size = self.inside as f64;
        let at = |position: usize, side: f64| {
            let part = (position - self.start) as f64 + 0.5;
            let spread = part * (1.0 - part / size);
            part + side * (WIDTHS * spread.sqrt() + BEND * spread + 2.0)
        };
        let (from, to) = (at(first, -1.0), at(last, 1.0));
        let low = if from <= 0.0 { self.low } else { self.low + width * (from / size) };
        let high = if to >= size { self.high } else { self.low + width * (to / size) };
        (low, high.max(low))
    }
}

/// Keeps what lies in the brackets of `sieve`; returns these as spans and what is wanted within them, both by position among what
/// was kept. Places of what does not lie there are added to `missed`.
fn narrow(
    lists: &[&[f64]],
    sieve: &Sieve,
    wanted: &[Wanted],
    kept: &mut Kept,
    missed: &mut Vec<usize>,
) -> (Vec<Span>, Vec<Wanted>) {
    sieve.empty(kept);
    for list in lists {
        sieve.sift_list(list, kept);
    }
    let total: usize = lists.iter().map(|list| list.len()).sum();
    let (mut spans, mut left) = (Vec::new(), Vec::new());
    let mut wanted = wanted.iter().copied().peekable();
    let mut start = 0;
    for (index, &(low, high)) in sieve.brackets().iter().enumerate() {
        let (below, inside) = (total - kept.from_bracket[index] as usize, kept.in_bracket[index] as usize);
        while let Some(before) = wanted.next_if(|wanted| wanted.position < below) {
            missed.push(before.place);
        }
        while let Some(within) = wanted.next_if(|wanted| wanted.position < below + inside) {
            left.push(Wanted { position: within.position - below + start, ..within });
        }
        spans.push(Span { low, high, start, inside });
        start += inside;
    }
    missed.extend(wanted.map(|after| after.place));
    (spans, left)
}

/// Orders as much of `values` as is needed.
fn order(values: &Kept, wanted: &[Wanted], keys: &mut Vec<u64>, found: &mut impl FnMut(usize, f64)) {
    keys.clear();
    keys.extend(values.lists().flatten().map(|&value| order_key(value)));
    let positions: Vec<usize> = wanted.iter().map(|wanted| wanted.position).collect();
    select_from(keys, 0, &positions, 0, &mut |index, key| found(wanted[index].place, from_order_key(key)));
}

/// Maps a value to an integer that orders as the value does (negative zero below zero).
#[inline(always)]
fn order_key(value: f64) -> u64 {
    let bits = value.to_bits();
    bits ^ ((bits.cast_signed() >> 63).cast_unsigned() | (1 << 63))
}

/// The value of an [`order_key`].
#[inline(always)]
fn from_order_key(key: u64) -> f64 {
    let mask = if key >> 63 == 1 { 1 << 63 } else { u64::MAX };
    f64::from_bits(key ^ mask)
}

/// Hands the element of each of `ranks` (rising, less `offset` below the length) to `found`, reordering `keys`.
fn select_from(keys: &mut [u64], offset: usize, ranks: &[usize], first: usize, found: &mut impl FnMut(usize, u64)) {
    if ranks.is_empty() {
        return;
    }
    let middle = ranks.len() / 2;
    let rank = ranks[middle] - offset;
    let (left, &mut key, right) = keys.select_nth_unstable(rank);
    let lower = ranks[..middle].partition_point(|&r| r < ranks[middle]);
    select_from(left, offset, &ranks[..lower], first, found);
    for same in lower..=middle {
        found(first + same, key);
    }
    let upper = middle + 1 + ranks[middle + 1..].partition_point(|&r| r == ranks[middle]);
    for same in middle + 1..upper {
        found(first + same, key);
    }
    select_from(right, offset + rank + 1, &ranks[upper..], first + upper, found);
}

#[cfg(test)]
mod tests {
    use super::*;

    fn values(count: usize) -> Vec<f64> {
        let mut state = 3u64;
        (0..count)
            .map(|_| {
                state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1);
                (state >> 40) as f64
            })
            .collect()
    }

    /// Selects some positions of `all`, of which only what lies within `brackets` is there to pick from.
    fn check(all: &[f64], brackets: &[(f64, f64)], kind: &Sieve) {
        let within =
            |value: f64| brackets.iter().any(|&(low, high)| value >= low && (value < high || high.is_infinite()));
        let listed: Vec<f64> = all.iter().copied().filter(|&value| within(value)).collect();
        let mut sorted = listed.clone();
        sorted.sort_by(f64::total_cmp);
        let position = |value: f64| sorted.partition_point(|&other| other < value);
        let spans: Vec<Span> = brackets
            .iter()
            .map(|&(low, high)| {
                let start = position(low);
                let end = if high.is_infinite() { sorted.len() } else { position(high) };
                Span { low, high, start, inside: end - start }
            })
            .collect();
        let mut positions: Vec<usize> = Vec::new();
        for span in &spans {
            let picks = [0, 0, 1, span.inside / 3, span.inside / 3 + 1, span.inside / 2, span.inside.saturating_sub(1)];
            positions.extend(picks.iter().filter(|&&pick| pick < span.inside).map(|pick| span.start + pick));
        }
        positions.sort_unstable();
        let wanted: Vec<Wanted> =
            positions.iter().enumerate().map(|(place, &position)| Wanted { position, place }).collect();
        let mut found = vec![f64::NAN; wanted.len()];
        let (one, other) = listed.split_at(listed.len() / 3);
        select(&[one, other], kind, &spans, &wanted, &mut Scratch::default(), &mut |place, value| found[place] = value);
        assert_eq!(found, positions.iter().map(|&position| sorted[position]).collect::<Vec<_>>());
    }

    #[test]
    fn selects_what_sorting_would() {
        let bend: [fn(f64) -> f64; 5] = [
            |value| value,
            |value| value * value * value,
            // Two clusters, steps, and all alike.
            |value| if value < 0.3 { 0.2 + 1e-6 * value } else { 0.9 + 1e-3 * value },
            |value| (value * 20.0).floor() / 20.0,
            |_| 0.5,
        ];
        for count in [1, 10, 1000, 5000, 40_000] {
            for bend in bend {
                let all: Vec<f64> = values(count).iter().map(|value| bend(value / 16_777_216.0)).collect();
                let wide = Sieve::wide(&[], &[]);
                check(&all, &[(0.0, f64::INFINITY)], &wide);
                check(&all, &[(0.0, 0.125), (0.1875, 0.25), (0.25, 0.5), (0.5, 0.5), (0.75, f64::INFINITY)], &wide);
                let signed: Vec<f64> = all.iter().map(|value| value - 0.4).collect();
                check(&signed, &[(f64::NEG_INFINITY, -0.2), (-0.1, 0.1), (0.1, 0.3)], &Sieve::exact(&[], &[]));
            }
        }
    }

    #[test]
    fn keys_order_as_values_do() {
        let values = [f64::NEG_INFINITY, -1.5, -1e-300, -0.0, 0.0, 1e-310, 2.0, f64::INFINITY];
        for pair in values.windows(2) {
            assert!(order_key(pair[0]) < order_key(pair[1]));
        }
        for value in values {
            assert_eq!(from_order_key(order_key(value)).to_bits(), value.to_bits());
        }
    }
}
