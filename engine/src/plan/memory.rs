//! How much is kept, and how many passes a memory budget makes of it.

use super::Plan;
use crate::course::{AT_A_TIME, KEPT_RUNS, KEPT_STEPS};
use crate::math::{LANES, Row, chunk_for};

/// Up to so many patients every value is kept: a pilot would not pay.
pub const DIRECT: u64 = 8192;

/// One patient in so many belongs to the pilot: a larger pilot costs its own pass, a smaller one keeps more values in the run.
const PILOT_PART: u64 = 24;

/// No pilot is larger: its histograms count in 32 bits.
const LARGEST_PILOT: u64 = 1 << 26;

/// Kept values as the pilot expects them may turn out a little more.
const MARGIN: f64 = 1.1;

/// Bytes a series takes beside its kept values: counts and headers, for one worker.
const SERIES_BYTES: u64 = 512;

/// Bytes that come into memory together.
const PAGE: u64 = 4096;

/// Bytes a series takes from the beginning to the tables: what is looked for, what was found, its rows.
const ANSWER_BYTES: u64 = 1024;

/// What the process takes before it keeps anything: code, tables on their way out, the allocator's own.
const PROCESS_BYTES: u64 = 24 << 20;

/// Patients in the pilot of a run; `None` where all values are kept.
pub fn pilot_size(patients: u64) -> Option<u64> {
    (patients > DIRECT).then(|| (patients / PILOT_PART).clamp(1024, LARGEST_PILOT).next_multiple_of(LANES as u64))
}

/// Cuts series into tiles that fit the budget, in order: `shares[i]` is the part of `patients` values expected to be kept of
/// series `i`. A series too large for the budget on its own gets a tile of its own.
pub fn tiles(shares: &[f64], patients: u64, threads: usize, budget: u64) -> Vec<std::ops::Range<usize>> {
    let mut out = Vec::new();
    let (mut start, mut filled) = (0, 0.0);
    for (index, share) in shares.iter().enumerate() {
        let expected = share * patients as f64;
        let lanes = chunk_for((expected / threads as f64) as usize);
        // A chunk is full when it has no room for another block. Each worker's last one is half empty on average; a small one takes
        // its place in memory all the same.
        let full = lanes as f64 / (lanes - LANES) as f64;
        let chunk = 8 * lanes as u64;
        let bytes = expected * 8.0 * MARGIN * full
            + (threads as u64 * ((chunk / 2).max(chunk.min(PAGE)) + SERIES_BYTES)) as f64;
        if index > start && filled + bytes > budget as f64 {
            out.push(start..index);
            (start, filled) = (index, 0.0);
        }
        filled += bytes;
    }
    if start < shares.len() {
        out.push(start..shares.len());
    }
    out
}

impl Plan {
    /// Bytes of the blocks in work, all threads together.
    pub fn block_bytes(&self) -> u64 {
        let rows = self.cohort.len() + 2 * self.individuals.len() + self.individuals.scratch();
        let march = 8 + 7 * (2 + KEPT_STEPS) + 2 * (1 + KEPT_RUNS) + (4 + AT_A_TIME) * self.protocol.shapes.len() + 8;
        (self.limits().threads * (rows + march) * size_of::<Row>()) as u64
    }

    /// Bytes left for kept values.
    pub fn budget(&self) -> u64 {
        self.limits().memory.saturating_sub(self.block_bytes() + PROCESS_BYTES + self.signals() as u64 * ANSWER_BYTES)
    }

    /// The least that a run of this plan works in: blocks, every series' order statistics, and one tile of some size.
    pub(super) fn least_memory(&self) -> u64 {
        PROCESS_BYTES + self.block_bytes() + self.signals() as u64 * ANSWER_BYTES + (4 << 20)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn tiles_cover_every_series_once_and_in_order() {
        let shares = [0.5, 0.1, 0.9, 0.0, 0.2, 1.0];
        for budget in [1, 10_000, 100_000, 1 << 30] {
            let tiles = tiles(&shares, 10_000, 2, budget);
            let all: Vec<usize> = tiles.iter().cloned().flatten().collect();
            assert_eq!(all, (0..shares.len()).collect::<Vec<_>>(), "budget {budget}");
        }
        assert_eq!(tiles(&shares, 10_000, 2, 1).len(), shares.len());
        assert_eq!(tiles(&shares, 10_000, 2, 1 << 30).len(), 1);
    }
}
