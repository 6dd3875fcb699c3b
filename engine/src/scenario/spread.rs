//! Reads a distribution of one variable and its limits. Every stated form of a log-normal ends as its median and the
//! standard deviation of its logarithm.

use super::chance::LEAST_HELD;
use super::covariates::{Frame, one_of, only};
use super::measure::Measured;
use super::reader::{Reader, Section};
use super::{Distribution, Limited};
use crate::diagnostic::{Diagnostic, Span};
use crate::math::{exp, ln, ln_one_plus};
use crate::quantity::to_f64;

/// The 95th percentile of the standard normal distribution.
const NORMAL_95: f64 = 1.644_853_626_951_472_7;

/// No spread of a logarithm is larger: people one standard deviation apart would differ twenty-thousandfold.
pub(super) const LARGEST_LOG_SD: f64 = 10.0;

/// Reads the keys that the distribution takes, and its limits.
pub(super) fn limited(
    reader: &mut Reader,
    section: &Section,
    word: &'static str,
    frame: &mut Frame,
) -> Option<Limited> {
    let distribution = match word {
        "lognormal" => {
            let keys = ["mean", "median", "cv", "sd", "log_sd", "log_variance", "range90", "limits"];
            only(reader, section, "lognormal", &keys);
            lognormal(reader, section, frame)
        }
        "normal" => {
            only(reader, section, "normal", &["mean", "sd", "cv", "range90", "limits"]);
            normal(reader, section, frame)
        }
        "uniform" => {
            only(reader, section, "uniform", &["from", "to", "limits"]);
            uniform(reader, section, frame)
        }
        "triangular" => {
            only(reader, section, "triangular", &["from", "mode", "to", "limits"]);
            triangular(reader, section, frame)
        }
        _ => {
            only(reader, section, "fixed", &["value", "limits"]);
            required(reader, section, frame, "value").map(|(value, _)| Distribution::Fixed { value })
        }
    };
    let bounds = if section.has("limits") {
        limits(reader, section, |reader, name, node| frame.measure(reader, name, node).map(|(value, _)| value))
    } else {
        Some((f64::NEG_INFINITY, f64::INFINITY, section.span))
    };
    let (distribution, (low, high, at)) = (distribution?, bounds?);
    let limited = Limited { distribution, low, high };
    if section.has("limits") && limited.held() < LEAST_HELD {
        reader.report(holds_nothing(at));
        return None;
    }
    Some(limited)
}

/// The fault of limits that leave next to nothing.
pub(super) fn holds_nothing(at: Span) -> Diagnostic {
    Diagnostic::error(at, "the limits hold less than one part in a million of the distribution")
        .label("next to nobody lies here")
}

/// Low and high of `limits`, each read by `measure`; low must lie below high.
pub(super) fn limits(
    reader: &mut Reader,
    section: &Section,
    mut measure: impl FnMut(&mut Reader, &str, &super::document::Node) -> Option<f64>,
) -> Option<(f64, f64, Span)> {
    let (low, high, span) = reader.pair(section, "limits")?;
    let (low, high) = (measure(reader, "limits", low), measure(reader, "limits", high));
    let (low, high) = (low?, high?);
    if low < high {
        return Some((low, high, span));
    }
    reader.report(if low == high {
        let fault = Diagnostic::error(span, "the limits are equal").label("nothing between them");
        fault.help("Where everyone has one value, the distribution is \"fixed\".")
    } else {
        Diagnostic::error(span, "the limits are reversed").label("low comes first")
    });
    None
}

/// A value that the distribution needs.
fn required(reader: &mut Reader, section: &Section, frame: &mut Frame, key: &str) -> Option<(f64, Measured)> {
    if !section.has(key) {
        reader.missing(section, key);
    }
    frame.value(reader, section, key)
}

/// A spread, which zero or more can be.
fn not_negative(reader: &mut Reader, key: &str, (value, at): (f64, Span)) -> Option<f64> {
    if value < 0.0 {
        reader.report(Diagnostic::error(at, format!("`{key}` is below zero")).label("negative"));
        return None;
    }
    Some(value)
}

/// The one of several keys that stands; none or more than one is told of.
pub(super) fn exactly_one<'k>(reader: &mut Reader, section: &Section, keys: &[&'k str], what: &str) -> Option<&'k str> {
    let standing: Vec<&str> = keys.iter().copied().filter(|key| section.has(key)).collect();
    match standing[..] {
        [one] => Some(one),
        [] => {
            let fault = Diagnostic::error(section.span, format!("{what} is missing")).label(format!("needs {what}"));
            reader.report_absent(fault.help(one_of(keys)));
            None
        }
        [first, second, ..] => {
            let (first, second) = (section.get(first)?, section.get(second)?);
            let (first, second) =
                if first.key_span.start < second.key_span.start { (first, second) } else { (second, first) };
            let said = format!("`{}` and `{}` say the same thing twice", first.key, second.key);
            let fault = Diagnostic::error(second.key_span, said).label("one too many");
            reader.report(fault.context(first.key_span, "already said here").help(one_of(keys)));
            None
        }
    }
}

fn normal(reader: &mut Reader, section: &Section, frame: &mut Frame) -> Option<Distribution> {
    if section.has("range90") {
        let (low, high, _) = range90(reader, section, frame, &["mean", "sd", "cv"])?;
        return Some(Distribution::Normal { mean: f64::midpoint(low, high), sd: (high - low) / (2.0 * NORMAL_95) });
    }
    let mean = required(reader, section, frame, "mean");
    let sd = if exactly_one(reader, section, &["sd", "cv"], "the spread")? == "sd" {
        let (value, measured) = frame.value(reader, section, "sd")?;
        not_negative(reader, "sd", (value, measured.span))
    } else {
        let (cv, at) = reader.share(section, "cv")?;
        let (mean, _) = mean.as_ref()?;
        if *mean <= 0.0 {
            let fault = Diagnostic::error(at, "`cv` says nothing about a mean that is not above zero");
            reader.report(fault.label("needs a positive mean").help("Give `sd` instead."));
            return None;
        }
        Some(to_f64(&cv) * mean)
    };
    let (mean, sd) = (mean?.0, sd?);
    Some(if sd > 0.0 { Distribution::Normal { mean, sd } } else { Distribution::Fixed { value: mean } })
}

/// `median = exp(m)`, `mean = exp(m + s^2 / 2)`, `cv^2 = exp(s^2) - 1`, with `m` and `s` of the natural logarithm.
fn lognormal(reader: &mut Reader, section: &Section, frame: &mut Frame) -> Option<Distribution> {
    if section.has("range90") {
        let others = ["mean", "median", "cv", "sd", "log_sd", "log_variance"];
        let (low, high, at) = range90(reader, section, frame, &others)?;
        if low <= 0.0 {
            reader.report(above_zero(at, "range90"));
            return None;
        }
        // The square root of each before the product, which could overflow.
        return Some(Distribution::Lognormal {
            median: low.sqrt() * high.sqrt(),
            log_sd: ln(high / low) / (2.0 * NORMAL_95),
        });
    }
    let centre = exactly_one(reader, section, &["mean", "median"], "the centre");
    let value = centre.and_then(|key| frame.value(reader, section, key));
    let value = value.and_then(|(value, measured)| {
        if value > 0.0 {
            return Some(value);
        }
        reader.report(above_zero(measured.span, centre.unwrap_or("mean")));
        None
    });
    let of_mean = centre == Some("mean");
    let log_variance = match exactly_one(reader, section, &["cv", "sd", "log_sd", "log_variance"], "the spread")? {
        "cv" => {
            let cv = to_f64(&reader.share(section, "cv")?.0);
            ln_one_plus(cv * cv)
        }
        "sd" => {
            let (sd, measured) = frame.value(reader, section, "sd")?;
            let ratio = not_negative(reader, "sd", (sd, measured.span))? / value?;
            // With exp(s^2) = 1 + u: about the mean u = (sd / mean)^2; about the median (1 + u) u = (sd / median)^2.
            let square = ratio * ratio;
            ln_one_plus(if of_mean { square } else { square / (0.5 + (0.25 + square).sqrt()) })
        }
        "log_sd" => {
            let (log_sd, at) = reader.number(section, "log_sd")?;
            let log_sd = not_negative(reader, "log_sd", (log_sd, at))?;
            log_sd * log_sd
        }
        _ => {
            let (log_variance, at) = reader.number(section, "log_variance")?;
            not_negative(reader, "log_variance", (log_variance, at))?
        }
    };
    let value = value?;
    let median = if of_mean { value * exp(-0.5 * log_variance) } else { value };
    let log_sd = log_variance.sqrt();
    if log_sd == 0.0 {
        return Some(Distribution::Fixed { value });
    }
    let sensible = median > 0.0 && log_sd <= LARGEST_LOG_SD;
    if !sensible {
        reader.report(super::measure::beyond(section.span, "the spread"));
    }
    sensible.then_some(Distribution::Lognormal { median, log_sd })
}

fn above_zero(at: Span, key: &str) -> Diagnostic {
    Diagnostic::error(at, format!("`{key}` of a log-normal must be above zero")).label("not above zero")
}

/// The 5th and the 95th percentile.
fn range90(reader: &mut Reader, section: &Section, frame: &mut Frame, others: &[&str]) -> Option<(f64, f64, Span)> {
    for key in others.iter().filter(|key| section.has(key)) {
        if let Some(entry) = section.get(key) {
            let said = format!("`{key}` and `range90` say the same thing twice");
            reader.report(Diagnostic::error(entry.key_span, said).label("one or the other"));
        }
    }
    let (low, high, span) = reader.pair(section, "range90")?;
    let (low, high) = (frame.measure(reader, "range90", low), frame.measure(reader, "range90", high));
    let (low, high) = (low?.0, high?.0);
    if low < high {
        return Some((low, high, span));
    }
    let said = "the 5th percentile must lie below the 95th";
    reader.report(Diagnostic::error(span, said).label("equal or reversed"));
    None
}

fn uniform(reader: &mut Reader, section: &Section, frame: &mut Frame) -> Option<Distribution> {
    let from = required(reader, section, frame, "from");
    let to = required(reader, section, frame, "to");
    let ((from, _), (to, end)) = (from?, to?);
    if from < to {
        return Some(Distribution::Uniform { from, to });
    }
    reader.report(Diagnostic::error(end.span, "`to` must lie above `from`").label("equal or reversed"));
    None
}

fn triangular(reader: &mut Reader, section: &Section, frame: &mut Frame) -> Option<Distribution> {
    let from = required(reader, section, frame, "from");
    let mode = required(reader, section, frame, "mode");
    let to = required(reader, section, frame, "to");
    let ((from, _), (mode, peak), (to, end)) = (from?, mode?, to?);
    if from >= to {
        reader.report(Diagnostic::error(end.span, "`to` must lie above `from`").label("equal or reversed"));
        return None;
    }
    if mode < from || mode > to {
        let said = "`mode` must lie between `from` and `to`";
        reader.report(Diagnostic::error(peak.span, said).label("outside"));
        return None;
    }
    Some(Distribution::Triangular { from, mode, to })
}
