//! Reads `tests/reference/math/*.csv` for the tests: arguments, and values to far more than 53 bits.

use std::path::Path;

/// An argument list and the value there.
pub(super) struct Point {
    pub(super) arguments: Vec<f64>,
    nearest: f64,
    rest_in_ulp: f64,
}

impl Point {
    /// The error of `value`, in units in the last place of the f64 nearest to the truth.
    pub(super) fn error(&self, value: f64) -> f64 {
        ((value - self.nearest) / last_place(self.nearest) - self.rest_in_ulp).abs()
    }
}

/// The distance to the next f64 away from zero.
fn last_place(value: f64) -> f64 {
    f64::from_bits(value.abs().to_bits() + 1) - value.abs()
}

/// The points of `tests/reference/math/NAME.csv`.
pub(super) fn points(name: &str) -> Vec<Point> {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join(format!("../tests/reference/math/{name}.csv"));
    let text = std::fs::read_to_string(&path).unwrap_or_else(|error| panic!("{}: {error}", path.display()));
    let number = |cell: &str| cell.parse::<f64>().unwrap_or_else(|error| panic!("{name}: {cell}: {error}"));
    text.lines()
        .skip(1)
        .map(|line| {
            let cells: Vec<f64> = line.split(',').map(number).collect();
            let [arguments @ .., _, nearest, rest_in_ulp] = cells.as_slice() else { panic!("{name}: {line}") };
            Point { arguments: arguments.to_vec(), nearest: *nearest, rest_in_ulp: *rest_in_ulp }
        })
        .collect()
}

/// Asserts that no error exceeds `bound` ulp over the points of a file, all 400 of them.
pub(super) fn assert_within(name: &str, bound: f64, function: impl Fn(&[f64]) -> f64) {
    let points = points(name);
    assert_eq!(points.len(), 400, "{name}");
    for point in points {
        let value = function(&point.arguments);
        let error = point.error(value);
        assert!(error <= bound, "{name}{:?} = {value:e}: {error} ulp", point.arguments);
    }
}

/// Numbers of every kind: all exponents of both signs, subnormal numbers, zeros, infinities, NaN, and rows of
/// scattered values in the range where the functions work.
pub(super) fn sweep() -> Vec<f64> {
    let mut values = vec![0.0, -0.0, f64::INFINITY, f64::NEG_INFINITY, f64::NAN, f64::MIN_POSITIVE, 1.0, f64::MAX];
    for exponent in 0..2047_u64 {
        for mantissa in [0, 1, 0x8_0000_0000_0000, 0xf_ffff_ffff_ffff] {
            let value = f64::from_bits((exponent << 52) | mantissa);
            values.extend([value, -value]);
        }
    }
    let mut word = 1_u64;
    for _ in 0..20_000 {
        word = word.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        let share = (word >> 11) as f64 / 9_007_199_254_740_992.0;
        values.extend([share, 1500.0 * (share - 0.5), f64::from_bits(word)]);
    }
    values
}

/// Asserts that a function of rows gives, lane by lane, the bits of its scalar twin.
pub(super) fn assert_same_bits(row_function: fn(&mut super::Row), scalar: fn(f64) -> f64) {
    for lanes in sweep().chunks(super::LANES) {
        let mut row = super::Row::ZERO;
        row[..lanes.len()].copy_from_slice(lanes);
        row_function(&mut row);
        for (&argument, &value) in lanes.iter().zip(row.iter()) {
            let alone = scalar(std::hint::black_box(argument));
            let same = value.to_bits() == alone.to_bits() || (value.is_nan() && alone.is_nan());
            assert!(same, "{argument:e}: {value:e} in a row, {alone:e} alone");
        }
    }
}
