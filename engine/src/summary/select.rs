//! Picking several neighbouring order statistics out of unordered values.
//!
//! In the manner of Floyd and Rivest 1975 (Commun ACM 18:165-172; from memory): a small sample says between which two values the
//! wanted ranks must lie, one pass picks those out, and only they are ordered.

use crate::math::narrow;

/// Lists shorter than this are ordered as they are.
const SMALL: usize = 1024;

/// Standard errors of the sample by which the picked part is widened.
const WIDTHS: f64 = 3.5;

/// Buffers to be used again.
#[derive(Debug, Default)]
pub struct Scratch {
    sample: Vec<f64>,
    picked: Vec<f64>,
    keys: Vec<u64>,
}

/// The values from `low` up to but not including `high`: `inside` of them, and `from` at or above `low`.
#[derive(Clone, Copy, Debug)]
pub(super) struct Bracket {
    pub(super) low: f64,
    pub(super) high: f64,
    pub(super) inside: usize,
    pub(super) from: usize,
}

/// Hands the value of each of `ranks` (rising, counted from 0 within the bracket) to `found`.
pub(super) fn select(
    lists: &[&[f64]],
    bracket: Bracket,
    ranks: &[usize],
    scratch: &mut Scratch,
    found: &mut impl FnMut(usize, f64),
) {
    let (Some(&first), Some(&last)) = (ranks.first(), ranks.last()) else { return };
    let picked = part(lists, bracket, first, last, scratch)
        .filter(|&(skipped, count)| skipped <= first && last < skipped + count);
    let skipped = picked.map_or_else(
        || {
            scratch.picked.clear();
            for values in lists {
                narrow(values, bracket.low, bracket.high, &mut scratch.picked);
            }
            0
        },
        |(skipped, _)| skipped,
    );
    scratch.keys.clear();
    scratch.keys.extend(scratch.picked.iter().map(|&value| order_key(value)));
    let ranks: Vec<usize> = ranks.iter().map(|rank| rank - skipped).collect();
    select_from(&mut scratch.keys, 0, &ranks, 0, &mut |place, key| found(place, from_order_key(key)));
}

/// Picks the part of a bracket where the ranks from `first` to `last` are expected; returns how many of the bracket's values lie
/// below that part and how many in it. `None` where the bracket is small enough as it is.
fn part(
    lists: &[&[f64]],
    bracket: Bracket,
    first: usize,
    last: usize,
    scratch: &mut Scratch,
) -> Option<(usize, usize)> {
    if bracket.inside < SMALL {
        return None;
    }
    // The values stand in the order of the patients, who are alike: the first ones are a sample.
    let total: usize = lists.iter().map(|values| values.len()).sum();
    let size = bracket.inside as f64;
    let wanted = crate::math::exp(crate::math::ln(size) * (2.0 / 3.0));
    let length = (wanted * total as f64 / size) as usize;
    scratch.sample.clear();
    let mut left = length;
    for values in lists {
        let taken = left.min(values.len());
        narrow(&values[..taken], bracket.low, bracket.high, &mut scratch.sample);
        left -= taken;
    }
    scratch.sample.sort_unstable_by(f64::total_cmp);
    let sampled = scratch.sample.len() as f64;
    if sampled < 32.0 {
        return None;
    }
    let place = |rank: usize, side: f64| {
        let p = (rank as f64 + 0.5) / size;
        p * sampled + side * (WIDTHS * (sampled * p * (1.0 - p)).sqrt() + 1.0)
    };
    let (from, to) = (place(first, -1.0), place(last, 1.0));
    let low = if from < 0.0 { bracket.low } else { scratch.sample[from as usize] };
    let high = scratch.sample.get(to as usize).copied().unwrap_or(bracket.high);
    scratch.picked.clear();
    let at_or_above: usize = lists.iter().map(|values| narrow(values, low, high, &mut scratch.picked)).sum();
    Some((bracket.from - at_or_above, scratch.picked.len()))
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

    #[test]
    fn selects_what_sorting_would() {
        for count in [1, 10, 1000, 5000, 40_000] {
            let all = values(count);
            let (one, other) = all.split_at(count / 3);
            let (low, high) = (1e6, 1.5e7);
            let mut sorted: Vec<f64> = all.iter().copied().filter(|&v| v >= low && v < high).collect();
            sorted.sort_by(f64::total_cmp);
            let from = all.iter().filter(|&&v| v >= low).count();
            let bracket = Bracket { low, high, inside: sorted.len(), from };
            for start in [0, sorted.len() / 4, sorted.len() / 2, sorted.len().saturating_sub(1)] {
                let ranks: Vec<usize> =
                    [0, 0, 1, 5, 5, 40].iter().map(|r| start + r).filter(|&r| r < sorted.len()).collect();
                let mut found = vec![f64::NAN; ranks.len()];
                select(&[one, other], bracket, &ranks, &mut Scratch::default(), &mut |place, value| {
                    found[place] = value;
                });
                assert_eq!(found, ranks.iter().map(|&r| sorted[r]).collect::<Vec<_>>(), "{count} values from {start}");
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
