//! How each format escapes text from outside, so that it stays text: names of folders,
//! files, columns and producers may hold anything.
//!
//! Control characters and marks that turn the direction of writing become visible escapes
//! in every format, as on the terminal.

use crate::fault::escaped;

/// Text for XML, before the writer of XML escapes what has a meaning there: two characters
/// besides the control ones are not allowed in it at all.
pub(super) fn xml_text(text: &str) -> String {
    let allowed = |c: char| !matches!(c, '\u{fffe}' | '\u{ffff}');
    let text = escaped(text);
    if text.chars().all(allowed) {
        return text;
    }
    let mut out = String::with_capacity(text.len());
    for c in text.chars() {
        if allowed(c) {
            out.push(c);
        } else {
            out.extend(c.escape_default());
        }
    }
    out
}

/// Text for a cell of CSV: one line, and no formula. A spreadsheet computes a cell that
/// begins with `=`, `+`, `-` or `@`; an apostrophe before it makes it text. One that
/// begins with an apostrophe gets a second one, so that who reads the table by program
/// can take one away from every cell that begins with it.
pub(super) fn csv_text(text: &str) -> String {
    let text = escaped(text);
    // Some programs skip blanks and read wide forms as the plain ones.
    let first = text.trim_start().chars().next();
    let computed = matches!(
        first,
        Some('=' | '+' | '-' | '@' | '\'' | '\u{ff1d}' | '\u{ff0b}' | '\u{ff0d}' | '\u{ff20}')
    );
    if computed { format!("'{text}") } else { text }
}

/// Text for Markdown, cut at a number of characters. What could begin markup, a table
/// cell, HTML or a link becomes a character reference, which every reader takes as text.
/// An at sign stands in a code element, or a forge would call whoever has that name.
pub(super) fn markdown_text(text: &str, most: usize) -> String {
    let text = escaped(text);
    let mut cut: Vec<char> = text.chars().take(most).collect();
    if cut.len() < text.len() && text.chars().nth(most).is_some() {
        cut.push('\u{2026}');
    }
    let mut out = String::with_capacity(cut.len() + 16);
    for (index, &c) in cut.iter().enumerate() {
        let before = index.checked_sub(1).map(|place| cut[place]);
        let after = cut.get(index + 1).copied();
        let within = |c: Option<char>| c.is_some_and(char::is_alphanumeric);
        let plain = match c {
            '@' => {
                out += "<code>@</code>";
                continue;
            }
            // At the start they would make a list or a heading.
            '-' | '+' | '=' => index > 0,
            ',' | ';' | '/' | '%' | '\'' | '"' | '?' => true,
            // Not `1.` at the start, nor `www.`.
            '.' | ')' => {
                let ends = after.is_none_or(char::is_whitespace);
                let number = ends && cut[..index].iter().all(char::is_ascii_digit);
                let address = index >= 3 && cut[index - 3..index].iter().all(|c| "wW".contains(*c));
                !number && !address
            }
            '(' => true,
            // Not the one of `https://`.
            ':' => after != Some('/'),
            // Within a word it is none of emphasis.
            '_' => within(before) && within(after),
            _ => !c.is_ascii_punctuation(),
        };
        if plain {
            out.push(c);
        } else {
            out += &format!("&#{};", u32::from(c));
        }
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn cells_are_no_formulas_and_the_mark_can_be_taken_away() {
        for (text, cell) in [
            ("alder 2.3", "alder 2.3"),
            ("=1+1", "'=1+1"),
            ("+1", "'+1"),
            ("-1", "'-1"),
            ("@sum", "'@sum"),
            (" =1", "' =1"),
            ("'quoted", "''quoted"),
            ("\t=1", "\\t=1"),
            ("a\nb", "a\\nb"),
            ("\u{ff1d}1", "'\u{ff1d}1"),
        ] {
            assert_eq!(csv_text(text), cell);
            if let Some(rest) = cell.strip_prefix('\'') {
                assert_eq!(rest, text);
            }
        }
    }

    #[test]
    fn markdown_has_no_markup_of_others() {
        for (text, out) in [
            ("h_10.csv", "h_10.csv"),
            ("_x_", "&#95;x&#95;"),
            ("a|b", "a&#124;b"),
            ("a\\|b", "a&#92;&#124;b"),
            ("`x`", "&#96;x&#96;"),
            ("<b>&amp;", "&#60;b&#62;&#38;amp;"),
            ("@all", "<code>@</code>all"),
            ("http://x", "http&#58;//x"),
            ("www.x", "www&#46;x"),
            ("1. x", "1&#46; x"),
            ("- x", "&#45; x"),
            ("1.5", "1.5"),
            ("a\nb\u{202e}", "a&#92;nb&#92;u&#123;202e&#125;"),
        ] {
            assert_eq!(markdown_text(text, 100), out, "{text}");
        }
        assert_eq!(markdown_text("abcdef", 3), "abc\u{2026}");
        assert_eq!(markdown_text("abc", 3), "abc");
    }

    #[test]
    fn xml_has_no_character_that_it_does_not_allow() {
        assert_eq!(xml_text("a\u{0}b\u{ffff}"), "a\\u{0}b\\u{ffff}");
    }
}
