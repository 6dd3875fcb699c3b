//! One stream a quantity: uniform numbers addressed by patient and index.
//!
//! A draw is a pure function of seed, cohort, path of the quantity, patient and index. Adding a quantity, an arm or a
//! patient moves no other draw, and blocks of patients can be drawn in any order, on any number of threads.

use std::convert::Infallible;

use multiversion::multiversion;
use rand::TryRng;
use sha2::{Digest, Sha256};

use super::philox::philox4x32;
use crate::math::{LANES, Row};

/// Opens the text that is hashed into a key; changes if ever the draws do.
const KEY_DOMAIN: &str = "neap draws 1";

/// The draws of one quantity in one cohort.
///
/// The key is the first 64 bits of the SHA-256 of four parts, each preceded by its length in bytes (64 bits): the text
/// "neap draws 1", the seed (64 bits), the cohort (32 bits), the path (UTF-8); all numbers little-endian. The counter is
/// the patient (64 bits), the index (32 bits) and the block (32 bits), the lowest word first.
///
/// # Example
/// ```
/// use neap_engine::draw::{Stream, uniform};
/// use neap_engine::math::Row;
/// use rand::Rng;
///
/// let stream = Stream::new(2026, 0, "clearance");
/// let mut row = Row::ZERO;
/// stream.fill_uniform(1000, 0, &mut row);
/// assert_eq!(row[7], uniform(stream.word(1007, 0)));
/// assert_eq!(stream.at(1007, 0).next_u64(), stream.word(1007, 0));
/// ```
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Stream {
    key: [u32; 2],
}

impl Stream {
    /// The stream of the quantity at `path`. Another seed, cohort or path is another stream.
    ///
    /// ```
    /// use neap_engine::draw::Stream;
    ///
    /// assert_ne!(Stream::new(1, 0, "weight"), Stream::new(1, 1, "weight"));
    /// ```
    pub fn new(seed: u64, cohort: u32, path: &str) -> Self {
        let mut hash = Sha256::new();
        for part in [KEY_DOMAIN.as_bytes(), &seed.to_le_bytes(), &cohort.to_le_bytes(), path.as_bytes()] {
            hash.update((part.len() as u64).to_le_bytes());
            hash.update(part);
        }
        let digest = hash.finalize();
        let word = |at: usize| u32::from_le_bytes([digest[at], digest[at + 1], digest[at + 2], digest[at + 3]]);
        Self { key: [word(0), word(4)] }
    }

    /// The generator of one draw, for what takes an unknown number of words, up to 2^34 of 32 bits.
    ///
    /// ```
    /// use neap_engine::draw::Stream;
    /// use rand::RngExt;
    ///
    /// let stream = Stream::new(1, 0, "genotype");
    /// let die = stream.at(12, 0).random_range(1..=6);
    /// assert_eq!(die, stream.at(12, 0).random_range(1..=6));
    /// ```
    pub const fn at(&self, patient: u64, index: u32) -> Words {
        Words { key: self.key, patient, index, next_block: 0, buffer: [0; 4], used: 4 }
    }

    /// The first 64 bits of a draw.
    ///
    /// ```
    /// use neap_engine::draw::Stream;
    ///
    /// let stream = Stream::new(1, 0, "weight");
    /// assert_ne!(stream.word(0, 0), stream.word(0, 1));
    /// ```
    pub fn word(&self, patient: u64, index: u32) -> u64 {
        first_word(self.key, patient, index)
    }

    /// Uniform numbers in (0, 1) for the patients from `first_patient` on, one a lane: [`uniform`] of their
    /// [`Stream::word`]. 1.7 ns a number with AVX-512.
    ///
    /// ```
    /// use neap_engine::draw::Stream;
    /// use neap_engine::math::{LANES, Row};
    ///
    /// let stream = Stream::new(1, 0, "weight");
    /// let mut row = Row::ZERO;
    /// stream.fill_uniform(LANES as u64, 0, &mut row);
    /// assert!(row.iter().all(|&u| 0.0 < u && u < 1.0));
    /// ```
    pub fn fill_uniform(&self, first_patient: u64, index: u32, out: &mut Row) {
        uniform_lanes(self.key, first_patient, index, &mut out.0);
    }
}

#[inline(always)]
fn first_word(key: [u32; 2], patient: u64, index: u32) -> u64 {
    let words = philox4x32([patient as u32, (patient >> 32) as u32, index, 0], key);
    u64::from(words[0]) | (u64::from(words[1]) << 32)
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl+bmi2", "x86_64+avx2+bmi2"))]
fn uniform_lanes(key: [u32; 2], first_patient: u64, index: u32, lanes: &mut [f64; LANES]) {
    for (lane, value) in (0_u64..).zip(lanes) {
        *value = uniform(first_word(key, first_patient.wrapping_add(lane), index));
    }
}

/// A word as a number in (0, 1): the middle of one of 2^52 equal cells, `((word >> 12) + 1/2) 2^-52`, exactly.
///
/// ```
/// use neap_engine::draw::uniform;
///
/// assert_eq!(uniform(0), f64::EPSILON / 2.0);
/// assert_eq!(uniform(u64::MAX), 1.0 - f64::EPSILON / 2.0);
/// ```
#[inline(always)]
pub fn uniform(word: u64) -> f64 {
    const ONE_BITS: u64 = 1.0_f64.to_bits();
    const HALF_CELL: f64 = f64::EPSILON / 2.0;
    // Both steps are exact: a number in [1, 2) less 1, and half a cell more.
    (f64::from_bits(ONE_BITS | (word >> 12)) - 1.0) + HALF_CELL
}

/// The words of one draw, as a generator for `rand`.
#[derive(Clone, Debug)]
pub struct Words {
    key: [u32; 2],
    patient: u64,
    index: u32,
    next_block: u32,
    buffer: [u32; 4],
    used: usize,
}

impl TryRng for Words {
    type Error = Infallible;

    fn try_next_u32(&mut self) -> Result<u32, Infallible> {
        if self.used == self.buffer.len() {
            let counter = [self.patient as u32, (self.patient >> 32) as u32, self.index, self.next_block];
            self.buffer = philox4x32(counter, self.key);
            self.next_block = self.next_block.wrapping_add(1);
            self.used = 0;
        }
        let word = self.buffer[self.used];
        self.used += 1;
        Ok(word)
    }

    fn try_next_u64(&mut self) -> Result<u64, Infallible> {
        rand::rand_core::utils::next_u64_via_u32(self)
    }

    fn try_fill_bytes(&mut self, bytes: &mut [u8]) -> Result<(), Infallible> {
        rand::rand_core::utils::fill_bytes_via_next_word(bytes, || self.try_next_u32())
    }
}

#[cfg(test)]
mod tests {
    use rand::Rng;
    use rand_distr::{Distribution, Gamma, Normal};

    use super::*;
    use crate::math::{normal_cdf, normal_quantile, normal_quantile_row};

    /// Draws of a test; a block has 256 of them.
    const DRAWS: usize = 200 * LANES;
    /// The distance that a Kolmogorov-Smirnov statistic times sqrt(n) exceeds with probability 0.001 (the limit law
    /// `2 exp(-2 d^2)`): the false-alarm rate of each distribution test here. Seeds are fixed.
    const ALARM: f64 = 1.949_5;

    fn uniforms(stream: Stream, index: u32) -> Vec<f64> {
        let mut row = Row::ZERO;
        let mut all = Vec::with_capacity(DRAWS);
        for first in (0..DRAWS as u64).step_by(LANES) {
            stream.fill_uniform(first, index, &mut row);
            all.extend_from_slice(&row[..]);
        }
        all
    }

    /// sqrt(n) times the largest distance of a sample's distribution from a distribution function.
    fn distance(mut sample: Vec<f64>, cdf: impl Fn(f64) -> f64) -> f64 {
        sample.sort_unstable_by(f64::total_cmp);
        let n = sample.len() as f64;
        let gap = |(rank, &x): (usize, &f64)| {
            let share = cdf(x);
            (share - rank as f64 / n).max((rank + 1) as f64 / n - share)
        };
        sample.iter().enumerate().map(gap).fold(0.0, f64::max) * n.sqrt()
    }

    /// The same for two samples of one size, no value in both.
    fn distance_between(mut first: Vec<f64>, mut second: Vec<f64>) -> f64 {
        first.sort_unstable_by(f64::total_cmp);
        second.sort_unstable_by(f64::total_cmp);
        let n = first.len() as f64;
        let below = |x: f64| second.partition_point(|&y| y <= x) as f64;
        let gap = |(rank, &x): (usize, &f64)| (below(x) - rank as f64).abs().max((rank as f64 + 1.0 - below(x)).abs());
        first.iter().enumerate().map(gap).fold(0.0, f64::max) / n * (n / 2.0).sqrt()
    }

    #[test]
    fn keys_stay_what_they_were() {
        // The key was computed by Python's hashlib from the encoding in the docs.
        assert_eq!(Stream::new(42, 7, "subject.clearance").key, [0x88b6_9f5d, 0x6c28_87a2]);
        assert_eq!(Stream::new(0, 0, "").key, [0xa93d_fdc0, 0x1b7b_53c9]);
    }

    #[test]
    fn seed_cohort_and_path_each_make_another_stream() {
        let keys = [
            Stream::new(1, 0, "a"),
            Stream::new(2, 0, "a"),
            Stream::new(1, 1, "a"),
            Stream::new(1, 0, "b"),
            Stream::new(1, 0, "ab"),
        ];
        for (at, key) in keys.iter().enumerate() {
            assert!(!keys[..at].contains(key));
        }
    }

    #[test]
    fn blocks_words_and_generators_agree() {
        let stream = Stream::new(7, 1, "volume");
        let mut row = Row::ZERO;
        for (first, index) in [(0, 0), (256, 3), (u64::from(u32::MAX) - 100, u32::MAX), (u64::MAX - 100, 1)] {
            stream.fill_uniform(first, index, &mut row);
            for (lane, value) in (0_u64..).zip(row.iter()) {
                let patient = first.wrapping_add(lane);
                let word = stream.word(patient, index);
                assert_eq!(value.to_bits(), uniform(std::hint::black_box(word)).to_bits());
                assert_eq!(stream.at(patient, index).next_u64(), word);
                assert_eq!(stream.at(patient, index).next_u32(), word as u32);
            }
        }
    }

    #[test]
    fn a_generator_runs_through_its_blocks() {
        let stream = Stream::new(7, 1, "volume");
        let mut words = stream.at(5, 9);
        for block in 0..10 {
            let expected = philox4x32([5, 0, 9, block], stream.key);
            assert_eq!([(); 4].map(|()| words.next_u32()), expected);
        }
        let mut bytes = [0; 10];
        stream.at(5, 9).fill_bytes(&mut bytes);
        assert_eq!(bytes[..8], stream.word(5, 9).to_le_bytes());
    }

    #[test]
    fn draws_are_uniform() {
        let stream = Stream::new(1, 0, "uniform");
        for index in 0..4 {
            let distance = distance(uniforms(stream, index), |u| u);
            assert!(distance < ALARM, "{distance}");
        }
        // The same patient at two indexes, and neighbours at one: sums of pairs have the triangular distribution.
        let (first, second) = (uniforms(stream, 0), uniforms(stream, 1));
        let triangular = |s: f64| if s < 1.0 { s * s / 2.0 } else { 1.0 - (2.0 - s) * (2.0 - s) / 2.0 };
        let pairs: Vec<f64> = first.iter().zip(&second).map(|(a, b)| a + b).collect();
        let neighbours: Vec<f64> = first.chunks_exact(2).map(|pair| pair[0] + pair[1]).collect();
        assert!(distance(pairs, triangular) < ALARM);
        assert!(distance(neighbours, triangular) < ALARM);
    }

    #[test]
    fn quantiles_of_draws_are_normal() {
        let stream = Stream::new(1, 0, "normal");
        let mut ours = Vec::with_capacity(DRAWS);
        for block in uniforms(stream, 0).chunks_exact(LANES) {
            let mut row = Row::ZERO;
            row.copy_from_slice(block);
            normal_quantile_row(&mut row);
            ours.extend_from_slice(&row[..]);
        }
        assert_eq!(ours[3], normal_quantile(uniform(stream.word(3, 0))));
        let standard = Normal::new(0.0, 1.0).expect("a standard deviation of 1");
        let theirs: Vec<f64> = (0..DRAWS as u64).map(|patient| standard.sample(&mut stream.at(patient, 1))).collect();
        assert!(distance(ours.clone(), normal_cdf) < ALARM);
        assert!(distance(theirs.clone(), normal_cdf) < ALARM);
        let between = distance_between(ours, theirs);
        assert!(between < ALARM, "{between}");
    }

    #[test]
    fn samplers_that_reject_draw_over_a_generator() {
        // Shape 2, scale 1: P(X <= x) = 1 - (1 + x) exp(-x).
        let stream = Stream::new(1, 0, "gamma");
        let gamma = Gamma::new(2.0, 1.0).expect("positive parameters");
        let sample: Vec<f64> = (0..DRAWS as u64).map(|patient| gamma.sample(&mut stream.at(patient, 0))).collect();
        assert!(distance(sample, |x| 1.0 - (1.0 + x) * crate::math::exp(-x)) < ALARM);
    }
}
