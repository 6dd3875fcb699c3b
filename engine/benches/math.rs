//! Nanoseconds a value of the portable mathematics and of the draws, over rows in cache, on one core:
//! `cargo bench -p neap-engine --bench math`. Each case is the least of many repeats.

#![expect(clippy::print_stdout, reason = "a bench reports on the terminal")]

use std::hint::black_box;
use std::time::{Duration, Instant};

use multiversion::multiversion;
use neap_engine::draw::{Stream, uniform};
use neap_engine::math::{
    ExactSum, LANES, Row, convolved2, convolved3, decay, exp, exp_row, falling1, falling2, falling3, ln, ln_row,
    normal_cdf, normal_quantile, normal_quantile_row,
};

/// Rows of a repeat: 32 kB a column, so that everything stays in the first cache levels.
const ROWS: usize = 16;
/// Each case repeats for this long.
const PATIENCE: Duration = Duration::from_millis(300);

/// Defines a function that replaces the first row by a function of the lanes of three rows, compiled for several
/// vector widths.
macro_rules! lanes {
    ($name:ident, |$a:ident, $b:ident, $c:ident| $value:expr) => {
        #[multiversion(targets("x86_64+avx512f+avx512bw+avx512dq+avx512vl+bmi2", "x86_64+avx2+bmi2"))]
        fn $name(rows: &mut [Row; 3]) {
            let [first, second, third] = rows;
            for lane in 0..LANES {
                let ($a, $b, $c) = (first.0[lane], second.0[lane], third.0[lane]);
                let _ = ($b, $c);
                first.0[lane] = $value;
            }
        }
    };
}

lanes!(decay_rows, |a, b, c| {
    let (left, lost) = decay(a);
    left - lost
});
lanes!(falling1_rows, |a, b, c| falling1(a));
lanes!(falling2_rows, |a, b, c| falling2(a, a + b));
lanes!(falling3_rows, |a, b, c| falling3(a, a + b, a + b + c));
lanes!(convolved2_rows, |a, b, c| convolved2(a, b, c));
lanes!(convolved3_rows, |a, b, c| convolved3(a, b, 1.0, c));

/// Runs a case on fresh copies of the rows and prints its least time a value.
fn case(name: &str, from: &[[Row; 3]], against: Option<f64>, mut work: impl FnMut(&mut [Row; 3])) -> f64 {
    let mut least = f64::INFINITY;
    let begin = Instant::now();
    while begin.elapsed() < PATIENCE {
        let mut rows = from.to_vec();
        black_box(&mut rows);
        let start = Instant::now();
        for row in &mut rows {
            work(row);
        }
        least = least.min(start.elapsed().as_secs_f64());
        black_box(&rows);
    }
    let nanoseconds = least * 1e9 / (ROWS * LANES) as f64;
    match against {
        Some(base) => println!("{name:<44} {nanoseconds:7.2} ns   {:5.2} x", nanoseconds / base),
        None => println!("{name:<44} {nanoseconds:7.2} ns"),
    }
    nanoseconds
}

fn each(rows: &mut [Row; 3], function: impl Fn(f64) -> f64) {
    for lane in rows[0].iter_mut() {
        *lane = function(*lane);
    }
}

fn main() {
    let stream = Stream::new(1, 0, "bench");
    let mut uniforms = vec![[Row::ZERO; 3]; ROWS];
    for (patient, rows) in (0..).step_by(LANES).zip(&mut uniforms) {
        for (index, row) in (0..).zip(rows) {
            stream.fill_uniform(patient, index, row);
        }
    }
    let scaled =
        |scale: f64| -> Vec<_> { uniforms.iter().map(|rows| rows.map(|row| Row(row.0.map(|u| u * scale)))).collect() };
    let (falls, positive) = (scaled(-30.0), scaled(4.0));

    println!("least time a value, rows of {LANES} lanes; ratio to the line that says so");
    let base = case("exp, libm crate, baseline", &falls, None, |rows| each(rows, libm::exp));
    case("exp, one at a time", &falls, Some(base), |rows| each(rows, |x| exp(black_box(x))));
    case("exp_row", &falls, Some(base), |rows| exp_row(&mut rows[0]));
    case("decay: exp(-x) and 1 - exp(-x)", &positive, Some(base), decay_rows);
    let base = case("ln, libm crate, baseline", &positive, None, |rows| each(rows, libm::log));
    case("ln, one at a time", &positive, Some(base), |rows| each(rows, |x| ln(black_box(x))));
    case("ln_row", &positive, Some(base), |rows| ln_row(&mut rows[0]));
    let base = case("(1 - exp(-x)) / x, libm crate, baseline", &positive, None, |rows| {
        each(rows, |x| -libm::expm1(-x) / x);
    });
    case("falling1", &positive, Some(base), falling1_rows);
    case("falling2", &positive, Some(base), falling2_rows);
    case("falling3", &positive, Some(base), falling3_rows);
    case("convolved2", &positive, Some(base), convolved2_rows);
    case("convolved3", &positive, Some(base), convolved3_rows);
    let base = case("normal_quantile, one at a time, baseline", &uniforms, None, |rows| {
        each(rows, |u| normal_quantile(black_box(u)));
    });
    case("normal_quantile_row", &uniforms, Some(base), |rows| normal_quantile_row(&mut rows[0]));
    let base = case("lower normal tail, libm erfc, baseline", &positive, None, |rows| {
        each(rows, |x| 0.5 * libm::erfc(x * std::f64::consts::FRAC_1_SQRT_2));
    });
    case("normal_cdf", &positive, Some(base), |rows| each(rows, |x| normal_cdf(-x)));
    let mut patient = 0;
    let base = case("uniform(word), one at a time, baseline", &uniforms, None, |rows| {
        for lane in rows[0].iter_mut() {
            *lane = uniform(stream.word(black_box(patient), 7));
            patient += 1;
        }
    });
    case("fill_uniform", &uniforms, Some(base), |rows| stream.fill_uniform(4096, 7, &mut rows[0]));
    let base = case("plain sum, baseline", &positive, None, |rows| rows[1].0[0] = rows[0].iter().sum());
    case("ExactSum, add", &positive, Some(base), |rows| {
        let mut sum = ExactSum::new();
        for &value in rows[0].iter() {
            sum.add(value);
        }
        rows[1].0[0] = sum.value();
    });
}
