//! Picking several neighbouring order statistics out of unordered values.
//!
//! In the manner of Floyd and Rivest 1975 (Commun ACM 18:165-172; from memory): a small sample says between which two values the
//! wanted ranks must lie, one pass picks those out, and only they are ordered.

use crate::math::{Kept, Sieve, exp, ln, narrow};

/// Shorter lists are ordered as they are.
const SMALL: usize = 4096;

/// Standard errors of the sample by which the picked part is widened.
const WIDTHS: f64 = 3.5;

/// Sampled values of fewer than so many say nothing.
const LEAST_SAMPLE: usize = 32;

/// Buffers to be used again.
#[derive(Debug, Default)]
pub struct Scratch {
    sample: Vec<u64>,
    picked: Vec<f64>,
    keys: Vec<u64>,
}

/// The values from `low` up to but not including `high`.
#[derive(Clone, Debug)]
pub(super) struct Bracket {
    pub(super) low: f64,
    pub(super) high: f64,
    /// How many of them there are.
    pub(super) inside: usize,
    /// How many values are at or above `low`.
    pub(super) from: usize,
    /// Ranks wanted within the bracket, rising, from 0.
    pub(super) ranks: Vec<usize>,
}

/// Hands the value of each wanted rank to `found`, with the bracket's index and the rank's place. Outside the brackets, which `sieve`
/// has, `lists` hold nothing.
pub(super) fn select(
    lists: &[&[f64]],
    sieve: &Sieve,
    brackets: &[Bracket],
    scratch: &mut Scratch,
    found: &mut impl FnMut(usize, usize, f64),
) {
    let total: usize = lists.iter().map(|values| values.len()).sum();
    let parts = if total < SMALL { None } else { Parts::new(lists, total, sieve, brackets, scratch) };
    for (index, bracket) in brackets.iter().enumerate() {
        if bracket.ranks.is_empty() {
            continue;
        }
        scratch.picked.clear();
        let skipped = match &parts {
            Some(parts) if parts.hold(index, bracket) => {
                let (low, high) = parts.sieve.brackets()[index];
                for values in parts.kept.lists() {
                    narrow(values, low, high, &mut scratch.picked);
                }
                parts.skipped(index, bracket)
            }
            _ => {
                for values in lists {
                    narrow(values, bracket.low, bracket.high, &mut scratch.picked);
                }
                0
            }
        };
        scratch.keys.clear();
        scratch.keys.extend(scratch.picked.iter().map(|&value| order_key(value)));
        let ranks: Vec<usize> = bracket.ranks.iter().map(|rank| rank - skipped).collect();
        let mut hand_over = |place, key| found(index, place, from_order_key(key));
        select_from(&mut scratch.keys, 0, &ranks, 0, &mut hand_over);
    }
}

/// The part of each bracket where its wanted ranks are expected, and the values there.
struct Parts {
    sieve: Sieve,
    kept: Kept,
}

impl Parts {
    /// Picks them; `None` where the sample is too small to say where.
    fn new(lists: &[&[f64]], total: usize, sieve: &Sieve, brackets: &[Bracket], scratch: &mut Scratch) -> Option<Self> {
        // The values stand in the order of the patients, who are alike: the first ones are a sample.
        let mut left = (1.5 * exp(ln(total as f64) * (2.0 / 3.0))) as usize;
        scratch.sample.clear();
        for values in lists {
            let taken = left.min(values.len());
            scratch.sample.extend(values[..taken].iter().map(|&value| order_key(value)));
            left -= taken;
        }
        // Integers sort faster than values.
        scratch.sample.sort_unstable();
        let parts: Option<Vec<(f64, f64)>> = brackets.iter().map(|bracket| bracket.part(&scratch.sample)).collect();
        let sieve = sieve.with_brackets(&parts?);
        let mut kept = sieve.nothing(total);
        for values in lists {
            sieve.sift_list(values, &mut kept);
        }
        Some(Self { sieve, kept })
    }

    /// How many of a bracket's values lie below its part.
    fn skipped(&self, index: usize, bracket: &Bracket) -> usize {
        bracket.from - self.kept.from_bracket[index] as usize
    }

    /// Whether a bracket's part holds all wanted ranks.
    fn hold(&self, index: usize, bracket: &Bracket) -> bool {
        let skipped = self.skipped(index, bracket);
        let held = self.kept.in_bracket[index] as usize;
        bracket.ranks.iter().all(|rank| (skipped..skipped + held).contains(rank))
    }
}

impl Bracket {
    /// Where the wanted ranks are expected, by the sorted keys of a sample of the values of all brackets.
    fn part(&self, sample: &[u64]) -> Option<(f64, f64)> {
        let (Some(&first), Some(&last)) = (self.ranks.first(), self.ranks.last()) else {
            return Some((self.low, self.low));
        };
        let start = sample.partition_point(|&key| key < order_key(self.low));
        let end = start + sample[start..].partition_point(|&key| key < order_key(self.high));
        let sample = &sample[start..end];
        if sample.len() < LEAST_SAMPLE {
            return None;
        }
        let sampled = sample.len() as f64;
        let place = |rank: usize, side: f64| {
            let p = (rank as f64 + 0.5) / self.inside as f64;
            p * sampled + side * (WIDTHS * (sampled * p * (1.0 - p)).sqrt() + 1.0)
        };
        let (from, to) = (place(first, -1.0), place(last, 1.0));
        let low = if from < 0.0 { self.low } else { from_order_key(sample[from as usize]) };
        Some((low, sample.get(to as usize).map_or(self.high, |&key| from_order_key(key))))
    }
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
        for count in [1, 10, 1000, 5000, 40_000, 300_000] {
            for sieve in [
                Sieve::wide(&[(1e6, 1.2e7), (1.4e7, 1.6e7)], &[]),
                Sieve::exact(&[(1e6, 1.2e7), (1.4e7, f64::INFINITY)], &[]),
            ] {
                let all: Vec<f64> = values(count)
                    .into_iter()
                    .filter(|&v| sieve.brackets().iter().any(|b| b.0 <= v && v < b.1))
                    .collect();
                let (one, other) = all.split_at(all.len() / 3);
                let mut expected = Vec::new();
                let brackets: Vec<Bracket> = sieve
                    .brackets()
                    .iter()
                    .map(|&(low, high)| {
                        let mut inside: Vec<f64> = all.iter().copied().filter(|&v| v >= low && v < high).collect();
                        inside.sort_by(f64::total_cmp);
                        let middle = inside.len() / 2;
                        let ranks: Vec<usize> =
                            [0, 0, 1, 5, 5, 40].iter().map(|r| middle + r).filter(|&r| r < inside.len()).collect();
                        expected.push(ranks.iter().map(|&r| inside[r]).collect::<Vec<f64>>());
                        let from = all.iter().filter(|&&v| v >= low).count();
                        Bracket { low, high, inside: inside.len(), from, ranks }
                    })
                    .collect();
                let mut found: Vec<Vec<f64>> = expected.iter().map(|e| vec![f64::NAN; e.len()]).collect();
                let mut take = |bracket: usize, place: usize, value| found[bracket][place] = value;
                select(&[one, other], &sieve, &brackets, &mut Scratch::default(), &mut take);
                assert_eq!(found, expected, "{count} values");
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
