//! Formula text to postfix code, by an operator stack (Dijkstra's shunting yard).
//!
//! Decided here: `-2^2` is -4, `2^3^2` is 512, `2^-t` is allowed, `2t` and `**` are
//! refused with a hint.

use crate::fault::{Fault, Result, nearest, quoted};

/// Longest formula that is read.
pub const MOST_CHARACTERS: usize = 65_536;
/// Deepest nesting of brackets, calls, signs and powers.
pub const MOST_NESTING: usize = 1_000;

/// A parsed formula: postfix code over numbered variables.
#[derive(Clone, Debug)]
pub struct Formula {
    pub(super) code: Vec<(Operation, Span)>,
}

/// Bytes of the formula's text that an operation came from: offset and length.
pub type Span = (usize, usize);

#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Operation {
    Number(f64),
    Pi,
    Variable(usize),
    Negate,
    Add,
    Subtract,
    Multiply,
    Divide,
    Power,
    Call(Function),
}

/// A function of a formula.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
#[allow(missing_docs)]
pub enum Function {
    Exp,
    Ln,
    Sqrt,
    Sin,
    Cos,
    Tan,
    Sinh,
    Cosh,
    Tanh,
    Abs,
    Min,
    Max,
    Heaviside,
}

impl Function {
    /// Every function with its name and its number of arguments.
    pub const ALL: [(Function, &str, usize); 13] = [
        (Function::Exp, "exp", 1),
        (Function::Ln, "ln", 1),
        (Function::Sqrt, "sqrt", 1),
        (Function::Sin, "sin", 1),
        (Function::Cos, "cos", 1),
        (Function::Tan, "tan", 1),
        (Function::Sinh, "sinh", 1),
        (Function::Cosh, "cosh", 1),
        (Function::Tanh, "tanh", 1),
        (Function::Abs, "abs", 1),
        (Function::Min, "min", 2),
        (Function::Max, "max", 2),
        (Function::Heaviside, "heaviside", 1),
    ];

    /// By name.
    pub fn find(name: &str) -> Option<(Function, usize)> {
        let found = Function::ALL.iter().find(|(_, known, _)| *known == name);
        found.map(|&(function, _, arguments)| (function, arguments))
    }
}

/// What waits on the operator stack.
enum Pending {
    Operator {
        operation: Operation,
        binding: u8,
        at: Span,
    },
    Bracket {
        at: usize,
    },
    Call {
        function: Function,
        arguments: usize,
        seen: usize,
        at: Span,
    },
}

const SUM: u8 = 1;
const PRODUCT: u8 = 2;
const SIGN: u8 = 3;
const POWER: u8 = 4;

struct Parser<'a> {
    text: &'a str,
    at: usize,
    code: Vec<(Operation, Span)>,
    pending: Vec<Pending>,
}

impl Formula {
    /// Reads a formula; `resolve` turns a name into the number of a variable.
    ///
    /// # Errors
    /// A [`Fault`] whose column counts characters of the formula from one.
    pub fn parse(text: &str, resolve: &dyn Fn(&str) -> Option<usize>) -> Result<Formula> {
        Formula::parse_known(text, resolve, &[])
    }

    /// As [`Formula::parse`], with the names that a complaint may suggest.
    pub fn parse_known(
        text: &str,
        resolve: &dyn Fn(&str) -> Option<usize>,
        names: &[&str],
    ) -> Result<Formula> {
        if text.len() > MOST_CHARACTERS {
            return Err(Fault::new(format!(
                "the formula has {} bytes, at most {MOST_CHARACTERS} are read",
                text.len()
            ))
            .at(1, 1));
        }
        let mut parser = Parser {
            text,
            at: 0,
            code: Vec::new(),
            pending: Vec::new(),
        };
        parser.run(resolve, names)?;
        Ok(Formula { code: parser.code })
    }

    /// Numbers, variables, operators and functions, counted.
    pub fn operations(&self) -> usize {
        self.code.len()
    }

    /// Numbers of the variables that occur.
    pub fn variables(&self) -> impl Iterator<Item = usize> {
        self.code
            .iter()
            .filter_map(|(operation, _)| match operation {
                Operation::Variable(index) => Some(*index),
                _ => None,
            })
    }
}

impl<'a> Parser<'a> {
    /// Alternates between "a value must come" and "an operator must come".
    fn run(&mut self, resolve: &dyn Fn(&str) -> Option<usize>, names: &[&str]) -> Result<()> {
        loop {
            self.value(resolve, names)?;
            if !self.operator()? {
                return Ok(());
            }
        }
    }

    fn fault(&self, text: impl Into<String>, at: usize) -> Fault {
        Fault::new(text).at_offset(self.text, at)
    }

    fn peek(&mut self) -> Option<char> {
        let rest = &self.text[self.at..];
        self.at += rest.len() - rest.trim_start().len();
        self.text[self.at..].chars().next()
    }

    fn push(&mut self, pending: Pending) -> Result<()> {
        if self.pending.len() >= MOST_NESTING {
            return Err(self.fault(
                format!("brackets, calls and signs are nested more than {MOST_NESTING} deep"),
                self.at,
            ));
        }
        self.pending.push(pending);
        Ok(())
    }

    /// Reads signs, opening brackets and calls up to a number or a name.
    fn value(&mut self, resolve: &dyn Fn(&str) -> Option<usize>, names: &[&str]) -> Result<()> {
        loop {
            let start = self.at;
            let Some(c) = self.peek() else {
                return Err(self.fault("the formula ends where a value was expected", start));
            };
            let at = self.at;
            match c {
                '0'..='9' | '.' => return self.number(),
                'a'..='z' | 'A'..='Z' | '_' => {
                    if self.name(resolve, names)? {
                        return Ok(());
                    }
                }
                '+' => self.at += 1,
                '-' => {
                    self.at += 1;
                    let (operation, binding) = (Operation::Negate, SIGN);
                    self.push(Pending::Operator {
                        operation,
                        binding,
                        at: (at, 1),
                    })?;
                }
                '(' => {
                    self.at += 1;
                    self.push(Pending::Bracket { at })?;
                }
                _ => {
                    let found = quoted(&c.to_string());
                    let fault = self.fault(format!("found {found}, expected a value"), at);
                    let before = self.text[..at].trim_end();
                    return Err(match c {
                        '*' if before.ends_with('*') => fault.help("a power is written `^`"),
                        _ if !c.is_ascii() => fault.help("names are made of a-z, A-Z, 0-9 and _"),
                        _ => fault,
                    });
                }
            }
        }
    }

    fn number(&mut self) -> Result<()> {
        let bytes = self.text.as_bytes();
        let start = self.at;
        let digits = |mut at: usize| {
            while bytes.get(at).is_some_and(u8::is_ascii_digit) {
                at += 1;
            }
            at
        };
        let mut end = digits(start);
        if bytes.get(end) == Some(&b'.') {
            end = digits(end + 1);
        }
        if let Some(b'e' | b'E') = bytes.get(end) {
            let sign = usize::from(matches!(bytes.get(end + 1), Some(b'+' | b'-')));
            let after = digits(end + 1 + sign);
            if after > end + 1 + sign {
                end = after;
            }
        }
        let word = &self.text[start..end];
        let value = word.parse::<f64>().ok().filter(|value| value.is_finite());
        let Some(value) = value else {
            return Err(self.fault(format!("{} is not a finite number", quoted(word)), start));
        };
        self.at = end;
        self.code
            .push((Operation::Number(value), (start, end - start)));
        Ok(())
    }

    /// A name or the start of a call; true where a value is complete.
    fn name(&mut self, resolve: &dyn Fn(&str) -> Option<usize>, names: &[&str]) -> Result<bool> {
        let start = self.at;
        let rest = &self.text[start..];
        let length = rest
            .find(|c: char| !(c.is_ascii_alphanumeric() || c == '_'))
            .unwrap_or(rest.len());
        let word = &rest[..length];
        self.at += length;
        let span = (start, length);
        if let Some((function, arguments)) = Function::find(word) {
            if self.peek() != Some('(') {
                return Err(self.fault(format!("`{word}` is a function: `(` must follow"), start));
            }
            self.at += 1;
            self.push(Pending::Call {
                function,
                arguments,
                seen: 1,
                at: span,
            })?;
            return Ok(false);
        }
        let operation = if word == "pi" {
            Operation::Pi
        } else if let Some(index) = resolve(word) {
            Operation::Variable(index)
        } else {
            let fault = self.fault(format!("unknown name {}", quoted(word)), start);
            let known = names
                .iter()
                .copied()
                .chain(Function::ALL.iter().map(|f| f.1));
            return Err(match nearest(word, known) {
                _ if word == "t" => fault.help("time enters a rate through the inputs"),
                Some(near) => fault.help(format!("did you mean `{near}`?")),
                None => fault,
            });
        };
        self.code.push((operation, span));
        Ok(true)
    }

    /// Reads closing brackets up to an operator or a comma; false at the end.
    fn operator(&mut self) -> Result<bool> {
        loop {
            let Some(c) = self.peek() else {
                self.reduce(0);
                return match self.pending.pop() {
                    None => Ok(false),
                    Some(open) => {
                        let (Pending::Operator { at: (at, _), .. }
                        | Pending::Bracket { at }
                        | Pending::Call { at: (at, _), .. }) = open;
                        Err(self.fault("this bracket is not closed", at))
                    }
                };
            };
            let at = self.at;
            let (operation, binding) = match c {
                '+' => (Operation::Add, SUM),
                '-' => (Operation::Subtract, SUM),
                '*' => (Operation::Multiply, PRODUCT),
                '/' => (Operation::Divide, PRODUCT),
                '^' => (Operation::Power, POWER),
                ')' => {
                    self.at += 1;
                    self.close(at)?;
                    continue;
                }
                ',' => {
                    self.at += 1;
                    self.comma(at)?;
                    return Ok(true);
                }
                _ => {
                    let found = quoted(&c.to_string());
                    let fault = self.fault(format!("found {found}, expected an operator"), at);
                    let product = c.is_ascii_alphanumeric() || matches!(c, '(' | '_');
                    return Err(if product {
                        fault.help("a product is written with `*`")
                    } else {
                        fault
                    });
                }
            };
            self.at += 1;
            // Powers group from the right, everything else from the left.
            self.reduce(if binding == POWER {
                binding + 1
            } else {
                binding
            });
            self.push(Pending::Operator {
                operation,
                binding,
                at: (at, 1),
            })?;
            return Ok(true);
        }
    }

    /// Moves waiting operators that bind at least this tightly into the code.
    fn reduce(&mut self, least: u8) {
        while let Some(&Pending::Operator {
            operation,
            binding,
            at,
        }) = self.pending.last()
        {
            if binding < least {
                break;
            }
            self.code.push((operation, at));
            self.pending.pop();
        }
    }

    fn close(&mut self, at: usize) -> Result<()> {
        self.reduce(0);
        match self.pending.pop() {
            Some(Pending::Bracket { .. }) => Ok(()),
            Some(Pending::Call {
                function,
                arguments,
                seen,
                at,
            }) if seen == arguments => {
                self.code.push((Operation::Call(function), at));
                Ok(())
            }
            Some(Pending::Call {
                arguments,
                seen,
                at: (start, length),
                ..
            }) => {
                let name = &self.text[start..start + length];
                let text = format!("`{name}` takes {arguments} argument(s), got {seen}");
                Err(self.fault(text, start))
            }
            _ => Err(self.fault("this bracket closes nothing", at)),
        }
    }

    fn comma(&mut self, at: usize) -> Result<()> {
        self.reduce(0);
        match self.pending.last_mut() {
            Some(Pending::Call { seen, .. }) => {
                *seen += 1;
                Ok(())
            }
            _ => Err(self
                .fault(
                    "a comma may only stand between the arguments of a function",
                    at,
                )
                .help("the decimal sign is a point")),
        }
    }
}
