//! Counts values at or above some edges, and keeps those within some brackets, in one go over a block.
//!
//! Comparing is the cost of exact percentiles, so most comparisons look at the upper 32 bits of a value only: edges that end in
//! 32 zero bits order the values exactly as all 64 bits would, at half the price. Values therefore must be `+0` or above.

use crate::math::{LANES, Row};

/// Where to count and what to keep.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Sieve {
    /// From the first, up to but not including the second; the second is infinity for everything above the first.
    brackets: Vec<(f64, f64)>,
    /// The upper halves of the brackets' ends, where they decide; else values are compared whole.
    keys: Option<Vec<(u32, u32)>>,
    edges: Vec<f64>,
    /// The upper half of each edge, for values of `+0` and above.
    edge_keys: Vec<EdgeKey>,
}

/// The upper half that values at or above an edge reach.
#[derive(Clone, Copy, Debug, PartialEq)]
struct EdgeKey {
    /// Values whose upper half is at least this are at or above the edge.
    from: u32,
    /// Values with this upper half may be on either side: whole values decide.
    doubtful: Option<u32>,
}

impl EdgeKey {
    fn new(edge: f64) -> Self {
        if edge.is_sign_negative() {
            return Self { from: 0, doubtful: None };
        }
        let whole = edge.to_bits() << 32 == 0;
        let key = upper(edge);
        Self { from: key + u32::from(!whole), doubtful: (!whole).then_some(key) }
    }
}

/// What a sieve has counted and kept of one series.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Kept {
    /// Values at or above the lower end of each bracket.
    pub from_bracket: Vec<u64>,
    /// Values within each bracket.
    pub in_bracket: Vec<u64>,
    /// Values at or above each edge.
    pub from_edge: Vec<u64>,
    /// Values within any bracket, in the order they came: the last of them. Chunks that are full stand in `full`: nothing is ever
    /// moved, so memory is what was kept and no more.
    pub values: Vec<f64>,
    /// Values that came before.
    pub full: Vec<Vec<f64>>,
    /// Values in a chunk.
    chunk: usize,
}

/// Values that a chunk holds at the most: small enough to be used again for whatever comes next.
const LARGEST_CHUNK: usize = 8192;

/// A chunk for a list of some expected length: an eighth of it.
pub fn chunk_for(expected: usize) -> usize {
    (expected / 8).clamp(64, LARGEST_CHUNK) + ROOM
}

impl Kept {
    /// All kept values, chunk by chunk.
    pub fn lists(&self) -> impl Iterator<Item = &[f64]> {
        self.full.iter().chain(std::iter::once(&self.values)).map(Vec::as_slice)
    }

    /// How many values are kept.
    pub fn kept(&self) -> usize {
        self.lists().map(<[f64]>::len).sum()
    }

    /// Counts and values read back from a store.
    pub fn stored(from_bracket: Vec<u64>, in_bracket: Vec<u64>, from_edge: Vec<u64>, values: Vec<f64>) -> Self {
        Self { from_bracket, in_bracket, from_edge, values, full: Vec::new(), chunk: chunk_for(0) }
    }

    /// Adds another's counts and values.
    pub fn merge(&mut self, other: &Self) {
        let add = |mine: &mut Vec<u64>, theirs: &Vec<u64>| {
            mine.iter_mut().zip(theirs).for_each(|(mine, theirs)| *mine += theirs);
        };
        add(&mut self.from_bracket, &other.from_bracket);
        add(&mut self.in_bracket, &other.in_bracket);
        add(&mut self.from_edge, &other.from_edge);
        self.full.extend(other.lists().map(<[f64]>::to_vec));
    }
}

/// Room that a block may need: its lanes, and the rest of the vector that the last of them stands in.
const ROOM: usize = LANES + 8;

/// A key above that of every number, infinity included.
const ABOVE_ALL: u32 = 0x7ff0_0001;

/// Upper half of a value's bits: rises with the value for everything from +0 to infinity.
#[inline(always)]
fn upper(value: f64) -> u32 {
    (value.to_bits() >> 32) as u32
}

impl Sieve {
    /// A sieve for values of `+0` and above, with `brackets` that are closed below and open above and do not overlap, and single
    /// `edges`. Each bracket is widened to the next numbers that end in 32 zero bits, a relative 1e-6;
    /// [`Sieve::brackets`] tells its ends as they act.
    ///
    /// # Panics
    /// If a bracket's ends are negative or not in order.
    pub fn wide(brackets: &[(f64, f64)], edges: &[f64]) -> Self {
        let keys: Vec<(u32, u32)> = brackets
            .iter()
            .map(|&(low, high)| {
                assert!(low.is_sign_positive() && high >= low, "brackets of non-negative values, ends in order");
                let above = upper(high) + u32::from(high.to_bits() << 32 != 0);
                (upper(low), if high == f64::INFINITY { ABOVE_ALL } else { above })
            })
            .collect();
        let end = |key: u32| if key == ABOVE_ALL { f64::INFINITY } else { f64::from_bits(u64::from(key) << 32) };
        let brackets = keys.iter().map(|&(low, high)| (end(low), end(high))).collect();
        Self {
            brackets,
            keys: Some(keys),
            edges: edges.to_vec(),
            edge_keys: edges.iter().copied().map(EdgeKey::new).collect(),
        }
    }

    /// A sieve whose brackets act exactly as given, for values of any sign.
    pub fn exact(brackets: &[(f64, f64)], edges: &[f64]) -> Self {
        Self { brackets: brackets.to_vec(), keys: None, edges: edges.to_vec(), edge_keys: Vec::new() }
    }

    /// Asks the processor to fetch what sifting into `kept` will soon need. Each series has a list of its own, whose end has long left
    /// the cache: without this, stores to it hold up all that follow. The same goes for its counts and its brackets.
    #[inline]
    pub fn prefetch(&self, kept: &Kept) {
        #[cfg(target_arch = "x86_64")]
        {
            avx512::prefetch_list(&kept.values);
            avx512::prefetch(&kept.from_bracket);
            avx512::prefetch(&kept.in_bracket);
            avx512::prefetch(&kept.from_edge);
            avx512::prefetch(&self.edge_keys);
            if let Some(keys) = &self.keys {
                avx512::prefetch(keys);
            }
        }
    }

    /// A sieve of the same kind with other brackets and no edges.
    #[must_use]
    pub fn with_brackets(&self, brackets: &[(f64, f64)]) -> Self {
        if self.keys.is_some() { Self::wide(brackets, &[]) } else { Self::exact(brackets, &[]) }
    }

    /// Sifts a list of any length.
    pub fn sift_list(&self, values: &[f64], kept: &mut Kept) {
        let (rows, rest) = values.as_chunks::<LANES>();
        for row in rows {
            self.sift(row, 1.0, LANES, kept);
        }
        let mut last = Row::ZERO;
        last[..rest.len()].copy_from_slice(rest);
        self.sift(&last, 1.0, rest.len(), kept);
    }

    /// The brackets as they act: from the first, up to but not including the second, or to infinity and with it.
    pub fn brackets(&self) -> &[(f64, f64)] {
        &self.brackets
    }

    /// Empty counts for this sieve, with room for `expected` kept values.
    pub fn nothing(&self, expected: usize) -> Kept {
        let chunk = chunk_for(expected);
        let room = if self.brackets.is_empty() { 0 } else { chunk };
        Kept {
            from_bracket: vec![0; self.brackets.len()],
            in_bracket: vec![0; self.brackets.len()],
            from_edge: vec![0; self.edges.len()],
            values: Vec::with_capacity(room),
            full: Vec::new(),
            chunk,
        }
    }

    /// Sifts the first `count` lanes of `row`, each times `scale`.
    pub fn sift(&self, row: &[f64; LANES], scale: f64, count: usize, kept: &mut Kept) {
        if !self.brackets.is_empty() && kept.values.capacity() - kept.values.len() < ROOM {
            let next = Vec::with_capacity(kept.chunk.max(ROOM));
            kept.full.push(std::mem::replace(&mut kept.values, next));
        }
        #[cfg(target_arch = "x86_64")]
        if count == LANES && avx512::available() {
            #[expect(unsafe_code, reason = "calls a function compiled for features that were checked")]
            // SAFETY: the processor has the features, and the room was just made.
            unsafe {
                avx512::sift(self, row, scale, kept);
            }
            return;
        }
        self.sift_plain(row, scale, count, kept);
    }

    /// The plain twin of the kernel.
    pub fn sift_plain(&self, row: &[f64; LANES], scale: f64, count: usize, kept: &mut Kept) {
        let mut values = Row(*row);
        plain::scale(&mut values, scale);
        let mut within = [0u32; LANES];
        let totals = kept.from_bracket.iter_mut().zip(&mut kept.in_bracket);
        if let Some(ends) = &self.keys {
            let mut keys = [0u32; LANES];
            plain::keys(&values, &mut keys);
            for (&(low, high), (from, inside)) in ends.iter().zip(totals) {
                let counts = plain::bracket(&keys, low, high, count, &mut within);
                *from += u64::from(counts.0);
                *inside += u64::from(counts.1);
            }
        } else {
            for (&(low, high), (from, inside)) in self.brackets.iter().zip(totals) {
                let counts = plain::bracket_exact(&values, low, high, count, &mut within);
                *from += u64::from(counts.0);
                *inside += u64::from(counts.1);
            }
        }
        for (&edge, total) in self.edges.iter().zip(&mut kept.from_edge) {
            *total += u64::from(plain::edge(&values, edge, count));
        }
        if self.brackets.is_empty() {
            return;
        }
        for lane in 0..count {
            if within[lane] != 0 {
                kept.values.push(values[lane]);
            }
        }
    }
}

mod plain {
    use multiversion::multiversion;

    use crate::math::{LANES, Row};

    #[multiversion(targets("x86_64+avx2"))]
    pub(super) fn scale(values: &mut Row, scale: f64) {
        for value in &mut values.0 {
            *value *= scale;
        }
    }

    #[multiversion(targets("x86_64+avx2"))]
    pub(super) fn keys(values: &Row, keys: &mut [u32; LANES]) {
        for (key, value) in keys.iter_mut().zip(&values.0) {
            *key = (value.to_bits() >> 32) as u32;
        }
    }

    #[multiversion(targets("x86_64+avx2"))]
    pub(super) fn bracket(
        keys: &[u32; LANES],
        low: u32,
        high: u32,
        count: usize,
        within: &mut [u32; LANES],
    ) -> (u32, u32) {
        let (mut total, mut held) = (0, 0);
        for (key, within) in keys[..count].iter().zip(&mut within[..count]) {
            let from = u32::from(*key >= low);
            let inside = from & u32::from(*key < high);
            total += from;
            held += inside;
            *within |= inside;
        }
        (total, held)
    }

    #[multiversion(targets("x86_64+avx2"))]
    pub(super) fn bracket_exact(
        values: &Row,
        low: f64,
        high: f64,
        count: usize,
        within: &mut [u32; LANES],
    ) -> (u32, u32) {
        let (mut total, mut held) = (0, 0);
        let open = u32::from(high == f64::INFINITY);
        for (value, within) in values.0[..count].iter().zip(&mut within[..count]) {
            let from = u32::from(*value >= low);
            let inside = from & (u32::from(*value < high) | open);
            total += from;
            held += inside;
            *within |= inside;
        }
        (total, held)
    }

    #[multiversion(targets("x86_64+avx2"))]
    pub(super) fn edge(values: &Row, edge: f64, count: usize) -> u32 {
        let mut total = 0;
        for value in &values.0[..count] {
            total += u32::from(*value >= edge);
        }
        total
    }
}

#[cfg(target_arch = "x86_64")]
#[expect(
    unsafe_code,
    reason = "vector loads and stores by pointer; the plain twin beside it is what tests compare with"
)]
mod avx512 {
    use std::arch::x86_64::{
        __m512d, __m512i, _CMP_GE_OQ, _CMP_NGE_UQ, _MM_HINT_ET0, _MM_HINT_T0, _mm_prefetch, _mm256_loadu_si256,
        _mm512_add_epi32, _mm512_castpd_si512, _mm512_cmp_pd_mask, _mm512_cmpeq_epu32_mask, _mm512_cmpge_epu32_mask,
        _mm512_loadu_pd, _mm512_mask_cmp_pd_mask, _mm512_mask_cmplt_epu32_mask, _mm512_mask_i32gather_pd,
        _mm512_maskz_compress_epi32, _mm512_maskz_compress_pd, _mm512_mul_pd, _mm512_permutex2var_epi32,
        _mm512_set1_epi32, _mm512_set1_pd, _mm512_setr_epi32, _mm512_setzero_pd, _mm512_storeu_epi32, _mm512_storeu_pd,
    };
    use std::mem::MaybeUninit;

    use super::{EdgeKey, Kept, ROOM, Sieve};
    use crate::math::LANES;

    /// Lines that a block's kept values usually fill.
    const LINES: usize = 4;

    /// The first line of a short list.
    #[inline]
    pub(super) fn prefetch<T>(list: &[T]) {
        // SAFETY: a prefetch reads and writes nothing and may name any address.
        unsafe { _mm_prefetch::<_MM_HINT_T0>(list.as_ptr().cast()) };
    }

    /// The lines behind the end of a list.
    #[inline]
    pub(super) fn prefetch_list(values: &[f64]) {
        let end = values.as_ptr_range().end.cast::<i8>();
        for line in 0..LINES {
            // SAFETY: a prefetch reads and writes nothing and may name any address.
            unsafe { _mm_prefetch::<_MM_HINT_ET0>(end.wrapping_add(64 * line)) };
        }
    }

    pub(super) fn available() -> bool {
        is_x86_feature_detected!("avx512f") && is_x86_feature_detected!("popcnt")
    }

    /// # Safety
    /// The processor must have AVX-512F and POPCNT; `kept.values` must have room for [`ROOM`] more if there are brackets.
    #[target_feature(enable = "avx512f,popcnt")]
    pub(super) unsafe fn sift(sieve: &Sieve, row: &[f64; LANES], scale: f64, kept: &mut Kept) {
        let Some(keys) = &sieve.keys else {
            edges(&sieve.edges, row, scale, &mut kept.from_edge);
            if !sieve.brackets.is_empty() {
                // SAFETY: as above.
                unsafe { whole(&sieve.brackets, row, scale, kept) };
            }
            return;
        };
        // A window has two edges, and they go along with the brackets; other numbers of edges go by themselves.
        let window: Option<&[EdgeKey; 2]> = sieve.edge_keys.as_slice().try_into().ok();
        if window.is_none() {
            edges(&sieve.edges, row, scale, &mut kept.from_edge);
        }
        // SAFETY: as above.
        let decided = unsafe {
            match window {
                Some(window) => by_number(keys, window, sieve, row, scale, kept),
                None => by_number(keys, &[], sieve, row, scale, kept),
            }
        };
        if !decided {
            edges(&sieve.edges, row, scale, &mut kept.from_edge);
        }
    }

    /// Chooses the kernel for a number of brackets. Says whether the edges could be counted by their upper halves.
    ///
    /// # Safety
    /// As [`by_key`].
    #[inline]
    #[target_feature(enable = "avx512f,popcnt")]
    unsafe fn by_number<const E: usize>(
        keys: &[(u32, u32)],
        edges: &[EdgeKey; E],
        sieve: &Sieve,
        row: &[f64; LANES],
        scale: f64,
        kept: &mut Kept,
    ) -> bool {
        // SAFETY: as the caller's.
        unsafe {
            match *keys {
                [] => by_key([], edges, row, scale, kept),
                [a] => by_key([a], edges, row, scale, kept),
                [a, b] => by_key([a, b], edges, row, scale, kept),
                [a, b, c] => by_key([a, b, c], edges, row, scale, kept),
                [a, b, c, d] => by_key([a, b, c, d], edges, row, scale, kept),
                [a, b, c, d, e] => by_key([a, b, c, d, e], edges, row, scale, kept),
                [a, b, c, d, e, f] => by_key([a, b, c, d, e, f], edges, row, scale, kept),
                [a, b, c, d, e, f, g] => by_key([a, b, c, d, e, f, g], edges, row, scale, kept),
                [a, b, c, d, e, f, g, h] => by_key([a, b, c, d, e, f, g, h], edges, row, scale, kept),
                _ => {
                    whole(&sieve.brackets, row, scale, kept);
                    by_key([], edges, row, scale, kept)
                }
            }
        }
    }

    /// Vector `index` of a row.
    #[inline]
    #[target_feature(enable = "avx512f")]
    fn value(row: &[f64; LANES], index: usize) -> __m512d {
        assert!(index < LANES / 8);
        // SAFETY: a row holds LANES / 8 vectors of eight.
        unsafe { _mm512_loadu_pd(row.as_ptr().add(8 * index)) }
    }

    /// Brackets and edges that the upper half of a value decides. Says whether it did for all edges; else none was counted.
    ///
    /// # Safety
    /// `kept.values` must have room for [`ROOM`] more if there are brackets.
    #[inline]
    #[target_feature(enable = "avx512f,popcnt")]
    unsafe fn by_key<const N: usize, const E: usize>(
        brackets: [(u32, u32); N],
        edges: &[EdgeKey; E],
        row: &[f64; LANES],
        scale: f64,
        kept: &mut Kept,
    ) -> bool {
        debug_assert!(N == 0 || kept.values.capacity() - kept.values.len() >= ROOM);
        let factor = _mm512_set1_pd(scale);
        let odd = _mm512_setr_epi32(1, 3, 5, 7, 9, 11, 13, 15, 17, 19, 21, 23, 25, 27, 29, 31);
        let lows = brackets.map(|(low, _)| splat(low));
        let highs = brackets.map(|(_, high)| splat(high));
        let froms = edges.map(|edge| splat(edge.from));
        // No value has the key of a number that is none.
        let doubtful = edges.map(|edge| splat(edge.doubtful.unwrap_or(u32::MAX)));
        let (mut from, mut held, mut at_edge, mut doubts) = ([0u32; N], [0u32; N], [0u32; E], 0);
        // Which lanes are kept: written one vector after the other, each over the unused end of the one before.
        let mut lanes = [const { MaybeUninit::<u32>::uninit() }; LANES + 16];
        let mut count = 0;
        let mut lane = _mm512_setr_epi32(0, 1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11, 12, 13, 14, 15);
        for pair in 0..LANES / 16 {
            let low = _mm512_mul_pd(value(row, 2 * pair), factor);
            let high = _mm512_mul_pd(value(row, 2 * pair + 1), factor);
            let key = _mm512_permutex2var_epi32(_mm512_castpd_si512(low), odd, _mm512_castpd_si512(high));
            let mut any = 0;
            for bracket in 0..N {
                let at_least = _mm512_cmpge_epu32_mask(key, lows[bracket]);
                let within = _mm512_mask_cmplt_epu32_mask(at_least, key, highs[bracket]);
                from[bracket] += at_least.count_ones();
                held[bracket] += within.count_ones();
                any |= within;
            }
            for edge in 0..E {
                at_edge[edge] += _mm512_cmpge_epu32_mask(key, froms[edge]).count_ones();
                if edges[edge].doubtful.is_some() {
                    doubts |= _mm512_cmpeq_epu32_mask(key, doubtful[edge]);
                }
            }
            if N > 0 {
                // SAFETY: at most LANES lanes are kept in all, and a store writes at most 16 past the last.
                unsafe {
                    let end = lanes.as_mut_ptr().add(count).cast::<i32>();
                    _mm512_storeu_epi32(end, _mm512_maskz_compress_epi32(any, lane));
                }
                count += any.count_ones() as usize;
                lane = _mm512_add_epi32(lane, _mm512_set1_epi32(16));
            }
        }
        let start = kept.values.len();
        for first in (0..count).step_by(8) {
            let some = 0xff_u8 >> 8usize.saturating_sub(count - first).min(7);
            // SAFETY: the first `count` lanes were written and lie within the row; the others are masked. A store writes at most 8
            // past the last value: the caller made that room.
            unsafe {
                let lanes = _mm256_loadu_si256(lanes.as_ptr().add(first).cast());
                let values = _mm512_mask_i32gather_pd::<8>(_mm512_setzero_pd(), some, lanes, row.as_ptr());
                let end = kept.values.as_mut_ptr().add(start + first);
                _mm512_storeu_pd(end, _mm512_mul_pd(values, factor));
            }
        }
        // SAFETY: `count` values were just written, within the capacity.
        unsafe { kept.values.set_len(start + count) };
        for bracket in 0..N {
            kept.from_bracket[bracket] += u64::from(from[bracket]);
            kept.in_bracket[bracket] += u64::from(held[bracket]);
        }
        if doubts == 0 {
            for (total, count) in kept.from_edge.iter_mut().zip(at_edge) {
                *total += u64::from(count);
            }
        }
        doubts == 0
    }

    #[inline]
    #[target_feature(enable = "avx512f")]
    fn splat(key: u32) -> __m512i {
        _mm512_set1_epi32(key.cast_signed())
    }

    /// Any number of brackets, by whole values.
    ///
    /// # Safety
    /// `kept.values` must have room for [`ROOM`] more.
    #[target_feature(enable = "avx512f,popcnt")]
    unsafe fn whole(brackets: &[(f64, f64)], row: &[f64; LANES], scale: f64, kept: &mut Kept) {
        debug_assert!(kept.values.capacity() - kept.values.len() >= ROOM);
        let scale = _mm512_set1_pd(scale);
        let mut end = kept.values.len();
        for index in 0..LANES / 8 {
            let scaled = _mm512_mul_pd(value(row, index), scale);
            let mut any = 0;
            for (bracket, &(low, high)) in brackets.iter().enumerate() {
                // Nothing is at or above what is not a number.
                let high = if high == f64::INFINITY { f64::NAN } else { high };
                let at_least = _mm512_cmp_pd_mask::<_CMP_GE_OQ>(scaled, _mm512_set1_pd(low));
                let within = _mm512_mask_cmp_pd_mask::<_CMP_NGE_UQ>(at_least, scaled, _mm512_set1_pd(high));
                kept.from_bracket[bracket] += u64::from(at_least.count_ones());
                kept.in_bracket[bracket] += u64::from(within.count_ones());
                any |= within;
            }
            // SAFETY: as in `by_key`.
            unsafe { _mm512_storeu_pd(kept.values.as_mut_ptr().add(end), _mm512_maskz_compress_pd(any, scaled)) };
            end += any.count_ones() as usize;
        }
        // SAFETY: the values up to `end` were just written, within the capacity.
        unsafe { kept.values.set_len(end) };
    }

    /// Counts at or above each edge, by whole values.
    #[target_feature(enable = "avx512f,popcnt")]
    fn edges(edges: &[f64], row: &[f64; LANES], scale: f64, totals: &mut [u64]) {
        let scale = _mm512_set1_pd(scale);
        for (&edge, total) in edges.iter().zip(totals) {
            *total += one_edge(edge, row, scale);
        }
    }

    #[inline]
    #[target_feature(enable = "avx512f,popcnt")]
    fn one_edge(edge: f64, row: &[f64; LANES], scale: __m512d) -> u64 {
        let edge = _mm512_set1_pd(edge);
        let mut count = 0;
        for index in 0..LANES / 8 {
            let scaled = _mm512_mul_pd(value(row, index), scale);
            count += u64::from(_mm512_cmp_pd_mask::<_CMP_GE_OQ>(scaled, edge).count_ones());
        }
        count
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn row(seed: u64) -> Row {
        let mut row = Row::ZERO;
        let mut state = seed;
        for lane in &mut row.0 {
            state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
            *lane = match state >> 61 {
                0 => 0.0,
                1 => f64::from_bits(state >> 20),
                2 => 2.0,
                _ => (state >> 11) as f64 / (1u64 << 51) as f64,
            };
        }
        row
    }

    #[test]
    fn the_kernel_and_its_twin_agree() {
        let sieve =
            Sieve::wide(&[(0.1, 0.5), (1.0, 1.0 + 1e-9), (2.0, f64::INFINITY)], &[0.0, 2.0, 2.0f64.next_up(), 3.3]);
        for seed in 0..200 {
            for count in [LANES, 0, 1, 7, 255] {
                let row = row(seed);
                let (mut fast, mut plain) = (sieve.nothing(0), sieve.nothing(0));
                sieve.sift(&row, 1.25, count, &mut fast);
                sieve.sift_plain(&row, 1.25, count, &mut plain);
                assert_eq!(fast, plain, "seed {seed}, {count} lanes");
            }
        }
    }

    #[test]
    fn the_kernel_and_its_twin_agree_on_whole_values_of_any_sign() {
        for sieve in [Sieve::exact(&[(-0.5, 0.1), (1.0, f64::INFINITY)], &[-0.25, 2.0]), Sieve::exact(&[], &[0.5, 1.5])]
        {
            for seed in 0..50 {
                let mut row = row(seed);
                row.iter_mut().step_by(3).for_each(|value| *value = -*value);
                let (mut fast, mut plain) = (sieve.nothing(0), sieve.nothing(0));
                sieve.sift(&row, 1.0, LANES, &mut fast);
                sieve.sift_plain(&row, 1.0, LANES, &mut plain);
                assert_eq!(fast, plain, "seed {seed}");
            }
        }
    }

    #[test]
    fn counts_and_keeps_what_a_loop_over_values_would() {
        let sieve = Sieve::wide(&[(0.1, 0.5), (1.0, 2.5)], &[2.0, 2.0f64.next_up()]);
        let mut kept = sieve.nothing(0);
        let row = row(7);
        sieve.sift(&row, 1.0, LANES, &mut kept);
        let within = |value: f64| sieve.brackets().iter().any(|&(low, high)| value >= low && value < high);
        let expected: Vec<f64> = row.iter().copied().filter(|&value| within(value)).collect();
        assert_eq!(kept.values, expected);
        assert_eq!(kept.from_edge[0], row.iter().filter(|&&value| value >= 2.0).count() as u64);
        assert_eq!(kept.from_edge[1], row.iter().filter(|&&value| value > 2.0).count() as u64);
        for b in 0..2 {
            assert_eq!(
                kept.from_bracket[b],
                row.iter().filter(|&&value| value >= sieve.brackets()[b].0).count() as u64
            );
        }
    }
}
