//! What can be wrong, as data. Nothing here prints: rendering is the caller's, so that the same diagnostic can reach a
//! terminal, an editor or a test.

use std::fmt;
use std::path::PathBuf;

/// A range of bytes in a source text, end exclusive.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct Span {
    /// First byte.
    pub start: usize,
    /// One past the last byte.
    pub end: usize,
}

/// A text and the name under which the user knows it.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Source {
    /// The path as the user typed it.
    pub name: String,
    /// The whole text.
    pub text: String,
}

impl Span {
    /// The same characters, in a text where they start `by` bytes later.
    #[must_use]
    pub fn shifted(self, by: usize) -> Self {
        Self { start: self.start + by, end: self.end + by }
    }
}

impl Source {
    /// Line and column of a byte, both from 1, columns in characters; a byte order mark counts for nothing.
    pub fn position(&self, byte: usize) -> (usize, usize) {
        let mut at = byte.min(self.text.len());
        while !self.text.is_char_boundary(at) {
            at -= 1;
        }
        let before = self.text[..at].trim_start_matches('\u{feff}');
        let line_start = before.rfind('\n').map_or(0, |newline| newline + 1);
        (before.matches('\n').count() + 1, before[line_start..].chars().count() + 1)
    }
}

/// How bad it is.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Severity {
    /// Nothing can be run.
    Error,
    /// It can be run; the user should know.
    Warning,
}

/// A place that explains a diagnostic beside the place it is about.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Context {
    /// Where.
    pub span: Span,
    /// What stands there, in a few words.
    pub text: String,
}

/// A replacement that mends the fault.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Mend {
    /// What to replace.
    pub span: Span,
    /// With what.
    pub replacement: String,
}

/// One thing that is wrong or doubtful, in the trade's words.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Diagnostic {
    /// Error or warning.
    pub severity: Severity,
    /// One terse sentence without a full stop, backticks round names from the file.
    pub message: String,
    /// The culprit; for something missing, the header of its table; `None` where there is no text to point at.
    pub span: Option<Span>,
    /// A few words under the underlined characters; may be empty.
    pub label: String,
    /// Other places that matter, such as the first of two equal names.
    pub context: Vec<Context>,
    /// How to mend it, in words; each a sentence of its own.
    pub help: Vec<String>,
    /// How to mend it, as an edit.
    pub mend: Option<Mend>,
}

impl Diagnostic {
    /// An error at `span`.
    pub fn error(span: Span, message: impl Into<String>) -> Self {
        Self {
            severity: Severity::Error,
            message: message.into(),
            span: Some(span),
            label: String::new(),
            context: Vec::new(),
            help: Vec::new(),
            mend: None,
        }
    }

    /// A warning at `span`.
    pub fn warning(span: Span, message: impl Into<String>) -> Self {
        Self { severity: Severity::Warning, ..Self::error(span, message) }
    }

    /// Adds the words under the underlined characters.
    #[must_use]
    pub fn label(mut self, text: impl Into<String>) -> Self {
        self.label = text.into();
        self
    }

    /// Adds a sentence of help.
    #[must_use]
    pub fn help(mut self, text: impl Into<String>) -> Self {
        self.help.push(text.into());
        self
    }

    /// Adds another place that matters.
    #[must_use]
    pub fn context(mut self, span: Span, text: impl Into<String>) -> Self {
        self.context.push(Context { span, text: text.into() });
        self
    }

    /// Adds an edit that mends the fault.
    #[must_use]
    pub fn mend(mut self, span: Span, replacement: impl Into<String>) -> Self {
        self.mend = Some(Mend { span, replacement: replacement.into() });
        self
    }
}

impl Diagnostic {
    /// The same diagnostic about a text that starts `by` bytes later, as when a value is read apart from its file.
    #[must_use]
    pub fn shifted(mut self, by: usize) -> Self {
        self.span = self.span.map(|span| span.shifted(by));
        for context in &mut self.context {
            context.span = context.span.shifted(by);
        }
        if let Some(mend) = &mut self.mend {
            mend.span = mend.span.shifted(by);
        }
        self
    }
}

/// Why something could not be done. The caller turns each kind into an exit code in one place.
#[derive(Debug)]
pub enum Fault {
    /// The scenario has faults, all of them here, in file order (warnings among them).
    Scenario {
        /// The text they point into.
        source: Source,
        /// At least one error.
        diagnostics: Vec<Diagnostic>,
    },
    /// The request is understood and refused, such as an output folder that exists.
    Refused {
        /// What and why, one sentence.
        message: String,
        /// How to mend it.
        help: String,
    },
    /// Reading or writing failed.
    Io {
        /// What was being done, as in "write the table".
        doing: String,
        /// Where.
        path: PathBuf,
        /// Why.
        cause: std::io::Error,
    },
    /// The user asked to stop.
    Interrupted,
}

impl fmt::Display for Fault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Scenario { source, diagnostics } => {
                let errors = diagnostics.iter().filter(|d| d.severity == Severity::Error).count();
                write!(f, "{}: {errors} fault{}", source.name, if errors == 1 { "" } else { "s" })
            }
            Self::Refused { message, .. } => f.write_str(message),
            Self::Io { doing, path, cause } => write!(f, "cannot {doing} {}: {cause}", path.display()),
            Self::Interrupted => f.write_str("interrupted"),
        }
    }
}

impl std::error::Error for Fault {
    fn source(&self) -> Option<&(dyn std::error::Error + 'static)> {
        match self {
            Self::Io { cause, .. } => Some(cause),
            _ => None,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn position_counts_characters_and_passes_over_a_byte_order_mark() {
        let source = Source { name: "s".into(), text: "\u{feff}a = 1\r\nµg = 2\n".into() };
        assert_eq!(source.position(3), (1, 1));
        assert_eq!(source.position(0), (1, 1));
        let two = source.text.find('2').expect("there is a 2");
        assert_eq!(source.position(two), (2, 6));
        assert_eq!(source.position(two - 5), (2, 1), "inside a character counts as its start");
        assert_eq!(source.position(usize::MAX), (3, 1));
    }

    #[test]
    fn a_fault_crosses_threads() {
        fn check<T: Send + Sync + 'static>() {}
        check::<Fault>();
    }
}
