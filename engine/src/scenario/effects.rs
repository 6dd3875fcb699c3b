//! Reads what covariates do to a parameter: factors in `scale`, terms in `plus`.

use super::covariates::with_near;
use super::measure::Wants;
use super::nearest::nearest;
use super::population::Covariates;
use super::reader::{Reader, Section};
use super::roles::Kind;
use super::{Additive, Covariate, Factor, Limited, Parameter, Spread};
use crate::diagnostic::{Diagnostic, Span};
use crate::math::{exp, ln};
use crate::quantity::{Dimension, Unit, to_f64};

/// No power is higher.
const LARGEST_EXPONENT: f64 = 20.0;

/// What acts on one parameter.
#[derive(Default)]
pub(super) struct Effects {
    pub(super) additive: Vec<Additive>,
    pub(super) factors: Vec<Factor>,
}

/// Reads `scale` and `plus`; `None` where an entry could not be read.
pub(super) fn read(
    reader: &mut Reader,
    section: &Section,
    kind: &Kind,
    covariates: &mut Covariates,
) -> Option<Effects> {
    let mut effects = Some(Effects::default());
    for (table, span) in reader.tables(section, "scale") {
        let entry = reader.open("drug.parameter.*.scale", table, span);
        match factor(reader, &entry, covariates) {
            Some(factor) => {
                if let Some(effects) = &mut effects {
                    effects.factors.push(factor);
                }
            }
            None => effects = None,
        }
    }
    for (table, span) in reader.tables(section, "plus") {
        let entry = reader.open("drug.parameter.*.plus", table, span);
        match additive(reader, &entry, kind, covariates) {
            Some(additive) => {
                if let Some(effects) = &mut effects {
                    effects.additive.push(additive);
                }
            }
            None => effects = None,
        }
    }
    effects
}

/// The covariate of an entry: its index, and what it is if it could be read.
fn covariate(
    reader: &mut Reader,
    section: &Section,
    covariates: &mut Covariates,
) -> Option<(usize, Option<Covariate>, Span)> {
    let (name, at) = reader.text(section, "covariate")?;
    let index = covariates.find(reader, name, at)?;
    Some((index, covariates.list[index].covariate.clone(), at))
}

/// The forms of a factor, each by the keys that tell it.
const FORMS: [(&str, &[&str], &[&str]); 4] = [
    ("a power", &["exponent"], &["reference", "exponent"]),
    ("a linear fraction", &["slope"], &["reference", "slope"]),
    ("an exponential", &["rate"], &["reference", "rate"]),
    ("a category", &["is", "times"], &["is", "times"]),
];

fn factor(reader: &mut Reader, section: &Section, covariates: &mut Covariates) -> Option<Factor> {
    let found = covariate(reader, section, covariates);
    if section.has("half_at") || section.has("hill") {
        return None;
    }
    let forms: Vec<_> = FORMS.iter().filter(|(_, tell, _)| tell.iter().any(|key| section.has(key))).collect();
    let (name, _, keys) = match forms[..] {
        [form] => form,
        [] if FORMS.iter().flat_map(|(_, tell, _)| *tell).any(|key| section.meant(key)) => return None,
        [] => {
            let fault = Diagnostic::error(section.span, "this effect has no form").label("which form?");
            let help = "A power takes `exponent`, a linear fraction `slope`, an exponential `rate`, a category `is` and `times`.";
            reader.report_absent(fault.help(help));
            return None;
        }
        [one, other, ..] => {
            let said = format!("this effect is both {} and {}", one.0, other.0);
            reader.report(Diagnostic::error(section.span, said).label("one form an entry"));
            return None;
        }
    };
    let mut complete = true;
    for key in keys.iter().filter(|key| !section.has(key)) {
        reader.missing(section, key);
        complete = false;
    }
    if let Some(entry) = section.get("reference").filter(|_| !keys.contains(&"reference")) {
        let fault = Diagnostic::error(entry.key_span, format!("`reference` has no place in {name}"));
        reader.report(fault.label("not used"));
        complete = false;
    }
    let (index, found, at) = found?;
    let found = found.filter(|_| complete)?;
    if keys.contains(&"is") {
        class(reader, section, index, &found, at)
    } else {
        numeric(reader, section, index, &found, at, keys[1])
    }
}

fn class(reader: &mut Reader, section: &Section, index: usize, found: &Covariate, at: Span) -> Option<Factor> {
    let times = reader.number(section, "times");
    if let Some((value, span)) = times.filter(|(value, _)| *value <= 0.0) {
        let label = if value < 0.0 { "negative" } else { "zero" };
        reader.report(Diagnostic::error(span, "`times` must be above zero").label(label));
        return None;
    }
    let (name, span) = reader.text(section, "is")?;
    let Spread::Classes { names, .. } = &found.spread else {
        let said = format!("`{}` is a number and has no class `{name}`", found.name);
        reader.report(
            Diagnostic::error(at, said)
                .label("a number")
                .help("Numbers take a power, a linear fraction or an exponential."),
        );
        return None;
    };
    let Some(class) = names.iter().position(|own| own == name) else {
        let fault = Diagnostic::error(span, format!("`{}` has no class `{name}`", found.name)).label("unknown class");
        let classes: Vec<String> = names.iter().map(|own| format!("`{own}`")).collect();
        let near = nearest(name, names.iter().map(String::as_str));
        reader.report(with_near(fault, near, span, true).help(format!("Its classes: {}.", classes.join(", "))));
        return None;
    };
    Some(Factor::Class { covariate: index, class, times: times?.0 })
}

/// The unit of a covariate that is a number.
fn number_unit<'c>(reader: &mut Reader, found: &'c Covariate, at: Span) -> Option<&'c Unit> {
    if found.unit.is_none() {
        let said = format!("`{}` has classes and no number", found.name);
        reader.report(Diagnostic::error(at, said).label("classes").help("Classes take `is` and `times`."));
    }
    found.unit.as_ref()
}

fn numeric(
    reader: &mut Reader,
    section: &Section,
    covariate: usize,
    found: &Covariate,
    at: Span,
    form: &str,
) -> Option<Factor> {
    let unit = number_unit(reader, found, at)?;
    let example = format!("1 {}", unit.text);
    let wants = Wants { name: "reference", dimension: Some(unit.dimension), example: &example };
    let measured = section.get("reference").and_then(|entry| reader.measure(&entry.node, &wants));
    let reference = measured.as_ref().map(|measured| measured.quantity.in_unit(unit));
    let factor = match form {
        "exponent" => {
            let exponent = reader.number(section, "exponent");
            let positive = Limited::all(&found.spread).iter().all(Limited::positive);
            if !positive {
                let said = format!("a power needs a positive covariate, and `{}` can be zero or negative", found.name);
                let fault = Diagnostic::error(at, said).label("not always above zero");
                reader.report(fault.help("Give the covariate limits above zero, or choose another form."));
                return None;
            }
            if let (Some(measured), Some(value)) = (&measured, reference)
                && value <= 0.0
            {
                reader
                    .report(Diagnostic::error(measured.span, "`reference` must be above zero").label("not above zero"));
                return None;
            }
            let (exponent, span) = exponent?;
            if exponent.abs() > LARGEST_EXPONENT {
                reader.report(super::measure::beyond(span, "exponent"));
                return None;
            }
            Factor::Power { covariate, reference: reference?, exponent }
        }
        "slope" => {
            let slope = per_covariate(reader, section, "slope", Dimension::NONE, unit);
            Factor::Linear { covariate, reference: reference?, slope: slope? }
        }
        _ => {
            let rate = per_covariate(reader, section, "rate", Dimension::NONE, unit);
            Factor::Exponential { covariate, reference: reference?, rate: rate? }
        }
    };
    Some(factor)
}

/// A change per unit of the covariate, in base units over the unit in which the covariate is held.
fn per_covariate(reader: &mut Reader, section: &Section, key: &str, of: Dimension, unit: &Unit) -> Option<f64> {
    let entry = section.get(key)?;
    let dimension = of.per(unit.dimension);
    let example = if of == Dimension::NONE { format!("0.01 /{}", unit.text) } else { "0.8".to_owned() };
    let measured = reader.measure(&entry.node, &Wants { name: key, dimension: Some(dimension), example: &example })?;
    Some(to_f64(&(measured.quantity.exact() * &unit.factor)))
}

fn additive(reader: &mut Reader, section: &Section, kind: &Kind, covariates: &mut Covariates) -> Option<Additive> {
    let found = covariate(reader, section, covariates);
    if !section.has("slope") {
        reader.missing(section, "slope");
        return None;
    }
    let (covariate, found, at) = found?;
    let found = found?;
    let unit = number_unit(reader, &found, at)?;
    let slope = per_covariate(reader, section, "slope", kind.dimension, unit)?;
    Some(Additive { covariate, slope })
}

impl Limited {
    /// Every distribution of a covariate that is a number.
    pub(super) fn all(spread: &Spread) -> Vec<Self> {
        match spread {
            Spread::Number(one) => vec![*one],
            Spread::ByClass { each, .. } => each.clone(),
            Spread::Classes { .. } => Vec::new(),
        }
    }
}

impl Effects {
    /// Lowest and highest value of a parameter without its random part, each covariate taken for itself. With `whole`
    /// every possible value counts, otherwise those that are likely at all. `None` where a covariate could not be read.
    pub(super) fn range(parameter: &Parameter, covariates: &Covariates, whole: bool) -> Option<(f64, f64)> {
        let ends = |index: usize| -> Option<(f64, f64)> {
            let covariate = covariates.list.get(index)?.covariate.as_ref()?;
            let every = Limited::all(&covariate.spread);
            let each = every.iter().map(|one| if whole { one.support() } else { one.reach() });
            each.reduce(|a, b| (a.0.min(b.0), a.1.max(b.1)))
        };
        let mut range = (parameter.typical, parameter.typical);
        for term in &parameter.additive {
            let (low, high) = ordered(ends(term.covariate)?, |x| term.slope * x);
            range = (range.0 + low, range.1 + high);
        }
        for factor in &parameter.factors {
            let own = match *factor {
                Factor::Power { covariate, reference, exponent } => {
                    ordered(ends(covariate)?, |x| exp(exponent * ln(x / reference)))
                }
                Factor::Linear { covariate, reference, slope } => {
                    ordered(ends(covariate)?, |x| 1.0 + slope * (x - reference))
                }
                Factor::Exponential { covariate, reference, rate } => {
                    ordered(ends(covariate)?, |x| exp(rate * (x - reference)))
                }
                Factor::Class { times, .. } => (times.min(1.0), times.max(1.0)),
            };
            let products = [range.0 * own.0, range.0 * own.1, range.1 * own.0, range.1 * own.1];
            // Zero times infinity is no number: an effect without bounds on a value of zero changes nothing.
            let products = products.map(|product| if product.is_nan() { 0.0 } else { product });
            range = products.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |r, p| (r.0.min(*p), r.1.max(*p)));
        }
        Some(range)
    }
}

/// The range of a function that only rises or only falls.
fn ordered((low, high): (f64, f64), of: impl Fn(f64) -> f64) -> (f64, f64) {
    let (a, b) = (of(low), of(high));
    // A slope of zero over an endless range is no number; it changes nothing.
    let (a, b) = (if a.is_nan() { of(1.0) } else { a }, if b.is_nan() { of(1.0) } else { b });
    (a.min(b), a.max(b))
}
