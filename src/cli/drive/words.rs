//! The words of a command, with places for what differs from run to run. There is no
//! shell in between: a word stays one word whatever stands in it.

use std::ffi::{OsStr, OsString};
use std::path::Path;

use crate::fault::{Fault, quoted};

/// What stands for something else, with what it stands for.
const PLACEHOLDERS: [(&str, Placeholder); 4] = [
    ("case", Placeholder::Case),
    ("step", Placeholder::Step),
    ("output", Placeholder::Output),
    ("plan", Placeholder::Plan),
];

/// What differs from run to run, and the folder of the plan.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Placeholder {
    /// The file with the case as JSON.
    Case,
    /// The step.
    Step,
    /// The file to write.
    Output,
    /// The folder of the plan.
    Plan,
}

#[derive(Clone, Debug, PartialEq)]
enum Part {
    Text(String),
    Filled(Placeholder),
}

/// One word of a command.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Word(Vec<Part>);

/// What the placeholders of one run stand for.
pub(super) struct Filling<'a> {
    pub case: &'a Path,
    pub step: &'a str,
    pub output: &'a Path,
    pub plan: &'a Path,
}

impl Word {
    /// Reads `text {placeholder} text`; doubled braces are braces.
    ///
    /// # Errors
    /// Placeholders that are not known, braces that are not closed.
    pub fn parse(text: &str) -> Result<Word, Fault> {
        let mut parts = Vec::new();
        let mut plain = String::new();
        let mut rest = text;
        while let Some(at) = rest.find(['{', '}']) {
            plain.push_str(&rest[..at]);
            let brace = &rest[at..=at];
            rest = &rest[at + 1..];
            if let Some(after) = rest.strip_prefix(brace) {
                plain.push_str(brace);
                rest = after;
                continue;
            }
            let (name, after) =
                (rest.split_once('}'))
                    .filter(|_| brace == "{")
                    .ok_or_else(|| {
                        let fault =
                            Fault::new(format!("{} has a brace without its other", quoted(text)));
                        fault.help("write `{{` and `}}` for braces that stand for themselves")
                    })?;
            let known = PLACEHOLDERS.iter().find(|(known, _)| *known == name);
            let &(_, placeholder) = known.ok_or_else(|| unknown(name))?;
            if !plain.is_empty() {
                parts.push(Part::Text(std::mem::take(&mut plain)));
            }
            parts.push(Part::Filled(placeholder));
            rest = after;
        }
        plain.push_str(rest);
        if !plain.is_empty() {
            parts.push(Part::Text(plain));
        }
        Ok(Word(parts))
    }

    /// True where the placeholder stands in the word.
    pub fn has(&self, placeholder: Placeholder) -> bool {
        self.0.contains(&Part::Filled(placeholder))
    }

    /// The word for one run.
    pub fn fill(&self, filling: &Filling) -> OsString {
        let mut word = OsString::new();
        for part in &self.0 {
            word.push(match part {
                Part::Text(text) => OsStr::new(text),
                Part::Filled(Placeholder::Case) => filling.case.as_os_str(),
                Part::Filled(Placeholder::Step) => OsStr::new(filling.step),
                Part::Filled(Placeholder::Output) => filling.output.as_os_str(),
                Part::Filled(Placeholder::Plan) => filling.plan.as_os_str(),
            });
        }
        word
    }

    /// True for a path that would be looked for in the folder of a run, where no
    /// program lies yet.
    pub fn is_relative_path(&self) -> bool {
        match self.0.first() {
            Some(Part::Text(text)) => {
                let path = Path::new(text);
                path.is_relative() && (path.components().count() > 1 || text.starts_with('.'))
            }
            _ => false,
        }
    }
}

fn unknown(name: &str) -> Fault {
    let names = PLACEHOLDERS.map(|(name, _)| format!("`{{{name}}}`"));
    let shown = quoted(&format!("{{{name}}}"));
    Fault::new(format!("there is no placeholder {shown}")).help(format!(
        "there are {}; write `{{{{` and `}}}}` for braces that stand for themselves",
        names.join(", ")
    ))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn filled(text: &str) -> String {
        let filling = Filling {
            case: Path::new("c.json"),
            step: "0.1",
            output: Path::new("o.csv"),
            plan: Path::new("p"),
        };
        let word = Word::parse(text).unwrap();
        word.fill(&filling).into_string().unwrap()
    }

    #[test]
    fn placeholders_are_filled_wherever_they_stand() {
        assert_eq!(
            filled("--step={step},{case}{output}"),
            "--step=0.1,c.jsono.csv"
        );
        assert_eq!(filled("{plan}/a b;c"), "p/a b;c");
        assert_eq!(filled("{{step}} }}{{"), "{step} }{");
        assert_eq!(filled(""), "");
    }

    #[test]
    fn what_is_no_placeholder_is_refused() {
        let fault = Word::parse("{stpe}").unwrap_err();
        assert_eq!(fault.text, "there is no placeholder `{stpe}`");
        for text in ["{step", "step}", "}{", "{", "{{step}"] {
            let fault = Word::parse(text).unwrap_err();
            assert!(fault.text.contains("without its other"), "{text}: {fault}");
        }
    }

    #[test]
    fn programs_that_lie_nowhere() {
        let relative = |text: &str| Word::parse(text).unwrap().is_relative_path();
        assert!(relative("./alder") && relative("bin/alder") && relative("../alder"));
        assert!(!relative("alder") && !relative("{plan}/alder") && !relative("/bin/alder"));
    }
}
