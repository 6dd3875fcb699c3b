//! Counts values at or above some edges, and keeps those within some brackets, in one go over a block.
//!
//! Comparing is the cost of exact percentiles, so most comparisons look at 16 bits of a value only: the ends of brackets are
//! moved outwards to the lines of a grid, and the number of its cell orders a value as all 64 bits would, at a quarter of the
//! price. Values therefore must be `+0` or above.

use crate::math::{LANES, Row};

/// Where to count and what to keep.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Sieve {
    /// From the first, up to but not including the second; the second is infinity for everything above the first.
    brackets: Vec<(f64, f64)>,
    /// The upper halves of the brackets' ends, where they decide; else values are compared whole.
    keys: Option<Vec<(u32, u32)>>,
    edges: Vec<f64>,
    /// The same on a grid, where one is fine enough.
    cells: Option<Cells>,
}

/// A sieve's brackets and edges on a grid.
#[derive(Clone, Debug, PartialEq)]
struct Cells {
    grid: Grid,
    /// First and last cell of each bracket.
    brackets: Vec<(u16, u16)>,
    /// One entry an edge, or empty where edges are compared whole.
    edges: Vec<Edge>,
}

/// Where an edge lies on a grid.
#[derive(Clone, Copy, Debug, PartialEq)]
enum Edge {
    /// All values are at or above it.
    Below,
    /// At the lower end of a cell.
    At(u16),
    /// Within a cell: its values must be compared whole.
    Within(u16),
    /// No value is at or above it.
    Beyond,
}

/// Divides the keys, the upper halves of values, into cells of a power of two. Cell 0 also holds everything below it, the last
/// one everything above it; the ends that a grid was made for lie between them.
#[derive(Clone, Copy, Debug, PartialEq)]
struct Grid {
    base: i32,
    shift: u32,
}

/// Coarsest grid: cells of a relative 2^-12, and 16 octaves.
const COARSEST: u32 = 8;

impl Grid {
    /// The finest grid with all of `keys` between its first and its last cell.
    fn new(keys: impl Iterator<Item = u32> + Clone) -> Option<Self> {
        let (least, most) = (keys.clone().min().unwrap_or(0), keys.max().unwrap_or(0));
        (0..=COARSEST)
            .map(|shift| Self { base: (((least >> shift) << shift).cast_signed()) - (1 << shift), shift })
            .find(|grid| grid.cell(most) + 1 < i32::from(u16::MAX))
    }

    fn cell(self, key: u32) -> i32 {
        (key.cast_signed() - self.base) >> self.shift
    }

    /// The keys that `low` and `high` become if moved outwards to lines of the grid.
    fn outwards(self, (low, high): (u32, u32)) -> (u32, u32) {
        let rest = (1 << self.shift) - 1;
        (low & !rest, if high == ABOVE_ALL { high } else { (high + rest) & !rest })
    }

    /// First and last cell of a bracket with its ends on lines of the grid.
    fn bracket(self, (low, high): (u32, u32)) -> (u16, u16) {
        let first = if low == 0 { 0 } else { self.cell(low) };
        let last = if high == ABOVE_ALL { i32::from(u16::MAX) } else { self.cell(high) - 1 };
        (first as u16, last as u16)
    }

    fn edge(self, edge: f64) -> Edge {
        if edge.is_nan() {
            Edge::Beyond
        } else if edge <= 0.0 {
            Edge::Below
        } else {
            let cell = self.cell(upper(edge)) as u16;
            let on_line = edge.to_bits().trailing_zeros() >= 32 + self.shift;
            if on_line { Edge::At(cell) } else { Edge::Within(cell) }
        }
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
    values: Vec<f64>,
    /// Values that came before.
    full: Vec<Vec<f64>>,
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
    /// A sieve for values of `+0` and above, with rising `brackets` that are closed below and open above, and single `edges`. Each
    /// bracket is widened a little, by a relative 2.5e-4 at most at either end, and those that then touch become one;
    /// [`Sieve::brackets`] tells them as they act.
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
        let lows = keys.iter().map(|key| key.0).filter(|&low| low != 0);
        let ends = lows.chain(keys.iter().map(|key| key.1).filter(|&high| high != ABOVE_ALL));
        let decided = edges.iter().filter(|&&edge| edge > 0.0).map(|&edge| upper(edge));
        let with_edges = Grid::new(ends.clone().chain(decided));
        let grid = with_edges.or_else(|| Grid::new(ends));
        let keys = merged(keys.iter().map(|&ends| grid.map_or(ends, |grid| grid.outwards(ends))));
        let cells = grid.map(|grid| Cells {
            grid,
            brackets: keys.iter().map(|&ends| grid.bracket(ends)).collect(),
            edges: with_edges.map_or_else(Vec::new, |grid| edges.iter().map(|&edge| grid.edge(edge)).collect()),
        });
        let end = |key: u32| if key == ABOVE_ALL { f64::INFINITY } else { f64::from_bits(u64::from(key) << 32) };
        let brackets = keys.iter().map(|&(low, high)| (end(low), end(high))).collect();
        Self { brackets, keys: Some(keys), edges: edges.to_vec(), cells }
    }

    /// A sieve whose brackets act exactly as given, for values of any sign.
    pub fn exact(brackets: &[(f64, f64)], edges: &[f64]) -> Self {
        Self { brackets: brackets.to_vec(), keys: None, edges: edges.to_vec(), cells: None }
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
            if let Some(cells) = &self.cells {
                avx512::prefetch(&cells.brackets);
                avx512::prefetch(&cells.edges);
            }
        }
    }

    /// A sieve of the same kind with other brackets, and no edges.
    #[must_use]
    pub fn like(&self, brackets: &[(f64, f64)]) -> Self {
        if self.keys.is_some() { Self::wide(brackets, &[]) } else { Self::exact(brackets, &[]) }
    }

    /// Empties `kept` for this sieve.
    pub fn empty(&self, kept: &mut Kept) {
        for counts in [&mut kept.from_bracket, &mut kept.in_bracket] {
            counts.clear();
            counts.resize(self.brackets.len(), 0);
        }
        kept.from_edge.clear();
        kept.from_edge.resize(self.edges.len(), 0);
        kept.values.clear();
        kept.full.clear();
        kept.chunk = LARGEST_CHUNK + ROOM;
    }

    /// Sifts a list.
    pub fn sift_list(&self, values: &[f64], kept: &mut Kept) {
        let (rows, rest) = values.as_chunks();
        for row in rows {
            self.sift_lanes(row, 1.0, LANES, kept);
        }
        let mut last = [0.0; LANES];
        last[..rest.len()].copy_from_slice(rest);
        self.sift_lanes(&last, 1.0, rest.len(), kept);
    }

    /// Sifts the first `count` lanes of `row`, each times `scale`.
    pub fn sift(&self, row: &Row, scale: f64, count: usize, kept: &mut Kept) {
        self.sift_lanes(&row.0, scale, count, kept);
    }

    fn sift_lanes(&self, row: &[f64; LANES], scale: f64, count: usize, kept: &mut Kept) {
        if !self.brackets.is_empty() && kept.values.capacity() - kept.values.len() < ROOM {
            let next = Vec::with_capacity(kept.chunk.max(ROOM));
            let last = std::mem::replace(&mut kept.values, next);
            if !last.is_empty() {
                kept.full.push(last);
            }
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
        self.sift_lanes_plain(row, scale, count, kept);
    }

    /// The plain twin of the kernel.
    pub fn sift_plain(&self, row: &Row, scale: f64, count: usize, kept: &mut Kept) {
        self.sift_lanes_plain(&row.0, scale, count, kept);
    }

    fn sift_lanes_plain(&self, row: &[f64; LANES], scale: f64, count: usize, kept: &mut Kept) {
        let mut values = *row;
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

/// Rising brackets; those that touch or overlap become one.
fn merged(brackets: impl Iterator<Item = (u32, u32)>) -> Vec<(u32, u32)> {
    let mut out: Vec<(u32, u32)> = Vec::new();
    for (low, high) in brackets {
        match out.last_mut() {
            Some(last) if low <= last.1 => last.1 = last.1.max(high),
            _ => out.push((low, high)),
        }
    }
    out
}

mod plain {
    use multiversion::multiversion;

    use crate::math::LANES;

    #[multiversion(targets("x86_64+avx2"))]
    pub(super) fn scale(values: &mut [f64; LANES], scale: f64) {
        for value in values {
            *value *= scale;
        }
    }

    #[multiversion(targets("x86_64+avx2"))]
    pub(super) fn keys(values: &[f64; LANES], keys: &mut [u32; LANES]) {
        for (key, value) in keys.iter_mut().zip(values) {
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
        values: &[f64; LANES],
        low: f64,
        high: f64,
        count: usize,
        within: &mut [u32; LANES],
    ) -> (u32, u32) {
        let (mut total, mut held) = (0, 0);
        let open = u32::from(high == f64::INFINITY);
        for (value, within) in values[..count].iter().zip(&mut within[..count]) {
            let from = u32::from(*value >= low);
            let inside = from & (u32::from(*value < high) | open);
            total += from;
            held += inside;
            *within |= inside;
        }
        (total, held)
    }

    /// Lists the lanes whose bits are set; returns how many there are.
    #[cfg(target_arch = "x86_64")]
    pub(super) fn list(bits: &[u64; LANES / 64], lanes: &mut [u8; LANES + 64]) -> usize {
        let mut count = 0;
        for (index, &bits) in bits.iter().enumerate() {
            let mut left = bits;
            while left != 0 {
                lanes[count] = (64 * index as u32 + left.trailing_zeros()) as u8;
                left &= left - 1;
                count += 1;
            }
        }
        count
    }

    #[multiversion(targets("x86_64+avx2"))]
    pub(super) fn edge(values: &[f64; LANES], edge: f64, count: usize) -> u32 {
        let mut total = 0;
        for value in &values[..count] {
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
        __m512d, __m512i, _CMP_GE_OQ, _CMP_NGE_UQ, _MM_HINT_ET0, _MM_HINT_T0, _mm_prefetch, _mm512_add_epi8,
        _mm512_castpd_si512, _mm512_cmp_pd_mask, _mm512_cmpge_epu16_mask, _mm512_loadu_epi8, _mm512_loadu_pd,
        _mm512_mask_add_epi64, _mm512_mask_cmp_pd_mask, _mm512_mask_cmple_epu16_mask, _mm512_mask_cmpneq_epu16_mask,
        _mm512_maskz_compress_epi8, _mm512_mul_pd, _mm512_packus_epi32, _mm512_permutex2var_epi32,
        _mm512_reduce_add_epi64, _mm512_set1_epi8, _mm512_set1_epi16, _mm512_set1_epi32, _mm512_set1_epi64,
        _mm512_set1_pd, _mm512_setr_epi32, _mm512_setzero_si512, _mm512_srav_epi32, _mm512_storeu_epi8,
        _mm512_sub_epi32, _pext_u64,
    };
    use std::hint::black_box;

    use super::{Cells, Edge, Grid, Kept, ROOM, Sieve};
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
        is_x86_feature_detected!("avx512f")
            && is_x86_feature_detected!("avx512bw")
            && is_x86_feature_detected!("bmi2")
            && is_x86_feature_detected!("popcnt")
    }

    /// # Safety
    /// The processor must be [`available`]; `kept.values` must have room for [`ROOM`] more if there are brackets.
    #[target_feature(enable = "avx512f,avx512bw,bmi2,popcnt")]
    pub(super) unsafe fn sift(sieve: &Sieve, row: &[f64; LANES], scale: f64, kept: &mut Kept) {
        if let Some(cells) = &sieve.cells {
            by_cell(sieve, cells, row, scale, kept);
            if cells.edges.len() == sieve.edges.len() {
                return;
            }
        } else if !sieve.brackets.is_empty() {
            whole(&sieve.brackets, row, scale, kept);
        }
        for (&edge, total) in sieve.edges.iter().zip(&mut kept.from_edge) {
            *total += one_edge(edge, row, scale);
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

    /// The cells of a row, 32 lanes a vector: in vector `2 q` sixteen of them from lane `64 q`, taken in turns of four with
    /// sixteen from lane `64 q + 32`; in the next vector those that follow either.
    #[inline]
    #[target_feature(enable = "avx512f,avx512bw")]
    fn cells_of(row: &[f64; LANES], scale: f64, grid: Grid) -> [__m512i; LANES / 32] {
        let scale = _mm512_set1_pd(scale);
        let odd = _mm512_setr_epi32(1, 3, 5, 7, 9, 11, 13, 15, 17, 19, 21, 23, 25, 27, 29, 31);
        let base = _mm512_set1_epi32(grid.base);
        // Known to be the same in all lanes, it would become a shift by one register: two steps on a processor, not one.
        let shift = black_box(_mm512_set1_epi32(grid.shift.cast_signed()));
        let sixteen = |group: usize| {
            let low = _mm512_mul_pd(value(row, 2 * group), scale);
            let high = _mm512_mul_pd(value(row, 2 * group + 1), scale);
            let key = _mm512_permutex2var_epi32(_mm512_castpd_si512(low), odd, _mm512_castpd_si512(high));
            _mm512_srav_epi32(_mm512_sub_epi32(key, base), shift)
        };
        std::array::from_fn(|index| {
            let group = 4 * (index / 2) + index % 2;
            _mm512_packus_epi32(sixteen(group), sixteen(group + 2))
        })
    }

    /// Puts the bits for the 64 lanes of two vectors of [`cells_of`] into the order of the lanes.
    #[inline]
    #[target_feature(enable = "bmi2")]
    fn in_order(first: u32, second: u32) -> u64 {
        const TURNS: u64 = 0x0f0f_0f0f_0f0f_0f0f;
        let bits = u64::from(first) | u64::from(second) << 32;
        _pext_u64(bits, TURNS) | _pext_u64(bits, !TURNS) << 32
    }

    /// Brackets, and edges, by the cells that values lie in.
    #[inline]
    #[target_feature(enable = "avx512f,avx512bw,bmi2,popcnt")]
    fn by_cell(sieve: &Sieve, on_grid: &Cells, row: &[f64; LANES], scale: f64, kept: &mut Kept) {
        let cells = cells_of(row, scale, on_grid.grid);
        let mut any = [0; LANES / 32];
        let totals = kept.from_bracket.iter_mut().zip(&mut kept.in_bracket);
        for (&(first, last), (from_bracket, in_bracket)) in on_grid.brackets.iter().zip(totals) {
            let first = _mm512_set1_epi16(first.cast_signed());
            let last = _mm512_set1_epi16(last.cast_signed());
            let (mut from, mut held) = (0, 0);
            for (&cell, any) in cells.iter().zip(&mut any) {
                let at_least = _mm512_cmpge_epu16_mask(cell, first);
                let within = _mm512_mask_cmple_epu16_mask(at_least, cell, last);
                from += u64::from(at_least.count_ones());
                held += u64::from(within.count_ones());
                *any |= within;
            }
            *from_bracket += from;
            *in_bracket += held;
        }
        for ((&edge, &whole), total) in on_grid.edges.iter().zip(&sieve.edges).zip(&mut kept.from_edge) {
            *total += match edge {
                Edge::Within(cell) if holds(&cells, cell) => one_edge(whole, row, scale),
                Edge::Within(cell) | Edge::At(cell) => from_cell(&cells, cell),
                Edge::Below => LANES as u64,
                Edge::Beyond => 0,
            };
        }
        if !on_grid.brackets.is_empty() {
            let bits = std::array::from_fn(|index| in_order(any[2 * index], any[2 * index + 1]));
            keep(&bits, row, scale, &mut kept.values);
        }
    }

    /// How many lanes lie in `cell` or above.
    #[inline]
    #[target_feature(enable = "avx512f,avx512bw,popcnt")]
    fn from_cell(cells: &[__m512i; LANES / 32], cell: u16) -> u64 {
        let first = _mm512_set1_epi16(cell.cast_signed());
        cells.iter().map(|&cells| u64::from(_mm512_cmpge_epu16_mask(cells, first).count_ones())).sum()
    }

    /// Whether any lane lies in `cell`.
    #[inline]
    #[target_feature(enable = "avx512f,avx512bw")]
    fn holds(cells: &[__m512i; LANES / 32], cell: u16) -> bool {
        let one = _mm512_set1_epi16(cell.cast_signed());
        cells.iter().fold(u32::MAX, |none, &cells| _mm512_mask_cmpneq_epu16_mask(none, cells, one)) != u32::MAX
    }

    /// Values copied at a time without looking whether there are as many.
    const BATCH: usize = 8;

    /// Appends the lanes whose bits are set, in order, times `scale`.
    #[inline]
    fn keep(bits: &[u64; LANES / 64], row: &[f64; LANES], scale: f64, values: &mut Vec<f64>) {
        let mut lanes = [0; LANES + 64];
        let count = if is_x86_feature_detected!("avx512vbmi2") {
            // SAFETY: the processor has this and, like all that do, the others.
            unsafe { list(bits, &mut lanes) }
        } else {
            super::plain::list(bits, &mut lanes)
        };
        let (room, _) = values.spare_capacity_mut()[..ROOM].as_chunks_mut::<BATCH>();
        for (room, lanes) in room[..count.div_ceil(BATCH)].iter_mut().zip(lanes.as_chunks::<BATCH>().0) {
            for (place, &lane) in room.iter_mut().zip(lanes) {
                place.write(row[usize::from(lane)] * scale);
            }
        }
        // SAFETY: `count` values, and the rest of a batch, were just written into spare room.
        unsafe { values.set_len(values.len() + count) };
    }

    /// Lists the lanes whose bits are set; returns how many there are. Beyond them stand others.
    #[target_feature(enable = "avx512f,avx512bw,avx512vbmi2,popcnt")]
    fn list(bits: &[u64; LANES / 64], lanes: &mut [u8; LANES + 64]) -> usize {
        const FIRST: [u8; 64] = {
            let mut lanes = [0; 64];
            let mut lane = 0;
            while lane < 64 {
                lanes[lane] = lane as u8;
                lane += 1;
            }
            lanes
        };
        // SAFETY: 64 bytes.
        let mut all = unsafe { _mm512_loadu_epi8(FIRST.as_ptr().cast()) };
        let mut count = 0;
        for &bits in bits {
            let room = &mut lanes[count..count + 64];
            // SAFETY: 64 bytes.
            unsafe { _mm512_storeu_epi8(room.as_mut_ptr().cast(), _mm512_maskz_compress_epi8(bits, all)) };
            all = _mm512_add_epi8(all, _mm512_set1_epi8(64));
            count += bits.count_ones() as usize;
        }
        count
    }

    /// Brackets by whole values.
    #[target_feature(enable = "avx512f,avx512bw,popcnt")]
    fn whole(brackets: &[(f64, f64)], row: &[f64; LANES], scale: f64, kept: &mut Kept) {
        let mut any = [0; LANES / 8];
        let one = _mm512_set1_epi64(1);
        let totals = kept.from_bracket.iter_mut().zip(&mut kept.in_bracket);
        for (&(low, high), (from_bracket, in_bracket)) in brackets.iter().zip(totals) {
            // Nothing is at or above what is not a number.
            let high = if high == f64::INFINITY { f64::NAN } else { high };
            let (low, high, scale) = (_mm512_set1_pd(low), _mm512_set1_pd(high), _mm512_set1_pd(scale));
            let (mut from, mut held) = (_mm512_setzero_si512(), _mm512_setzero_si512());
            for (index, any) in any.iter_mut().enumerate() {
                let scaled = _mm512_mul_pd(value(row, index), scale);
                let at_least = _mm512_cmp_pd_mask::<_CMP_GE_OQ>(scaled, low);
                let within = _mm512_mask_cmp_pd_mask::<_CMP_NGE_UQ>(at_least, scaled, high);
                from = _mm512_mask_add_epi64(from, at_least, from, one);
                held = _mm512_mask_add_epi64(held, within, held, one);
                *any |= within;
            }
            *from_bracket += _mm512_reduce_add_epi64(from).cast_unsigned();
            *in_bracket += _mm512_reduce_add_epi64(held).cast_unsigned();
        }
        let any: [u64; LANES / 64] = std::array::from_fn(|index| u64::from_le_bytes(any.as_chunks().0[index]));
        keep(&any, row, scale, &mut kept.values);
    }

    #[inline]
    #[target_feature(enable = "avx512f,popcnt")]
    fn one_edge(edge: f64, row: &[f64; LANES], scale: f64) -> u64 {
        let (edge, scale) = (_mm512_set1_pd(edge), _mm512_set1_pd(scale));
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

    /// Counts and values, however they are chunked.
    fn flat(kept: &Kept) -> (Vec<u64>, Vec<u64>, Vec<u64>, Vec<f64>) {
        let values = kept.lists().flatten().copied().collect();
        (kept.from_bracket.clone(), kept.in_bracket.clone(), kept.from_edge.clone(), values)
    }

    fn agree(sieve: &Sieve, row: &Row, scale: f64) {
        for count in [LANES, 0, 1, 7, 255] {
            let (mut fast, mut plain) = (sieve.nothing(0), sieve.nothing(0));
            for _ in 0..2 {
                sieve.sift(row, scale, count, &mut fast);
                sieve.sift_plain(row, scale, count, &mut plain);
            }
            assert_eq!(flat(&fast), flat(&plain), "{count} lanes through {sieve:?}");
        }
    }

    #[test]
    fn the_kernel_and_its_twin_agree() {
        const OPEN: f64 = f64::INFINITY;
        let brackets: [&[(f64, f64)]; 7] = [
            &[(0.1, 0.5), (1.0, 1.0 + 1e-9), (2.0, OPEN)],
            &[(0.0, OPEN)],
            &[(0.0, 0.3), (2.0, 2.0), (2.1, 2.5)],
            &[(0.0, 0.0), (1e-300, 1e-9), (1.0, 2.0)],
            &[(0.3, 0.31), (0.5, 0.51), (0.7, 0.71), (0.9, 0.91), (1.1, 1.11), (1.3, 1.31), (1.5, 3.0), (4.0, 5.0)],
            &[(1.9, 1.99), (1.991, 2.0), (2.00001, 2.1)],
            &[],
        ];
        let edges: [&[f64]; 6] = [
            &[],
            &[2.0, 2.0f64.next_up()],
            &[2.5, 2.5f64.next_down(), 3.3],
            &[f64::NEG_INFINITY, f64::NAN],
            &[0.0, -0.0, -1.0, 1e-200, OPEN],
            &[1e-310, 1e300],
        ];
        for brackets in brackets {
            for edges in edges {
                let sieve = Sieve::wide(brackets, edges);
                for seed in 0..20 {
                    let mut row = row(seed);
                    agree(&sieve, &row, 1.25);
                    row.0[(11 * seed) as usize] = OPEN;
                    row.0[(11 * seed + 1) as usize] = f64::MAX;
                    agree(&sieve, &row, 1.0);
                }
            }
        }
    }

    #[test]
    fn a_list_is_sifted_like_its_rows() {
        let values: Vec<f64> = (0..5).flat_map(|seed| row(seed).0).collect();
        for sieve in [Sieve::wide(&[(0.1, 0.5), (1.0, 2.1)], &[]), Sieve::exact(&[(-0.5, 0.1), (1.0, 1.5)], &[])] {
            for part in [&values[..0], &values[1..8], &values[3..259], &values[..512], &values[5..]] {
                let mut kept = sieve.nothing(0);
                sieve.sift_list(&values, &mut kept);
                sieve.empty(&mut kept);
                sieve.sift_list(part, &mut kept);
                let within = |value: f64| sieve.brackets().iter().any(|&(low, high)| value >= low && value < high);
                assert_eq!(flat(&kept).3, part.iter().copied().filter(|&value| within(value)).collect::<Vec<_>>());
                for (&(low, high), (from, inside)) in
                    sieve.brackets().iter().zip(kept.from_bracket.iter().zip(&kept.in_bracket))
                {
                    assert_eq!(*from, part.iter().filter(|&&value| value >= low).count() as u64);
                    assert_eq!(*inside, part.iter().filter(|&&value| value >= low && value < high).count() as u64);
                }
            }
        }
    }

    #[test]
    fn rows_of_one_number_and_its_neighbours() {
        let sieve = Sieve::wide(&[(1.0, 1.5), (1.7, 2.0), (2.5, 3.0)], &[1.7, 1.7f64.next_up(), 2.0, 2.0f64.next_up()]);
        let ends = sieve.brackets().iter().flat_map(|&(low, high)| [low, high]).chain([1.7, 2.0]);
        for end in ends {
            for value in [end.next_down(), end, end.next_up()] {
                let mut row = Row::ZERO;
                row.0[..200].fill(value);
                agree(&sieve, &row, 1.0);
            }
        }
    }

    #[test]
    fn brackets_become_a_little_wider_and_join() {
        let given = [(0.0, 0.1), (0.4, 0.5), (0.5, 0.7), (1.0, f64::INFINITY)];
        let expected = [(0.0, 0.1), (0.4, 0.7), (1.0, f64::INFINITY)];
        for edges in [&[] as &[f64], &[0.25, 40.0], &[1e-30, 1e30]] {
            let sieve = Sieve::wide(&given, edges);
            assert_eq!(sieve.brackets().len(), expected.len());
            for (&(low, high), (least, most)) in sieve.brackets().iter().zip(expected) {
                assert!(low <= least && low >= least * (1.0 - 2.5e-4), "{low} for {least}");
                assert!(high >= most && high <= most * (1.0 + 2.5e-4), "{high} for {most}");
            }
        }
    }

    #[cfg(target_arch = "x86_64")]
    #[test]
    fn lanes_are_listed_in_order() {
        for bits in [[0; 4], [u64::MAX; 4], [1, 0, 1 << 63, 0x8001_0000_f00f_0000]] {
            let mut lanes = [0; LANES + 64];
            let count = plain::list(&bits, &mut lanes);
            let expected: Vec<u8> =
                (0..=255u8).filter(|&lane| bits[usize::from(lane / 64)] >> (lane % 64) & 1 == 1).collect();
            assert_eq!(lanes[..count], expected);
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
