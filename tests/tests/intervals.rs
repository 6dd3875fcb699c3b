//! Monte Carlo intervals and percentiles against values computed elsewhere (see `reference/README.md`).

#![expect(clippy::print_stdout, reason = "a test reports its worst error")]

use neap_engine::quantity::Exact;
use neap_engine::summary::{Ranks, order_statistic_ranks, wilson};
use neap_tests::{csv, number};
use num_bigint::BigInt;

/// Wilson intervals: `statistics/proportion_intervals.csv` (mpmath, 20 digits).
///
/// Each bound is a sum and a quotient of a few numbers, so a few units in the last place of 1 are lost, and the deviate adds
/// its own relative 1e-15: 1e-14 absolute covers both.
#[test]
fn wilson_intervals_agree_with_twenty_digits() {
    let mut worst = 0.0f64;
    let rows = csv("statistics/proportion_intervals.csv");
    for row in &rows {
        let (successes, trials) = (row["successes"].parse().unwrap(), row["trials"].parse().unwrap());
        let (lower, upper) = wilson(successes, trials, number(&row["confidence"]));
        for (got, name) in [(lower, "wilson_low_20_digits"), (upper, "wilson_high_20_digits")] {
            let error = (got - number(&row[name])).abs();
            assert!(error <= 1e-14, "{successes} of {trials}, {name}: {got} is off by {error:e}");
            worst = worst.max(error);
        }
    }
    println!("wilson: {} intervals, worst absolute error {worst:.1e}", rows.len());
}

/// Ranks: `statistics/order_statistic_intervals.csv` (binomial quantiles by scipy, coverage by mpmath).
#[test]
fn order_statistic_ranks_agree() {
    for row in csv("statistics/order_statistic_intervals.csv") {
        let n: u64 = row["sample_size"].parse().unwrap();
        let bound = |name: &str| -> Option<u64> {
            let rank = row[name].parse().unwrap();
            (1..=n).contains(&rank).then_some(rank)
        };
        let got = order_statistic_ranks(n, number(&row["probability"]), number(&row["confidence"]));
        assert_eq!(got, (bound("lower_rank"), bound("upper_rank")), "{row:?}");
    }
}

/// Binomial probabilities of `0..=n` successes, by the recurrence from the mode outwards and scaled to add up to 1.
fn binomial(n: usize, p: f64) -> Vec<f64> {
    let mut terms = vec![0.0; n + 1];
    let mode = ((n + 1) as f64 * p) as usize;
    terms[mode] = 1.0;
    for k in mode + 1..=n {
        terms[k] = terms[k - 1] * (n - k + 1) as f64 / k as f64 * p / (1.0 - p);
    }
    for k in (0..mode).rev() {
        terms[k] = terms[k + 1] * (k + 1) as f64 / (n - k) as f64 * (1.0 - p) / p;
    }
    let sum: f64 = terms.iter().sum();
    terms.iter().map(|term| term / sum).collect()
}

/// What the ranks are for: the interval holds the quantile with at least the stated confidence, each tail misses at most half
/// of the rest, and one rank nearer would miss more. The probabilities are summed here term by term.
#[test]
fn order_statistic_intervals_cover_and_none_is_wider_than_it_must_be() {
    for level in [0.8, 0.95, 0.999] {
        let tail = 0.5 * (1.0 - level);
        for n in [1usize, 2, 10, 59, 100, 999, 5000] {
            for p in [0.001, 0.05, 0.25, 0.5, 0.9, 0.975] {
                let terms = binomial(n, p);
                let below = |k: usize| terms[..k].iter().sum::<f64>();
                let from = |k: usize| terms[k..].iter().sum::<f64>();
                let (lower, upper) = order_statistic_ranks(n as u64, p, level);
                // The quantile lies below the order statistic of rank r where fewer than r values fall below it.
                let rank = lower.unwrap_or(0) as usize;
                assert!(below(rank) < tail * (1.0 + 1e-9), "{n} {p} {level}: lower {rank}");
                assert!(below(rank + 1) >= tail * (1.0 - 1e-9), "{n} {p} {level}: lower {rank} could be nearer");
                let rank = upper.unwrap_or(n as u64 + 1) as usize;
                assert!(from(rank) <= tail * (1.0 + 1e-9), "{n} {p} {level}: upper {rank}");
                assert!(from(rank - 1) > tail * (1.0 - 1e-9), "{n} {p} {level}: upper {rank} could be nearer");
            }
        }
    }
}

/// Percentiles: definition 7 of `statistics/quantile_definitions.csv` (R 4.2.2, `quantile(x, probs, type = 7)`; the
/// definition is Hyndman and Fan 1996).
///
/// R prints 17 digits at most and adds the same three numbers: 4 units in the last place.
#[test]
fn percentiles_are_of_type_seven() {
    let samples = csv("statistics/quantile_samples.csv");
    let mut checked = 0;
    for row in csv("statistics/quantile_definitions.csv").iter().filter(|row| row["definition"] == "7") {
        let mut values: Vec<f64> = samples
            .iter()
            .filter(|sample| sample["sample"] == row["sample"])
            .map(|sample| number(&sample["value"]))
            .collect();
        values.sort_by(f64::total_cmp);
        let ranks = Ranks::new(&percentile(&row["probability"]), values.len() as u64, 0.95);
        let at = |rank: u64| values[rank as usize];
        let next = if ranks.fraction > 0.0 { at(ranks.at + 1) } else { f64::NAN };
        let (got, expected) = (ranks.interpolate(at(ranks.at), next), number(&row["quantile"]));
        assert!((got - expected).abs() <= 4.0 * f64::EPSILON * expected.abs(), "{row:?}: {got}");
        checked += 1;
    }
    assert!(checked >= 40, "{checked} quantiles were checked");
}

/// A probability in decimal digits as an exact percentile.
fn percentile(probability: &str) -> Exact {
    let (whole, part) = probability.split_once('.').unwrap_or((probability, ""));
    let digits: BigInt = format!("{whole}{part}").parse().expect("decimal digits");
    Exact::new(digits * BigInt::from(100), BigInt::from(10).pow(part.len() as u32))
}

/// All ranks that a percentile needs exist.
#[test]
fn ranks_stay_within_the_sample() {
    for n in [1u64, 2, 3, 99, 100, 101, 10_000] {
        for tenths in 1..1000u32 {
            let ranks = Ranks::new(&Exact::new(BigInt::from(tenths), BigInt::from(10)), n, 0.95);
            assert!(ranks.needed().all(|rank| rank < n), "{tenths} tenths of a percent of {n}: {ranks:?}");
            assert!((0.0..1.0).contains(&ranks.fraction));
            // In very small samples a bound may lie between the two ranks that a percentile is interpolated from.
            assert!(ranks.lower.is_none_or(|lower| lower <= ranks.at + 1));
            assert!(ranks.upper.is_none_or(|upper| upper >= ranks.at));
        }
    }
}
