//! Reads how a parameter varies between subjects, and the limits of its individual values.

use super::chance::LEAST_HELD;
use super::measure::{Wants, beyond};
use super::reader::{Reader, Section};
use super::roles::Kind;
use super::spread::{LARGEST_LOG_SD, exactly_one, limits as bounds};
use super::{Role, Varies};
use crate::diagnostic::{Diagnostic, Span};
use crate::math::{ln, ln_one_plus, normal_between};
use crate::quantity::to_f64;

/// The keys that say how much a parameter varies.
const SPREADS: [&str; 4] = ["cv", "log_sd", "log_variance", "logit_sd"];

/// Reads the random part; none is a value too.
pub(super) fn read(reader: &mut Reader, section: &Section, role: Role) -> Option<Varies> {
    let standing = SPREADS.iter().any(|key| section.has(key));
    if !section.has("varies") && !standing {
        return Some(Varies::Not);
    }
    let form = if section.has("varies") { reader.word(section, "varies")? } else { "lognormal" };
    let form_span = section.get("varies").map_or(section.span, |entry| entry.node.span);
    let allowed: &[&str] = match form {
        "normal" => &["cv"],
        "logit-normal" => &["logit_sd"],
        _ => &["cv", "log_sd", "log_variance"],
    };
    let mut fit = true;
    for entry in SPREADS.iter().filter(|key| !allowed.contains(key)).filter_map(|key| section.get(key)) {
        reader.report(out_of_place(&entry.key, entry.key_span, form, allowed));
        fit = false;
    }
    if form == "logit-normal" && role != Role::Bioavailability {
        let fault = Diagnostic::error(form_span, "logit-normal variability is for fractions, as `bioavailability` is");
        reader.report(fault.label("not a fraction"));
        fit = false;
    }
    if !fit {
        return None;
    }
    let key = exactly_one(reader, section, allowed, "the spread")?;
    let varies = spread(reader, section, key, form)?;
    if role == Role::Bioavailability && matches!(varies, Varies::Lognormal { .. }) {
        let at = section.get(key).map_or(section.span, |entry| entry.key_span);
        let fault = Diagnostic::warning(at, "log-normal variability can take `bioavailability` above 100 %");
        reader
            .report(fault.label("above 100 % for some").help("varies = \"logit-normal\" with `logit_sd` stays below."));
    }
    Some(varies)
}

fn out_of_place(key: &str, at: Span, form: &str, allowed: &[&str]) -> Diagnostic {
    let takes: Vec<String> = allowed.iter().map(|key| format!("`{key}`")).collect();
    let fault = Diagnostic::error(at, format!("`{key}` has no place in variability that is {form}")).label("not used");
    if key == "logit_sd" {
        return fault.help("It goes with varies = \"logit-normal\".");
    }
    fault.help(format!("It takes {}.", takes.join(" or ")))
}

/// The random part that the key states; a spread of zero is none.
fn spread(reader: &mut Reader, section: &Section, key: &str, form: &str) -> Option<Varies> {
    let (value, at) = if key == "cv" {
        let (cv, at) = reader.share(section, "cv")?;
        (to_f64(&cv), at)
    } else {
        reader.number(section, key)?
    };
    if value < 0.0 {
        reader.report(Diagnostic::error(at, format!("`{key}` is below zero")).label("negative"));
        return None;
    }
    let log_sd = if key == "log_variance" { value.sqrt() } else { value };
    if key != "cv" && log_sd > LARGEST_LOG_SD {
        reader.report(beyond(at, key));
        return None;
    }
    Some(match (form, key) {
        _ if value == 0.0 => Varies::Not,
        ("normal", _) => Varies::Normal { cv: value },
        ("logit-normal", _) => Varies::LogitNormal { logit_sd: value },
        (_, "cv") => Varies::Lognormal { log_sd: ln_one_plus(value * value).sqrt() },
        _ => Varies::Lognormal { log_sd },
    })
}

/// Reads the limits of the individual value; without any they are infinite.
pub(super) fn limits(
    reader: &mut Reader,
    section: &Section,
    name: &str,
    kind: &Kind,
    varies: Option<&Varies>,
) -> Option<(f64, f64)> {
    let normal = matches!(varies, Some(Varies::Normal { .. }));
    let typical = typical(section, kind);
    check_logit(reader, section, varies, typical);
    if !section.has("limits") {
        if normal {
            let at = section.get("varies").map_or(section.span, |entry| entry.node.span);
            let fault = Diagnostic::error(at, format!("normal variability of `{name}` needs limits above zero"));
            let help = "A normal distribution reaches below zero: add limits = [low, high].";
            reader.report_absent(fault.label("needs `limits`").help(help));
            return None;
        }
        return Some((f64::NEG_INFINITY, f64::INFINITY));
    }
    let wants = Wants { name: "limits", dimension: Some(kind.dimension), example: kind.example };
    let (low, high, at) = bounds(reader, section, |reader, _, node| {
        let measured = reader.measure(node, &wants)?;
        reader.not_negative("limits", &measured).map(|value| to_f64(&value))
    })?;
    if normal && low <= 0.0 {
        let fault = Diagnostic::error(at, format!("normal variability of `{name}` needs limits above zero"));
        reader.report(fault.label("low is zero"));
        return None;
    }
    if kind.role == Role::Bioavailability && high > 1.0 {
        reader.report(Diagnostic::error(at, "the limits of `bioavailability` reach above 100 %").label("above 100 %"));
        return None;
    }
    let varies = varies?;
    if *varies == Varies::Not && !SPREADS.iter().any(|key| section.has(key)) {
        if ["scale", "plus"].iter().any(|key| section.has(key)) {
            let said = format!("`{name}` has no random part: its limits only cut off what the covariates do");
            reader.report(Diagnostic::warning(at, said).label("cut off here"));
        } else {
            let fault = Diagnostic::warning(at, format!("the limits do nothing: `{name}` has no random part"));
            reader.report(fault.label("limits of what?"));
        }
    }
    let held = typical.filter(|typical| *typical > 0.0).map(|typical| held(*varies, typical, low, high));
    if held.is_some_and(|held| held < LEAST_HELD) {
        reader.report(super::spread::holds_nothing(at));
        return None;
    }
    Some((low, high))
}

/// The typical value once more, for checks that need it; its own faults are told elsewhere.
fn typical(section: &Section, kind: &Kind) -> Option<f64> {
    let entry = section.get("typical").filter(|_| !section.has("plus"))?;
    let wants = Wants { name: "typical", dimension: Some(kind.dimension), example: kind.example };
    let measured = Reader::default().measure(&entry.node, &wants)?;
    Some(measured.quantity.in_base())
}

fn check_logit(reader: &mut Reader, section: &Section, varies: Option<&Varies>, typical: Option<f64>) {
    let Some(entry) = section.get("typical") else { return };
    let logit = matches!(varies, Some(Varies::LogitNormal { .. }));
    // Beyond the ends the value itself has been refused.
    if logit && !section.has("plus") && typical.is_some_and(|typical| typical == 0.0 || typical == 1.0) {
        let said = "logit-normal variability needs a typical value between 0 and 100 %, both left out";
        reader.report(Diagnostic::error(entry.node.span, said).label("has no logit"));
    }
}

/// The share of the random part at the reference covariates that the limits leave.
fn held(varies: Varies, typical: f64, low: f64, high: f64) -> f64 {
    let log = |x: f64| if x > 0.0 { ln(x) } else { f64::NEG_INFINITY };
    let logit = |x: f64| if x >= 1.0 { f64::INFINITY } else { log(x) - ln(1.0 - x) };
    match varies {
        Varies::Not => 1.0,
        Varies::Lognormal { log_sd } => {
            normal_between((log(low) - ln(typical)) / log_sd, (log(high) - ln(typical)) / log_sd)
        }
        Varies::Normal { cv } => normal_between((low / typical - 1.0) / cv, (high / typical - 1.0) / cv),
        Varies::LogitNormal { logit_sd } => {
            let z = |x: f64| (logit(x) - logit(typical)) / logit_sd;
            normal_between(z(low), z(high))
        }
    }
}
