//! Philox 4x32: a counter in, four random words out.
//!
//! Source: Salmon, Moraes, Dror and Shaw 2011, Parallel random numbers: as easy as 1, 2, 3, SC11 (from memory; the
//! published known answers are met).

const MULTIPLIERS: [u32; 2] = [0xd251_1f53, 0xcd9e_8d57];
/// Golden ratio and sqrt(3) - 1, as 32-bit fractions: the steps of the key schedule.
const KEY_STEPS: [u32; 2] = [0x9e37_79b9, 0xbb67_ae85];

/// Rounds of the generator behind every draw.
pub(super) const ROUNDS: usize = 10;

/// The block of random words for a counter and a key: Philox4x32-10. Words are lowest first.
///
/// ```
/// use neap_engine::draw::philox4x32;
///
/// assert_eq!(philox4x32([0; 4], [0; 2]), [0x6627_e8d5, 0xe169_c58d, 0xbc57_ac4c, 0x9b00_dbd8]);
/// ```
#[inline(always)]
pub fn philox4x32(counter: [u32; 4], key: [u32; 2]) -> [u32; 4] {
    philox4x32_of_rounds::<ROUNDS>(counter, key)
}

/// Philox4x32 with `N` rounds; 7 is the fewest its authors found to pass every test.
///
/// ```
/// use neap_engine::draw::philox4x32_of_rounds;
///
/// assert_eq!(philox4x32_of_rounds::<7>([0; 4], [0; 2])[0], 0x5f6f_b709);
/// ```
#[inline(always)]
pub fn philox4x32_of_rounds<const N: usize>(counter: [u32; 4], key: [u32; 2]) -> [u32; 4] {
    // Words stand in 64-bit lanes, whose product of the low halves is one instruction at every vector width.
    let mut words = counter.map(u64::from);
    for [key0, key1] in key_schedule::<N>(key) {
        let product0 = u64::from(MULTIPLIERS[0]) * (words[0] & 0xffff_ffff);
        let product1 = u64::from(MULTIPLIERS[1]) * (words[2] & 0xffff_ffff);
        words = [
            (product1 >> 32) ^ words[1] ^ u64::from(key0),
            product1 & 0xffff_ffff,
            (product0 >> 32) ^ words[3] ^ u64::from(key1),
            product0 & 0xffff_ffff,
        ];
    }
    words.map(|word| word as u32)
}

/// The key of every round.
#[inline(always)]
fn key_schedule<const N: usize>(key: [u32; 2]) -> [[u32; 2]; N] {
    let mut keys = [key; N];
    for round in 1..N {
        keys[round] = [keys[round - 1][0].wrapping_add(KEY_STEPS[0]), keys[round - 1][1].wrapping_add(KEY_STEPS[1])];
    }
    keys
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn published_answers_are_met() {
        let table = include_str!("../../../tests/reference/random_numbers/philox4x32.csv");
        let words = |cell: &str| -> Vec<u32> {
            cell.split(' ').map(|word| u32::from_str_radix(word, 16).expect("hexadecimal")).collect()
        };
        let mut seen = [0, 0];
        for line in table.lines().skip(1) {
            let cells: Vec<&str> = line.split(',').collect();
            let counter = words(cells[1]).try_into().expect("four words");
            let key = words(cells[2]).try_into().expect("two words");
            let output = if cells[0] == "7" {
                seen[0] += 1;
                philox4x32_of_rounds::<7>(counter, key)
            } else {
                seen[1] += 1;
                philox4x32(counter, key)
            };
            assert_eq!(output.to_vec(), words(cells[3]), "{line}");
        }
        assert_eq!(seen, [3, 3]);
    }
}
