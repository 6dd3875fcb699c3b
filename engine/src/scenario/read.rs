//! From text to a checked scenario, or to everything that is wrong with it.

use std::path::Path;

use super::document::{self, Table};
use super::population::{self, Covariates};
use super::reader::{Reader, Section};
use super::{AmountUnit, Drug, Model, Output, Overrides, Population, Scenario, Varies, arms, output, parameters};
use crate::diagnostic::{Diagnostic, Fault, Severity, Source, Span};
use crate::quantity::Unit;

/// The version of the format that is read.
const VERSION: u64 = 1;
/// Larger files are not read: a scenario is a page.
const LARGEST_FILE: u64 = 16 * 1024 * 1024;
/// The start of the file, for what has no better place.
const TOP: Span = Span { start: 0, end: 0 };

impl Scenario {
    /// Reads and checks a scenario file.
    ///
    /// # Errors
    /// [`Fault::Io`] where the file cannot be read, [`Fault::Scenario`] with every fault of its content.
    pub fn read(path: &Path) -> Result<Self, Fault> {
        Self::read_with(path, Overrides::default())
    }

    /// As [`Scenario::read`], with a size or a seed that stands in for the file's.
    ///
    /// # Errors
    /// As [`Scenario::read`].
    pub fn read_with(path: &Path, overrides: Overrides) -> Result<Self, Fault> {
        Self::parse_with(load(path)?, overrides)
    }

    /// Checks a scenario text.
    ///
    /// # Errors
    /// [`Fault::Scenario`] with every fault, in file order, warnings among them.
    pub fn parse(source: Source) -> Result<Self, Fault> {
        Self::parse_with(source, Overrides::default())
    }

    /// As [`Scenario::parse`], with a size or a seed that stands in for the file's.
    ///
    /// # Errors
    /// As [`Scenario::parse`].
    pub fn parse_with(source: Source, overrides: Overrides) -> Result<Self, Fault> {
        let (root, form) = document::read(&source);
        let mut reader = Reader { damaged: !form.is_empty(), ..Reader::default() };
        let draft = draft(&mut reader, &root, overrides);
        let mut diagnostics = form;
        // What stands on a line that could not be read is guesswork.
        let lines: Vec<Span> =
            diagnostics.iter().filter_map(|fault| fault.span.map(|at| line(&source.text, at))).collect();
        let guess = |found: &Diagnostic| {
            found.span.is_some_and(|at| lines.iter().any(|line| line.start <= at.start && at.start <= line.end))
        };
        diagnostics.extend(reader.found.into_iter().filter(|found| !guess(found)));
        diagnostics.sort_by_key(|diagnostic| diagnostic.span);
        if diagnostics.iter().any(|diagnostic| diagnostic.severity == Severity::Error) {
            return Err(Fault::Scenario { source, diagnostics });
        }
        let defaults = reader.defaults;
        match draft {
            Some(draft) => Ok(Self { source, warnings: diagnostics, defaults, ..draft }),
            None => Err(Fault::Scenario {
                source,
                diagnostics: vec![Diagnostic::error(TOP, "this scenario cannot be read")],
            }),
        }
    }
}

/// The line in which a place lies.
fn line(text: &str, at: Span) -> Span {
    let start = text[..at.start].rfind('\n').map_or(0, |newline| newline + 1);
    Span { start, end: text[start..].find('\n').map_or(text.len(), |newline| start + newline) }
}

/// The text of a file.
fn load(path: &Path) -> Result<Source, Fault> {
    let io = |cause| Fault::Io { doing: "read".to_owned(), path: path.to_owned(), cause };
    let size = std::fs::metadata(path).map_err(io)?.len();
    if size > LARGEST_FILE {
        return Err(Fault::Refused {
            message: format!("{} is too large to be a scenario", path.display()),
            help: format!("A scenario has at most {} MiB.", LARGEST_FILE >> 20),
        });
    }
    let name = path.display().to_string();
    match String::from_utf8(std::fs::read(path).map_err(io)?) {
        Ok(text) => Ok(Source { name, text }),
        Err(fault) => Err(not_utf8(name, &fault)),
    }
}

/// The file holds bytes that are no text; the readable beginning is kept so that the place can be shown.
fn not_utf8(name: String, fault: &std::string::FromUtf8Error) -> Fault {
    let bytes = fault.as_bytes();
    let good = fault.utf8_error().valid_up_to();
    let source = Source { name, text: String::from_utf8_lossy(bytes).into_owned() };
    let at = Span { start: good, end: good + char::REPLACEMENT_CHARACTER.len_utf8() };
    let (line, column) = source.position(good);
    let said = format!("the file is not UTF-8: byte 0x{:02X} at line {line}, column {column}", bytes[good]);
    let fault = Diagnostic::error(at, said).label("not a character").help("Save the file as UTF-8.");
    Fault::Scenario { source, diagnostics: vec![fault] }
}

/// Reads every table; a scenario comes out only where everything could be read.
fn draft(reader: &mut Reader, root: &Table, overrides: Overrides) -> Option<Scenario> {
    let root = top(reader, root);
    version(reader, &root);
    let title = reader.text(&root, "title").map(|(text, _)| text.to_owned());
    let question = reader.text(&root, "question").map(|(text, _)| text.to_owned());
    let mut population = match reader.table(&root, "population") {
        Some((table, span)) => population::read(reader, table, span, overrides),
        None => population::Draft::default(),
    };
    let covariates = &mut population.covariates;
    let arms = arms::read(reader, &root, covariates);
    let drug = match reader.table(&root, "drug") {
        Some((table, span)) => parameters::read(reader, table, span, covariates, arms.demand),
        None => parameters::Draft::default(),
    };
    let window = output::window(reader, &root, arms.amount_unit, arms.settled_at);
    let between_subject = output::variability(reader, &root);
    let output = match reader.table(&root, "output") {
        Some((table, span)) => output::output(reader, table, span),
        None => output::Draft::default(),
    };
    covariates.warn_unused(reader);
    let amount_unit = arms.amount_unit?;
    Some(Scenario {
        source: Source { name: String::new(), text: String::new() },
        title,
        question,
        population: finished_population(population.size?, population.seed?, population.covariates),
        drug: finished_drug(drug, amount_unit, between_subject?)?,
        arms: arms.arms,
        window: window.window,
        between_subject: between_subject?,
        output: Output {
            times: output.times?,
            percentiles: output.percentiles?,
            concentration: window.unit.or_else(|| Unit::parse(&format!("{}/L", amount_unit.symbol())).ok())?,
            patients: output.patients,
        },
        warnings: Vec::new(),
        defaults: Vec::new(),
    })
}

/// The file itself as a table; what it lacks has no header to point at.
fn top<'t>(reader: &mut Reader, root: &'t Table) -> Section<'t> {
    reader.open("", root, TOP)
}

fn version(reader: &mut Reader, root: &Section) {
    if !root.has("neap") && !root.meant("neap") {
        let fault = Diagnostic::error(TOP, "`neap`, the version of the format, is missing").label("starts here");
        reader.report_absent(fault.help("A scenario starts with neap = 1."));
    }
    let Some(version) = reader.count(root, "neap", 0, u64::MAX >> 1) else { return };
    if version != VERSION
        && let Some(entry) = root.get("neap")
    {
        let fault = Diagnostic::error(entry.node.span, format!("this version reads format {VERSION} only"));
        reader.report(fault.label("another format").mend(entry.node.span, VERSION.to_string()));
    }
}

fn finished_population(size: u64, seed: u64, covariates: Covariates) -> Population {
    Population { size, seed, covariates: covariates.list.into_iter().filter_map(|known| known.covariate).collect() }
}

/// The drug; without variability between subjects no parameter has a random part.
fn finished_drug(draft: parameters::Draft, amount_unit: AmountUnit, vary: bool) -> Option<Drug> {
    let parameters::Draft { name, model, mut parameters, mut correlations } = draft;
    if !vary {
        for parameter in &mut parameters {
            parameter.varies = Varies::Not;
        }
        correlations.clear();
    }
    let name = name.unwrap_or_else(|| "unnamed".to_owned());
    let model: Model = model?;
    Some(Drug { name, model, amount_unit, parameters, correlations })
}
