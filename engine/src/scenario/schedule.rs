//! Reads when the doses of a row are given.

use num_traits::{ToPrimitive, Zero};

use super::arms::MOST_DOSES;
use super::document::Value;
use super::measure::Wants;
use super::reader::{Reader, Section};
use crate::diagnostic::{Diagnostic, Span};
use crate::quantity::{Dimension, Exact};

/// The times of a row in h, strictly rising; `key` is the row's place in the file.
pub(super) fn read(reader: &mut Reader, section: &Section, key: &str) -> Option<Vec<Exact>> {
    if section.has("at") {
        return listed(reader, section);
    }
    let first = if section.has("first_at") {
        reader.time(section, "first_at").map(|(first, _)| first)
    } else {
        reader.acted(format!("{key}.first_at"), "0 h");
        Some(Exact::zero())
    };
    if !section.has("every") {
        if section.meant("every") {
            return None;
        }
        let mut alone = false;
        for entry in ["count", "until"].iter().filter_map(|key| section.get(key)) {
            let said = format!("`{}` needs `every`, the interval between doses", entry.key);
            reader.report_absent(Diagnostic::error(entry.key_span, said).label("how often?"));
            alone = true;
        }
        return first.filter(|_| !alone).map(|first| vec![first]);
    }
    repeated(reader, section, first)
}

/// Doses at stated times.
fn listed(reader: &mut Reader, section: &Section) -> Option<Vec<Exact>> {
    let entry = section.get("at")?;
    let mut clash = false;
    for other in ["first_at", "every", "count", "until"].iter().filter_map(|key| section.get(key)) {
        let fault = Diagnostic::error(other.key_span, format!("`{}` and `at` both say when", other.key));
        let help = "List every time in `at`, or give `first_at` and `every`; two rows may have one each.";
        reader.report(fault.label("one or the other").context(entry.key_span, "listed here").help(help));
        clash = true;
    }
    let Value::List(items) = &entry.node.value else {
        let kind = super::fields::Kind::Quantities(Dimension::TIME, "6 h");
        reader.wrong_kind("at", kind, &entry.node);
        return None;
    };
    if items.is_empty() {
        reader.report(Diagnostic::error(entry.node.span, "`at` lists no time").label("empty"));
        return None;
    }
    if items.len() > MOST_DOSES {
        reader.report(too_many(entry.node.span, &items.len().to_string()));
        return None;
    }
    let wants = Wants { name: "at", dimension: Some(Dimension::TIME), example: "6 h" };
    let mut times: Vec<Exact> = Vec::with_capacity(items.len());
    let mut sound = !clash;
    for item in items {
        let time = reader.measure(item, &wants).and_then(|measured| reader.hours("at", &measured));
        let Some(time) = time else {
            sound = false;
            continue;
        };
        sound &= rises(reader, times.last(), &time, item.span);
        times.push(time);
    }
    sound.then_some(times)
}

/// Whether a time lies after the last one; one that does not is told of.
pub(super) fn rises(reader: &mut Reader, last: Option<&Exact>, time: &Exact, at: Span) -> bool {
    match last {
        Some(last) if time == last => reader.report(Diagnostic::error(at, "this time stands twice").label("again")),
        Some(last) if time < last => {
            reader.report(Diagnostic::error(at, "these times run backwards").label("before the time in front of it"));
        }
        _ => return true,
    }
    false
}

fn too_many(at: Span, count: &str) -> Diagnostic {
    Diagnostic::error(at, format!("this row gives {count} doses; {MOST_DOSES} are the most")).label("too many")
}

/// Doses at a steady interval.
fn repeated(reader: &mut Reader, section: &Section, first: Option<Exact>) -> Option<Vec<Exact>> {
    let every = reader.time(section, "every").and_then(|(every, span)| {
        if every.is_zero() {
            reader.report(Diagnostic::error(span, "`every` must be above zero").label("no interval"));
            return None;
        }
        Some(every)
    });
    let most = u64::MAX >> 1;
    let count = reader.count(section, "count", 1, most);
    let until = reader.time(section, "until");
    let (count, at) = match (section.get("count"), section.get("until")) {
        (Some(one), Some(other)) => {
            let fault = Diagnostic::error(other.key_span, "`count` and `until` both say how many doses");
            reader.report(fault.label("one or the other").context(one.key_span, "counted here"));
            return None;
        }
        (Some(entry), None) => (Exact::from_integer(count?.into()), entry.node.span),
        (None, Some(entry)) => {
            let (until, at) = until?;
            let (first, every) = (first.as_ref()?, every.as_ref()?);
            if until <= *first {
                let fault = Diagnostic::error(at, "`until` does not lie after the first dose");
                reader.report(fault.label("no dose fits").help("The dose at `until` itself is not given."));
                return None;
            }
            (((until - first) / every).ceil(), entry.node.span)
        }
        (None, None) => {
            let at = section.get("every").map_or(section.span, |entry| entry.key_span);
            if section.meant("count") || section.meant("until") {
                return None;
            }
            let fault = Diagnostic::error(at, "`every` needs `count` or `until`").label("for how long?");
            reader.report_absent(
                fault.help("count = 14 gives fourteen doses; until = \"168 h\" gives none at 168 h or later."),
            );
            return None;
        }
    };
    let whole = count.to_integer().to_usize().filter(|count| *count <= MOST_DOSES);
    let Some(whole) = whole else {
        reader.report(too_many(at, &count.to_integer().to_string()));
        return None;
    };
    let (first, every) = (first?, every?);
    Some((0..whole).map(|dose| &first + &every * Exact::from_integer(dose.into())).collect())
}
