//! Takes plain values out of the document: text, words, flags, counts, bare numbers, percentages and pairs.

use num_traits::Zero;

use super::document::{Node, Value};
use super::fields::Kind;
use super::measure::{Wants, beyond};
use super::nearest::nearest;
use super::reader::{Reader, Section};
use crate::diagnostic::{Diagnostic, Span};
use crate::quantity::{Dimension, Exact, decimal, to_f64};

/// Bare numbers (exponents, spreads of logarithms, correlations) are far smaller.
const LARGEST_NUMBER: f64 = 1e6;
/// No coefficient of variation is larger: 10,000 %.
const LARGEST_SHARE: f64 = 100.0;

impl Reader {
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
                let sensible = number.exact.clone().filter(|exact| to_f64(exact).abs() <= LARGEST_NUMBER);
                if sensible.is_none() {
                    self.report(beyond(node.span, name).label("not a number to reckon with"));
                }
                sensible
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
            // Few spread by more than 200 %: what stands above 2 was surely meant as a percentage.
            let fraction = bare <= Exact::from_integer(2.into());
            let times = Exact::from_integer(if fraction { 100 } else { 1 }.into());
            let percent = format!("{} %", to_f64(&(bare * times)));
            let fault = Diagnostic::error(node.span, format!("`{key}` wants a percentage")).label("no `%`");
            self.report(
                if fraction {
                    fault.help(format!("If this is meant as a fraction, write \"{percent}\"."))
                } else {
                    fault.help(format!("Write \"{percent}\"."))
                }
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
        if to_f64(&value) > LARGEST_SHARE {
            self.report(beyond(node.span, key));
            return None;
        }
        Some((value, node.span))
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
