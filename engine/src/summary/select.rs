//! Picking several order statistics out of unordered values.

/// Maps a value to an integer that orders as the value does (negative zero below zero).
#[inline(always)]
pub(super) fn order_key(value: f64) -> u64 {
    let bits = value.to_bits();
    bits ^ (((bits.cast_signed() >> 63).cast_unsigned()) | (1 << 63))
}

/// The value of an [`order_key`].
#[inline(always)]
pub(super) fn from_order_key(key: u64) -> f64 {
    let mask = if key >> 63 == 1 { 1 << 63 } else { u64::MAX };
    f64::from_bits(key ^ mask)
}

/// Hands the element of each of `ranks` (rising, counted from 0, all below the length) to `found`, reordering `keys`.
pub(super) fn select(keys: &mut [u64], ranks: &[usize], found: &mut impl FnMut(usize, u64)) {
    select_from(keys, 0, ranks, 0, found);
}

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

    #[test]
    fn selects_what_sorting_would() {
        let mut state = 3u64;
        let values: Vec<u64> = (0..1000)
            .map(|_| {
                state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1);
                state >> 57
            })
            .collect();
        let mut sorted = values.clone();
        sorted.sort_unstable();
        let ranks = [0, 0, 3, 500, 501, 501, 999];
        let mut found = vec![0; ranks.len()];
        select(&mut values.clone(), &ranks, &mut |index, key| found[index] = key);
        assert_eq!(found, ranks.map(|rank| sorted[rank]));
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
