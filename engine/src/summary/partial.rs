//! What some patients contribute: absorbed block by block, merged in any order, the same whatever the split.

use multiversion::multiversion;

use crate::math::{ExactSum, Kept, Row, SUM_WORDS};

use super::Search;

/// Sums of one quantity about a centre that the scenario fixes.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Moments {
    /// Of the differences from the centre.
    pub sum: ExactSum,
    /// Of their squares.
    pub squares: ExactSum,
}

impl Moments {
    /// Adds the first `count` lanes. Inside a block the sum has a fixed order; blocks are added exactly, in any order.
    pub fn absorb(&mut self, row: &Row, centre: f64, count: usize) {
        let (sums, squares) = block_sums(row, centre, count);
        self.sum.add(sums.iter().sum());
        self.squares.add(squares.iter().sum());
    }

    /// Mean and standard deviation (of a sample) of `n` values.
    pub fn mean_and_sd(&self, centre: f64, n: u64) -> (f64, f64) {
        let size = n as f64;
        let (sum, squares) = (self.sum.value(), self.squares.value());
        let variance = if n > 1 { (squares - sum * (sum / size)) / (size - 1.0) } else { 0.0 };
        (centre + sum / size, variance.max(0.0).sqrt())
    }

    fn merge(&mut self, other: &Self) {
        self.sum.merge(&other.sum);
        self.squares.merge(&other.squares);
    }
}

/// Sums of differences from a centre and of their squares, in eight interleaved parts: the same order at every vector width.
#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn block_sums(row: &Row, centre: f64, count: usize) -> ([f64; 8], [f64; 8]) {
    let (mut sums, mut squares) = ([0.0; 8], [0.0; 8]);
    let (chunks, rest) = row.0[..count].as_chunks::<8>();
    for chunk in chunks {
        for lane in 0..8 {
            let difference = chunk[lane] - centre;
            sums[lane] += difference;
            squares[lane] += difference * difference;
        }
    }
    for (lane, value) in rest.iter().enumerate() {
        let difference = value - centre;
        sums[lane] += difference;
        squares[lane] += difference * difference;
    }
    (sums, squares)
}

/// What some patients contribute to every series of a pass.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Partial {
    /// How many patients.
    pub patients: u64,
    /// One entry a series; empty where the pass does not look at it.
    pub kept: Vec<Kept>,
    /// One entry a quantity of the population, where asked for.
    pub moments: Vec<Moments>,
}

impl Partial {
    /// Nothing yet, with room for what `patients` patients are expected to leave.
    pub fn new(searches: &[Option<Search>], moments: usize, patients: u64) -> Self {
        let nothing = |search: &Search| search.sieve().nothing((search.share * patients as f64) as usize);
        let kept = searches.iter().map(|search| search.as_ref().map_or_else(Kept::default, nothing)).collect();
        Self { patients: 0, kept, moments: vec![Moments::default(); moments] }
    }

    /// Adds the first `count` lanes of `row`, each times `scale`, to a series.
    pub fn absorb(&mut self, series: usize, search: &Search, row: &Row, scale: f64, count: usize) {
        search.sieve().sift(row, scale, count, &mut self.kept[series]);
    }

    /// Prepares for the next block of a series: see [`crate::math::Sieve::prefetch`].
    #[inline]
    pub fn prefetch(&self, series: usize, search: &Search) {
        search.sieve().prefetch(&self.kept[series]);
    }

    /// Adds what other patients contributed to the same searches.
    ///
    /// # Panics
    /// If the other comes of other searches.
    pub fn merge(&mut self, other: &Self) {
        assert_eq!((self.kept.len(), self.moments.len()), (other.kept.len(), other.moments.len()), "same searches");
        self.patients += other.patients;
        for (mine, theirs) in self.kept.iter_mut().zip(&other.kept) {
            mine.merge(theirs);
        }
        for (mine, theirs) in self.moments.iter_mut().zip(&other.moments) {
            mine.merge(theirs);
        }
    }

    /// As 64-bit words, to be stored and read back on any machine.
    pub fn to_words(&self) -> Vec<u64> {
        let mut words = vec![self.patients, self.kept.len() as u64, self.moments.len() as u64];
        for kept in &self.kept {
            words.extend([kept.from_bracket.len() as u64, kept.from_edge.len() as u64, kept.kept() as u64]);
            words.extend(kept.from_bracket.iter().chain(&kept.in_bracket).chain(&kept.from_edge));
            words.extend(kept.lists().flatten().map(|value| value.to_bits()));
        }
        for moments in &self.moments {
            words.extend(moments.sum.to_words());
            words.extend(moments.squares.to_words());
        }
        words
    }

    /// Reads [`Partial::to_words`]; `None` where the words are not of that form.
    pub fn from_words(words: &[u64]) -> Option<Self> {
        let mut rest = words;
        let mut take = |count: u64| {
            let (taken, after) = rest.split_at_checked(usize::try_from(count).ok()?)?;
            rest = after;
            Some(taken)
        };
        let &[patients, series, quantities] = take(3)? else { return None };
        let mut partial = Self { patients, ..Self::default() };
        for _ in 0..series {
            let &[brackets, edges, values] = take(3)? else { return None };
            let (from_bracket, in_bracket, from_edge) = (take(brackets)?, take(brackets)?, take(edges)?);
            let values = take(values)?.iter().map(|&bits| f64::from_bits(bits)).collect();
            partial.kept.push(Kept::stored(from_bracket.to_vec(), in_bracket.to_vec(), from_edge.to_vec(), values));
        }
        let mut sum = || ExactSum::from_words(take(SUM_WORDS as u64)?.try_into().ok()?);
        for _ in 0..quantities {
            partial.moments.push(Moments { sum: sum()?, squares: sum()? });
        }
        rest.is_empty().then_some(partial)
    }
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;
    use crate::math::LANES;
    use crate::summary::{Place, WindowEdges};

    fn searches() -> Vec<Option<Search>> {
        let window = Some(WindowEdges::new(Some(2.0), Some(8.0)));
        vec![
            Some(Search::new(&[Place::Between(1.0, 3.0), Place::Between(5.0, f64::INFINITY)], window, false, 0.5)),
            None,
            Some(Search::new(&[Place::Between(-1.0, 4.0), Place::At(4.0)], None, true, 0.5)),
        ]
    }

    fn absorbed(blocks: &[(u64, usize)]) -> Partial {
        let searches = searches();
        let mut partial = Partial::new(&searches, 1, 0);
        for &(seed, count) in blocks {
            let mut state = seed;
            let mut row = Row::ZERO;
            for lane in row.iter_mut() {
                state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
                *lane = (state >> 40) as f64 / f64::from(1 << 20);
            }
            for (series, search) in searches.iter().enumerate() {
                if let Some(search) = search {
                    partial.absorb(series, search, &row, 1.0, count);
                }
            }
            partial.moments[0].absorb(&row, 8.0, count);
            partial.patients += count as u64;
        }
        partial
    }

    /// Kept values in rising order: the order they came in is not part of what a partial means.
    fn sorted(mut partial: Partial) -> Partial {
        for kept in &mut partial.kept {
            let mut values: Vec<f64> = kept.lists().flatten().copied().collect();
            values.sort_by(f64::total_cmp);
            let (brackets, inside) = (kept.from_bracket.clone(), kept.in_bracket.clone());
            *kept = Kept::stored(brackets, inside, kept.from_edge.clone(), values);
        }
        partial
    }

    proptest! {
        #[test]
        fn any_split_in_any_order_merges_to_the_same(
            blocks in prop::collection::vec((any::<u64>(), 0..=LANES), 0..12),
            cut in 0usize..12,
        ) {
            let (one, other) = blocks.split_at(cut.min(blocks.len()));
            let whole = sorted(absorbed(&blocks));
            for (first, second) in [(one, other), (other, one)] {
                let mut merged = absorbed(first);
                merged.merge(&absorbed(second));
                prop_assert_eq!(&sorted(merged), &whole);
            }
        }

        #[test]
        fn stored_and_read_back_it_is_the_same(blocks in prop::collection::vec((any::<u64>(), 0..=LANES), 0..4)) {
            let partial = absorbed(&blocks);
            let words = partial.to_words();
            prop_assert_eq!(Partial::from_words(&words).map(sorted), Some(sorted(partial)));
            prop_assert_eq!(Partial::from_words(&words[..words.len() - 1]), None);
        }
    }
}
