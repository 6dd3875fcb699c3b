//! Reads `[window]`, `[variability]` and `[output]`.

use num_traits::Zero;

use super::document::{Entry, Node, Table, Value};
use super::fields::Kind;
use super::measure::{Measured, Wants};
use super::reader::{Reader, Section};
use super::schedule::rises;
use super::{AmountUnit, Window};
use crate::diagnostic::{Diagnostic, Span};
use crate::quantity::{Dimension, Exact, Unit, to_f64};

/// Concentrations are written at most at this many times.
const MOST_TIMES: usize = 100_000;
/// Percentiles of the bands unless the file asks for others.
const PERCENTILES: [u32; 5] = [5, 25, 50, 75, 95];

/// The window, and the unit in which it is written.
#[derive(Default)]
pub(super) struct WindowDraft {
    pub(super) window: Option<Window>,
    pub(super) unit: Option<Unit>,
}

/// Reads `[window]`.
pub(super) fn window(
    reader: &mut Reader,
    root: &Section,
    unit: Option<AmountUnit>,
    settled: Option<Span>,
) -> WindowDraft {
    let Some((table, span)) = reader.table(root, "window") else {
        if !root.has("window") && !root.meant("window") {
            let said = "there is no therapeutic window, so no shares below, within and above it";
            let fault = Diagnostic { span: None, ..Diagnostic::warning(Span { start: 0, end: 0 }, said) };
            reader.report_absent(fault.help("Add [window] with `low`, `high` or both."));
        }
        return WindowDraft::default();
    };
    let section = reader.open("window", table, span);
    if !section.has("low") && !section.has("high") {
        let fault = Diagnostic::error(span, "the window has neither `low` nor `high`").label("needs a side");
        reader.report_absent(fault.help("Write them as in low = \"2 mg/L\"."));
        return WindowDraft::default();
    }
    let low = side(reader, &section, "low", unit, settled);
    let high = side(reader, &section, "high", unit, settled);
    if let (Some(low), Some(high)) = (&low, &high)
        && low.quantity.unit.dimension == high.quantity.unit.dimension
        && low.quantity.exact() >= high.quantity.exact()
    {
        let fault = Diagnostic::error(low.span, "the window's `low` must lie below its `high`");
        reader.report(fault.label("not below").context(high.span, "`high` stands here"));
    }
    let base = |side: &Option<Measured>| side.as_ref().map(|side| side.quantity.in_base());
    let window = Window { low: base(&low), high: base(&high) };
    WindowDraft { window: Some(window), unit: low.or(high).map(|side| side.quantity.unit) }
}

/// One side of the window: a concentration above zero (a low side may be zero).
fn side(
    reader: &mut Reader,
    section: &Section,
    key: &str,
    unit: Option<AmountUnit>,
    settled: Option<Span>,
) -> Option<Measured> {
    let entry = section.get(key)?;
    let dimension = unit.map(|unit| unit.dimension().per(Dimension::VOLUME));
    let example = format!("2 {}/L", unit.map_or("mg", AmountUnit::symbol));
    let before = reader.found.len();
    let measured = reader.measure(&entry.node, &Wants { name: key, dimension, example: &example });
    let Some(measured) = measured else {
        // Where the window measures another thing than the doses do, both places matter.
        if let (Some(fault), Some(at), Some(unit)) = (reader.found.get_mut(before), settled, unit)
            && fault.message.contains("; this is ")
        {
            fault
                .context
                .push(crate::diagnostic::Context { span: at, text: format!("doses are counted in {}", unit.symbol()) });
        }
        return None;
    };
    let own = measured.quantity.unit.dimension;
    if unit.is_none() && !AmountUnit::ALL.iter().any(|unit| unit.dimension().per(Dimension::VOLUME) == own) {
        let said = format!("`{key}` wants a concentration; this is {}", own.phrase());
        reader.report(Diagnostic::error(measured.unit, said).label(own.name()));
        return None;
    }
    let value = reader.not_negative(key, &measured)?;
    if key == "high" && value.is_zero() {
        reader.report(Diagnostic::error(measured.span, "`high` must be above zero").label("zero"));
        return None;
    }
    Some(measured)
}

/// Reads `[variability]`; whether parameters vary between subjects.
pub(super) fn variability(reader: &mut Reader, root: &Section) -> Option<bool> {
    let Some((table, span)) = reader.table(root, "variability") else {
        reader.acted("variability.between_subject", "true");
        return Some(true);
    };
    let section = reader.open("variability", table, span);
    for key in ["between_occasion", "residual"] {
        if reader.flag(&section, key) == Some(true)
            && let Some(entry) = section.get(key)
        {
            reader.later(&format!("{key} = true"), entry.node.span);
        }
    }
    if !section.has("between_subject") {
        reader.acted("variability.between_subject", "true");
        return Some(true);
    }
    reader.flag(&section, "between_subject")
}

/// `[output]`, as far as it could be read.
#[derive(Default)]
pub(super) struct Draft {
    pub(super) times: Option<Vec<Exact>>,
    pub(super) percentiles: Option<Vec<Exact>>,
    pub(super) patients: bool,
}

/// Reads `[output]`.
pub(super) fn output(reader: &mut Reader, table: &Table, span: Span) -> Draft {
    let section = reader.open("output", table, span);
    let times = section.get("times").and_then(|entry| times(reader, entry));
    let percentiles = if let Some(entry) = section.get("percentiles") {
        percentiles(reader, entry)
    } else {
        reader.acted("output.percentiles", format!("{PERCENTILES:?}"));
        Some(PERCENTILES.iter().map(|p| Exact::from_integer((*p).into())).collect())
    };
    let patients = reader.flag(&section, "patients").unwrap_or(false);
    Draft { times, percentiles, patients }
}

/// Percentiles in rising order.
fn percentiles(reader: &mut Reader, entry: &Entry) -> Option<Vec<Exact>> {
    let Value::List(items) = &entry.node.value else {
        reader.wrong_kind("percentiles", Kind::Numbers, &entry.node);
        return None;
    };
    if items.is_empty() {
        reader.report(Diagnostic::error(entry.node.span, "`percentiles` lists none").label("empty"));
        return None;
    }
    let mut read: Vec<(Exact, Span)> = Vec::new();
    let mut sound = true;
    for item in items {
        match percentile(reader, item) {
            Some(percentile) => {
                if let Some((_, first)) = read.iter().find(|(other, _)| *other == percentile) {
                    let fault = Diagnostic::error(item.span, "this percentile stands twice").label("again");
                    reader.report(fault.context(*first, "first here"));
                    sound = false;
                }
                read.push((percentile, item.span));
            }
            None => sound = false,
        }
    }
    let mut percentiles: Vec<Exact> = read.into_iter().map(|(percentile, _)| percentile).collect();
    percentiles.sort();
    sound.then_some(percentiles)
}

fn percentile(reader: &mut Reader, item: &Node) -> Option<Exact> {
    if let Value::Text { text, .. } = &item.value
        && let Some(bare) = text.trim().strip_suffix('%')
        && crate::quantity::decimal(bare.trim()).is_some()
    {
        let fault = Diagnostic::error(item.span, "`percentiles` wants bare numbers, without quotes and `%`");
        reader.report(fault.mend(item.span, bare.trim()));
        return None;
    }
    let percentile = reader.number_of("percentiles", item)?;
    if percentile > Exact::zero() && percentile < Exact::from_integer(100.into()) {
        return Some(percentile);
    }
    let fault = Diagnostic::error(item.span, "a percentile lies between 0 and 100, both left out");
    reader.report(fault.label("out of range"));
    None
}

/// Output times: one range, or a list that mixes times and ranges.
fn times(reader: &mut Reader, entry: &Entry) -> Option<Vec<Exact>> {
    let items = match &entry.node.value {
        Value::Table(_) => std::slice::from_ref(&entry.node),
        Value::List(items) => items,
        _ => {
            reader.wrong_kind("times", Kind::Times, &entry.node);
            return None;
        }
    };
    if items.is_empty() {
        reader.report(Diagnostic::error(entry.node.span, "`times` lists none").label("empty"));
        return None;
    }
    let mut times: Vec<Exact> = Vec::new();
    let mut sound = true;
    for item in items {
        let Some(own) = part(reader, item) else {
            sound = false;
            continue;
        };
        if let Some(first) = own.first() {
            sound &= rises(reader, times.last(), first, item.span);
        }
        if times.len() + own.len() > MOST_TIMES {
            reader.report(too_many(item.span));
            return None;
        }
        times.extend(own);
    }
    sound.then_some(times)
}

fn too_many(at: Span) -> Diagnostic {
    Diagnostic::error(at, format!("these are more than {MOST_TIMES} output times")).label("too many")
}

/// One time, or the times of one range.
fn part(reader: &mut Reader, item: &Node) -> Option<Vec<Exact>> {
    let Value::Table(table) = &item.value else {
        let wants = Wants { name: "times", dimension: Some(Dimension::TIME), example: "12 h" };
        let measured = reader.measure(item, &wants)?;
        return reader.hours("times", &measured).map(|time| vec![time]);
    };
    let section = reader.open("output.times", table, item.span);
    let (from, to, step) = (reader.time(&section, "from"), reader.time(&section, "to"), reader.time(&section, "step"));
    let step = step.and_then(|(step, stride)| {
        if step.is_zero() {
            reader.report(Diagnostic::error(stride, "`step` must be above zero").label("no step"));
            return None;
        }
        Some((step, stride))
    });
    let ((from, _), (to, end)) = (from?, to?);
    if to < from {
        reader.report(Diagnostic::error(end, "this range runs backwards").label("before `from`"));
        return None;
    }
    let (step, stride) = step?;
    let steps = ((to - &from) / &step).floor();
    // Compared before it is counted: a short text can ask for more times than memory holds.
    if to_f64(&steps) >= MOST_TIMES as f64 {
        reader.report(too_many(stride));
        return None;
    }
    let steps = to_f64(&steps) as usize;
    Some((0..=steps).map(|k| &from + &step * Exact::from_integer(k.into())).collect())
}
