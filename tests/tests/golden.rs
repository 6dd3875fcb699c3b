//! Every kind of bad input has a scenario in `golden/` and, beside it, what the reader says about it.
//!
//! `NEAP_UPDATE=1 cargo test -p neap-tests --test golden` rewrites what is expected; read the difference before
//! committing it.

use std::fmt::Write as _;
use std::path::{Path, PathBuf};

use neap_engine::diagnostic::{Diagnostic, Fault, Severity, Source, Span};
use neap_engine::scenario::Scenario;

/// One line a diagnostic: place, severity, message, underlined text, label, other places, help, mend.
fn plain(source: &Source, diagnostics: &[Diagnostic]) -> String {
    let place = |span: Span| {
        let (line, column) = source.position(span.start);
        format!("{line}:{column}")
    };
    let mut out = String::new();
    for diagnostic in diagnostics {
        let at = diagnostic.span.map_or_else(|| "-".to_owned(), place);
        let severity = match diagnostic.severity {
            Severity::Error => "error",
            Severity::Warning => "warning",
        };
        let _ = writeln!(out, "{at} {severity}: {}", diagnostic.message);
        if let Some(span) = diagnostic.span {
            let _ = writeln!(out, "    under {:?}: {}", &source.text[span.start..span.end], diagnostic.label);
        }
        for context in &diagnostic.context {
            let _ = writeln!(out, "    see {}: {}", place(context.span), context.text);
        }
        for help in &diagnostic.help {
            let _ = writeln!(out, "    help: {help}");
        }
        if let Some(mend) = &diagnostic.mend {
            let _ = writeln!(out, "    mend {}: {:?}", place(mend.span), mend.replacement);
        }
    }
    out
}

fn said_about(path: &Path) -> String {
    match Scenario::read(path) {
        Ok(scenario) => plain(&scenario.source, &scenario.warnings),
        Err(Fault::Scenario { source, diagnostics }) => plain(&source, &diagnostics),
        Err(fault) => format!("{fault}\n"),
    }
}

fn scenarios(folder: &str) -> Vec<PathBuf> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join(folder);
    let mut paths: Vec<PathBuf> = std::fs::read_dir(&folder)
        .expect("the folder is there")
        .map(|entry| entry.expect("an entry").path())
        .filter(|path| path.extension().is_some_and(|extension| extension == "toml"))
        .collect();
    paths.sort();
    paths
}

#[test]
fn bad_scenarios_are_told_of_as_expected() {
    let update = std::env::var_os("NEAP_UPDATE").is_some();
    let mut stale = String::new();
    for path in scenarios("golden") {
        let said = said_about(&path);
        let beside = path.with_extension("expected");
        if update {
            std::fs::write(&beside, &said).expect("the folder can be written");
        }
        let expected = std::fs::read_to_string(&beside).unwrap_or_default();
        if said != expected {
            let _ = writeln!(stale, "{}:\n{said}", path.display());
        }
    }
    assert!(stale.is_empty(), "not as expected (NEAP_UPDATE=1 rewrites):\n{stale}");
}

#[test]
fn every_bad_scenario_has_a_fault() {
    for path in scenarios("golden") {
        assert!(!said_about(&path).is_empty(), "{} has nothing wrong with it", path.display());
    }
}

#[test]
fn a_file_that_cannot_be_read_is_no_fault_of_its_content() {
    let missing = Scenario::read(Path::new("golden/no such file.toml"));
    assert!(matches!(missing, Err(Fault::Io { .. })));
    let folder = Scenario::read(Path::new(env!("CARGO_MANIFEST_DIR")));
    assert!(matches!(folder, Err(Fault::Io { .. })));
}

#[test]
fn demo_scenarios_have_no_faults() {
    for path in scenarios("../scenarios") {
        assert_eq!(said_about(&path), "", "{}", path.display());
    }
}
