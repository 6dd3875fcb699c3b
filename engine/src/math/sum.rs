//! The exact sum: whatever the order of the terms, and however they were split, the same bits.

/// Words of [`ExactSum::to_words`].
pub const SUM_WORDS: usize = CHUNKS + 1;

/// Chunks of 32 bits from 2^-1074 on; the last one, signed, leaves room for 2^77 numbers of the largest magnitude.
const CHUNKS: usize = 67;
const CHUNK_BITS: u32 = 32;
const CHUNK_MASK: i64 = (1 << CHUNK_BITS) - 1;
/// Each addition changes a chunk by less than 2^53, so 2^10 - 1 of them fit between two propagations of carries.
const ROOM: u32 = (1 << 10) - 1;

const MANTISSA_BITS: u32 = 52;
const MANTISSA_MASK: u64 = (1 << MANTISSA_BITS) - 1;

const SEEN_INFINITY: u8 = 1;
const SEEN_MINUS_INFINITY: u8 = 2;
const SEEN_NAN: u8 = 4;

/// A sum of f64 that rounds once, at the end.
#[derive(Clone, Debug)]
pub struct ExactSum {
    chunks: [i64; CHUNKS],
    /// Additions that still fit before carries must be propagated.
    room: u32,
    /// What was seen of infinities and NaN.
    seen: u8,
}

impl ExactSum {
    /// The empty sum.
    pub const fn new() -> Self {
        Self { chunks: [0; CHUNKS], room: ROOM, seen: 0 }
    }

    /// Adds one number.
    pub fn add(&mut self, value: f64) {
        let bits = value.to_bits();
        let exponent = (bits >> MANTISSA_BITS) & 0x7ff;
        let mut mantissa = bits & MANTISSA_MASK;
        if exponent == 0x7ff {
            self.seen |= match (mantissa == 0, value > 0.0) {
                (true, true) => SEEN_INFINITY,
                (true, false) => SEEN_MINUS_INFINITY,
                (false, _) => SEEN_NAN,
            };
            return;
        }
        if self.room == 0 {
            self.propagate();
        }
        self.room -= 1;
        // value = mantissa * 2^(position - 1074)
        let position = if exponent == 0 {
            0
        } else {
            mantissa |= 1 << MANTISSA_BITS;
            exponent - 1
        };
        let chunk = (position >> 5) as usize;
        let shift = (position & 31) as u32;
        let low = (mantissa << shift).cast_signed() & CHUNK_MASK;
        let high = (mantissa >> (CHUNK_BITS - shift)).cast_signed();
        if value < 0.0 {
            self.chunks[chunk] -= low;
            self.chunks[chunk + 1] -= high;
        } else {
            self.chunks[chunk] += low;
            self.chunks[chunk + 1] += high;
        }
    }

    /// Adds all that another sum holds.
    pub fn merge(&mut self, other: &Self) {
        let mut other = other.clone();
        other.propagate();
        self.propagate();
        for (chunk, more) in self.chunks.iter_mut().zip(other.chunks) {
            *chunk += more;
        }
        self.seen |= other.seen;
        self.propagate();
    }

    /// Brings every chunk but the last into [0, 2^32): the one representation of the value held.
    fn propagate(&mut self) {
        let mut carry = 0;
        for chunk in &mut self.chunks[..CHUNKS - 1] {
            let total = *chunk + carry;
            *chunk = total & CHUNK_MASK;
            carry = total >> CHUNK_BITS;
        }
        self.chunks[CHUNKS - 1] += carry;
        self.room = ROOM;
    }

    /// The sum, rounded to the nearest f64 (ties to even).
    pub fn value(&self) -> f64 {
        match self.seen {
            0 => self.finite_value(),
            SEEN_INFINITY => f64::INFINITY,
            SEEN_MINUS_INFINITY => f64::NEG_INFINITY,
            _ => f64::NAN,
        }
    }

    fn finite_value(&self) -> f64 {
        let mut sum = self.clone();
        sum.propagate();
        let negative = sum.chunks[CHUNKS - 1] < 0;
        if negative {
            for chunk in &mut sum.chunks {
                *chunk = -*chunk;
            }
            sum.propagate();
        }
        let magnitude = magnitude(&sum.chunks);
        if negative { -magnitude } else { magnitude }
    }

    /// The sum as words that can be stored; equal sums give equal words.
    pub fn to_words(&self) -> [u64; SUM_WORDS] {
        let mut sum = self.clone();
        sum.propagate();
        let mut words = [0; SUM_WORDS];
        for (word, chunk) in words.iter_mut().zip(sum.chunks) {
            *word = chunk.cast_unsigned();
        }
        words[CHUNKS] = u64::from(sum.seen);
        words
    }

    /// The sum from its words; `None` if [`ExactSum::to_words`] can't have written them.
    pub fn from_words(words: &[u64; SUM_WORDS]) -> Option<Self> {
        let (chunk_words, seen) = (&words[..CHUNKS], words[CHUNKS]);
        if seen > u64::from(SEEN_INFINITY | SEEN_MINUS_INFINITY | SEEN_NAN)
            || chunk_words[..CHUNKS - 1].iter().any(|&word| word > CHUNK_MASK as u64)
        {
            return None;
        }
        let mut sum = Self::new();
        for (chunk, &word) in sum.chunks.iter_mut().zip(chunk_words) {
            *chunk = word.cast_signed();
        }
        sum.seen = seen as u8;
        Some(sum)
    }
}

impl Default for ExactSum {
    fn default() -> Self {
        Self::new()
    }
}

impl PartialEq for ExactSum {
    fn eq(&self, other: &Self) -> bool {
        self.to_words() == other.to_words()
    }
}

impl Eq for ExactSum {}

/// Rounds a propagated, nonnegative number of chunks.
fn magnitude(chunks: &[i64; CHUNKS]) -> f64 {
    let Some(top) = chunks.iter().rposition(|&chunk| chunk != 0) else { return 0.0 };
    // The position of the leading bit, counted from 2^-1074.
    let leading = CHUNK_BITS as usize * top + (63 - chunks[top].leading_zeros() as usize);
    let bit_width = MANTISSA_BITS as usize + 1;
    if leading < bit_width {
        // Exact; a subnormal number, or the first normal binade: the bits are the number.
        return f64::from_bits((chunks[0] | (chunks[1] << CHUNK_BITS)) as u64);
    }
    let lowest = leading - MANTISSA_BITS as usize;
    let exponent = lowest as u64 + 1;
    if exponent >= 0x7ff {
        return f64::INFINITY;
    }
    let mantissa = bits_from(chunks, lowest) & ((1 << bit_width) - 1);
    let half = bits_from(chunks, lowest - 1) & 1 == 1;
    let odd = mantissa & 1 == 1;
    let up = half && (odd || any_below(chunks, lowest - 1));
    // A carry out of the mantissa moves to the next exponent, and from the last one to infinity.
    f64::from_bits((exponent << MANTISSA_BITS) + (mantissa & MANTISSA_MASK) + u64::from(up))
}

/// 64 bits from a position on.
fn bits_from(chunks: &[i64; CHUNKS], position: usize) -> u64 {
    let (chunk, shift) = (position / 32, position % 32);
    let at = |i: usize| chunks.get(i).map_or(0, |&c| c as u128);
    ((at(chunk) | (at(chunk + 1) << 32) | (at(chunk + 2) << 64)) >> shift) as u64
}

/// Whether any bit below a position is set.
fn any_below(chunks: &[i64; CHUNKS], position: usize) -> bool {
    let (chunk, shift) = (position / 32, position % 32);
    chunks[..chunk].iter().any(|&c| c != 0) || chunks[chunk] & ((1 << shift) - 1) != 0
}
