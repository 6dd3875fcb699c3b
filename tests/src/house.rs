//! Reads Rust sources for what they import, and knows the order of the house.

use std::fmt::Write as _;

/// The modules of the engine: a module imports only from rows above its own. Of two in one row the
/// second may import the first.
pub const HOUSE: [&[&str]; 13] = [
    &["math"],
    &["diagnostic", "quantity"],
    &["scenario"],
    &["draw"],
    &["cohort"],
    &["model"],
    &["dosing"],
    &["kinetics"],
    &["course"],
    &["summary"],
    &["plan"],
    &["run"],
    &["tables"],
];

/// What may stand at the top level beside files whose name begins with a dot.
pub const TOP_LEVEL: [&str; 12] = [
    "Cargo.lock",
    "Cargo.toml",
    "DEVELOPERS.md",
    "LICENSE-APACHE",
    "LICENSE-MIT",
    "README.md",
    "cli",
    "engine",
    "results-demo",
    "scenarios",
    "target",
    "tests",
];

/// A piece of Rust text: a word, or one other character.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Token {
    /// An identifier, keyword or number.
    Word(String),
    /// Anything else but blanks.
    Mark(char),
}

impl Token {
    fn is(&self, word: &str) -> bool {
        matches!(self, Self::Word(own) if own == word)
    }
}

/// Splits Rust text into pieces; comments, texts and character literals are left out.
pub fn tokens(text: &str) -> Vec<Token> {
    let chars: Vec<char> = text.chars().collect();
    let at = |index: usize| chars.get(index).copied().unwrap_or('\0');
    let mut out = Vec::new();
    let mut i = 0;
    while i < chars.len() {
        let c = chars[i];
        if c == '/' && at(i + 1) == '/' {
            while i < chars.len() && chars[i] != '\n' {
                i += 1;
            }
        } else if c == '/' && at(i + 1) == '*' {
            let mut depth = 0;
            loop {
                if at(i) == '/' && at(i + 1) == '*' {
                    (depth, i) = (depth + 1, i + 2);
                } else if at(i) == '*' && at(i + 1) == '/' {
                    (depth, i) = (depth - 1, i + 2);
                } else {
                    i += 1;
                }
                if depth == 0 || i >= chars.len() {
                    break;
                }
            }
        } else if c == '"' {
            i += 1;
            while i < chars.len() && chars[i] != '"' {
                i += if chars[i] == '\\' { 2 } else { 1 };
            }
            i += 1;
        } else if c == '\'' {
            // A character, or a lifetime.
            if at(i + 1) == '\\' {
                i += 3;
                while i < chars.len() && chars[i] != '\'' {
                    i += 1;
                }
                i += 1;
            } else if at(i + 2) == '\'' {
                i += 3;
            } else {
                i += 1;
            }
        } else if c.is_alphanumeric() || c == '_' {
            let start = i;
            while at(i).is_alphanumeric() || at(i) == '_' {
                i += 1;
            }
            let word: String = chars[start..i].iter().collect();
            let hashes = (i..chars.len()).take_while(|&j| at(j) == '#').count();
            if ["r", "br", "cr"].contains(&word.as_str()) && at(i + hashes) == '"' {
                let end: String = std::iter::once('"').chain("#".repeat(hashes).chars()).collect();
                let rest: String = chars[i + hashes + 1..].iter().collect();
                let length = rest.find(&end).map_or(rest.chars().count(), |byte| rest[..byte].chars().count());
                i += hashes + 1 + length + 1 + hashes;
            } else {
                out.push(Token::Word(word));
            }
        } else {
            if !c.is_whitespace() {
                out.push(Token::Mark(c));
            }
            i += 1;
        }
    }
    out
}

/// The top-level modules that a file names by `crate::...`, or by enough `super`s; `home` is the path of the file's own
/// module, as in `["run", "worker"]`.
pub fn imports(text: &str, home: &[&str]) -> Vec<String> {
    let tokens = tokens(text);
    let mut out = Vec::new();
    // For each open brace, whether it opened a module.
    let mut braces = Vec::new();
    let mut i = 0;
    while i < tokens.len() {
        let token = &tokens[i];
        let module = i >= 2 && tokens[i - 2].is("mod");
        match token {
            Token::Mark('{') => braces.push(module),
            Token::Mark('}') => drop(braces.pop()),
            Token::Word(word) if word == "crate" => first_segments(&tokens, i + 1, &mut out),
            Token::Word(word) if word == "super" => {
                let mut levels = 1;
                while separator(&tokens, i + 1) && tokens.get(i + 3).is_some_and(|token| token.is("super")) {
                    (levels, i) = (levels + 1, i + 3);
                }
                let depth = home.len() + braces.iter().filter(|&&module| module).count();
                if levels >= depth {
                    first_segments(&tokens, i + 1, &mut out);
                }
            }
            _ => {}
        }
        i += 1;
    }
    out.sort();
    out.dedup();
    out
}

fn separator(tokens: &[Token], at: usize) -> bool {
    tokens.get(at) == Some(&Token::Mark(':')) && tokens.get(at + 1) == Some(&Token::Mark(':'))
}

/// What follows `crate`: one name, or the first name of each path in a group.
fn first_segments(tokens: &[Token], at: usize, out: &mut Vec<String>) {
    if !separator(tokens, at) {
        return;
    }
    match tokens.get(at + 2) {
        Some(Token::Word(name)) => out.push(name.clone()),
        Some(Token::Mark('{')) => {
            let (mut depth, mut first) = (1, true);
            for token in &tokens[at + 3..] {
                match token {
                    Token::Mark('{') => depth += 1,
                    Token::Mark('}') => depth -= 1,
                    Token::Mark(',') if depth == 1 => first = true,
                    Token::Word(name) if depth == 1 && first => {
                        out.push(name.clone());
                        first = false;
                    }
                    _ => {}
                }
                if depth == 0 {
                    break;
                }
            }
        }
        Some(Token::Mark(other)) => out.push(other.to_string()),
        None => {}
    }
}

/// Rows and places in [`HOUSE`]: a smaller place may be imported by a larger one.
fn place(module: &str) -> Option<usize> {
    HOUSE.iter().flat_map(|row| row.iter()).position(|name| *name == module)
}

/// What is wrong with the imports of one file of the engine, a line each; empty where nothing is.
pub fn trespasses(text: &str, home: &[&str]) -> String {
    let mut out = String::new();
    let module = home.first().copied().unwrap_or("the root");
    let Some(own) = place(module) else {
        let _ = writeln!(out, "{module} is no module of the house");
        return out;
    };
    for import in imports(text, home) {
        match place(&import) {
            Some(other) if other <= own => {}
            Some(_) => {
                let _ = writeln!(out, "{} imports {import}, which stands below it", home.join("::"));
            }
            None => {
                let _ = writeln!(out, "{} imports crate::{import}, which is no module of the house", home.join("::"));
            }
        }
    }
    out
}

/// Whether the keyword stands in a text, comments and literals left out.
pub fn has_word(text: &str, word: &str) -> bool {
    tokens(text).iter().any(|token| token.is(word))
}
