//! The one place that writes to the terminal. Standard output carries the answer; everything else goes to standard error.

use std::env;
use std::io::{self, IsTerminal, Write};
use std::path::PathBuf;

use neap_engine::diagnostic::Fault;

/// Width of what is shown where there is no terminal to ask.
const DEFAULT_WIDTH: usize = 80;

/// What the terminal can show.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Look {
    /// Colour on standard error.
    pub(crate) colour: bool,
    /// Characters beyond ASCII.
    pub(crate) unicode: bool,
    /// Columns.
    pub(crate) width: usize,
}

/// Writes to standard output and standard error.
#[derive(Debug)]
pub(crate) struct Printer {
    look: Look,
}

impl Printer {
    /// A printer that knows the terminal and the locale of this process.
    pub(crate) fn of_this_process() -> Self {
        let no_colour = env::var_os("NO_COLOR").is_some_and(|value| !value.is_empty());
        let dumb = env::var_os("TERM").is_some_and(|value| value == "dumb");
        let width = if io::stdout().is_terminal() { terminal_size::terminal_size_of(io::stdout()) } else { None };
        Self {
            look: Look {
                colour: io::stderr().is_terminal() && !no_colour && !dumb,
                unicode: utf8(|name| env::var(name).ok()),
                width: width.map_or(DEFAULT_WIDTH, |(terminal_size::Width(columns), _)| usize::from(columns)),
            },
        }
    }

    /// What the terminal can show.
    pub(crate) fn look(&self) -> Look {
        self.look
    }

    /// Writes the answer. A reader that has gone away, such as `head`, has what it wanted: that is no fault.
    #[expect(clippy::unused_self, reason = "all writing goes through a printer")]
    pub(crate) fn out(&self, text: &str) -> Result<(), Fault> {
        let mut out = io::stdout().lock();
        match out.write_all(text.as_bytes()).and_then(|()| out.flush()) {
            Err(cause) if cause.kind() != io::ErrorKind::BrokenPipe => {
                Err(Fault::Io { doing: "write to".to_owned(), path: PathBuf::from("standard output"), cause })
            }
            _ => Ok(()),
        }
    }

    /// Writes anything else. Where even that fails there is nowhere left to say so.
    #[expect(clippy::unused_self, reason = "all writing goes through a printer")]
    pub(crate) fn err(&self, text: &str) {
        let _ = io::stderr().lock().write_all(text.as_bytes());
    }
}

/// Whether the locale's characters are UTF-8, by the order in which POSIX looks at the variables.
fn utf8(variable: impl Fn(&str) -> Option<String>) -> bool {
    ["LC_ALL", "LC_CTYPE", "LANG"].into_iter().filter_map(variable).find(|value| !value.is_empty()).is_some_and(
        |value| {
            let value = value.to_ascii_lowercase();
            value.contains("utf-8") || value.contains("utf8")
        },
    )
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_first_variable_that_is_set_decides() {
        let of = |pairs: &[(&str, &str)]| {
            utf8(|name| pairs.iter().find(|(key, _)| *key == name).map(|(_, value)| (*value).to_owned()))
        };
        assert!(of(&[("LANG", "en_GB.UTF-8")]));
        assert!(of(&[("LC_ALL", ""), ("LC_CTYPE", "C.utf8"), ("LANG", "C")]));
        assert!(!of(&[("LC_ALL", "C"), ("LANG", "en_GB.UTF-8")]));
        assert!(!of(&[]));
    }
}
