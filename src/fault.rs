//! What goes wrong with what a user gave us: where, what, and how to mend it.
//!
//! One type serves the whole crate, because every module's complaint has the same
//! three parts; the layer that knows the file adds the path, the one that knows the
//! line adds the line.

use std::fmt;
use std::path::{Path, PathBuf};

/// A complaint about input, ready to be printed.
///
/// `Display` gives `path:line:column: text` and, where a cure is known, a second
/// line that begins with `help:`.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Fault {
    /// The file, where there is one.
    pub path: Option<PathBuf>,
    /// Line, counted from one.
    pub line: Option<u64>,
    /// Column in characters, counted from one.
    pub column: Option<u64>,
    /// What was found and what was expected.
    pub text: String,
    /// The key or option to change.
    pub help: Option<String>,
}

/// Shorthand for results of this crate.
pub type Result<T> = std::result::Result<T, Fault>;

impl Fault {
    /// As it is printed, with the cure in the same line.
    pub fn in_one_line(&self) -> String {
        self.to_string().replace("\n  help:", "; help:")
    }

    /// A complaint without a place yet.
    pub fn new(text: impl Into<String>) -> Fault {
        Fault {
            path: None,
            line: None,
            column: None,
            text: text.into(),
            help: None,
        }
    }

    /// Adds the cure.
    pub fn help(mut self, help: impl Into<String>) -> Fault {
        self.help = Some(help.into());
        self
    }

    /// Adds the file, unless a deeper layer has named one.
    pub fn in_file(mut self, path: &Path) -> Fault {
        self.path.get_or_insert_with(|| path.to_owned());
        self
    }

    /// Adds line and column.
    pub fn at(mut self, line: u64, column: u64) -> Fault {
        self.line = Some(line);
        self.column = Some(column);
        self
    }

    /// Adds the place of a byte offset in a text.
    pub fn at_offset(self, text: &str, offset: usize) -> Fault {
        let offset = (0..=offset.min(text.len()))
            .rev()
            .find(|&o| text.is_char_boundary(o));
        let before = &text[..offset.unwrap_or(0)];
        let line = before.matches('\n').count() + 1;
        let column = before.rsplit('\n').next().unwrap_or("").chars().count() + 1;
        self.at(line as u64, column as u64)
    }

    /// A complaint of the operating system about a file.
    pub fn io(path: &Path, error: &std::io::Error) -> Fault {
        Fault::new(format!("cannot be read: {error}")).in_file(path)
    }
}

impl fmt::Display for Fault {
    fn fmt(&self, f: &mut fmt::Formatter) -> fmt::Result {
        if let Some(path) = &self.path {
            write!(f, "{}:", escaped(&path.display().to_string()))?;
        }
        for place in [self.line, self.column].into_iter().flatten() {
            write!(f, "{place}:")?;
        }
        if self.path.is_some() || self.line.is_some() {
            write!(f, " ")?;
        }
        write!(f, "{}", self.text)?;
        match &self.help {
            Some(help) => write!(f, "\n  help: {help}"),
            None => Ok(()),
        }
    }
}

impl std::error::Error for Fault {}

/// The complaint of the TOML reader without the names of Rust's types.
pub fn in_plain_words(message: &str) -> String {
    let mut text = message.trim_end().to_owned();
    for (rust, plain) in [
        ("expected f64", "expected a number"),
        ("expected u64", "expected a whole number not below zero"),
        ("expected u8", "expected a whole number not below zero"),
        ("expected a string", "expected text in quotes"),
    ] {
        text = text.replace(rust, plain);
    }
    text
}

/// A complaint of the TOML reader; a key that is not known is compared with those that it lists.
pub fn misread(message: &str) -> Fault {
    let fault = Fault::new(in_plain_words(message));
    let Some(rest) = message.strip_prefix("unknown field `") else {
        return fault;
    };
    // Every other piece between backticks is a name.
    let mut names = rest.split('`').step_by(2);
    let near = names.next().and_then(|key| nearest(key, names));
    match near {
        Some(near) => fault.help(format!("did you mean `{near}`?")),
        None => fault.help("leave it out, or write one of the keys that are expected"),
    }
}

/// User text in backticks: control characters escaped, cut at 40 characters.
pub fn quoted(text: &str) -> String {
    let escaped = escaped(text);
    let cut: String = escaped.chars().take(40).collect();
    if cut.len() < escaped.len() {
        format!("`{cut}...`")
    } else {
        format!("`{cut}`")
    }
}

/// User text without anything that moves a cursor or turns the direction of writing.
pub fn escaped(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for c in text.chars() {
        let turns = matches!(c, '\u{200b}'..='\u{200f}' | '\u{202a}'..='\u{202e}'
            | '\u{2060}'..='\u{2069}' | '\u{feff}');
        if c.is_control() || turns {
            out.extend(c.escape_default());
        } else {
            out.push(c);
        }
    }
    out
}

/// The candidate nearest to a mistyped name, if one is near.
pub fn nearest<'a>(name: &str, candidates: impl Iterator<Item = &'a str>) -> Option<&'a str> {
    let length = name.chars().count();
    let most = (length / 3 + 1).min(length.saturating_sub(1));
    candidates
        .map(|candidate| (edits(name, candidate, most), candidate))
        .filter(|&(distance, _)| distance <= most)
        .min_by_key(|&(distance, near)| (distance, near.len().abs_diff(name.len())))
        .map(|(_, candidate)| candidate)
}

/// Levenshtein distance without regard to case; above `most` only "more".
fn edits(a: &str, b: &str, most: usize) -> usize {
    let a: Vec<char> = a.to_lowercase().chars().take(80).collect();
    let b: Vec<char> = b.to_lowercase().chars().take(80).collect();
    if a.len().abs_diff(b.len()) > most {
        return most + 1;
    }
    strsim::generic_levenshtein(&a, &b)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_fault_prints_its_place_and_its_cure() {
        let fault = Fault::new(format!("field {} is empty", quoted("x\u{1b}[31m")))
            .help("fill it")
            .at(3, 7)
            .in_file(Path::new("a.csv"));
        assert_eq!(
            fault.to_string(),
            "a.csv:3:7: field `x\\u{1b}[31m` is empty\n  help: fill it"
        );
    }

    #[test]
    fn offsets_count_characters() {
        let fault = Fault::new("here").at_offset("ab\nζζx", 7);
        assert_eq!((fault.line, fault.column), (Some(2), Some(3)));
    }

    #[test]
    fn near_misses_are_found_and_far_ones_are_not() {
        let names = ["thermal/cold-room", "electrical/rc-pulse"];
        assert_eq!(
            nearest("thermal/coldroom", names.into_iter()),
            Some(names[0])
        );
        assert_eq!(nearest("decay", names.into_iter()), None);
    }

    #[test]
    fn long_text_is_cut_and_direction_marks_are_shown() {
        assert_eq!(quoted(&"a".repeat(50)), format!("`{}...`", "a".repeat(40)));
        assert_eq!(quoted("a\u{202e}b"), "`a\\u{202e}b`");
    }
}
