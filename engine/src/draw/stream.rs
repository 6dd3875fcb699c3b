//! One stream a quantity: uniform numbers addressed by patient and index.

use std::convert::Infallible;

use multiversion::multiversion;
use rand::TryRng;
use sha2::{Digest, Sha256};

use super::philox::philox4x32;
use crate::math::{LANES, Row};

/// Opens the text that is hashed into a key; changes if ever the draws do.
const KEY_DOMAIN: &str = "neap draws 1";

/// The draws of one quantity in one cohort.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Stream {
    key: [u32; 2],
}

impl Stream {
    /// The stream of the quantity at `path`.
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

    /// The generator of one draw, for what takes an unknown number of words.
    pub const fn at(&self, patient: u64, index: u32) -> Words {
        Words { key: self.key, patient, index, next_block: 0, buffer: [0; 4], used: 4 }
    }

    /// The first 64 bits of a draw.
    pub fn word(&self, patient: u64, index: u32) -> u64 {
        first_word(self.key, patient, index)
    }

    /// Uniform numbers in (0, 1) for the patients from `first_patient` on, one a lane.
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

/// A word as a number in (0, 1): the middle of one of 2^52 equal cells.
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
