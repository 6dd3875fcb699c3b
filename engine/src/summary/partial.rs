//! What some patients contribute: absorbed block by block, merged in any order, the same whatever the split.

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
        let (sums, squares) = sums(&row.0[..count], centre);
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

    /// Prepares for the next block of a series: see [`Kept::prefetch`].
    #[inline]
    pub fn prefetch(&self, series: usize) {
        self.kept[series].prefetch();
    }

    /// Adds what other patients contributed to the same searches.
    ///
    /// # Panics
    /// If the other comes of other searches.
    pub fn merge(&mut self, other: &Self) {
        assert_eq!((self.kept.len(), self.moments.len()), (other.kept.len(), other.moments.len()), "same searches");
        self.patients += other.patients;
        for (mine, theirs) in self.kept.iter_mut().zip(&other.kept) {
            add(&mut mine.from_bracket, &theirs.from_bracket);
            add(&mut mine.in_bracket, &theirs.in_bracket);
            add(&mut mine.from_edge, &theirs.from_edge);
            mine.values.extend_from_slice(&theirs.values);
        }
        for (mine, theirs) in self.moments.iter_mut().zip(&other.moments) {
            mine.merge(theirs);
        }
    }

    /// As 64-bit words, to be stored and read back on any machine.
    pub fn to_words(&self) -> Vec<u64> {
        let mut words = vec![self.patients, self.kept.len() as u64, self.moments.len() as u64];
        for kept in &self.kept {
            words.extend([kept.from_bracket.len() as u64, kept.from_edge.len() as u64, kept.values.len() as u64]);
            words.extend(kept.from_bracket.iter().chain(&kept.in_bracket).chain(&kept.from_edge));
            words.extend(kept.values.iter().map(|value| value.to_bits()));
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
            partial.kept.push(Kept {
                from_bracket: take(brackets)?.to_vec(),
                in_bracket: take(brackets)?.to_vec(),
                from_edge: take(edges)?.to_vec(),
                values: take(values)?.iter().map(|&bits| f64::from_bits(bits)).collect(),
            });
        }
        let mut sum = || ExactSum::from_words(take(SUM_WORDS as u64)?.try_into().ok()?);
        for _ in 0..quantities {
            partial.moments.push(Moments { sum: sum()?, squares: sum()? });
        }
        rest.is_empty().then_some(partial)
    }
}

fn add(mine: &mut [u64], theirs: &[u64]) {
    for (mine, theirs) in mine.iter_mut().zip(theirs) {
        *mine += theirs;
    }
}

/// Sums of the differences from a centre and of their squares, of every eighth value: the order is fixed, whatever the vectors.
#[multiversion::multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn sums(values: &[f64], centre: f64) -> ([f64; 8], [f64; 8]) {
    let (mut sums, mut squares) = ([0.0; 8], [0.0; 8]);
    let mut add = |lane: usize, value: f64| {
        let difference = value - centre;
        sums[lane] += difference;
        squares[lane] += difference * difference;
    };
    let (chunks, rest) = values.as_chunks::<8>();
    for chunk in chunks {
        for (lane, &value) in chunk.iter().enumerate() {
            add(lane, value);
        }
    }
    for (lane, &value) in rest.iter().enumerate() {
        add(lane, value);
    }
    (sums, squares)
}
