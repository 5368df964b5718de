//! Looks of the terminal: width, characters, colours, and how a table is drawn.

use anstyle::{AnsiColor, Style};
use comfy_table::{
    CellAlignment, ContentArrangement, ContentLineStyle, LineStyle, Table, TableStyle,
};

use crate::fault::escaped;

/// What the terminal can show.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Screen {
    /// Columns.
    pub width: u16,
    /// False where only ASCII may be written.
    pub unicode: bool,
}

/// Wider screens are used up to this.
pub const WIDEST: u16 = 240;
/// From this width on, a table has its further columns.
pub(super) const WIDE: u16 = 130;

/// A colour that stands for a meaning. It travels through the table as a character of
/// no width, so that widths stay right, and becomes a terminal code at the end.
#[derive(Clone, Copy, PartialEq, Eq)]
pub(super) enum Tone {
    Good,
    Bad,
    Open,
    Quiet,
}

const TONES: [(Tone, char); 4] = [
    (Tone::Good, '\u{2061}'),
    (Tone::Bad, '\u{2062}'),
    (Tone::Open, '\u{2063}'),
    (Tone::Quiet, '\u{2064}'),
];
const END: char = '\u{2060}';

/// Text in a tone.
pub(super) fn toned(tone: Tone, text: &str) -> String {
    let mark = TONES
        .iter()
        .find(|(known, _)| *known == tone)
        .map_or(END, |(_, mark)| *mark);
    format!("{mark}{text}{END}")
}

/// Marks to terminal codes; whether these are shown is decided by the stream.
pub(super) fn coloured(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for c in text.chars() {
        if c == END {
            out += &format!("{:#}", Style::new().bold());
            continue;
        }
        match TONES.iter().find(|(_, mark)| *mark == c) {
            Some((tone, _)) => out += &style(*tone).to_string(),
            None => out.push(c),
        }
    }
    out
}

fn style(tone: Tone) -> Style {
    match tone {
        Tone::Good => Style::new().fg_color(Some(AnsiColor::Green.into())),
        Tone::Bad => Style::new().fg_color(Some(AnsiColor::Red.into())).bold(),
        Tone::Open => Style::new().fg_color(Some(AnsiColor::Yellow.into())).bold(),
        Tone::Quiet => Style::new().dimmed(),
    }
}

impl Screen {
    /// Outside text without control characters, and without what this screen cannot
    /// show.
    pub(super) fn clean(self, text: &str) -> String {
        self.plain(&escaped(text))
    }

    /// Our own text in the characters of this screen.
    pub(super) fn plain(self, text: &str) -> String {
        if self.unicode {
            return text.to_owned();
        }
        let mut out = String::with_capacity(text.len());
        for c in text.chars() {
            match c {
                _ if c.is_ascii() || c == END || TONES.iter().any(|(_, mark)| *mark == c) => {
                    out.push(c);
                }
                '\u{2026}' => out.push_str("..."),
                '\u{2500}' => out.push('-'),
                _ => out.extend(c.escape_default()),
            }
        }
        out
    }

    /// A table in our style: a rule under the header, blanks between columns; columns
    /// whose heading begins with `>` are set to the right.
    pub(super) fn table(self, headings: &[&str]) -> Table {
        let rule = if self.unicode { '\u{2500}' } else { '-' };
        let style = TableStyle::new()
            .header_lines(ContentLineStyle::none())
            .header_separator(LineStyle::none().fill(rule).junction(rule))
            .content_lines(ContentLineStyle::none());
        let mut table = Table::new();
        table.load_style(style);
        table.set_content_arrangement(ContentArrangement::Dynamic);
        // Below this a table would be letters under each other: better that lines wrap.
        table.set_width(self.width.max(76));
        table.set_header(
            headings
                .iter()
                .map(|heading| heading.trim_start_matches('>')),
        );
        for (index, heading) in headings.iter().enumerate() {
            if let Some(column) = table.column_mut(index) {
                // The junction of the rule is a blank between columns besides.
                column.set_padding((0, 1));
                if heading.starts_with('>') {
                    column.set_cell_alignment(CellAlignment::Right);
                }
            }
        }
        table
    }

    /// A paragraph, with lines after the first set in.
    pub(super) fn wrap(self, text: &str, indent: usize) -> String {
        let width = usize::from(self.width).clamp(40, 120);
        let mut out = String::new();
        let mut column = 0;
        for word in text.split_whitespace() {
            let length = word.chars().count();
            if column > 0 && column + 1 + length > width {
                out.push('\n');
                out.extend(std::iter::repeat_n(' ', indent));
                column = indent;
            } else if column > 0 {
                out.push(' ');
                column += 1;
            }
            out += word;
            column += length;
        }
        out
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn tones_have_no_width_and_become_codes() {
        let text = toned(Tone::Bad, "fail");
        assert_eq!(coloured(&text), "\u{1b}[1m\u{1b}[31mfail\u{1b}[0m");
        assert_eq!(coloured("plain"), "plain");
    }

    #[test]
    fn ascii_screens_get_ascii() {
        let screen = Screen {
            width: 80,
            unicode: false,
        };
        assert_eq!(screen.clean("a\u{2026}\u{b5}\u{1b}"), "a...\\u{b5}\\u{1b}");
        assert!(
            screen
                .plain(&toned(Tone::Good, "ok"))
                .starts_with('\u{2061}')
        );
    }

    #[test]
    fn paragraphs_are_set_in() {
        let screen = Screen {
            width: 40,
            unicode: true,
        };
        let text = screen.wrap(&"word ".repeat(12), 2);
        assert!(text.lines().all(|line| line.chars().count() <= 40));
        assert!(text.lines().nth(1).unwrap().starts_with("  word"));
    }
}
