//! The cases that are at hand: those compiled in, and those of `--cases` folders.

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

use walkdir::WalkDir;

use super::{Case, Replacements};
use crate::fault::{Fault, nearest, quoted};

/// Largest case file that is read.
pub const MOST_CASE_BYTES: u64 = 1 << 20;
/// Deepest folder below a `--cases` folder that is looked into.
const MOST_DEPTH: usize = 8;

macro_rules! built_in {
    ($($name:literal),* $(,)?) => {
        /// Every built-in case: its name and the text of its file.
        pub const fn built_in() -> &'static [(&'static str, &'static str)] {
            &[$(($name, include_str!(concat!("../../reference-cases/", $name, ".toml")))),*]
        }
    };
}

built_in!(
    "control/dc-motor",
    "control/double-integrator",
    "control/lag-held-samples",
    "control/lag-linear-samples",
    "control/servo-integrator",
    "decay/chain-8-repeated",
    "decay/parent-daughter",
    "decay/secular-equilibrium",
    "electrical/lc-bus-filter",
    "electrical/rc-constant",
    "electrical/rc-ladder-5",
    "electrical/rc-pulse",
    "electrical/rc-sine",
    "electrical/rl-constant",
    "electrical/rl-pulse",
    "electrical/rl-sine",
    "electrical/rlc-critical",
    "electrical/rlc-overdamped",
    "electrical/rlc-underdamped",
    "kinetics/bolus",
    "kinetics/infusion",
    "kinetics/oral",
    "kinetics/oral-equal-rates",
    "kinetics/repeated-infusions",
    "kinetics/two-compartments",
    "mechanical/base-excitation",
    "mechanical/beat",
    "mechanical/oscillator-critical",
    "mechanical/oscillator-light",
    "mechanical/oscillator-undamped",
    "mechanical/resonance",
    "mechanical/two-masses",
    "mechanical/winch-ramp",
    "membrane/cable-5",
    "membrane/leaky-pulse-train",
    "membrane/leaky-sine",
    "membrane/leaky-step",
    "process/tank",
    "process/tank-cascade",
    "process/tank-leak-ramp",
    "process/tanks-interacting",
    "stress/exponential-input",
    "stress/growth",
    "stress/jordan-4",
    "stress/million-periods",
    "stress/near-equal-rates",
    "stress/nonnormal-10",
    "stress/quadratic-input",
    "stress/stiff-1e12",
    "stress/stiff-1e4",
    "stress/stiff-1e6",
    "stress/stiff-smooth-forcing",
    "stress/transient-growth-7",
    "thermal/battery-room",
    "thermal/cold-room-defrost",
    "thermal/cooling-body",
    "thermal/rod-30-node",
    "thermal/wall-3-node",
);

/// Cases by name.
#[derive(Clone, Debug)]
pub struct Library {
    entries: BTreeMap<String, Entry>,
}

#[derive(Clone, Debug)]
struct Entry {
    slug: String,
    text: String,
    path: PathBuf,
}

impl Library {
    /// The built-in cases.
    pub fn new() -> Library {
        let entries = built_in().iter().map(|&(name, text)| {
            let slug = name.rsplit('/').next().unwrap_or(name).to_owned();
            let path = Path::new("reference-cases").join(format!("{name}.toml"));
            (
                name.to_owned(),
                Entry {
                    slug,
                    text: text.to_owned(),
                    path,
                },
            )
        });
        Library {
            entries: entries.collect(),
        }
    }

    /// Adds every `.toml` file below a folder.
    ///
    /// # Errors
    /// Unreadable folders or files, files that are no case, and names that are
    /// already taken.
    pub fn add_folder(&mut self, folder: &Path) -> Result<(), Vec<Fault>> {
        let mut faults = Vec::new();
        for entry in WalkDir::new(folder)
            .max_depth(MOST_DEPTH)
            .sort_by_file_name()
        {
            match entry {
                Ok(entry) if entry.path().extension().is_some_and(|e| e == "toml") => {
                    if let Err(mut found) = self.add_file(entry.path()) {
                        faults.append(&mut found);
                    }
                }
                Ok(_) => {}
                Err(error) => {
                    let path = error.path().unwrap_or(folder).to_owned();
                    let text = format!("cannot be read: {error}");
                    faults.push(Fault::new(text).in_file(&path));
                }
            }
        }
        if faults.is_empty() {
            Ok(())
        } else {
            Err(faults)
        }
    }

    fn add_file(&mut self, path: &Path) -> Result<(), Vec<Fault>> {
        let placed = |fault: Fault| vec![fault.in_file(path)];
        let size = std::fs::metadata(path).map_err(|error| placed(Fault::io(path, &error)))?;
        if !size.is_file() || size.len() > MOST_CASE_BYTES {
            let text = format!("a case file is a plain file of at most {MOST_CASE_BYTES} bytes");
            return Err(placed(Fault::new(text)));
        }
        let text =
            std::fs::read_to_string(path).map_err(|error| placed(Fault::io(path, &error)))?;
        let slug = path
            .file_stem()
            .unwrap_or_default()
            .to_string_lossy()
            .into_owned();
        // The name is that of folders and files that `drive` makes.
        let plain = |c: char| c.is_ascii_alphanumeric() || "-_.".contains(c);
        if slug.starts_with('.') || !slug.chars().all(plain) {
            let fault =
                Fault::new("a case is named by its file, and this name has other characters");
            return Err(placed(fault.help("use a-z, 0-9, - and _ only")));
        }
        let case = Case::parse(&slug, &text, &Replacements::new()).map_err(|faults| {
            faults
                .into_iter()
                .map(|f| f.in_file(path))
                .collect::<Vec<_>>()
        })?;
        if self.entries.contains_key(&case.name) {
            let fault = Fault::new(format!("there is already a case {}", quoted(&case.name)))
                .help("give the file another name, or its case another `field`");
            return Err(placed(fault));
        }
        self.entries.insert(
            case.name,
            Entry {
                slug,
                text,
                path: path.to_owned(),
            },
        );
        Ok(())
    }

    /// The files of cases that were added from folders.
    pub fn files(&self) -> impl Iterator<Item = &Path> {
        let built_in = |name: &str| built_in().iter().any(|&(known, _)| known == name);
        let added = self.entries.iter().filter(move |(name, _)| !built_in(name));
        added.map(|(_, entry)| entry.path.as_path())
    }

    /// The file of a case that was added from a folder; `None` for a built-in one.
    pub fn file(&self, name: &str) -> Option<&Path> {
        let built_in = built_in().iter().any(|&(known, _)| known == name);
        let entry = self.entries.get(name).filter(|_| !built_in);
        entry.map(|entry| entry.path.as_path())
    }

    /// All names, in alphabetical order.
    pub fn names(&self) -> impl Iterator<Item = &str> {
        self.entries.keys().map(String::as_str)
    }

    /// How long the text of a case is: that is what it costs to load it.
    pub fn text_bytes(&self, name: &str) -> usize {
        self.entries.get(name).map_or(0, |entry| entry.text.len())
    }

    /// Loads a case, with some of its parameters replaced.
    ///
    /// # Errors
    /// An unknown name, with the nearest known one; complaints about the file.
    pub fn load(&self, name: &str, replace: &Replacements) -> Result<Case, Vec<Fault>> {
        let Some(entry) = self.entries.get(name) else {
            let fault = Fault::new(format!("there is no case {}", quoted(name)));
            let by_slug = self
                .names()
                .find(|known| known.rsplit('/').next() == Some(name));
            let part = || {
                self.names()
                    .find(|known| name.len() > 2 && known.contains(name))
            };
            let near = by_slug
                .or_else(|| nearest(name, self.names()))
                .or_else(part);
            return Err(vec![fault.help(match near {
                Some(near) => format!("did you mean `{near}`? `stepgauge cases` lists all"),
                None => "`stepgauge cases` lists all".to_owned(),
            })]);
        };
        Case::parse(&entry.slug, &entry.text, replace).map_err(|faults| {
            // A complaint without a place is about what replaces parameters, not about
            // the file.
            let placed = |fault: Fault| match fault.line {
                Some(_) => fault.in_file(&entry.path),
                None => fault,
            };
            let mut faults: Vec<Fault> = faults.into_iter().map(placed).collect();
            if !replace.is_empty() {
                let list: Vec<String> = replace
                    .iter()
                    .map(|(name, value)| format!("{name} = {value}"))
                    .collect();
                let text = format!("case `{name}` cannot be used with {}", list.join(", "));
                if faults.iter().any(|fault| fault.line.is_some()) {
                    faults.insert(0, Fault::new(text));
                }
            }
            faults
        })
    }
}

impl Default for Library {
    fn default() -> Library {
        Library::new()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_file_of_reference_cases_is_compiled_in_and_loads() {
        let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("reference-cases");
        let mut on_disk: Vec<String> = WalkDir::new(&root)
            .into_iter()
            .filter_map(Result::ok)
            .filter(|entry| entry.file_type().is_file())
            .map(|entry| entry.path().strip_prefix(&root).unwrap().to_owned())
            .map(|path| path.with_extension("").to_string_lossy().replace('\\', "/"))
            .collect();
        on_disk.sort();
        let library = Library::new();
        assert_eq!(on_disk, library.names().collect::<Vec<_>>());
        for name in library.names() {
            let case = library.load(name, &Replacements::new());
            let case = case.unwrap_or_else(|faults| panic!("{name}: {}", faults[0]));
            assert_eq!(case.name, name);
            assert!(
                !case.hard_for.is_empty(),
                "{name} says not what it is hard for"
            );
        }
    }

    #[test]
    fn unknown_names_get_a_suggestion() {
        let fault =
            |name| Library::new().load(name, &Replacements::new()).unwrap_err()[0].to_string();
        assert!(fault("thermal/cold-room-defrots").contains("`thermal/cold-room-defrost`"));
        assert!(fault("cold-room-defrost").contains("did you mean `thermal/cold-room-defrost`"));
    }
}
