//! Takes quantities out of the document and compares what they measure with what is wanted.

use num_traits::{One, Zero};

use super::document::{Node, Value};
use super::fields::Kind;
use super::reader::{Reader, Section};
use crate::diagnostic::{Diagnostic, Span};
use crate::quantity::{Dimension, Exact, Quantity, Unit, to_f64};

/// Quantities lie between this and its inverse, in base units: products and quotients of four of them stay finite.
const FARTHEST: f64 = 1e75;
/// No time of a trial is longer: more than 100,000 years.
const MOST_HOURS: f64 = 1e9;

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

impl Reader {
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
        self.hours(key, &measured).map(|time| (time, measured.span))
    }

    /// The exact value of a time in h that is not negative.
    pub(super) fn hours(&mut self, name: &str, measured: &Measured) -> Option<Exact> {
        let time = self.not_negative(name, measured)?;
        if to_f64(&time) > MOST_HOURS {
            self.report(beyond(measured.span, name));
            return None;
        }
        Some(time)
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
                let unit = Unit { text: String::new(), dimension: Dimension::NONE, factor: Exact::one() };
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
        let magnitude = base.abs();
        let sensible = measured.quantity.value.is_zero() || (1.0 / FARTHEST..=FARTHEST).contains(&magnitude);
        if !sensible {
            self.report(beyond(node.span, wants.name));
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
        // Amounts and concentrations settle their dimension too, and are never pure.
        if wants.dimension.is_none() && !matches!(wants.name, "amount" | "low" | "high") {
            fault = fault.help("A pure number has the unit 1: \"3.2 1\".");
        }
        self.report(fault);
    }
}

/// The fault of a value that cannot be meant.
pub(super) fn beyond(at: Span, name: &str) -> Diagnostic {
    Diagnostic::error(at, format!("`{name}` is beyond all measure")).label("out of range")
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
