//! Reads one covariate: its distribution, or one distribution for each class of another.

use num_traits::{Signed, Zero};

use super::document::{Entry, Node, Value};
use super::fields::{Kind, quoted};
use super::measure::{Measured, Wants};
use super::nearest::nearest;
use super::reader::{Reader, Section};
use super::spread::limited;
use super::{Covariate, Spread};
use crate::diagnostic::{Diagnostic, Span};
use crate::quantity::{Dimension, Exact, Unit, to_f64};

/// Proportions may miss the whole by this much, as decimals of thirds do; they are then made to add up.
const PROPORTION_SLACK: (i64, i64) = (1, 1_000_000_000);

/// A covariate of the file.
pub(super) struct Known<'t> {
    pub(super) name: &'t str,
    pub(super) key_span: Span,
    pub(super) section: Section<'t>,
    /// `None` while unread, and where it could not be read.
    pub(super) covariate: Option<Covariate>,
    /// The covariate whose classes it follows.
    pub(super) class_of: Option<&'t str>,
    pub(super) used: bool,
}

/// The unit of a covariate, known from its first value on.
pub(super) struct Frame<'n> {
    pub(super) name: &'n str,
    pub(super) unit: Option<Unit>,
    /// What everybody expects of a covariate of this name.
    expected: Option<(Dimension, &'static str)>,
}

impl<'n> Frame<'n> {
    fn new(name: &'n str) -> Self {
        let expected = match name {
            "weight" | "fat_free_mass" | "lean_body_mass" | "ideal_weight" => Some((Dimension::MASS, "70 kg")),
            "height" => Some((Dimension::LENGTH, "170 cm")),
            "age" | "postnatal_age" | "gestational_age" | "postmenstrual_age" => Some((Dimension::TIME, "40 a")),
            _ => None,
        };
        Self { name, unit: None, expected }
    }

    /// Reads a value and takes its unit if none is known yet.
    pub(super) fn measure(&mut self, reader: &mut Reader, name: &str, node: &Node) -> Option<(f64, Measured)> {
        let (dimension, example) = match (&self.unit, self.expected) {
            (Some(unit), _) => (Some(unit.dimension), format!("1 {}", unit.text)),
            (None, Some((dimension, example))) => (Some(dimension), example.to_owned()),
            (None, None) => (None, "70 kg".to_owned()),
        };
        let shown = if self.unit.is_none() && dimension.is_some() { self.name } else { name };
        let measured = reader.measure(node, &Wants { name: shown, dimension, example: &example })?;
        let unit = self.unit.get_or_insert_with(|| measured.quantity.unit.clone());
        let value = measured.quantity.in_unit(unit);
        Some((value, measured))
    }

    /// As [`Frame::measure`], from a key.
    pub(super) fn value(&mut self, reader: &mut Reader, section: &Section, key: &str) -> Option<(f64, Measured)> {
        let entry = section.get(key)?;
        self.measure(reader, key, &entry.node)
    }
}

/// Reads a covariate with a distribution of its own.
pub(super) fn read_own(reader: &mut Reader, known: &mut Known) {
    let section = known.section;
    if section.has("formula") || section.has("by") {
        return;
    }
    if let Some(each) = section.get("each") {
        let fault = Diagnostic::error(each.key_span, "`each` needs `by`, the covariate whose classes it lists");
        reader.report_absent(fault.label("of which covariate?"));
        return;
    }
    let Some(distribution) = distribution(reader, &section) else { return };
    let spread = if distribution == "categories" {
        classes(reader, known.name, &section).map(|spread| (None, spread))
    } else {
        let mut frame = Frame::new(known.name);
        limited(reader, &section, distribution, &mut frame).map(|limited| (frame.unit, Spread::Number(limited)))
    };
    known.covariate = spread.map(|(unit, spread)| Covariate { name: known.name.to_owned(), unit, spread });
}

/// The distribution's name; a missing one is told of.
fn distribution(reader: &mut Reader, section: &Section) -> Option<&'static str> {
    if !section.has("distribution") {
        reader.missing(section, "distribution");
        return None;
    }
    reader.word(section, "distribution")
}

/// Refuses keys that the distribution does not use.
pub(super) fn only(reader: &mut Reader, section: &Section, distribution: &str, keys: &[&str]) {
    for entry in &section.table.entries {
        let key = entry.key.as_str();
        let known = super::fields::find(section.at, key).is_some_and(|field| field.need != super::fields::Need::Later);
        if known && key != "distribution" && !keys.contains(&key) {
            let said = format!("`{key}` has no place in a distribution that is {distribution}");
            let takes: Vec<String> = keys.iter().map(|key| format!("`{key}`")).collect();
            let fault = Diagnostic::error(entry.key_span, said).label("not used");
            reader.report(fault.help(format!("It takes {}.", takes.join(", "))));
        }
    }
}

/// Reads a covariate that follows the classes of another one, which has been read before.
pub(super) fn read_by_class(reader: &mut Reader, list: &mut [Known], index: usize) {
    let section = list[index].section;
    if !section.has("by") || section.has("formula") {
        return;
    }
    only(reader, &section, "given by class", &["by", "each"]);
    if let Some(entry) = section.get("distribution") {
        let said = "`distribution` stands inside each class where a covariate is given by class";
        reader.report(Diagnostic::error(entry.key_span, said).label("one or the other"));
    }
    let Some((of, at)) = reader.text(&section, "by") else { return };
    let Some(place) = list.iter().position(|known| known.name == of) else {
        let names: Vec<&str> = list.iter().map(|known| known.name).collect();
        let fault = Diagnostic::error(at, format!("there is no covariate `{of}`")).label("unknown covariate");
        reader.report_absent(match nearest(of, names) {
            Some(near) => fault.help(format!("Did you mean `{near}`?")).mend(at, format!("\"{near}\"")),
            None => fault,
        });
        return;
    };
    list[place].used = true;
    if place == index || list[place].section.has("by") {
        let said = "`by` needs a covariate with classes of its own";
        reader.report(Diagnostic::error(at, said).label(if place == index { "itself" } else { "given by class" }));
        return;
    }
    let classes = match list[place].covariate.as_ref().map(|covariate| &covariate.spread) {
        Some(Spread::Classes { names, .. }) => names.clone(),
        // Its own faults are told; more would be noise.
        None => return,
        Some(_) => {
            let said = format!("`by` needs a covariate with classes; `{of}` is a number");
            let fault = Diagnostic::error(at, said).label("no classes");
            reader.report(fault.context(list[place].key_span, "this one"));
            return;
        }
    };
    list[index].class_of = Some(of);
    let mut frame = Frame::new(list[index].name);
    let Some(each) = each_class(reader, &section, &classes, of, &mut frame) else { return };
    let spread = Spread::ByClass { of: place, each };
    list[index].covariate = Some(Covariate { name: list[index].name.to_owned(), unit: frame.unit, spread });
}

/// One distribution for each class.
fn each_class(
    reader: &mut Reader,
    section: &Section,
    classes: &[String],
    of: &str,
    frame: &mut Frame,
) -> Option<Vec<super::Limited>> {
    let Some((table, span)) = reader.table(section, "each") else {
        if !section.has("each") {
            reader.missing(section, "each");
        }
        return None;
    };
    let mut meant = Vec::new();
    for entry in table.entries.iter().filter(|entry| !classes.contains(&entry.key)) {
        let fault = Diagnostic::error(entry.key_span, format!("`{of}` has no class `{}`", entry.key));
        let near = nearest(&entry.key, classes.iter().map(String::as_str));
        meant.push(near);
        reader.report_absent(with_near(fault.label("unknown class"), near, entry.key_span, false));
    }
    let mut read: Vec<(&Entry, Option<super::Limited>)> = Vec::new();
    for entry in table.entries.iter().filter(|entry| classes.contains(&entry.key)) {
        let Value::Table(inner) = &entry.node.value else {
            reader.wrong_kind(&entry.key, Kind::Table, &entry.node);
            read.push((entry, None));
            continue;
        };
        let class = reader.open("population.*.each.*", inner, entry.node.span);
        let word = distribution(reader, &class);
        if word == Some("categories") {
            let at = class.get("distribution").map_or(class.span, |entry| entry.node.span);
            reader.report(Diagnostic::error(at, "a class cannot be divided into classes again"));
        }
        let own = word.filter(|word| *word != "categories").and_then(|word| limited(reader, &class, word, frame));
        read.push((entry, own));
    }
    let mut each = Vec::with_capacity(classes.len());
    for class in classes {
        if let Some((_, own)) = read.iter().find(|(entry, _)| entry.key == *class) {
            each.push(*own);
        } else {
            if !meant.contains(&Some(class.as_str())) {
                let said = format!("the class `{class}` of `{of}` has no distribution");
                reader.report_absent(Diagnostic::error(span, said).label(format!("needs `each.{class}`")));
            }
            each.push(None);
        }
    }
    each.into_iter().collect()
}

/// Adds the nearest name, as a mend with or without quotes.
pub(super) fn with_near(fault: Diagnostic, near: Option<&str>, at: Span, in_quotes: bool) -> Diagnostic {
    match near {
        Some(near) => {
            let mend = if in_quotes { format!("\"{near}\"") } else { near.to_owned() };
            fault.help(format!("Did you mean `{near}`?")).mend(at, mend)
        }
        None => fault,
    }
}

/// Classes and their proportions.
fn classes(reader: &mut Reader, name: &str, section: &Section) -> Option<Spread> {
    only(reader, section, "categories", &["proportions"]);
    let Some(entry) = section.get("proportions") else {
        reader.missing(section, "proportions");
        return None;
    };
    let Value::Table(table) = &entry.node.value else {
        reader.wrong_kind("proportions", Kind::Proportions, &entry.node);
        return None;
    };
    if table.entries.is_empty() {
        reader.report(Diagnostic::error(entry.node.span, format!("`{name}` has no classes")).label("empty"));
        return None;
    }
    let read: Vec<Option<Exact>> =
        table.entries.iter().map(|class| proportion(reader, &class.key, &class.node)).collect();
    let proportions: Vec<Exact> = read.into_iter().collect::<Option<_>>()?;
    let total: Exact = proportions.iter().sum();
    let slack = Exact::new(PROPORTION_SLACK.0.into(), PROPORTION_SLACK.1.into());
    if (&total - Exact::from_integer(1.into())).abs() > slack {
        let said = format!("the proportions of `{name}` add up to {}", to_f64(&total));
        reader.report(Diagnostic::error(entry.node.span, said).label("must add up to 1"));
        return None;
    }
    let names = table.entries.iter().map(|class| class.key.clone()).collect();
    Some(Spread::Classes { names, proportions: proportions.iter().map(|own| to_f64(&(own / &total))).collect() })
}

/// One proportion: a bare number or a percentage, above zero.
fn proportion(reader: &mut Reader, class: &str, node: &Node) -> Option<Exact> {
    if class.trim().is_empty() {
        reader.report(Diagnostic::error(node.span, "a class has no name"));
        return None;
    }
    let wants = Wants { name: class, dimension: Some(Dimension::NONE), example: "50 %" };
    let value = reader.measure(node, &wants)?.quantity.exact();
    if value <= Exact::zero() {
        let fault = Diagnostic::error(node.span, format!("the proportion of `{class}` must be above zero"));
        reader.report(fault.label("not above zero").help("Leave out a class that nobody belongs to."));
        return None;
    }
    Some(value)
}

/// The help that lists what a distribution is called.
pub(super) fn one_of(keys: &[&str]) -> String {
    format!("Give one of {}.", quoted(keys).replace('"', "`"))
}
