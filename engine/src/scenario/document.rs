//! The text as a tree of values, each with the bytes where it stands and in the order of the file.

use toml::de::{DeTable, DeValue};

use crate::diagnostic::{Diagnostic, Source, Span};
use crate::quantity::{Exact, decimal};

/// Nesting beyond this is refused before the text is read: no scenario comes near, and reading recurses.
const DEEPEST: usize = 250;

/// A value and where it stands.
#[derive(Debug)]
pub(super) struct Node {
    pub(super) span: Span,
    pub(super) value: Value,
}

/// A value.
#[derive(Debug)]
pub(super) enum Value {
    /// Text; `verbatim` is the first byte of its content where the file holds it without escapes.
    Text { text: String, verbatim: Option<usize> },
    /// A bare number.
    Number(Number),
    /// `true` or `false`.
    Flag(bool),
    /// A date or a time of day, which no key takes.
    Moment,
    /// A list.
    List(Vec<Node>),
    /// A table.
    Table(Table),
}

/// A bare number.
#[derive(Debug)]
pub(super) struct Number {
    /// Its value; `None` for infinities, not-a-number, and what is too long or too large.
    pub(super) exact: Option<Exact>,
    /// Its value where it is written as an integer.
    pub(super) integer: Option<i128>,
}

/// A table: its entries, in file order.
#[derive(Debug, Default)]
pub(super) struct Table {
    pub(super) entries: Vec<Entry>,
}

/// A key and its value.
#[derive(Debug)]
pub(super) struct Entry {
    pub(super) key: String,
    pub(super) key_span: Span,
    pub(super) node: Node,
}

impl Table {
    /// The entry of a key.
    pub(super) fn get(&self, key: &str) -> Option<&Entry> {
        self.entries.iter().find(|entry| entry.key == key)
    }
}

impl Value {
    /// What it is, in words.
    pub(super) fn phrase(&self) -> &'static str {
        match self {
            Self::Text { .. } => "text",
            Self::Number(_) => "a bare number",
            Self::Flag(_) => "true or false",
            Self::Moment => "a date or a time of day",
            Self::List(_) => "a list",
            Self::Table(_) => "a table",
        }
    }
}

/// Reads the text; what could be read, and the faults of its form.
pub(super) fn read(source: &Source) -> (Table, Vec<Diagnostic>) {
    if let Some(fault) = too_deep(&source.text) {
        return (Table::default(), vec![fault]);
    }
    let mut text = source.text.clone();
    let mut faults: Vec<Diagnostic> = Vec::new();
    loop {
        let (root, errors) = DeTable::parse_recoverable(&text);
        let mut blanked = text.clone();
        for error in &errors {
            let fault = form_fault(&source.text, error.message(), error.span());
            // One slip often upsets the reader more than once at the same place.
            if faults.iter().any(|other| other.span == fault.span) {
                continue;
            }
            if let Some(at) = fault.span.filter(|_| ENDS_READING.contains(&kind_of(error.message()))) {
                blank_line(&mut blanked, at.start);
            }
            faults.push(fault);
        }
        if blanked == text || faults.len() >= MOST_FAULTS {
            return (table(root.get_ref(), &source.text), faults);
        }
        text = blanked;
    }
}

/// Faults after which the reader of the format gives up: their line is blanked and the text read again, so that the
/// lines below are judged too.
const ENDS_READING: [&str; 2] = ["key with no value", "missing value for key"];
/// After so many faults of form the text is taken for something else than a scenario.
const MOST_FAULTS: usize = 20;

/// The kind of fault, without what was expected instead.
fn kind_of(message: &str) -> &str {
    message.split(',').next().unwrap_or(message)
}

/// Writes blanks over a line; everything else keeps its place.
fn blank_line(text: &mut String, at: usize) {
    let at = at.min(text.len());
    let start = text[..at].rfind('\n').map_or(0, |newline| newline + 1);
    let end = text[start..].find('\n').map_or(text.len(), |newline| start + newline);
    text.replace_range(start..end, &" ".repeat(end - start));
}

fn table(from: &DeTable, text: &str) -> Table {
    let mut entries: Vec<Entry> = from
        .iter()
        .map(|(key, value)| Entry {
            key: key.get_ref().to_string(),
            key_span: span(key.span()),
            node: node(value.get_ref(), span(value.span()), text),
        })
        .collect();
    entries.sort_by_key(|entry| entry.key_span.start);
    Table { entries }
}

fn node(from: &DeValue, at: Span, text: &str) -> Node {
    let value = match from {
        DeValue::String(content) => Value::Text { text: content.to_string(), verbatim: verbatim(content, at, text) },
        DeValue::Integer(number) => Value::Number(Number {
            exact: i128::from_str_radix(number.as_str(), number.radix()).ok().map(|n| Exact::from_integer(n.into())),
            integer: i128::from_str_radix(number.as_str(), number.radix()).ok(),
        }),
        DeValue::Float(number) => Value::Number(Number { exact: decimal(number.as_str()), integer: None }),
        DeValue::Boolean(flag) => Value::Flag(*flag),
        DeValue::Datetime(_) => Value::Moment,
        DeValue::Array(items) => {
            Value::List(items.iter().map(|item| node(item.get_ref(), span(item.span()), text)).collect())
        }
        DeValue::Table(inner) => Value::Table(table(inner, text)),
    };
    Node { span: at, value }
}

fn span(range: std::ops::Range<usize>) -> Span {
    Span { start: range.start, end: range.end }
}

/// The first byte of a string's content, if the file holds it as it is.
fn verbatim(content: &str, at: Span, text: &str) -> Option<usize> {
    let written = text.get(at.start..at.end)?;
    let quotes = written.len().checked_sub(content.len())? / 2;
    (written.get(quotes..quotes + content.len()) == Some(content)).then_some(at.start + quotes)
}

/// A fault of the file's form, in the words of the reader of the format where they serve.
fn form_fault(text: &str, message: &str, range: Option<std::ops::Range<usize>>) -> Diagnostic {
    let Some(at) = range.map(span).filter(|at| text.get(at.start..at.end).is_some()) else {
        return Diagnostic { span: None, ..Diagnostic::error(Span { start: 0, end: 0 }, message) };
    };
    if message == "duplicate key" {
        let key = text[at.start..at.end].to_owned();
        let fault = Diagnostic::error(at, format!("`{key}` stands twice")).label("again");
        return match first_of(text, &key, at) {
            Some(first) => fault.context(first, "first here"),
            None => fault.help("Keep one of the two."),
        };
    }
    let written = text[at.start..at.end].trim();
    match kind_of(message) {
        "key with no value" => return Diagnostic::error(at, "a key has no value").label("needs `=` and a value"),
        "string values must be quoted" if written.is_empty() => {
            return Diagnostic::error(at, "a value is missing").label("nothing here");
        }
        "string values must be quoted" if !written.contains(['"', '\\']) => {
            return Diagnostic::error(at, "a value that is not a bare number stands in quotes")
                .label("no quotes")
                .mend(at, format!("\"{written}\""));
        }
        _ => {}
    }
    Diagnostic::error(at, format!("the file is not TOML here: {message}"))
        .help("Text stands in quotes, and each `key = value` on a line of its own.")
}

/// Where a key that stands twice stood first: the same header, or the same key under the same header.
fn first_of(text: &str, key: &str, again: Span) -> Option<Span> {
    let line_start = text[..again.start].rfind('\n').map_or(0, |newline| newline + 1);
    let prefix = &text[line_start..again.start];
    if prefix.trim_start().starts_with('[') {
        let header = text[line_start..].lines().next()?.split('#').next()?.trim();
        let found = text[..line_start].find(header)?;
        return Some(Span { start: found, end: found + header.len() });
    }
    let mut at = line_start;
    for line in text[..line_start].split_inclusive('\n').rev() {
        at -= line.len();
        let indent = line.len() - line.trim_start().len();
        let content = &line[indent..];
        if content.starts_with('[') {
            return None;
        }
        if content.strip_prefix(key).is_some_and(|rest| rest.trim_start().starts_with(['=', '.'])) {
            return Some(Span { start: at + indent, end: at + indent + key.len() });
        }
    }
    None
}

/// A key with absurdly many dots: the reader of the format would recurse as deep. Text may hold dots too, so the bound
/// lies far beyond what a sentence has.
fn too_deep(text: &str) -> Option<Diagnostic> {
    let (mut dots, mut last) = (0, ' ');
    for (at, c) in text.char_indices().filter(|(_, c)| !c.is_whitespace() || *c == '\n') {
        match c {
            '=' | ',' | '{' | '}' | '[' | ']' | '\n' => dots = 0,
            '.' if last != '.' => dots += 1,
            _ => {}
        }
        if dots > DEEPEST {
            return Some(Diagnostic::error(Span { start: at, end: at + 1 }, "too many dots in one key"));
        }
        last = c;
    }
    None
}

#[cfg(test)]
mod tests {
    use super::*;

    fn source(text: &str) -> Source {
        Source { name: "test.toml".into(), text: text.into() }
    }

    #[test]
    fn entries_keep_the_order_of_the_file_and_their_places() {
        let text = "\u{feff}b = \"1 mg\"\r\na = 2\r\n[c.d]\r\ne = 'x'\r\n";
        let (root, faults) = read(&source(text));
        assert!(faults.is_empty(), "{faults:?}");
        let keys: Vec<&str> = root.entries.iter().map(|entry| entry.key.as_str()).collect();
        assert_eq!(keys, ["b", "a", "c"]);
        let b = &root.entries[0];
        assert_eq!(&text[b.node.span.start..b.node.span.end], "\"1 mg\"");
        let Value::Text { verbatim: Some(at), .. } = &b.node.value else { panic!("{b:?}") };
        assert!(text[*at..].starts_with("1 mg"));
    }

    #[test]
    fn escapes_leave_no_verbatim_text() {
        let (root, _) = read(&source("a = \"\\u0031 mg\"\n"));
        assert!(matches!(&root.entries[0].node.value, Value::Text { text, verbatim: None } if text == "1 mg"));
    }

    #[test]
    fn deep_nesting_is_refused_and_not_recursed_into() {
        for text in [format!("{} = 1", "a.".repeat(100_000) + "a"), format!("[{}a]", "a.".repeat(100_000))] {
            assert_eq!(read(&source(&text)).1.len(), 1);
        }
        let brackets = format!("a = {}", "[".repeat(100_000));
        assert!(!read(&source(&brackets)).1.is_empty());
        let braces = format!("a = {}", "{a=".repeat(100_000));
        assert!(!read(&source(&braces)).1.is_empty());
    }

    #[test]
    fn a_second_key_names_the_first() {
        let text = "[a]\nx = 1\ny = 2\nx = 3\n[b]\n[a]\n";
        let (_, faults) = read(&source(text));
        assert_eq!(faults[0].message, "`x` stands twice");
        assert_eq!(faults[0].context[0].span, Span { start: 4, end: 5 });
        assert_eq!(faults[1].context[0].span, Span { start: 0, end: 3 });
    }
}
