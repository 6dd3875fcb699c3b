//! Collects what is wrong with a document, opens its tables and judges their keys. Every message is made from the field
//! table, so that what is wanted is said the same way everywhere.

use super::Echo;
use super::document::{Entry, Node, Table, Value};
use super::fields::{self, Kind, Need};
use super::nearest::nearest;
use crate::diagnostic::{Diagnostic, Span};

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
    /// As in [`fields::Field::tables`].
    pub(super) at: &'static str,
    pub(super) table: &'t Table,
    /// The header, or the key of a table without one.
    pub(super) span: Span,
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

    /// What its value is.
    pub(super) fn kind(&self, key: &str) -> Kind {
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
            // The population's may be given outside the file; the version has words of its own.
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
            Kind::Table if !section.at.contains('*') => format!("Write [{}].", section.path(key)),
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
}
