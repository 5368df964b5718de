//! From the text of a plan to what will be run, or all that is wrong with it. Nothing is
//! started and nothing is written before the whole plan is sound.

use std::collections::BTreeMap;
use std::fmt;
use std::path::{Path, PathBuf};
use std::time::Duration;

use serde::de::value::{MapAccessDeserializer, SeqAccessDeserializer};
use serde::de::{Deserialize, Deserializer, IgnoredAny, MapAccess, SeqAccess, Visitor};
use toml::Spanned;

use super::select::select;
use super::steps::Steps;
use super::words::{Placeholder, Word};
use crate::case::{Case, Library, Replacements};
use crate::cli::facts::facts;
use crate::cli::plan::processors;
use crate::fault::{Fault, in_plain_words, nearest, quoted};
use crate::number::plain;
use crate::report::case_json;
use crate::submission::Terms;

/// Largest plan that is read.
const MOST_PLAN_BYTES: u64 = 1 << 20;
/// Most steps of a case.
const MOST_STEPS: usize = 100;
/// Most runs at once.
const MOST_JOBS: i64 = 256;
/// Seconds of a run unless a plan says otherwise.
const TIME_LIMIT: f64 = 60.0;
/// Longest time limit, in seconds: some eleven days.
const MOST_TIME: f64 = 1e6;
/// For a plan that leaves out what it cannot do without.
const KEYS: [&str; 10] = [
    "producer",
    "command",
    "cases",
    "steps",
    "jobs",
    "time_limit",
    "claims",
    "limits",
    "columns",
    "layout",
];

/// What will be run.
#[derive(Debug)]
pub(super) struct DrivePlan {
    pub producer: Option<String>,
    pub command: Vec<Word>,
    /// Line and column of the command, for what only starting it can show.
    pub command_place: (u64, u64),
    /// In the order of the plan.
    pub cases: Vec<Chosen>,
    pub jobs: usize,
    pub time_limit: Duration,
    /// The folder of the plan.
    pub folder: PathBuf,
}

/// One case with its runs.
#[derive(Debug)]
pub(super) struct Chosen {
    pub case: Case,
    /// As `stepgauge case NAME --json` gives it.
    pub json: String,
    pub steps: Vec<f64>,
    /// As far as they are about channels of this case.
    pub terms: Terms,
}

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
struct PlanFile {
    producer: Option<String>,
    command: Option<Spanned<Vec<Spanned<String>>>>,
    cases: Option<Spanned<Vec<Spanned<String>>>>,
    steps: Option<Spanned<StepsEntry>>,
    jobs: Option<Spanned<i64>>,
    time_limit: Option<Spanned<f64>>,
    // Read by `Terms`.
    #[serde(rename = "claims")]
    _claims: Option<IgnoredAny>,
    #[serde(rename = "limits")]
    _limits: Option<IgnoredAny>,
    #[serde(rename = "columns")]
    _columns: Option<IgnoredAny>,
    #[serde(rename = "layout")]
    _layout: Option<IgnoredAny>,
}

/// A list of steps, or a table that says what they are fractions of.
enum StepsEntry {
    Stated(Vec<Spanned<f64>>),
    Fractions(Vec<Spanned<f64>>),
}

#[derive(serde::Deserialize)]
#[serde(deny_unknown_fields)]
struct FractionsTable {
    of_time_constant: Vec<Spanned<f64>>,
}

impl<'de> Deserialize<'de> for StepsEntry {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        struct ListOrTable;
        impl<'de> Visitor<'de> for ListOrTable {
            type Value = StepsEntry;
            fn expecting(&self, f: &mut fmt::Formatter) -> fmt::Result {
                f.write_str("a list of steps or `{ of_time_constant = [...] }`")
            }
            fn visit_seq<A: SeqAccess<'de>>(self, list: A) -> Result<StepsEntry, A::Error> {
                Vec::deserialize(SeqAccessDeserializer::new(list)).map(StepsEntry::Stated)
            }
            fn visit_map<A: MapAccess<'de>>(self, map: A) -> Result<StepsEntry, A::Error> {
                let table = FractionsTable::deserialize(MapAccessDeserializer::new(map))?;
                Ok(StepsEntry::Fractions(table.of_time_constant))
            }
        }
        deserializer.deserialize_any(ListOrTable)
    }
}

/// Reads the plan at `path`.
///
/// # Errors
/// All complaints, in order of their places.
pub(super) fn read(path: &Path, library: &Library) -> Result<DrivePlan, Vec<Fault>> {
    let result = text(path).map_err(|fault| vec![fault]).and_then(|text| {
        let folder = std::path::absolute(path).map_err(|error| vec![Fault::io(path, &error)])?;
        let folder = folder.parent().unwrap_or(Path::new("/")).to_owned();
        parse(&text, folder, library)
    });
    result.map_err(|faults| {
        faults
            .into_iter()
            .map(|fault| fault.in_file(path))
            .collect()
    })
}

fn text(path: &Path) -> Result<String, Fault> {
    if path.is_dir() {
        let fault = Fault::new("this is a folder, a plan is a file");
        return Err(fault.help("name the plan itself, such as plan.toml in this folder"));
    }
    let io = |error: std::io::Error| Fault::io(path, &error);
    let size = std::fs::metadata(path).map_err(io)?.len();
    if size > MOST_PLAN_BYTES {
        let text = format!("has {size} bytes, at most {MOST_PLAN_BYTES} are read");
        return Err(Fault::new(text).help("name a plan, not a trajectory"));
    }
    let bytes = std::fs::read(path).map_err(io)?;
    String::from_utf8(bytes)
        .map_err(|_| Fault::new("this is not UTF-8 text").help("save it as UTF-8"))
}

struct Reader<'a> {
    text: &'a str,
    faults: Vec<Fault>,
}

fn parse(text: &str, folder: PathBuf, library: &Library) -> Result<DrivePlan, Vec<Fault>> {
    let file: PlanFile = toml::from_str(text).map_err(|error| {
        let offset = error.span().map_or(0, |span| span.start);
        vec![misread(error.message()).at_offset(text, offset)]
    })?;
    let mut reader = Reader {
        text,
        faults: Vec::new(),
    };
    let terms = Terms::parse(text).unwrap_or_else(|faults| {
        reader.faults.extend(faults);
        Terms::default()
    });
    let command_place = file
        .command
        .as_ref()
        .map_or(0, |command| command.span().start);
    let cases_place = file.cases.as_ref().map_or(0, |cases| cases.span().start);
    let steps_place = file.steps.as_ref().map_or(0, |steps| steps.span().start);
    let steps = reader.steps(file.steps);
    let names = reader.cases(file.cases, library);
    let command = reader.command(file.command, steps.count(), names.len());
    let jobs = reader.jobs(file.jobs);
    let time_limit = reader.time_limit(file.time_limit);
    let mut cases = Vec::new();
    // What follows rests on what was read so far.
    if reader.faults.is_empty() {
        for name in &names {
            match chosen(name, &steps, library) {
                Ok(one) => cases.push(one),
                Err((faults, true)) => reader.placed(faults, steps_place),
                Err((faults, false)) => reader.placed(faults, cases_place),
            }
        }
    }
    if reader.faults.is_empty() {
        reader.share(&terms, &mut cases);
    }
    if !reader.faults.is_empty() {
        reader
            .faults
            .sort_by_key(|fault| (fault.line, fault.column));
        return Err(reader.faults);
    }
    let placed = Fault::new("").at_offset(text, command_place);
    Ok(DrivePlan {
        producer: file.producer,
        command,
        command_place: (placed.line.unwrap_or(1), placed.column.unwrap_or(1)),
        cases,
        jobs,
        time_limit,
        folder,
    })
}

/// A complaint of the TOML reader; a mistyped key is compared with those there are.
fn misread(message: &str) -> Fault {
    let fault = Fault::new(in_plain_words(message));
    let unknown = message.strip_prefix("unknown field `");
    let key = unknown.and_then(|rest| rest.split('`').next());
    match key.and_then(|key| nearest(key, KEYS.into_iter())) {
        Some(near) => fault.help(format!("did you mean `{near}`?")),
        None if key.is_some() => fault.help(format!("a plan has the keys {}", KEYS.join(", "))),
        None => fault,
    }
}

/// A case with its steps; a complaint comes with whether it is about the steps.
fn chosen(name: &str, steps: &Steps, library: &Library) -> Result<Chosen, (Vec<Fault>, bool)> {
    let case = (library.load(name, &Replacements::new())).map_err(|faults| (faults, false))?;
    let exact = case.exact().map_err(|fault| (vec![fault], false))?;
    let facts = facts(&case, &exact);
    let steps = steps
        .of(&case, &facts)
        .map_err(|fault| (vec![fault], true))?;
    Ok(Chosen {
        json: case_json(&case, &facts),
        case,
        steps,
        terms: Terms::default(),
    })
}

impl Reader<'_> {
    fn complain(&mut self, fault: Fault, offset: usize) {
        self.faults.push(fault.at_offset(self.text, offset));
    }

    /// Complaints without a place get this one.
    fn placed(&mut self, faults: Vec<Fault>, offset: usize) {
        for fault in faults {
            match fault.line {
                Some(_) => self.faults.push(fault),
                None => self.complain(fault, offset),
            }
        }
    }

    fn missing(&mut self, key: &str, example: &str) {
        let fault = Fault::new(format!("the plan has no `{key}`"));
        self.complain(fault.help(format!("add `{key} = {example}`")), 0);
    }

    fn command(
        &mut self,
        entry: Option<Spanned<Vec<Spanned<String>>>>,
        steps: usize,
        cases: usize,
    ) -> Vec<Word> {
        let example = "[\"{plan}/simulator\", \"{case}\", \"{step}\", \"{output}\"]";
        let Some(entry) = entry else {
            self.missing("command", example);
            return Vec::new();
        };
        let offset = entry.span().start;
        let entry = entry.into_inner();
        if entry
            .first()
            .is_none_or(|first| first.get_ref().trim().is_empty())
        {
            let fault = Fault::new("the command is empty");
            self.complain(fault.help(format!("write `command = {example}`")), offset);
            return Vec::new();
        }
        let mut words = Vec::new();
        for word in &entry {
            match Word::parse(word.get_ref()) {
                Ok(parsed) => words.push(parsed),
                Err(fault) => self.complain(fault, word.span().start),
            }
        }
        if words.len() < entry.len() {
            return words;
        }
        if words[0].is_relative_path() {
            let shown = quoted(entry[0].get_ref());
            let fault = Fault::new(format!(
                "program {shown} would be looked for in the folder of each run"
            ));
            let help = "begin the path with `{plan}/`, the folder of the plan";
            self.complain(fault.help(help), entry[0].span().start);
        }
        for (name, placeholder, needed, why) in [
            (
                "output",
                Placeholder::Output,
                true,
                "nothing tells the simulator which file to write",
            ),
            (
                "step",
                Placeholder::Step,
                steps > 1,
                "all steps of a case would be the same run",
            ),
            (
                "case",
                Placeholder::Case,
                cases > 1,
                "all cases would be the same run",
            ),
        ] {
            if needed && !words.iter().any(|word| word.has(placeholder)) {
                let fault = Fault::new(format!("the command has no `{{{name}}}`: {why}"));
                let help = format!("add a word such as `\"--{name}={{{name}}}\"`");
                self.complain(fault.help(help), offset);
            }
        }
        words
    }

    fn cases(
        &mut self,
        entry: Option<Spanned<Vec<Spanned<String>>>>,
        library: &Library,
    ) -> Vec<String> {
        let example = "[\"thermal/*\"]";
        let Some(entry) = entry else {
            self.missing("cases", example);
            return Vec::new();
        };
        if entry.get_ref().is_empty() {
            let fault = Fault::new("`cases` is empty").help(format!("write `cases = {example}`"));
            self.complain(fault, entry.span().start);
        }
        let known: Vec<&str> = library.names().collect();
        let mut names: Vec<String> = Vec::new();
        for pattern in entry.into_inner() {
            match select(pattern.get_ref(), &known) {
                Ok(found) => {
                    for name in found {
                        // A case that several patterns match has its first place.
                        if !names.iter().any(|taken| taken == name) {
                            names.push(name.to_owned());
                        }
                    }
                }
                Err(fault) => self.complain(fault, pattern.span().start),
            }
        }
        names
    }

    fn steps(&mut self, entry: Option<Spanned<StepsEntry>>) -> Steps {
        let Some(entry) = entry else {
            self.missing("steps", "{ of_time_constant = [0.1, 0.05] }");
            return Steps::Stated(Vec::new());
        };
        let offset = entry.span().start;
        let (numbers, of_case) = match entry.into_inner() {
            StepsEntry::Stated(numbers) => (numbers, false),
            StepsEntry::Fractions(numbers) => (numbers, true),
        };
        if numbers.is_empty() || numbers.len() > MOST_STEPS {
            let fault = Fault::new(format!("a case has {} steps here", numbers.len()));
            self.complain(fault.help(format!("give 1 to {MOST_STEPS} steps")), offset);
        }
        let mut steps: Vec<f64> = Vec::new();
        for number in numbers.into_iter().take(MOST_STEPS) {
            let place = number.span().start;
            let step = number.into_inner();
            if !(step > 0.0 && step.is_finite()) {
                let fault = Fault::new(format!("{} is no step", plain(step)));
                self.complain(fault.help("a step is finite and above zero"), place);
            } else if steps.contains(&step) {
                let fault = Fault::new(format!("step {} is named twice", plain(step)));
                self.complain(fault.help("leave one of them out"), place);
            }
            steps.push(step);
        }
        if of_case {
            Steps::Fractions(steps)
        } else {
            Steps::Stated(steps)
        }
    }

    fn jobs(&mut self, entry: Option<Spanned<i64>>) -> usize {
        let Some(jobs) = entry else {
            return processors();
        };
        if !(1..=MOST_JOBS).contains(jobs.get_ref()) {
            let fault = Fault::new(format!("`jobs` is {}", jobs.get_ref()));
            let help = format!("give 1 to {MOST_JOBS}, or leave it out to use all processors");
            self.complain(fault.help(help), jobs.span().start);
        }
        usize::try_from(jobs.into_inner()).unwrap_or(1)
    }

    fn time_limit(&mut self, entry: Option<Spanned<f64>>) -> Duration {
        let offset = entry.as_ref().map_or(0, |entry| entry.span().start);
        let seconds = entry.map_or(TIME_LIMIT, Spanned::into_inner);
        if !(seconds > 0.0 && seconds <= MOST_TIME) {
            let fault = Fault::new(format!("`time_limit` is {}", plain(seconds)));
            let help = format!("give the seconds of a run, above 0 and at most {MOST_TIME}");
            self.complain(fault.help(help), offset);
            return Duration::ZERO;
        }
        Duration::from_secs_f64(seconds)
    }

    /// Gives each case the terms that are about its channels; a channel that no case has
    /// is a slip.
    fn share(&mut self, terms: &Terms, cases: &mut [Chosen]) {
        let mut channels: Vec<String> = Vec::new();
        for chosen in &mut *cases {
            let own: Vec<String> = (chosen.case.channels().iter())
                .map(|channel| channel.name.to_owned())
                .collect();
            chosen.terms = terms.clone();
            chosen.terms.places = BTreeMap::new();
            (chosen.terms.limits.channels).retain(|name, _| own.contains(name));
            (chosen.terms.columns).retain(|name, _| name == "time" || own.contains(name));
            channels.extend(own);
        }
        let place = |name: &String| terms.places.get(&format!("limits.{name}")).copied();
        let limits = terms.limits.channels.keys().map(|name| (name, place(name)));
        let columns = terms
            .columns
            .iter()
            .map(|(name, stated)| (name, stated.place));
        for (name, place) in limits.chain(columns) {
            if name != "time" && !channels.contains(name) {
                let fault = Fault::new(format!(
                    "no case of the plan has a channel {}",
                    quoted(name)
                ));
                let near = nearest(name, channels.iter().map(String::as_str));
                let fault = fault.help(match near {
                    Some(near) => format!("did you mean `{near}`?"),
                    None => "`stepgauge case NAME` shows the channels of a case".to_owned(),
                });
                let (line, column) = place.unwrap_or((1, 1));
                self.faults.push(fault.at(line, column));
            }
        }
    }
}
