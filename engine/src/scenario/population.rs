//! Reads `[population]`: how many, the seed, and the covariates in an order in which each can be drawn.

use super::covariates::{Known, read_by_class, read_own};
use super::document::{Table, Value};
use super::fields;
use super::nearest::nearest;
use super::parameters::is_parameter_name;
use super::reader::{Reader, Section};
use super::values::grouped;
use super::{Overrides, Spread};
use crate::diagnostic::{Diagnostic, Span};

/// More patients than this cannot be meant.
const MOST_PATIENTS: u64 = 1_000_000_000_000;
/// Seeds are written as whole numbers of the file format, which end here.
const HIGHEST_SEED: u64 = i64::MAX as u64;
/// Columns that tables have anyway.
const RESERVED: [&str; 2] = ["patient", "arm"];

/// What `[population]` says; `None` for what could not be read.
#[derive(Default)]
pub(super) struct Draft<'t> {
    pub(super) size: Option<u64>,
    pub(super) seed: Option<u64>,
    pub(super) covariates: Covariates<'t>,
}

/// The covariates, readable or not, so that a name whose distribution is at fault is still a known name.
#[derive(Default)]
pub(super) struct Covariates<'t> {
    pub(super) list: Vec<Known<'t>>,
    /// Something names a covariate that is not there, so one that seems unused may be meant.
    lost: bool,
}

impl Covariates<'_> {
    /// The place of a covariate that something else uses.
    pub(super) fn find(&mut self, reader: &mut Reader, name: &str, at: Span) -> Option<usize> {
        if let Some(index) = self.list.iter().position(|known| known.name == name) {
            self.list[index].used = true;
            return Some(index);
        }
        self.lost = true;
        let fault = Diagnostic::error(at, format!("there is no covariate `{name}`")).label("unknown covariate");
        let near = nearest(name, self.list.iter().map(|known| known.name));
        reader.report_absent(match near {
            Some(near) => fault.help(format!("Did you mean `{near}`?")).mend(at, format!("\"{near}\"")),
            None => fault.help(format!("Describe it under [population.{name}].")),
        });
        None
    }

    /// Warns of covariates that nothing uses.
    pub(super) fn warn_unused(&self, reader: &mut Reader) {
        if self.lost {
            return;
        }
        for known in self.list.iter().filter(|known| !known.used && known.covariate.is_some()) {
            let said = format!("nothing uses the covariate `{}`", known.name);
            reader.report_absent(Diagnostic::warning(known.key_span, said).label("unused"));
        }
    }
}

/// Reads the table.
pub(super) fn read<'t>(reader: &mut Reader, table: &'t Table, header: Span, overrides: Overrides) -> Draft<'t> {
    let section = reader.open_named("population", table, header);
    let size = counted(reader, &section, "size", (1, MOST_PATIENTS), overrides.size);
    let seed = counted(reader, &section, "seed", (0, HIGHEST_SEED), overrides.seed);
    if reader.word(&section, "draws").is_none() && !section.has("draws") {
        reader.acted("population.draws", "independent");
    }
    Draft { size, seed, covariates: covariates(reader, &section) }
}

/// A count of the file, or the one given instead of it.
fn counted(
    reader: &mut Reader,
    section: &Section,
    key: &str,
    (least, most): (u64, u64),
    instead: Option<u64>,
) -> Option<u64> {
    let written = reader.count(section, key, least, most);
    match instead {
        Some(given) if (least..=most).contains(&given) => Some(given),
        Some(_) => {
            let said =
                format!("the {key} given outside the file must lie between {} and {}", grouped(least), grouped(most));
            reader.report(Diagnostic { span: None, ..Diagnostic::error(section.span, said) });
            None
        }
        None => {
            if !section.has(key) {
                reader.missing(section, key);
            }
            written
        }
    }
}

fn covariates<'t>(reader: &mut Reader, section: &Section<'t>) -> Covariates<'t> {
    let mut list: Vec<Known> = Vec::new();
    for entry in section.table.entries.iter().filter(|entry| fields::find("population", &entry.key).is_none()) {
        let Value::Table(table) = &entry.node.value else {
            unknown(reader, &entry.key, entry.key_span);
            continue;
        };
        check_name(reader, &entry.key, entry.key_span);
        list.push(Known {
            name: &entry.key,
            key_span: entry.key_span,
            section: reader.open("population.*", table, entry.node.span),
            covariate: None,
            class_of: None,
            used: false,
        });
    }
    for known in &mut list {
        read_own(reader, known);
    }
    for index in 0..list.len() {
        read_by_class(reader, &mut list, index);
    }
    Covariates { list: ordered(list), lost: false }
}

fn unknown(reader: &mut Reader, key: &str, at: Span) {
    let fault = Diagnostic::error(at, format!("unknown key `{key}`")).label("unknown");
    let keys = fields::of("population").map(|field| field.key);
    reader.report(match nearest(key, keys) {
        Some(near) => fault.help(format!("Did you mean `{near}`?")).mend(at, near),
        None => fault.help(format!("A covariate is a table of its own: [population.{key}].")),
    });
}

/// Names become columns: words that no other column has.
fn check_name(reader: &mut Reader, name: &str, at: Span) {
    let word = name.starts_with(char::is_alphabetic) && name.chars().all(|c| c.is_alphanumeric() || c == '_');
    if !word {
        let said = format!("`{name}` cannot name a covariate");
        let help = "A name starts with a letter and holds letters, digits and `_`, since it becomes a column.";
        reader.report(Diagnostic::error(at, said).help(help));
    } else if is_parameter_name(name) || RESERVED.contains(&name) {
        let said = format!("`{name}` cannot name a covariate: it is the name of something else");
        reader.report(Diagnostic::error(at, said).help("Tables have a column of that name already."));
    }
}

/// Moves each covariate that depends on another's class behind it, and leaves the order of the file otherwise.
fn ordered(list: Vec<Known>) -> Vec<Known> {
    let names: Vec<&str> = list.iter().map(|known| known.name).collect();
    let mut ranked: Vec<((usize, usize), Known)> = list
        .into_iter()
        .enumerate()
        .map(|(own, known)| {
            let after = known.class_of.and_then(|of| names.iter().position(|name| *name == of));
            // What waits for a later covariate takes its place, just behind it.
            let rank = match after {
                Some(after) if after > own => (after, own + 1),
                _ => (own, 0),
            };
            (rank, known)
        })
        .collect();
    ranked.sort_by_key(|(rank, _)| *rank);
    let mut list: Vec<Known> = ranked.into_iter().map(|(_, known)| known).collect();
    let places: Vec<Option<usize>> =
        list.iter().map(|known| list.iter().position(|other| Some(other.name) == known.class_of)).collect();
    for (known, place) in list.iter_mut().zip(places) {
        if let (Some(covariate), Some(place)) = (&mut known.covariate, place)
            && let Spread::ByClass { of, .. } = &mut covariate.spread
        {
            *of = place;
        }
    }
    list
}
