//! The exact sum: whatever the order of the terms, and however they were split, the same bits.
//!
//! Every f64 is an integer times 2^-1074. The sum is kept as that integer, in chunks of 32 bits that are held in 64, so
//! that a thousand additions fit before carries are propagated.
//!
//! Source: Neal 2015, Fast exact summation using small and large superaccumulators, arXiv:1505.05571 (the small one; from
//! memory).

/// Number of words that [`ExactSum::to_words`] gives.
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

/// A sum of f64 that rounds once, at the end: 2.4 ns a term, 544 bytes.
///
/// Infinities of one sign give that infinity; of both signs, or NaN, give NaN; an infinity is never made by an
/// intermediate overflow. An empty sum, and a sum of zeros of any sign, is plus zero. Holds 2^77 terms of any size.
///
/// # Example
/// ```
/// use neap_engine::math::ExactSum;
///
/// let mut sum = ExactSum::new();
/// for term in [1e300, 1.0, -1e300, f64::MAX, f64::MAX, -f64::MAX, -f64::MAX] {
///     sum.add(term);
/// }
/// assert_eq!(sum.value(), 1.0);
///
/// let mut other = ExactSum::new();
/// other.add(1e-300);
/// other.merge(&sum);
/// other.add(-1.0);
/// assert_eq!(other.value(), 1e-300);
/// assert_eq!(ExactSum::from_words(&other.to_words()), Some(other));
/// ```
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

#[cfg(test)]
mod tests {
    use num_bigint::BigInt;
    use num_rational::BigRational;
    use num_traits::{Signed, Zero};
    use proptest::collection::vec;
    use proptest::prelude::*;

    use super::*;

    fn sum_of(terms: &[f64]) -> ExactSum {
        let mut sum = ExactSum::new();
        for &term in terms {
            sum.add(term);
        }
        sum
    }

    fn exact(value: f64) -> BigRational {
        BigRational::from_float(value).expect("finite")
    }

    /// Asserts that `value` is the f64 nearest to `truth`, ties to even, by the distances to its neighbours.
    fn assert_nearest(value: f64, truth: &BigRational) {
        if value.is_infinite() {
            let half_beyond = exact(f64::MAX) + exact(f64::MAX - f64::MAX.next_down()) / BigInt::from(2);
            assert!(truth.abs() >= half_beyond && truth.is_positive() == (value > 0.0));
            return;
        }
        let distance = (exact(value) - truth).abs();
        for neighbour in [value.next_up(), value.next_down()] {
            if neighbour.is_infinite() {
                continue;
            }
            let further = (exact(neighbour) - truth).abs();
            let even = value.to_bits() & 1 == 0;
            assert!(distance < further || (distance == further && even), "{value:e} but {neighbour:e} is nearer");
        }
        assert!(!truth.is_zero() || value.to_bits() == 0);
    }

    /// Any finite f64, and clusters whose sums cancel or tie.
    fn term() -> impl Strategy<Value = f64> {
        prop_oneof![
            any::<u64>().prop_map(f64::from_bits).prop_filter("finite", |x| x.is_finite()),
            (-4_i32..4, 0_i32..3).prop_map(|(m, e)| f64::from(m) * [1.0, f64::EPSILON, f64::EPSILON / 2.0][e as usize]),
            prop::sample::select(vec![f64::MAX, -f64::MAX, f64::from_bits(1), -f64::MIN_POSITIVE, 1e16, -1e16]),
            -1e3..1e3,
        ]
    }

    proptest! {
        #[test]
        fn rounds_the_exact_sum_once(terms in vec(term(), 0..60)) {
            let truth = terms.iter().fold(BigRational::zero(), |total, &term| total + exact(term));
            assert_nearest(sum_of(&terms).value(), &truth);
        }

        #[test]
        fn order_and_split_move_no_bit((terms, shuffled) in vec(term(), 0..60).prop_flat_map(|terms| {
            (Just(terms.clone()), Just(terms).prop_shuffle())
        }), split in 0_usize..60) {
            let whole = sum_of(&terms);
            prop_assert_eq!(sum_of(&shuffled).to_words(), whole.to_words());
            let (first, second) = shuffled.split_at(split.min(shuffled.len()));
            let mut parts = sum_of(second);
            parts.merge(&sum_of(first));
            prop_assert_eq!(parts.to_words(), whole.to_words());
            prop_assert_eq!(parts.value().to_bits(), whole.value().to_bits());
        }

        #[test]
        fn words_bring_the_sum_back(terms in vec(term(), 0..60)) {
            let sum = sum_of(&terms);
            prop_assert_eq!(ExactSum::from_words(&sum.to_words()), Some(sum));
        }
    }

    #[test]
    fn many_terms_of_one_size_leave_room_for_carries() {
        let mut sum = ExactSum::new();
        for _ in 0..100_000 {
            sum.add(-f64::MAX);
        }
        for _ in 0..100_000 {
            sum.add(f64::MAX.next_down());
        }
        assert_eq!(sum.value(), -1e5 * (f64::MAX - f64::MAX.next_down()));
    }

    #[test]
    fn ties_go_to_even_and_sticky_bits_break_them() {
        let half = f64::EPSILON / 2.0;
        assert_eq!(sum_of(&[1.0, half]).value(), 1.0);
        assert_eq!(sum_of(&[1.0, half, f64::from_bits(1)]).value(), 1.0 + f64::EPSILON);
        assert_eq!(sum_of(&[1.0, f64::EPSILON, half]).value(), 1.0 + 2.0 * f64::EPSILON);
        assert_eq!(sum_of(&[f64::MAX, 9.9e291]).value(), f64::MAX);
        assert_eq!(sum_of(&[f64::MAX, 1e292]).value(), f64::INFINITY);
    }

    #[test]
    fn infinities_and_nan_are_kept_apart() {
        let (plus, minus) = (f64::INFINITY, f64::NEG_INFINITY);
        assert_eq!(sum_of(&[1.0, plus, plus]).value(), plus);
        assert_eq!(sum_of(&[minus, f64::MAX]).value(), minus);
        assert!(sum_of(&[plus, minus]).value().is_nan());
        assert!(sum_of(&[f64::NAN, plus]).value().is_nan());
        let mut merged = sum_of(&[plus]);
        merged.merge(&sum_of(&[minus]));
        assert!(merged.value().is_nan());
        assert_eq!(sum_of(&[]).value().to_bits(), 0);
        assert_eq!(sum_of(&[-0.0]).value().to_bits(), 0);
    }

    #[test]
    fn foreign_words_are_refused() {
        let mut words = sum_of(&[1.0]).to_words();
        words[3] = 1 << 32;
        assert_eq!(ExactSum::from_words(&words), None);
        words[3] = 0;
        words[CHUNKS] = 8;
        assert_eq!(ExactSum::from_words(&words), None);
    }
}
