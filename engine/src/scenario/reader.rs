//! Takes values out of the document and collects what is wrong with them. Every message is made from the field table,
//! so that what is wanted is said the same way everywhere.

use num_traits::{One, Zero};

use super::Echo;
use super::document::{Entry, Node, Table, Value};
use super::fields::{self, Kind, Need};
use super::nearest::nearest;
use crate::diagnostic::{Diagnostic, Span};
use crate::quantity::{Dimension, Exact, Quantity, decimal, to_f64};

/// Collects faults, warnings and defaults while the document is read.
#[derive(Default)]
pub(super) struct Reader {
    pub(super) found: Vec<Diagnostic>,
    pub(super) defaults: Vec<Echo>,
    /// The form of the file is broken: what seems to be missing may stand in the broken part, so nothing is called missing.
    pub(super) damaged: bool,
}

/// A table and its place in the field table.
#[derive(Clone, Copy)]
pub(super) struct Section<'t> {
    /// As in [`Field::tables`].
    pub(super) at: &'static str,
    pub(super) table: &'t Table,
    /// The header, or the key of a table without one.
    pub(super) span: Span,
}

/// A quantity and where it stands.
#[derive(Clone, Debug)]
pub(super) struct Measured {
    pub(super) quantity: Quantity,
    /// The whole value.
    pub(super) span: Span,
    /// The unit inside it, or the whole value where there is none.
    pub(super) unit: Span,
}

/// What a quantity must be.
#[derive(Clone, Debug)]
pub(super) struct Wants<'n> {
    /// Whose value it is.
    pub(super) name: &'n str,
    /// `None` where any will do.
    pub(super) dimension: Option<Dimension>,
    /// How it might be written.
    pub(super) example: &'n str,
}

impl<'t> Section<'t> {
    /// The entry of a key that this version reads.
    pub(super) fn get(&self, key: &str) -> Option<&'t Entry> {
        self.table.get(key).filter(|_| fields::find(self.at, key).is_none_or(|field| field.need != Need::Later))
    }

    /// Whether the key stands in the file, readable or not.
    pub(super) fn has(&self, key: &str) -> bool {
        self.table.get(key).is_some()
    }

    /// Whether an unknown key of the table was probably meant to be this one.
    pub(super) fn meant(&self, key: &str) -> bool {
        self.table.entries.iter().any(|entry| {
            fields::find(self.at, &entry.key).is_none()
                && nearest(&entry.key, fields::of(self.at).map(|field| field.key)) == Some(key)
        })
    }

    /// A key with the names of the tables that it stands in.
    fn path(&self, key: &str) -> String {
        if self.at.is_empty() { key.to_owned() } else { format!("{}.{key}", self.at) }
    }

    fn kind(&self, key: &str) -> Kind {
        fields::find(self.at, key).map_or(Kind::Open, |field| field.kind)
    }
}

impl Reader {
    /// Takes a fault or a warning.
    pub(super) fn report(&mut self, diagnostic: Diagnostic) {
        self.found.push(diagnostic);
    }

    /// Takes a fault about something that is not there or not known, unless the file is broken.
    pub(super) fn report_absent(&mut self, diagnostic: Diagnostic) {
        if !self.damaged {
            self.found.push(diagnostic);
        }
    }

    /// Takes a default that acts on the numbers.
    pub(super) fn acted(&mut self, key: impl Into<String>, value: impl Into<String>) {
        self.defaults.push(Echo { key: key.into(), value: value.into() });
    }

    /// Opens a table: refuses unknown keys and those of later versions, and misses required ones.
    pub(super) fn open<'t>(&mut self, at: &'static str, table: &'t Table, span: Span) -> Section<'t> {
        let section = self.open_named(at, table, span);
        for entry in &table.entries {
            if fields::find(at, &entry.key).is_none() {
                self.unknown_key(at, entry);
            }
        }
        section
    }

    /// As [`Reader::open`], where keys that the field table does not know are names, which the caller reads.
    pub(super) fn open_named<'t>(&mut self, at: &'static str, table: &'t Table, span: Span) -> Section<'t> {
        let section = Section { at, table, span };
        for entry in &table.entries {
            if fields::find(at, &entry.key).is_some_and(|field| field.need == Need::Later) {
                self.later(&entry.key, entry.key_span);
            }
        }
        for field in fields::of(at).filter(|field| field.need == Need::Required) {
            // The population's may be given outside the file, and the version is told of with its mend.
            if table.get(field.key).is_none() && at != "population" && field.key != "neap" {
                self.missing(&section, field.key);
            }
        }
        section
    }

    /// A required key is missing. Where a key was meant for it and misspelt, that has been told.
    pub(super) fn missing(&mut self, section: &Section, key: &str) {
        let Some(field) = fields::find(section.at, key).filter(|_| !section.meant(key)) else { return };
        let wanted = match field.kind {
            Kind::Table => format!("Write [{}].", section.path(key)),
            Kind::Tables => format!("Write [[{}]].", section.path(key)),
            kind => format!("{}: {}.", field.about, kind.phrase()),
        };
        let mut fault = Diagnostic::error(section.span, format!("`{key}` is missing")).help(wanted);
        if section.at.is_empty() {
            fault.span = None;
        } else {
            fault = fault.label(format!("needs `{key}`"));
        }
        self.report_absent(fault);
    }

    /// A key or a value of the design that this version does not read.
    pub(super) fn later(&mut self, what: &str, at: Span) {
        self.report(
            Diagnostic::error(at, format!("`{what}` is not in this version"))
                .label("planned")
                .help("Nothing of a scenario is silently left out, so it is refused."),
        );
    }

    fn unknown_key(&mut self, at: &str, entry: &Entry) {
        let fault = Diagnostic::error(entry.key_span, format!("unknown key `{}`", entry.key));
        let fault = fault.label("unknown");
        let near = nearest(&entry.key, fields::of(at).map(|field| field.key));
        self.report(if let Some(near) = near {
            fault.help(format!("Did you mean `{near}`?")).mend(entry.key_span, near)
        } else {
            let keys: Vec<String> = fields::of(at)
                .filter(|field| field.need != Need::Later)
                .map(|field| format!("`{}`", field.key))
                .collect();
            fault.help(format!("Known here: {}.", keys.join(", ")))
        });
    }

    /// The value is of another kind than the key wants.
    pub(super) fn wrong_kind(&mut self, name: &str, kind: Kind, node: &Node) {
        let phrase = kind.phrase();
        self.report(
            Diagnostic::error(node.span, format!("`{name}` wants {phrase}"))
                .label(format!("this is {}", node.value.phrase())),
        );
    }

    /// Text that is not blank.
    pub(super) fn text<'t>(&mut self, section: &Section<'t>, key: &str) -> Option<(&'t str, Span)> {
        let entry = section.get(key)?;
        self.text_of(key, section.kind(key), &entry.node)
    }

    /// As [`Reader::text`], from a value.
    pub(super) fn text_of<'t>(&mut self, name: &str, kind: Kind, node: &'t Node) -> Option<(&'t str, Span)> {
        match &node.value {
            Value::Text { text, .. } if text.trim().is_empty() => {
                self.report(Diagnostic::error(node.span, format!("`{name}` is empty")));
                None
            }
            Value::Text { text, .. } => Some((text, node.span)),
            _ => {
                self.wrong_kind(name, kind, node);
                None
            }
        }
    }

    /// One of the words that the field table lists.
    pub(super) fn word(&mut self, section: &Section, key: &str) -> Option<&'static str> {
        let kind = section.kind(key);
        let Kind::Word(now, later) = kind else { return None };
        let (text, span) = self.text(section, key)?;
        if let Some(word) = now.iter().find(|word| **word == text) {
            return Some(word);
        }
        if later.contains(&text) {
            self.later(text, span);
            return None;
        }
        let fault = Diagnostic::error(span, format!("`{key}` wants {}", kind.phrase())).label("unknown");
        self.report(match nearest(text, now.iter().chain(later).copied()) {
            Some(near) => fault.help(format!("Did you mean \"{near}\"?")).mend(span, format!("\"{near}\"")),
            None => fault,
        });
        None
    }

    /// `true` or `false`.
    pub(super) fn flag(&mut self, section: &Section, key: &str) -> Option<bool> {
        let entry = section.get(key)?;
        if let Value::Flag(flag) = entry.node.value {
            return Some(flag);
        }
        self.wrong_kind(key, Kind::Flag, &entry.node);
        None
    }

    /// A whole number from `least` to `most`.
    pub(super) fn count(&mut self, section: &Section, key: &str, least: u64, most: u64) -> Option<u64> {
        let entry = section.get(key)?;
        let span = entry.node.span;
        let Value::Number(number) = &entry.node.value else {
            self.wrong_kind(key, Kind::Count, &entry.node);
            return None;
        };
        let whole =
            number.integer.or_else(|| number.exact.as_ref().filter(|x| x.is_integer())?.to_integer().try_into().ok());
        let inside = whole.and_then(|whole| u64::try_from(whole).ok()).filter(|whole| (least..=most).contains(whole));
        match (number.integer, whole, inside) {
            (Some(_), _, Some(inside)) => return Some(inside),
            (None, Some(_), Some(inside)) => self.report(
                Diagnostic::error(span, format!("`{key}` wants a whole number without a fraction or a power of ten"))
                    .label("write it out")
                    .mend(span, inside.to_string()),
            ),
            (_, Some(_), _) => self.report(
                Diagnostic::error(span, format!("`{key}` must lie between {} and {}", grouped(least), grouped(most)))
                    .label("out of range"),
            ),
            _ => self.report(Diagnostic::error(span, format!("`{key}` wants a whole number"))),
        }
        None
    }

    /// A bare number.
    pub(super) fn number(&mut self, section: &Section, key: &str) -> Option<(f64, Span)> {
        let entry = section.get(key)?;
        let exact = self.number_of(key, &entry.node)?;
        Some((to_f64(&exact), entry.node.span))
    }

    /// As [`Reader::number`], from a value and exactly.
    pub(super) fn number_of(&mut self, name: &str, node: &Node) -> Option<Exact> {
        match &node.value {
            Value::Number(number) => {
                if number.exact.is_none() {
                    let said = format!("`{name}` wants a finite number of sensible length");
                    self.report(Diagnostic::error(node.span, said).label("not a number to reckon with"));
                }
                number.exact.clone()
            }
            Value::Text { text, .. } if decimal(text.trim()).is_some() => {
                let fault = Diagnostic::error(node.span, format!("`{name}` wants a bare number, without quotes"));
                self.report(fault.label("in quotes").mend(node.span, text.trim()));
                None
            }
            _ => {
                self.wrong_kind(name, Kind::Number, node);
                None
            }
        }
    }

    /// A fraction with its `%`, not below zero; exactly.
    pub(super) fn share(&mut self, section: &Section, key: &str) -> Option<(Exact, Span)> {
        let entry = section.get(key)?;
        let node = &entry.node;
        let bare = match &node.value {
            Value::Number(number) => number.exact.clone(),
            Value::Text { text, .. } => decimal(text.trim()),
            _ => None,
        };
        if let Some(bare) = bare {
            let percent = format!("{} %", to_f64(&(bare * Exact::from_integer(100.into()))));
            self.report(
                Diagnostic::error(node.span, format!("`{key}` wants a percentage"))
                    .label("no `%`")
                    .help(format!("If this is meant as a fraction, write \"{percent}\"."))
                    .mend(node.span, format!("\"{percent}\"")),
            );
            return None;
        }
        if !matches!(node.value, Value::Text { .. }) {
            self.wrong_kind(key, Kind::Share, node);
            return None;
        }
        let wants = Wants { name: key, dimension: Some(Dimension::NONE), example: "30 %" };
        let measured = self.measure(node, &wants)?;
        let value = measured.quantity.exact();
        if value < Exact::zero() {
            self.report(Diagnostic::error(node.span, format!("`{key}` is below zero")).label("negative"));
            return None;
        }
        Some((value, node.span))
    }

    /// A quantity whose dimension the field table knows.
    pub(super) fn quantity(&mut self, section: &Section, key: &str) -> Option<Measured> {
        let entry = section.get(key)?;
        let (Kind::Quantity(dimension, example) | Kind::Quantities(dimension, example)) = section.kind(key) else {
            return None;
        };
        self.measure(&entry.node, &Wants { name: key, dimension: Some(dimension), example })
    }

    /// A time in h that is not negative, exactly.
    pub(super) fn time(&mut self, section: &Section, key: &str) -> Option<(Exact, Span)> {
        let measured = self.quantity(section, key)?;
        self.not_negative(key, &measured).map(|time| (time, measured.span))
    }

    /// The exact value in base units, if it is not below zero.
    pub(super) fn not_negative(&mut self, name: &str, measured: &Measured) -> Option<Exact> {
        let value = measured.quantity.exact();
        if value < Exact::zero() {
            self.report(Diagnostic::error(measured.span, format!("`{name}` is below zero")).label("negative"));
            return None;
        }
        Some(value)
    }

    /// Two quantities in a list.
    pub(super) fn pair<'t>(&mut self, section: &Section<'t>, key: &str) -> Option<(&'t Node, &'t Node, Span)> {
        let entry = section.get(key)?;
        match &entry.node.value {
            Value::List(items) if items.len() == 2 => Some((&items[0], &items[1], entry.node.span)),
            Value::List(items) => {
                let said = format!("`{key}` wants {}", Kind::Pair.phrase());
                let label = if items.is_empty() { "empty".to_owned() } else { format!("{} here", items.len()) };
                self.report(Diagnostic::error(entry.node.span, said).label(label));
                None
            }
            _ => {
                self.wrong_kind(key, Kind::Pair, &entry.node);
                None
            }
        }
    }

    /// A table under a key.
    pub(super) fn table<'t>(&mut self, section: &Section<'t>, key: &str) -> Option<(&'t Table, Span)> {
        let entry = section.get(key)?;
        match &entry.node.value {
            Value::Table(table) => Some((table, entry.node.span)),
            Value::List(items) if items.iter().all(|item| matches!(item.value, Value::Table(_))) => {
                let said = format!("several `{key}` are not in this version");
                self.report(
                    Diagnostic::error(entry.node.span, said)
                        .label("a list of tables")
                        .help(format!("Write one [{key}].")),
                );
                None
            }
            _ => {
                self.wrong_kind(key, Kind::Table, &entry.node);
                None
            }
        }
    }

    /// The tables of a list under a key, each with its place.
    pub(super) fn tables<'t>(&mut self, section: &Section<'t>, key: &str) -> Vec<(&'t Table, Span)> {
        let Some(entry) = section.get(key) else { return Vec::new() };
        let Value::List(items) = &entry.node.value else {
            let fault = Diagnostic::error(entry.node.span, format!("`{key}` wants a list of tables"))
                .label(format!("this is {}", entry.node.value.phrase()));
            self.report(match &entry.node.value {
                Value::Table(_) => {
                    fault.help("Write its header with double brackets, or put the table into a list: [{ ... }].")
                }
                _ => fault,
            });
            return Vec::new();
        };
        let mut tables = Vec::new();
        for item in items {
            match &item.value {
                Value::Table(table) => tables.push((table, item.span)),
                _ => self.wrong_kind(key, Kind::Tables, item),
            }
        }
        tables
    }

    /// Reads a quantity and compares its dimension.
    pub(super) fn measure(&mut self, node: &Node, wants: &Wants) -> Option<Measured> {
        let pure = wants.dimension == Some(Dimension::NONE);
        let measured = match &node.value {
            Value::Text { text, verbatim } => match Quantity::parse(text) {
                Ok(quantity) => {
                    let start = Quantity::unit_start(text);
                    let unit = match verbatim {
                        Some(at) if !quantity.unit.text.is_empty() => {
                            Span { start: at + start, end: at + start + quantity.unit.text.len() }
                        }
                        _ => node.span,
                    };
                    Measured { quantity, span: node.span, unit }
                }
                Err(fault) => {
                    self.report(placed(*fault, node.span, *verbatim, wants.name));
                    return None;
                }
            },
            Value::Number(_) if pure => {
                let value = self.number_of(wants.name, node)?;
                let unit =
                    crate::quantity::Unit { text: String::new(), dimension: Dimension::NONE, factor: Exact::one() };
                Measured { quantity: Quantity { value, unit }, span: node.span, unit: node.span }
            }
            Value::Number(_) => {
                self.without_unit(node.span, wants);
                return None;
            }
            other => {
                let said = format!("`{}` wants {}", wants.name, wants.phrase());
                self.report(Diagnostic::error(node.span, said).label(format!("this is {}", other.phrase())));
                return None;
            }
        };
        if measured.quantity.unit.text.is_empty() && !pure {
            self.without_unit(node.span, wants);
            return None;
        }
        if wants.dimension.is_some_and(|wanted| wanted != measured.quantity.unit.dimension) {
            self.report(misfit(&measured, wants));
            return None;
        }
        let base = measured.quantity.in_base();
        if !base.is_finite() || (base == 0.0) != measured.quantity.value.is_zero() {
            self.report(Diagnostic::error(node.span, format!("`{}` is beyond all measure", wants.name)));
            return None;
        }
        Some(measured)
    }

    fn without_unit(&mut self, at: Span, wants: &Wants) {
        let mut fault = Diagnostic::error(at, format!("`{}` has no unit", wants.name)).label("no unit").help(format!(
            "It wants {}, in quotes, as in \"{}\".",
            wants.kind(),
            wants.example
        ));
        if wants.dimension.is_none() {
            fault = fault.help("A pure number has the unit 1: \"3.2 1\".");
        }
        self.report(fault);
    }
}

impl Wants<'_> {
    /// The kind of thing, with its article.
    fn kind(&self) -> String {
        self.dimension.map_or_else(|| "a number with its unit".to_owned(), Dimension::phrase)
    }

    /// The kind of thing and an example.
    fn phrase(&self) -> String {
        format!("{}, as in \"{}\"", self.kind(), self.example)
    }
}

/// A whole number with its digits in threes, as the file format allows.
pub(super) fn grouped(number: u64) -> String {
    let digits = number.to_string();
    let mut grouped = String::new();
    for (place, digit) in digits.chars().enumerate() {
        if place > 0 && (digits.len() - place).is_multiple_of(3) && digits.len() > 4 {
            grouped.push('_');
        }
        grouped.push(digit);
    }
    grouped
}

/// A fault inside a text, moved to where the text stands; where escapes hide the place, the whole value is underlined.
fn placed(fault: Diagnostic, whole: Span, verbatim: Option<usize>, name: &str) -> Diagnostic {
    let fault = Diagnostic { message: format!("`{name}`: {}", fault.message), ..fault };
    match verbatim {
        Some(at) => {
            let fault = fault.shifted(at);
            // An empty culprit, as in "", cannot be underlined.
            let empty = fault.span.is_none_or(|span| span.start == span.end);
            if empty { Diagnostic { span: Some(whole), ..fault } } else { fault }
        }
        None => Diagnostic { span: Some(whole), mend: None, ..fault },
    }
}

/// The quantity measures another kind of thing.
fn misfit(measured: &Measured, wants: &Wants) -> Diagnostic {
    let unit = &measured.quantity.unit;
    let said = format!("`{}` wants {}; this is {}", wants.name, wants.kind(), unit.dimension.phrase());
    let fault = Diagnostic::error(measured.unit, said).label(unit.dimension.name());
    let Some(wanted) = wants.dimension else { return fault };
    if unit.dimension.per(Dimension::TIME) == wanted && !unit.text.is_empty() {
        let mended = format!("{}/h", unit.text);
        let fault = fault.help(format!("Write it per hour: `{mended}`."));
        // Where escapes hide the unit, an edit would replace the number too.
        return if measured.unit == measured.span { fault } else { fault.mend(measured.unit, mended) };
    }
    let swapped = |from: Dimension, to: Dimension| wanted.per(to).times(from) == unit.dimension;
    if swapped(Dimension::MASS, Dimension::SUBSTANCE) || swapped(Dimension::SUBSTANCE, Dimension::MASS) {
        return fault.help("Mass and amount of substance are kept apart: this version has no molar mass.");
    }
    if unit.dimension.indexed != wanted.indexed {
        return fault.help("Filtration indexed to 1.73 m2 and absolute filtration are kept apart.");
    }
    fault.help(format!("Write it as in \"{}\".", wants.example))
}
