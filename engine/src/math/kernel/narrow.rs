//! Picks the values between two numbers out of an unordered list, and counts those at or above the lower one.

/// Appends the values with `low <= value < high` to `out` and returns how many values are at or above `low`; an infinite `high`
/// holds everything above.
pub fn narrow(values: &[f64], low: f64, high: f64, out: &mut Vec<f64>) -> usize {
    out.reserve(values.len() + 8);
    // Nothing is at or above what is not a number.
    let high = if high == f64::INFINITY { f64::NAN } else { high };
    #[cfg(target_arch = "x86_64")]
    if is_x86_feature_detected!("avx512f") && is_x86_feature_detected!("popcnt") {
        #[expect(unsafe_code, reason = "calls a function compiled for a feature that was checked")]
        // SAFETY: the processor has the features, and there is room for all values and one vector more.
        return unsafe { avx512::narrow(values, low, high, out) };
    }
    narrow_plain(values, low, high, out)
}

/// The plain twin of the kernel; `high` is not a number where it is open.
#[expect(clippy::neg_cmp_op_on_partial_ord, reason = "an open end compares as not reached")]
fn narrow_plain(values: &[f64], low: f64, high: f64, out: &mut Vec<f64>) -> usize {
    let mut from = 0;
    for &value in values {
        from += usize::from(value >= low);
        if value >= low && !(value >= high) {
            out.push(value);
        }
    }
    from
}

#[cfg(target_arch = "x86_64")]
#[expect(
    unsafe_code,
    reason = "vector loads and stores by pointer; the plain twin beside it is what tests compare with"
)]
mod avx512 {
    use std::arch::x86_64::{
        _CMP_GE_OQ, _CMP_NGE_UQ, _mm512_cmp_pd_mask, _mm512_loadu_pd, _mm512_mask_cmp_pd_mask,
        _mm512_maskz_compress_pd, _mm512_set1_pd, _mm512_storeu_pd,
    };

    /// # Safety
    /// The processor must have AVX-512F and POPCNT; `out` must have room for `values.len() + 8` more.
    #[target_feature(enable = "avx512f,popcnt")]
    pub(super) unsafe fn narrow(values: &[f64], low: f64, high: f64, out: &mut Vec<f64>) -> usize {
        let (lows, highs) = (_mm512_set1_pd(low), _mm512_set1_pd(high));
        let (chunks, rest) = values.as_chunks::<8>();
        let (mut from, mut end) = (0, out.len());
        for chunk in chunks {
            // SAFETY: a chunk is eight values.
            let value = unsafe { _mm512_loadu_pd(chunk.as_ptr()) };
            let at_least = _mm512_cmp_pd_mask::<_CMP_GE_OQ>(value, lows);
            let within = _mm512_mask_cmp_pd_mask::<_CMP_NGE_UQ>(at_least, value, highs);
            from += at_least.count_ones() as usize;
            // SAFETY: at most as many values are appended as there are, and a store writes at most 8 past the last: the
            // caller made that room.
            unsafe { _mm512_storeu_pd(out.as_mut_ptr().add(end), _mm512_maskz_compress_pd(within, value)) };
            end += within.count_ones() as usize;
        }
        // SAFETY: the values up to `end` were just written, within the capacity.
        unsafe { out.set_len(end) };
        from + super::narrow_plain(rest, low, high, out)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_kernel_and_its_twin_agree() {
        let values: Vec<f64> = (0..1003u32).map(|i| f64::from(i.wrapping_mul(2_654_435_761) >> 8) - 4e6).collect();
        for length in [0, 1, 7, 8, 9, 64, 1003] {
            for (low, high) in [(-1e6, 1e6), (0.0, f64::NAN), (5.0, 5.0), (f64::NEG_INFINITY, 0.0)] {
                let (mut fast, mut plain) = (vec![1.0], vec![1.0]);
                let counted = narrow(&values[..length], low, high, &mut fast);
                assert_eq!(counted, narrow_plain(&values[..length], low, high, &mut plain));
                assert_eq!(fast, plain);
            }
        }
    }
}
