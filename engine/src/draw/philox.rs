//! Philox 4x32: a counter in, four random words out.

const MULTIPLIERS: [u32; 2] = [0xd251_1f53, 0xcd9e_8d57];
/// Golden ratio and sqrt(3) - 1, as 32-bit fractions: the steps of the key schedule.
const KEY_STEPS: [u32; 2] = [0x9e37_79b9, 0xbb67_ae85];

/// Rounds of the generator behind every draw.
pub(super) const ROUNDS: usize = 10;

/// The block of random words for a counter and a key: Philox4x32-10.
#[inline(always)]
pub fn philox4x32(counter: [u32; 4], key: [u32; 2]) -> [u32; 4] {
    philox4x32_of_rounds::<ROUNDS>(counter, key)
}

/// Philox4x32 with a given number of rounds.
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
