//! Bytes in pieces of any size to whole lines.

use crate::fault::{Fault, Result};

/// Longest line that is read.
pub const MOST_LINE_BYTES: usize = 1 << 20;

/// Splits a stream of bytes at line ends: `\n`, `\r\n`, or a lone `\r`.
#[derive(Debug, Default)]
pub struct Lines {
    partial: Vec<u8>,
    number: u64,
    /// The last byte was a `\r` that ended a line; a `\n` right after it belongs to it.
    after_return: bool,
    begun: bool,
}

impl Lines {
    /// Takes the next piece; `each` gets every line that it completes, with its
    /// number from one. The line end is not part of it, nor is a byte order mark.
    ///
    /// # Errors
    /// A line longer than [`MOST_LINE_BYTES`], or what `each` returns.
    pub fn feed(
        &mut self,
        mut piece: &[u8],
        each: &mut dyn FnMut(u64, &[u8]) -> Result<()>,
    ) -> Result<()> {
        while !piece.is_empty() {
            if self.after_return && piece[0] == b'\n' {
                piece = &piece[1..];
                self.after_return = false;
                continue;
            }
            self.after_return = false;
            let Some(end) = memchr::memchr2(b'\n', b'\r', piece) else {
                self.partial.extend_from_slice(piece);
                return self.check_length(self.partial.len());
            };
            self.after_return = piece[end] == b'\r';
            if self.partial.is_empty() {
                self.check_length(end)?;
                self.number += 1;
                let line = without_mark(&piece[..end], !self.begun);
                each(self.number, line)?;
            } else {
                self.partial.extend_from_slice(&piece[..end]);
                self.check_length(self.partial.len())?;
                self.number += 1;
                each(self.number, without_mark(&self.partial, !self.begun))?;
                self.partial.clear();
            }
            self.begun = true;
            piece = &piece[end + 1..];
        }
        Ok(())
    }

    /// The last line, where no line end follows it.
    ///
    /// # Errors
    /// What `each` returns.
    pub fn finish(&mut self, each: &mut dyn FnMut(u64, &[u8]) -> Result<()>) -> Result<()> {
        if self.partial.is_empty() {
            return Ok(());
        }
        self.number += 1;
        let line = std::mem::take(&mut self.partial);
        each(self.number, without_mark(&line, !self.begun))
    }

    fn check_length(&self, length: usize) -> Result<()> {
        if length <= MOST_LINE_BYTES {
            return Ok(());
        }
        let text = format!("this line is longer than {MOST_LINE_BYTES} bytes");
        Err(Fault::new(text).at(self.number + 1, 1))
    }
}

fn without_mark(line: &[u8], first: bool) -> &[u8] {
    if first {
        line.strip_prefix(b"\xef\xbb\xbf").unwrap_or(line)
    } else {
        line
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn split(bytes: &[u8], size: usize) -> Vec<(u64, String)> {
        let mut found = Vec::new();
        let mut each = |number: u64, line: &[u8]| {
            found.push((number, String::from_utf8_lossy(line).into_owned()));
            Ok(())
        };
        let mut lines = Lines::default();
        for piece in bytes.chunks(size) {
            lines.feed(piece, &mut each).unwrap();
        }
        lines.finish(&mut each).unwrap();
        found
    }

    #[test]
    fn every_line_end_and_every_chunking_gives_the_same_lines() {
        for text in [
            "a\nb\n\nc",
            "\u{feff}a\r\nb\r\n\r\nc\r\n",
            "a\rb\r\rc",
            "\n\n",
            "",
            "a",
        ] {
            let whole = split(text.as_bytes(), usize::MAX);
            for size in 1..6 {
                assert_eq!(split(text.as_bytes(), size), whole, "{text:?} in {size}");
            }
        }
        let lines = split(b"\xef\xbb\xbfa\r\nb\r\n\r\nc", 1);
        let expected = [(1, "a"), (2, "b"), (3, ""), (4, "c")];
        assert_eq!(lines, expected.map(|(n, text)| (n, text.to_owned())));
    }

    #[test]
    fn a_line_without_end_is_refused() {
        let mut lines = Lines::default();
        let piece = vec![b'x'; MOST_LINE_BYTES / 2 + 1];
        lines.feed(&piece, &mut |_, _| Ok(())).unwrap();
        let fault = lines.feed(&piece, &mut |_, _| Ok(())).unwrap_err();
        assert_eq!(fault.line, Some(1));
    }
}
