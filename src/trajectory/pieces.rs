//! A stream of text cut into pieces of whole lines, which can be parsed apart from each other.
//! Nothing that is read depends on how large the pieces are.

use std::io::Read;

use crate::fault::{Fault, Result};

/// Longest line that is read.
pub const MOST_LINE_BYTES: usize = 1 << 20;

/// Lines that follow each other in a file.
#[derive(Debug, Default)]
pub(crate) struct Piece {
    /// Whole lines with their ends; of the last piece the last line may have none.
    pub text: Vec<u8>,
    /// True where nothing follows.
    pub last: bool,
}

/// Cuts a stream.
pub(super) struct Pieces<R> {
    input: R,
    size: usize,
    /// The beginning of a line whose end was not read yet.
    rest: Vec<u8>,
    done: bool,
}

impl<R: Read> Pieces<R> {
    /// Pieces of about `size` bytes.
    pub(super) fn new(input: R, size: usize) -> Pieces<R> {
        Pieces {
            input,
            size: size.max(1),
            rest: Vec::new(),
            done: false,
        }
    }

    /// Leaves out lines from the start, at most as many as there are, and a byte order mark.
    pub(super) fn skip_lines(&mut self, lines: u64) -> Result<()> {
        let (mut skipped, mut at, mut begun) = (0, 0, false);
        while skipped < lines || !begun {
            match line_end(&self.rest[at..], self.done) {
                Some((_, next)) if begun => {
                    at += next;
                    skipped += 1;
                }
                _ if (begun || self.rest.len() < 3) && !self.done => {
                    self.rest.drain(..at);
                    at = 0;
                    check_length(self.rest.len()).map_err(|fault| fault.at(skipped + 1, 1))?;
                    self.done = fill(&mut self.input, self.size, &mut self.rest)?;
                }
                _ if begun => {
                    at = self.rest.len();
                    break;
                }
                _ => {
                    begun = true;
                    let mark = self.rest.starts_with(b"\xef\xbb\xbf");
                    self.rest.drain(..3 * usize::from(mark));
                }
            }
        }
        self.rest.drain(..at);
        Ok(())
    }

    /// The next piece, in the memory of one that is not needed any more; false at the end.
    ///
    /// # Errors
    /// What the stream fails with, or the first line of a piece that is too long.
    pub(super) fn next(&mut self, piece: &mut Piece) -> Result<bool> {
        piece.text.clear();
        std::mem::swap(&mut piece.text, &mut self.rest);
        // What was the rest of the last piece is the beginning of this one.
        let text = &mut piece.text;
        loop {
            if !self.done && text.len() < self.size {
                self.done = fill(&mut self.input, self.size - text.len(), text)?;
                continue;
            }
            if self.done {
                piece.last = true;
                return Ok(!text.is_empty());
            }
            if let Some(cut) = last_line_end(text) {
                self.rest.clear();
                self.rest.extend_from_slice(&text[cut..]);
                text.truncate(cut);
                piece.last = false;
                return Ok(true);
            }
            check_length(text.len()).map_err(|fault| fault.at(1, 1))?;
            self.done = fill(&mut self.input, self.size, text)?;
        }
    }
}

/// Reads on, at most so many bytes; true at the end of the stream.
fn fill(input: &mut impl Read, bytes: usize, text: &mut Vec<u8>) -> Result<bool> {
    let read = input.take(bytes as u64).read_to_end(text);
    Ok(read.map_err(|error| Fault::new(error.to_string()))? == 0)
}

/// The length of the first line and where the next one begins; `None` where its end is not
/// there yet. Lines end with `\n`, `\r\n` or a lone `\r`.
pub(super) fn line_end(text: &[u8], is_all: bool) -> Option<(usize, usize)> {
    let end = memchr::memchr2(b'\n', b'\r', text)?;
    match (text[end], text.get(end + 1)) {
        (b'\n', _) => Some((end, end + 1)),
        (_, Some(b'\n')) => Some((end, end + 2)),
        (_, Some(_)) => Some((end, end + 1)),
        (_, None) => is_all.then_some((end, end + 1)),
    }
}

/// After the last line that has certainly ended: a `\r` at the very end may be half of one.
pub(super) fn last_line_end(text: &[u8]) -> Option<usize> {
    let found = memchr::memrchr(b'\n', text);
    let found = found.or_else(|| memchr::memrchr(b'\r', &text[..text.len().saturating_sub(1)]));
    found.map(|end| end + 1)
}

pub(super) fn check_length(length: usize) -> Result<()> {
    if length <= MOST_LINE_BYTES {
        return Ok(());
    }
    let text = format!("this line is longer than {MOST_LINE_BYTES} bytes");
    Err(Fault::new(text))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn pieces(text: &str, size: usize, skip: u64) -> Vec<String> {
        let mut pieces = Pieces::new(text.as_bytes(), size);
        pieces.skip_lines(skip).unwrap();
        let mut found = Vec::new();
        let mut piece = Piece::default();
        while pieces.next(&mut piece).unwrap() {
            found.push(String::from_utf8(piece.text.clone()).unwrap());
        }
        found
    }

    #[test]
    fn pieces_hold_whole_lines_and_nothing_is_lost() {
        for text in [
            "a\nbb\n\nccc",
            "\u{feff}a\r\nbb\r\n\r\n",
            "a\rbb\r\rccc\r",
            "",
            "a",
            "\n\n",
        ] {
            let bare = text.trim_start_matches('\u{feff}');
            for size in 1..8 {
                let found = pieces(text, size, 0);
                assert_eq!(found.concat(), bare, "{text:?} in {size}");
                for piece in found.iter().rev().skip(1) {
                    assert!(piece.ends_with(['\n', '\r']), "{found:?}");
                }
                // A line end of two bytes is never cut.
                assert!(found.iter().all(|piece| !piece.starts_with('\n')
                    || text.starts_with('\n')
                    || !text.contains('\r')));
            }
        }
    }

    #[test]
    fn lines_are_left_out_from_the_start() {
        for size in 1..9 {
            assert_eq!(pieces("\u{feff}a\r\nb\rc\nd\n", size, 3).concat(), "d\n");
            assert_eq!(pieces("a\nb", size, 7).concat(), "");
        }
    }

    #[test]
    fn a_line_without_end_is_refused() {
        let long = vec![b'x'; MOST_LINE_BYTES + 1000];
        let mut pieces = Pieces::new(&long[..], 500);
        assert!(pieces.next(&mut Piece::default()).is_err());
    }
}
