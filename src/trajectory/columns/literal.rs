//! The dictionary of Python literals in the header of an array: text to values.
//! Strings, whole numbers, true and false, tuples, lists and dictionaries; nothing
//! else stands in such a header.

use crate::fault::{Fault, Result, quoted};

/// A value of the header.
#[derive(Clone, Debug, PartialEq)]
pub(super) enum Literal {
    Text(String),
    Number(u64),
    Truth(bool),
    Nothing,
    /// A tuple or a list.
    Series(Vec<Literal>),
    Dictionary(Vec<(Literal, Literal)>),
}

/// Deeper nesting than any array has.
const MOST_LEVELS: usize = 16;

/// Reads one value that fills the text but for blanks.
pub(super) fn parse(text: &str) -> Result<Literal> {
    let mut rest = Rest { text };
    let value = rest.value(0)?;
    match rest.next() {
        None => Ok(value),
        Some(_) => Err(rest.fault()),
    }
}

struct Rest<'a> {
    text: &'a str,
}

impl Rest<'_> {
    fn fault(&self) -> Fault {
        Fault::new(format!(
            "the header of the array cannot be read at {}",
            quoted(self.text)
        ))
    }

    /// The next character that is no blank, left where it is.
    fn next(&mut self) -> Option<char> {
        self.text = self.text.trim_start();
        self.text.chars().next()
    }

    fn takes(&mut self, what: char) -> bool {
        let is_next = self.next() == Some(what);
        if is_next {
            self.text = &self.text[what.len_utf8()..];
        }
        is_next
    }

    fn value(&mut self, level: usize) -> Result<Literal> {
        match self.next() {
            _ if level > MOST_LEVELS => Err(self.fault()),
            Some('(') => self.series(')', level),
            Some('[') => self.series(']', level),
            Some('{') => self.dictionary(level),
            Some(quote @ ('\'' | '"')) => self.string(quote),
            Some('0'..='9') => self.number(),
            Some(_) => self.word(),
            None => Err(self.fault()),
        }
    }

    fn series(&mut self, end: char, level: usize) -> Result<Literal> {
        self.text = &self.text[1..];
        let mut values = Vec::new();
        while !self.takes(end) {
            values.push(self.value(level + 1)?);
            if !self.takes(',') && self.next() != Some(end) {
                return Err(self.fault());
            }
        }
        Ok(Literal::Series(values))
    }

    fn dictionary(&mut self, level: usize) -> Result<Literal> {
        self.text = &self.text[1..];
        let mut pairs = Vec::new();
        while !self.takes('}') {
            let key = self.value(level + 1)?;
            if !self.takes(':') {
                return Err(self.fault());
            }
            pairs.push((key, self.value(level + 1)?));
            if !self.takes(',') && self.next() != Some('}') {
                return Err(self.fault());
            }
        }
        Ok(Literal::Dictionary(pairs))
    }

    fn string(&mut self, quote: char) -> Result<Literal> {
        let mut text = String::new();
        let mut characters = self.text.char_indices().skip(1);
        while let Some((at, c)) = characters.next() {
            match c {
                '\\' => match characters.next() {
                    Some((_, c @ ('\\' | '\'' | '"'))) => text.push(c),
                    // Other escapes stand for characters that no name needs.
                    _ => return Err(self.fault()),
                },
                c if c == quote => {
                    self.text = &self.text[at + 1..];
                    return Ok(Literal::Text(text));
                }
                c => text.push(c),
            }
        }
        Err(self.fault())
    }

    fn number(&mut self) -> Result<Literal> {
        let end = self.text.find(|c: char| !c.is_ascii_digit());
        let (digits, rest) = self.text.split_at(end.unwrap_or(self.text.len()));
        let number = digits.parse().map_err(|_| self.fault())?;
        // Python 2 marked long numbers.
        self.text = rest.strip_prefix('L').unwrap_or(rest);
        Ok(Literal::Number(number))
    }

    fn word(&mut self) -> Result<Literal> {
        for (word, value) in [
            ("True", Literal::Truth(true)),
            ("False", Literal::Truth(false)),
            ("None", Literal::Nothing),
        ] {
            if let Some(rest) = self.text.strip_prefix(word) {
                self.text = rest;
                return Ok(value);
            }
        }
        Err(self.fault())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_header_is_read_and_nonsense_is_not() {
        let text = "{'descr': [('t', '<f8')], 'fortran_order': False, 'shape': (3L, 2,), } \n";
        let Literal::Dictionary(pairs) = parse(text).unwrap() else {
            panic!()
        };
        assert_eq!(pairs.len(), 3);
        let three_two = vec![Literal::Number(3), Literal::Number(2)];
        assert_eq!(pairs[2].1, Literal::Series(three_two));
        for text in [
            "",
            "{",
            "{'a'}",
            "(1 2)",
            "'a",
            "1.5",
            "-1",
            "x",
            "{} {}",
            "99999999999999999999",
        ] {
            assert!(parse(text).is_err(), "{text}");
        }
        assert!(parse(&"(".repeat(100_000)).is_err());
    }
}
