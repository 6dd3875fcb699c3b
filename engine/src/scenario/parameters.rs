//! Reads `[drug]`: the model and its parameters, each with its typical value, its random part and its limits.

use num_traits::Zero;

use super::correlations;
use super::document::{Entry, Table, Value};
use super::effects::{self, Effects};
use super::fields::{Kind as FieldKind, LATER_PARAMETERS};
use super::measure::{Measured, Wants};
use super::nearest::nearest;
use super::population::Covariates;
use super::reader::{Reader, Section};
use super::roles::{KINDS, Kind, ONE_VOLUME, Sign};
use super::variation;
use super::{Model, Parameter, Role, Varies};
use crate::diagnostic::{Diagnostic, Span};
use crate::quantity::Exact;

/// The drug, as far as it could be read.
#[derive(Default)]
pub(super) struct Draft {
    pub(super) name: Option<String>,
    pub(super) model: Option<Model>,
    pub(super) parameters: Vec<Parameter>,
    pub(super) correlations: Vec<(usize, usize, f64)>,
}

/// A parameter of the file.
pub(super) struct Written<'t> {
    pub(super) name: &'t str,
    pub(super) key_span: Span,
    /// `None` where it could not be read; its name is known all the same.
    pub(super) parameter: Option<Parameter>,
}

/// What the doses ask of the drug.
#[derive(Clone, Copy, Default)]
pub(super) struct Demand {
    /// Where the first oral dose names its route.
    pub(super) oral: Option<Span>,
    /// Some route could not be read: nothing can be said to be unused.
    pub(super) unsure: bool,
}

/// Whether a name belongs to a parameter, of this version or a later one.
pub(super) fn is_parameter_name(name: &str) -> bool {
    name == ONE_VOLUME || LATER_PARAMETERS.contains(&name) || KINDS.iter().any(|kind| kind.name == name)
}

/// Reads the table.
pub(super) fn read(
    reader: &mut Reader,
    table: &Table,
    header: Span,
    covariates: &mut Covariates,
    demand: Demand,
) -> Draft {
    let section = reader.open("drug", table, header);
    let name = reader.text(&section, "name").map(|(name, _)| name.to_owned());
    let model = match reader.word(&section, "model") {
        Some("one-compartment") => Some(Model::OneCompartment),
        Some("two-compartment") => Some(Model::TwoCompartment),
        _ => None,
    };
    let mut written = Vec::new();
    if let Some((parameters, _)) = reader.table(&section, "parameter") {
        for entry in &parameters.entries {
            written.extend(one(reader, entry, model, covariates, demand));
        }
        if let Some(model) = model {
            missing(reader, header, model, &written, demand);
        }
    }
    let correlations = correlations::read(reader, &section, &written);
    let parameters = written.into_iter().filter_map(|own| own.parameter).collect();
    Draft { name, model, parameters, correlations }
}

/// Reads one parameter; `None` where the name means nothing.
fn one<'t>(
    reader: &mut Reader,
    entry: &'t Entry,
    model: Option<Model>,
    covariates: &mut Covariates,
    demand: Demand,
) -> Option<Written<'t>> {
    let named = |name| Written { name, key_span: entry.key_span, parameter: None };
    let kind = match known(reader, entry, model) {
        Ok(kind) => kind,
        // The name that was meant counts as written: its absence is no further fault.
        Err(meant) => {
            // What the table says is judged all the same.
            if let Some(kind) = KINDS.iter().find(|kind| Some(kind.name) == meant) {
                body(reader, entry, kind, covariates);
            }
            return meant.map(named);
        }
    };
    used(reader, entry, kind, model, demand);
    let parameter = body(reader, entry, kind, covariates);
    Some(Written { parameter, ..named(&entry.key) })
}

/// What a parameter's table says.
fn body(reader: &mut Reader, entry: &Entry, kind: &Kind, covariates: &mut Covariates) -> Option<Parameter> {
    let Value::Table(table) = &entry.node.value else {
        reader.wrong_kind(&entry.key, FieldKind::Table, &entry.node);
        return None;
    };
    let section = reader.open("drug.parameter.*", table, entry.node.span);
    let effects = effects::read(reader, &section, kind, covariates);
    let typical = typical(reader, &section, &entry.key, kind, !section.has("plus"));
    let varies = variation::read(reader, &section, kind.role);
    let limits = variation::limits(reader, &section, &entry.key, kind, varies.as_ref());
    let (effects, typical, varies, (low, high)) = (effects?, typical?, varies?, limits?);
    let parameter = Parameter {
        role: kind.role,
        span: entry.key_span,
        typical: typical.quantity.in_base(),
        additive: effects.additive,
        factors: effects.factors,
        varies,
        low,
        high,
    };
    plausible(reader, &section, &entry.key, &parameter, covariates, typical.span);
    Some(parameter)
}

/// The parameter that a name means, or the known name that it was probably meant to be.
fn known<'t>(reader: &mut Reader, entry: &'t Entry, model: Option<Model>) -> Result<&'static Kind, Option<&'t str>> {
    let (name, at) = (entry.key.as_str(), entry.key_span);
    if LATER_PARAMETERS.contains(&name) {
        reader.later(name, at);
        return Err(Some(name));
    }
    let wanted = match model {
        Some(Model::OneCompartment) => Some((ONE_VOLUME, "central_volume", "one compartment")),
        Some(Model::TwoCompartment) => Some(("central_volume", ONE_VOLUME, "two compartments")),
        None => None,
    };
    if let Some((right, wrong, count)) = wanted
        && name == wrong
    {
        let said = format!("with {count} the volume is called `{right}`");
        reader.report(Diagnostic::error(at, said).label(format!("not `{wrong}`")).mend(at, right));
    }
    let meant = if name == ONE_VOLUME { "central_volume" } else { name };
    if let Some(kind) = KINDS.iter().find(|kind| kind.name == meant) {
        return Ok(kind);
    }
    let names = KINDS.iter().map(|kind| match model {
        Some(model) => kind.role.name(model),
        None => kind.name,
    });
    let fault = Diagnostic::error(at, format!("there is no parameter `{name}`")).label("unknown parameter");
    let known: Vec<String> = names.clone().map(|name| format!("`{name}`")).collect();
    let near = nearest(name, names);
    reader.report(match near {
        Some(near) => fault.help(format!("Did you mean `{near}`?")).mend(at, near),
        None => fault.help(format!("Known here: {}.", known.join(", "))),
    });
    Err(near)
}

/// Refuses a parameter that nothing would use.
fn used(reader: &mut Reader, entry: &Entry, kind: &Kind, model: Option<Model>, demand: Demand) {
    let (name, at) = (&entry.key, entry.key_span);
    if kind.role.peripheral() && model == Some(Model::OneCompartment) {
        let said = format!("a one-compartment model has no `{name}`");
        reader.report(
            Diagnostic::error(at, said).label("unused").help("Leave it out, or write model = \"two-compartment\"."),
        );
    }
    if kind.role.oral() && demand.oral.is_none() && !demand.unsure {
        let fault = Diagnostic::error(at, format!("nothing uses `{name}`: no dose is oral")).label("unused");
        reader.report_absent(fault.help("Leave it out, or give a dose by route = \"oral\"."));
    }
}

/// Names every parameter that the model needs and the file lacks.
fn missing(reader: &mut Reader, header: Span, model: Model, written: &[Written], demand: Demand) {
    for kind in &KINDS {
        let needed = match kind.role {
            Role::Clearance | Role::CentralVolume => true,
            Role::IntercompartmentalClearance | Role::PeripheralVolume => model == Model::TwoCompartment,
            Role::AbsorptionRate => demand.oral.is_some(),
            Role::LagTime | Role::Bioavailability => false,
        };
        let name = kind.role.name(model);
        let either = |own: &Written| {
            own.name == kind.name || own.name == name || (kind.role == Role::CentralVolume && own.name == ONE_VOLUME)
        };
        if !needed || written.iter().any(either) {
            continue;
        }
        let count = if model == Model::OneCompartment { "one-compartment" } else { "two-compartment" };
        let mut fault = Diagnostic::error(header, format!("the parameter `{name}` is missing"))
            .label(format!("needs `{name}`"))
            .help(format!("Write [drug.parameter.{name}] with its typical value, as in \"{}\".", kind.example));
        fault = match (kind.role, demand.oral) {
            (Role::AbsorptionRate, Some(oral)) => fault.context(oral, "an oral dose needs it"),
            _ => fault.help(format!("A {count} model needs it.")),
        };
        reader.report_absent(fault);
    }
}

/// The typical value, checked for its sign.
fn typical(reader: &mut Reader, section: &Section, name: &str, kind: &Kind, alone: bool) -> Option<Measured> {
    let entry = section.get("typical")?;
    let wants = Wants { name, dimension: Some(kind.dimension), example: kind.example };
    let measured = reader.measure(&entry.node, &wants)?;
    let value = measured.quantity.exact();
    if kind.role == Role::Bioavailability && value > Exact::from_integer(1.into()) {
        let fault = Diagnostic::error(measured.span, "`bioavailability` is above 100 %");
        reader.report(fault.label("more than the whole dose"));
        return None;
    }
    // Additive terms may carry the whole value, or be taken from it.
    if !alone {
        return Some(measured);
    }
    if value < Exact::zero() {
        reader.report(Diagnostic::error(measured.span, format!("`{name}` is below zero")).label("negative"));
        return None;
    }
    if value.is_zero() {
        match kind.sign {
            Sign::Positive => {
                reader.report(Diagnostic::error(measured.span, format!("`{name}` must be above zero")).label("zero"));
                return None;
            }
            Sign::ZeroDoubtful => {
                let said = format!("`{name}` is zero");
                reader.report(Diagnostic::warning(measured.span, said).label(zero_means(kind.role)));
            }
            Sign::ZeroFine => {}
        }
    }
    Some(measured)
}

fn zero_means(role: Role) -> &'static str {
    match role {
        Role::Clearance => "nothing is ever eliminated",
        Role::IntercompartmentalClearance => "nothing reaches the second compartment",
        _ => "nothing is ever absorbed",
    }
}

/// Looks at the values that the covariates can lead to.
fn plausible(
    reader: &mut Reader,
    section: &Section,
    name: &str,
    parameter: &Parameter,
    covariates: &Covariates,
    typical: Span,
) {
    if parameter.additive.is_empty() && parameter.factors.is_empty() {
        return;
    }
    let at = ["scale", "plus"].iter().find_map(|key| section.get(key)).map_or(typical, |entry| entry.key_span);
    let reach = Effects::range(parameter, covariates, false);
    if reach.is_some_and(|(low, _)| low < 0.0) {
        let fault = Diagnostic::warning(at, format!("covariates can make `{name}` negative"));
        reader.report(
            fault.label("below zero for some").help("Narrow the limits of the covariate, or choose another form."),
        );
    }
    if parameter.role != Role::Bioavailability {
        return;
    }
    let within = |range: Option<(f64, f64)>| range.is_none_or(|(low, high)| low > 0.0 && high < 1.0);
    if matches!(parameter.varies, Varies::LogitNormal { .. }) {
        if !within(Effects::range(parameter, covariates, true)) {
            let said = "logit-normal variability needs a value between 0 and 100 %, and covariates lead out of it";
            let fault = Diagnostic::error(at, said).label("reaches 0 or 100 %");
            reader.report(fault.help("Give the covariate limits, or weaken its effect."));
        }
    } else if reach.is_some_and(|(_, high)| high > 1.0) {
        let said = "covariates can take `bioavailability` above 100 %";
        reader.report(Diagnostic::warning(at, said).label("above 100 % for some"));
    }
}
