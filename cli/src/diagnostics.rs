//! Faults and warnings as text: file, line and column, the underlined characters, and how to mend them.

use std::fmt::Write;
use std::ops::Range;

use annotate_snippets::renderer::DecorStyle;
use annotate_snippets::{AnnotationKind, Group, Level, Origin, Patch, Renderer, Snippet};
use neap_engine::diagnostic::{Diagnostic, Fault, Severity, Source, Span};

use crate::numbers::counted;
use crate::printer::Look;

/// Diagnostics wrap no lines; this bounds how much of a very long line is shown.
const WIDTH: usize = 140;

/// A fault with all that belongs to it, ready for standard error.
pub(crate) fn fault(fault: &Fault, look: Look) -> String {
    let renderer = renderer(look);
    match fault {
        Fault::Scenario { source, diagnostics } => {
            let mut text = list(source, diagnostics, look);
            let errors = diagnostics.iter().filter(|found| found.severity == Severity::Error).count();
            let _ = writeln!(text, "{}; nothing was written", counted(errors as u64, "fault"));
            text
        }
        Fault::Refused { message, help } => {
            let what = [Group::with_title(Level::ERROR.primary_title(message.as_str()))];
            let mend = [Group::with_title(Level::HELP.secondary_title(help.as_str()))];
            format!("{}\n{}\n", renderer.render(&what), renderer.render(&mend)) // apart: no gutter without a text
        }
        Fault::Io { .. } => {
            format!("{}\n", renderer.render(&[Group::with_title(Level::ERROR.primary_title(fault.to_string()))]))
        }
        Fault::Interrupted => "interrupted; nothing was written\n".to_owned(),
    }
}

/// All diagnostics, in file order, a blank line after each.
pub(crate) fn list(source: &Source, diagnostics: &[Diagnostic], look: Look) -> String {
    let mut ordered: Vec<&Diagnostic> = diagnostics.iter().collect();
    ordered.sort_by_key(|found| found.span.map_or(0, |span| span.start)); // stable: as found where they start together
    let renderer = renderer(look);
    let mut text = String::new();
    for found in ordered {
        let _ = writeln!(text, "{}\n", renderer.render(&report(source, found)));
    }
    text
}

fn renderer(look: Look) -> Renderer {
    let renderer = if look.colour { Renderer::styled() } else { Renderer::plain() };
    renderer.decor_style(DecorStyle::Ascii).term_width(WIDTH)
}

/// One diagnostic: what is wrong and where, then the edit that mends it.
fn report<'a>(source: &'a Source, found: &'a Diagnostic) -> Vec<Group<'a>> {
    let level = match found.severity {
        Severity::Error => Level::ERROR,
        Severity::Warning => Level::WARNING,
    };
    let mut group = Group::with_title(level.primary_title(found.message.as_str()));
    if let Some(span) = found.span {
        let label = Some(found.label.as_str()).filter(|label| !label.is_empty());
        let culprit = AnnotationKind::Primary.span(range(span, &source.text)).label(label);
        let others = found
            .context
            .iter()
            .map(|other| AnnotationKind::Context.span(range(other.span, &source.text)).label(other.text.as_str()));
        let snippet = Snippet::source(source.text.as_str()).path(source.name.as_str());
        group = group.element(snippet.annotation(culprit).annotations(others));
    } else {
        group = group.element(Origin::path(source.name.as_str()));
    }
    let edit = found.mend.as_ref().filter(|mend| one_line(mend.span, &mend.replacement, &source.text));
    // With an edit to show, the last sentence of help is the edit's title.
    let (title, sentences) = match (edit, &found.help[..]) {
        (Some(_), [before @ .., last]) => (last.as_str(), before),
        (_, sentences) => ("write it so", sentences),
    };
    for help in sentences {
        group = group.element(Level::HELP.message(help.as_str()));
    }
    if let (None, Some(mend)) = (edit, &found.mend) {
        group = group.element(Level::HELP.message(format!("write it so: {}", mend.replacement)));
    }
    let mut groups = vec![group];
    if let Some(mend) = edit {
        let patch = Patch::new(range(mend.span, &source.text), mend.replacement.as_str());
        let snippet = Snippet::source(source.text.as_str()).path(source.name.as_str()).patch(patch);
        groups.push(Group::with_title(Level::HELP.secondary_title(title)).element(snippet));
    }
    groups
}

/// Whether an edit changes one line into one line.
fn one_line(span: Span, replacement: &str, text: &str) -> bool {
    !replacement.contains('\n') && !text[range(span, text)].contains('\n')
}

/// The bytes of a span, moved to whole characters inside the text.
fn range(span: Span, text: &str) -> Range<usize> {
    let inside = |mut at: usize| {
        at = at.min(text.len());
        while !text.is_char_boundary(at) {
            at -= 1;
        }
        at
    };
    let start = inside(span.start);
    start..inside(span.end).max(start)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::testing;

    const TEXT: &str = "[drug.parameter.clearance]\ntypical = \"5 L\"\n";

    fn source() -> Source {
        Source { name: "tablets.toml".to_owned(), text: TEXT.to_owned() }
    }

    fn span(of: &str) -> Span {
        let start = TEXT.find(of).unwrap();
        Span { start, end: start + of.len() }
    }

    fn volume() -> Diagnostic {
        Diagnostic::error(span("\"5 L\""), "`clearance` wants a volume per time; this is a volume").label("volume")
    }

    fn shown(diagnostics: Vec<Diagnostic>) -> String {
        fault(&Fault::Scenario { source: source(), diagnostics }, testing::look(true))
    }

    #[test]
    fn a_fault_is_underlined_and_counted() {
        let expected = "\
error: `clearance` wants a volume per time; this is a volume
 --> tablets.toml:2:11
  |
2 | typical = \"5 L\"
  |           ^^^^^ volume
  |
  = help: a clearance is a volume per time

1 fault; nothing was written
";
        assert_eq!(shown(vec![volume().help("a clearance is a volume per time")]), expected);
    }

    #[test]
    fn a_mend_is_shown_as_an_edit() {
        let text = shown(vec![volume().mend(span("\"5 L\""), "\"5 L/h\"")]);
        assert!(text.contains("help: write it so"), "{text}");
        assert!(text.contains("2 | typical = \"5 L/h\"") || text.contains("2 + typical = \"5 L/h\""), "{text}");
    }

    #[test]
    fn faults_come_in_file_order_and_warnings_are_not_counted() {
        let first = Diagnostic::warning(span("clearance"), "odd").context(span("typical"), "see here");
        let text = shown(vec![volume(), first]);
        assert!(text.find("warning: odd").unwrap() < text.find("error: ").unwrap(), "{text}");
        assert!(text.contains("see here"), "{text}");
        assert!(text.ends_with("\n1 fault; nothing was written\n"), "{text}");
    }

    #[test]
    fn a_place_beyond_the_text_is_no_panic() {
        let far = Span { start: 500, end: 900 };
        let text = shown(vec![Diagnostic::error(far, "the text ends too soon"), Diagnostic { span: None, ..volume() }]);
        assert!(text.contains("the text ends too soon"), "{text}");
        assert!(text.ends_with("2 faults; nothing was written\n"), "{text}");
    }

    #[test]
    fn a_refusal_names_the_way_out() {
        let refused = Fault::Refused { message: "the folder `x` exists already".into(), help: "choose another".into() };
        let text = fault(&refused, testing::look(true));
        assert_eq!(text, "error: the folder `x` exists already\nhelp: choose another\n");
    }
}
