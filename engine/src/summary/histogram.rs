//! A histogram of a pilot's values, fine enough to place brackets: cells of equal width in the upper half of a value's bits, that is
//! nearly equal on a log axis.

use multiversion::multiversion;

use crate::math::{LANES, Row};

/// Cells of a histogram; the first and the last are open.
pub const CELLS: usize = 2048;

/// Binades below the smallest and above the largest value of the sample that the cells reach.
const MARGIN: u32 = 2;

/// Where the cells of one series lie.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Cells {
    base: u32,
    shift: u32,
}

fn upper(value: f64) -> u32 {
    (value.to_bits() >> 32) as u32
}

impl Cells {
    /// Cells that cover a sample of non-negative values, and somewhat more; zeros fall into the first cell.
    ///
    /// # Panics
    /// Never: 32 bits can be shifted away.
    pub fn covering(sample: &[f64]) -> Self {
        let positive = || sample.iter().copied().filter(|&value| value > 0.0);
        let least = upper(positive().fold(f64::INFINITY, f64::min)).saturating_sub(MARGIN << 20).max(1);
        let most = upper(positive().fold(0.0, f64::max)).saturating_add(MARGIN << 20);
        let width = most.saturating_sub(least);
        let shift =
            (0..32).find(|shift| width >> shift < (CELLS - 2) as u32).expect("a width of 32 bits can be shifted away");
        Self { base: least, shift }
    }

    /// The lower end of a cell, for cells but the first.
    fn start(self, cell: usize) -> f64 {
        f64::from_bits((u64::from(self.base) + (((cell - 1) as u64) << self.shift)) << 32)
    }

    /// Adds the first `count` lanes of `row`, each times `scale`, to `histogram`, which has [`CELLS`] cells.
    ///
    /// # Panics
    /// If the histogram is shorter.
    pub fn absorb(self, row: &Row, scale: f64, count: usize, histogram: &mut [u32]) {
        let histogram: &mut [u32; CELLS] = histogram.try_into().expect("as many cells as a histogram has");
        let mut cells = [0u32; LANES];
        find(row, scale, self.base, self.shift, &mut cells);
        for cell in &cells[..count] {
            histogram[*cell as usize % CELLS] += 1;
        }
    }

    /// The value below which `place` of the counted values lie, by a straight line within a cell; `None` in an open cell.
    pub fn value(self, histogram: &[u32], place: f64) -> Option<f64> {
        let mut below = 0.0;
        for (cell, &count) in histogram.iter().enumerate() {
            let count = f64::from(count);
            if below + count > place {
                if cell == 0 || cell == CELLS - 1 {
                    return None;
                }
                let (start, end) = (self.start(cell), self.start(cell + 1));
                return Some(start + (end - start) * ((place - below) / count));
            }
            below += count;
        }
        None
    }
}

#[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl", "x86_64+avx2"))]
fn find(row: &Row, scale: f64, base: u32, shift: u32, cells: &mut [u32; LANES]) {
    for (cell, value) in cells.iter_mut().zip(&row.0) {
        let key = ((*value * scale).to_bits() >> 32) as u32;
        let inside = (key.wrapping_sub(base) >> shift) + 1;
        let inside = if inside > CELLS as u32 - 1 { CELLS as u32 - 1 } else { inside };
        *cell = if key < base { 0 } else { inside };
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn values_are_found_where_they_were_counted() {
        let mut row = Row::ZERO;
        for (lane, value) in row.iter_mut().enumerate() {
            *value = 1.0 + lane as f64 / 64.0;
        }
        let cells = Cells::covering(&row[..]);
        let mut histogram = vec![0; CELLS];
        cells.absorb(&row, 1.0, LANES, &mut histogram);
        assert_eq!(histogram.iter().sum::<u32>(), LANES as u32);
        for rank in [1, 50, 128, 200, 254] {
            let value = cells.value(&histogram, f64::from(rank)).expect("inside the cells");
            assert!(
                (value - row[rank as usize]).abs() < 0.02 * value,
                "rank {rank}: {value} against {}",
                row[rank as usize]
            );
        }
    }

    #[test]
    fn zeros_and_giants_fall_into_the_open_cells() {
        let cells = Cells::covering(&[1.0, 2.0]);
        let mut row = Row::splat(1.5);
        (row[0], row[1]) = (0.0, 1e30);
        let mut histogram = vec![0; CELLS];
        cells.absorb(&row, 1.0, LANES, &mut histogram);
        assert_eq!((histogram[0], histogram[CELLS - 1]), (1, 1));
        assert_eq!(cells.value(&histogram, 0.0), None);
    }
}
