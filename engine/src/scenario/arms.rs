//! Reads the arms and their dose rows. What amounts are counted in is settled here, by the first amount of the file.

use super::document::{Node, Value};
use super::measure::{Measured, Wants};
use super::population::Covariates;
use super::reader::{Reader, Section};
use super::schedule;
use super::{Amount, AmountUnit, Arm, Dose, Limited, Route};
use crate::diagnostic::{Diagnostic, Span};
use crate::quantity::{Dimension, Exact, Unit, to_f64};

/// An arm gives at most this many doses.
pub(super) const MOST_DOSES: usize = 100_000;

/// The arms, as far as they could be read.
#[derive(Default)]
pub(super) struct Draft {
    pub(super) arms: Vec<Arm>,
    pub(super) amount_unit: Option<AmountUnit>,
    /// Where the amount stands that settled the unit.
    pub(super) settled_at: Option<Span>,
    pub(super) demand: super::parameters::Demand,
}

/// Reads every arm.
pub(super) fn read(reader: &mut Reader, root: &Section, covariates: &mut Covariates) -> Draft {
    let mut draft = Draft::default();
    let arms = reader.tables(root, "arm");
    if arms.is_empty() {
        draft.demand.unsure = true;
        if let Some(entry) = root.get("arm").filter(|entry| matches!(&entry.node.value, Value::List(l) if l.is_empty()))
        {
            reader.report(Diagnostic::error(entry.node.span, "there are no arms").label("empty"));
        }
    }
    let mut names: Vec<(&str, Span)> = Vec::new();
    for (number, (table, span)) in arms.into_iter().enumerate() {
        let section = reader.open("arm", table, span);
        let name = reader.text(&section, "name");
        if let Some((name, at)) = name {
            if let Some((_, first)) = names.iter().find(|(other, _)| *other == name) {
                let fault = Diagnostic::error(at, format!("two arms are called \"{name}\"")).label("again");
                reader.report(fault.context(*first, "first here"));
            }
            names.push((name, at));
        }
        let doses = doses(reader, &section, number + 1, covariates, &mut draft);
        draft.arms.push(Arm { name: name.map(|(name, _)| name.to_owned()).unwrap_or_default(), doses });
    }
    draft
}

fn doses(
    reader: &mut Reader,
    arm: &Section,
    number: usize,
    covariates: &mut Covariates,
    draft: &mut Draft,
) -> Vec<Dose> {
    let rows = reader.tables(arm, "dose");
    if rows.is_empty() {
        draft.demand.unsure = true;
        if matches!(arm.get("dose").map(|entry| &entry.node.value), Some(Value::List(_))) {
            reader.report(Diagnostic::error(arm.span, "this arm gives nothing").label("needs a dose"));
        }
    }
    let mut doses = Vec::new();
    let mut count = 0_usize;
    for (row, (table, span)) in rows.into_iter().enumerate() {
        let section = reader.open("arm.dose", table, span);
        let route = route(reader, &section, draft);
        let amount = amount(reader, &section, covariates, draft);
        let times = schedule::read(reader, &section, &format!("arm.{number}.dose.{}", row + 1));
        let before = count;
        count += times.as_ref().map_or(0, Vec::len);
        if before <= MOST_DOSES && count > MOST_DOSES {
            reader.report(
                Diagnostic::error(section.span, format!("this arm gives {count} doses; {MOST_DOSES} are the most"))
                    .label("too many in all"),
            );
        }
        if let (Some(route), Some(amount), Some(times)) = (route, amount, times) {
            doses.push(Dose { amount, route, times });
        }
    }
    doses
}

/// The route, with how long an infusion lasts.
fn route(reader: &mut Reader, section: &Section, draft: &mut Draft) -> Option<Route> {
    let over = section.get("over");
    let Some(word) = reader.word(section, "route") else {
        draft.demand.unsure = true;
        return None;
    };
    let at = section.get("route").map_or(section.span, |entry| entry.node.span);
    if word == "oral" {
        draft.demand.oral.get_or_insert(at);
    }
    if word == "infusion" {
        if over.is_none() {
            let fault =
                Diagnostic::error(section.span, "an infusion needs `over`, how long it lasts").label("needs `over`");
            reader.report_absent(fault.context(at, "an infusion").help("Write it as in over = \"2 h\"."));
            return None;
        }
        let (over, span) = reader.time(section, "over")?;
        if over <= Exact::from_integer(0.into()) {
            let fault = Diagnostic::error(span, "an infusion must last longer than 0 h").label("no time at all");
            reader.report(fault.help("A dose given at once is a \"bolus\"."));
            return None;
        }
        return Some(Route::Infusion { over });
    }
    if let Some(over) = over {
        let fault = Diagnostic::error(
            over.key_span,
            format!("`over` has no place in {}", if word == "bolus" { "a bolus" } else { "an oral dose" }),
        );
        let fault = fault.label("not used").context(at, "given at once");
        reader.report(fault.help("A dose given over a time has route = \"infusion\"."));
        return None;
    }
    Some(if word == "bolus" { Route::Bolus } else { Route::Oral })
}

/// The amount of a row.
fn amount(reader: &mut Reader, section: &Section, covariates: &mut Covariates, draft: &mut Draft) -> Option<Amount> {
    let per = match reader.text(section, "per") {
        Some((name, at)) => Some((covariates.find(reader, name, at), at)),
        None if section.has("per") => return None,
        None => None,
    };
    let entry = section.get("amount")?;
    if let Value::Table(_) = entry.node.value {
        reader.later("amount in bands", entry.node.span);
        return None;
    }
    let Some((index, at)) = per else {
        let measured = settled(reader, &entry.node, Dimension::NONE, None, draft)?;
        return Some(Amount::Flat(measured.quantity.in_base()));
    };
    let index = index?;
    let covariate = covariates.list[index].covariate.clone()?;
    let Some(unit) = &covariate.unit else {
        let said = format!("`per` needs a number; `{}` has classes", covariate.name);
        reader.report(Diagnostic::error(at, said).label("classes"));
        return None;
    };
    if Limited::all(&covariate.spread).iter().any(|one| one.support().0 < 0.0) {
        let said = format!("`{}` can be negative, and the dose with it", covariate.name);
        let fault = Diagnostic::error(at, said).label("below zero for some");
        reader.report(fault.help("Give the covariate limits that are not below zero."));
        return None;
    }
    let measured = settled(reader, &entry.node, unit.dimension, Some(unit), draft)?;
    let amount = to_f64(&(measured.quantity.exact() * &unit.factor));
    Some(Amount::Per { covariate: index, amount })
}

/// Reads an amount, per so much of `below`, in what the scenario counts amounts in.
fn settled(
    reader: &mut Reader,
    node: &Node,
    below: Dimension,
    per: Option<&Unit>,
    draft: &mut Draft,
) -> Option<Measured> {
    let example = per.map_or_else(|| "500 mg".to_owned(), |unit| format!("25 mg/{}", unit.text));
    let measured = reader.measure(node, &Wants { name: "amount", dimension: None, example: &example })?;
    let dimension = measured.quantity.unit.dimension.times(below);
    // "25 %" of a weight is a mass too, and surely no dose.
    let quotient = per.is_none() || measured.quantity.unit.text.contains(['/', '-']);
    let Some(unit) = AmountUnit::ALL.into_iter().find(|unit| quotient && unit.dimension() == dimension) else {
        reader.report(no_amount(&measured, per, &example));
        return None;
    };
    match (draft.amount_unit, draft.settled_at) {
        (Some(settled), Some(first)) if settled != unit => {
            let said = format!("amounts are {} here and {} elsewhere", words(unit), words(settled));
            let fault = Diagnostic::error(measured.unit, said).label(words(unit)).context(first, words(settled));
            reader.report(fault.help("One scenario counts in mass, in amount of substance or in international units; this version has no molar mass."));
            return None;
        }
        _ => {
            draft.amount_unit = Some(unit);
            draft.settled_at.get_or_insert(measured.unit);
        }
    }
    reader.not_negative("amount", &measured)?;
    Some(measured)
}

fn words(unit: AmountUnit) -> String {
    unit.dimension().name()
}

/// The amount is not an amount of drug.
fn no_amount(measured: &Measured, per: Option<&Unit>, example: &str) -> Diagnostic {
    let unit = &measured.quantity.unit;
    let wanted = match per {
        Some(unit) => format!("an amount of drug per {}", unit.text),
        None => "an amount of drug".to_owned(),
    };
    let quotient = unit.text.contains('/');
    let what = if quotient { format!("`{}`", unit.text) } else { unit.dimension.phrase() };
    let fault = Diagnostic::error(measured.unit, format!("`amount` wants {wanted}; this is {what}"));
    let fault = fault.label("not an amount");
    if per.is_none() && quotient {
        return fault.help("For an amount for each kilogram add per = \"weight\".");
    }
    fault.help(format!("Write it as in \"{example}\"."))
}
