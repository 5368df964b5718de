//! The rules of a reviewer: limits in place of those that submissions state, what has to be
//! there, and what is refused. The shape of the file and its words; whether its cases,
//! channels and methods exist is asked by whoever knows them.

use std::collections::BTreeMap;
use std::path::Path;

use toml::Spanned;

use super::schema::Reader;
use super::terms::LimitEntry;
use super::{LimitsStated, MOST_RUNS};
use crate::fault::{Fault, misread};

/// Largest file of rules that is read.
pub const MOST_RULES_BYTES: u64 = 1 << 20;
/// Most limits, requirements and names of methods of one file.
pub const MOST_ENTRIES: usize = 2000;

/// What a reviewer lays down for every submission of an audit.
#[derive(Clone, Debug, Default)]
pub struct Rules {
    /// For cases without limits of their own here; `None` leaves those of the cases.
    pub limits: Option<LimitsStated>,
    /// By case; they stand in place of the others, not beside them.
    pub case_limits: BTreeMap<String, LimitsStated>,
    /// What has to be there, in the order of the file.
    pub requirements: Vec<Requirement>,
    /// True where a submission may not replace parameters; `None` where it is not said.
    pub refuses_own_parameters: Option<bool>,
    /// True where a submission may not bring its case along.
    pub refuses_own_cases: bool,
    /// True where a submission may not mark itself as a control.
    pub refuses_controls: bool,
    /// Lines and columns of what can prove wrong only later, as `limits.air`,
    /// `case_limits.NAME.air`, `require.0` and `require.0.1` for its second method.
    pub places: BTreeMap<String, (u64, u64)>,
}

/// One thing that has to be there.
#[derive(Clone, Debug, PartialEq)]
pub struct Requirement {
    /// The case that a submission has to pass.
    pub case: String,
    /// Its runs at different steps, at least.
    pub runs: u64,
    /// Rows of each of its results, at least; zero where the case alone says how many.
    pub rows: u64,
    /// It has to claim one of these; empty where any will do.
    pub methods: Vec<String>,
    /// True where its rows have to agree with the method, so that "cannot tell" is not enough.
    pub method_shown: bool,
}

/// For what a file of rules is read.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Purpose {
    /// Limits alone: whatever else it holds is refused rather than overlooked.
    Limits,
    /// All that it holds.
    Everything,
}

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
struct RulesFile {
    own_parameters: Option<Spanned<String>>,
    own_cases: Option<Spanned<String>>,
    controls: Option<Spanned<String>>,
    limits: Option<LimitsTable>,
    #[serde(default)]
    case_limits: BTreeMap<Spanned<String>, LimitsTable>,
    #[serde(default)]
    require: Vec<Spanned<RequireEntry>>,
}

type LimitsTable = BTreeMap<Spanned<String>, Spanned<LimitEntry>>;

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
struct RequireEntry {
    case: Spanned<String>,
    runs: Option<Spanned<i64>>,
    rows: Option<Spanned<i64>>,
    methods: Option<Spanned<Vec<Spanned<String>>>>,
    #[serde(default)]
    method_shown: bool,
}

impl RulesFile {
    /// How many places have to be looked up.
    fn entries(&self) -> usize {
        let methods =
            |entry: &RequireEntry| entry.methods.as_ref().map_or(0, |m| m.get_ref().len());
        let required = self.require.iter().map(|one| 1 + methods(one.get_ref()));
        let tables = self.limits.iter().chain(self.case_limits.values());
        let limits = tables.map(|table| 1 + table.len());
        required.chain(limits).sum()
    }
}

impl Rules {
    /// Reads the text of a file.
    ///
    /// # Errors
    /// All complaints about the file, in order of their places.
    pub fn parse(text: &str, purpose: Purpose) -> Result<Rules, Vec<Fault>> {
        let file: RulesFile = toml::from_str(text).map_err(|error| {
            let offset = error.span().map_or(0, |span| span.start);
            vec![misread(error.message()).at_offset(text, offset)]
        })?;
        let mut reader = Reader::new(text, Path::new(""));
        let rules = reader.rules(file, purpose);
        reader.conclude(rules)
    }

    /// What is laid down for every submission before it is audited, as text: two files with
    /// the same text differ in what they require at most.
    pub fn terms(&self) -> String {
        // `allow` is what holds where nothing is said.
        let own_parameters = self.refuses_own_parameters == Some(true);
        let refused = (
            own_parameters,
            self.refuses_own_cases,
            self.refuses_controls,
        );
        format!("{:?} {:?} {refused:?}", self.limits, self.case_limits)
    }

    /// The limits for a submission of this case, as far as a reviewer states any.
    pub fn limits_of(&self, case: Option<&str>) -> Option<&LimitsStated> {
        let own = case.and_then(|case| self.case_limits.get(case));
        own.or(self.limits.as_ref())
    }
}

impl Reader<'_> {
    fn rules(&mut self, file: RulesFile, purpose: Purpose) -> Rules {
        let entries = file.entries();
        if entries > MOST_ENTRIES {
            let text = format!(
                "the file has {entries} limits, requirements and methods, \
                 at most {MOST_ENTRIES} are read"
            );
            self.complain(text, 0);
            return Rules::default();
        }
        let says_nothing = self.is_empty(&file, purpose);
        let mut rules = Rules::default();
        let words = [
            ("own_parameters", file.own_parameters),
            ("own_cases", file.own_cases),
            ("controls", file.controls),
        ];
        let [own_parameters, own_cases, controls] =
            words.map(|(key, word)| self.one_of(word, key, &[("allow", false), ("refuse", true)]));
        rules.refuses_own_parameters = own_parameters;
        rules.refuses_own_cases = own_cases.unwrap_or(false);
        rules.refuses_controls = controls.unwrap_or(false);
        rules.limits = file
            .limits
            .map(|table| self.limits_at("limits", table, &mut rules.places));
        for (case, table) in file.case_limits {
            let key = format!("case_limits.{}", case.get_ref());
            rules.places.insert(key.clone(), self.place(&case));
            let limits = self.limits_at(&key, table, &mut rules.places);
            rules.case_limits.insert(case.into_inner(), limits);
        }
        for (index, entry) in file.require.into_iter().enumerate() {
            let requirement = self.requirement(entry.into_inner(), index, &mut rules.places);
            rules.requirements.push(requirement);
        }
        if says_nothing {
            let help =
                "write `[limits]` with `absolute` or `relative`, or `[case_limits.\"FIELD/NAME\"]`";
            self.complain_of(Fault::new("the file states no limits").help(help), 0);
        }
        rules
    }

    /// True for a file of limits without any; what is no limit there is complained of.
    fn is_empty(&mut self, file: &RulesFile, purpose: Purpose) -> bool {
        if purpose == Purpose::Everything {
            return false;
        }
        let start = |word: &Option<Spanned<String>>| word.as_ref().map(|word| word.span().start);
        let others = [
            ("own_parameters", start(&file.own_parameters)),
            ("own_cases", start(&file.own_cases)),
            ("controls", start(&file.controls)),
            ("require", file.require.first().map(|one| one.span().start)),
        ];
        let mut any = false;
        for (key, offset) in others {
            if let Some(offset) = offset {
                any = true;
                let fault = Fault::new(format!("`{key}` is no limit"));
                self.complain_of(fault.help("give this file to `--require`"), offset);
            }
        }
        !any && file.limits.is_none() && file.case_limits.is_empty()
    }

    fn limits_at(
        &mut self,
        key: &str,
        table: LimitsTable,
        places: &mut BTreeMap<String, (u64, u64)>,
    ) -> LimitsStated {
        for name in table.keys() {
            places.insert(format!("{key}.{}", name.get_ref()), self.place(name));
        }
        self.limits(table)
    }

    fn requirement(
        &mut self,
        entry: RequireEntry,
        index: usize,
        places: &mut BTreeMap<String, (u64, u64)>,
    ) -> Requirement {
        places.insert(format!("require.{index}"), self.place(&entry.case));
        let runs = entry.runs.map_or(1, |runs| {
            let whole = u64::try_from(*runs.get_ref()).unwrap_or(0);
            if !(1..=MOST_RUNS as u64).contains(&whole) {
                let text = format!("`runs` is {}", runs.get_ref());
                let help = format!("a submission has 1 to {MOST_RUNS} runs");
                self.complain_of(Fault::new(text).help(help), runs.span().start);
            }
            whole
        });
        let rows = entry.rows.map_or(0, |rows| {
            let whole = u64::try_from(*rows.get_ref()).unwrap_or(0);
            if whole == 0 {
                let fault = Fault::new(format!("`rows` is {}", rows.get_ref()));
                let help = "give the rows of a result from the start of the window to its end";
                self.complain_of(fault.help(help), rows.span().start);
            }
            whole
        });
        let mut methods = Vec::new();
        if let Some(list) = entry.methods {
            if list.get_ref().is_empty() {
                let help = "name a method, or leave `methods` out where any will do";
                let fault = Fault::new("`methods` is empty").help(help);
                self.complain_of(fault, list.span().start);
            }
            for (number, name) in list.into_inner().into_iter().enumerate() {
                places.insert(format!("require.{index}.{number}"), self.place(&name));
                methods.push(name.into_inner());
            }
        }
        Requirement {
            case: entry.case.into_inner(),
            runs,
            rows,
            methods,
            method_shown: entry.method_shown,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn parse(text: &str) -> Result<Rules, String> {
        let all = |faults: Vec<Fault>| {
            let lines: Vec<String> = faults.iter().map(Fault::in_one_line).collect();
            lines.join(" | ")
        };
        Rules::parse(text, Purpose::Everything).map_err(all)
    }

    #[test]
    fn a_file_of_rules_is_read_in_full() {
        let rules = parse(
            "own_parameters = \"refuse\"\ncontrols = \"refuse\"\n[limits]\nabsolute = 1e-3\n\
             air = { relative = 1e-4 }\n[case_limits.\"a/b\"]\nabsolute = 2\n\
             [[require]]\ncase = \"a/b\"\nruns = 3\nmethods = [\"RK4\", \"Heun\"]\n\
             method_shown = true\n[[require]]\ncase = \"c/d\"\n",
        );
        let rules = rules.unwrap();
        assert_eq!(rules.refuses_own_parameters, Some(true));
        assert!(rules.refuses_controls && !rules.refuses_own_cases);
        let absolute = |case| rules.limits_of(case).unwrap().general.absolute;
        assert_eq!(
            (absolute(None), absolute(Some("a/b"))),
            (Some(1e-3), Some(2.0))
        );
        // The limits of a case stand alone: nothing of the others shines through.
        assert!(rules.limits_of(Some("a/b")).unwrap().channels.is_empty());
        assert_eq!(rules.requirements[0].methods, ["RK4", "Heun"]);
        assert_eq!(
            (rules.requirements[0].runs, rules.requirements[1].runs),
            (3, 1)
        );
        assert_eq!(rules.places["limits.air"], (5, 1));
        assert_eq!(rules.places["require.0.1"], (11, 19));
    }

    #[test]
    fn what_is_wrong_has_a_place_and_a_cure() {
        for (text, told) in [
            ("limit = 1", "1:1: unknown field `limit`"),
            ("limit = 1", "help: did you mean `limits`?"),
            (
                "[[require]]\ncase = \"a/b\"\nrun = 3",
                "3:1: unknown field `run`",
            ),
            (
                "[[require]]\ncase = \"a/b\"\nrun = 3",
                "did you mean `runs`?",
            ),
            ("[[require]]\nruns = 3", "1:1: missing field `case`"),
            (
                "controls = \"no\"",
                "1:12: `controls` is `no`, expected \"allow\" or \"refuse\"",
            ),
            (
                "[[require]]\ncase = \"a\"\nruns = 0",
                "3:8: `runs` is 0; help: a submission has",
            ),
            (
                "[[require]]\ncase = \"a\"\nmethods = []",
                "3:11: `methods` is empty; help:",
            ),
            (
                "[limits]\nabsolute = -1",
                "2:12: a limit must be finite and not below zero",
            ),
            (
                "[limits]\nabsolut = 1",
                "2:1: `absolut` is no limit; help: a limit is `absolute`",
            ),
        ] {
            let found = parse(text).unwrap_err();
            assert!(found.contains(told), "{text}: {found}");
        }
        let limits = |text| Rules::parse(text, Purpose::Limits).unwrap_err()[0].in_one_line();
        assert!(limits("").contains("1:1: the file states no limits; help: write `[limits]`"));
        let other = limits("controls = \"refuse\"\n[limits]\nabsolute = 1");
        assert!(
            other.contains("1:12: `controls` is no limit; help: give this file to `--require`")
        );
    }
}
