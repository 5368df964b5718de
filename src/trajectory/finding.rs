//! Faults of a file: what kind, at which line, and whether the file can still pass.

/// What is wrong.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
#[allow(missing_docs)]
pub enum Kind {
    TimeNotIncreasing,
    RepeatedStamp,
    MissingRows,
    NotANumber,
    RowLength,
    CutOffLine,
    WindowNotCovered,
    TooFewRows,
    ColumnMissing,
    EmptyFile,
}

impl Kind {
    /// The word in reports.
    pub fn word(self) -> &'static str {
        match self {
            Kind::TimeNotIncreasing => "time-not-increasing",
            Kind::RepeatedStamp => "repeated-stamp",
            Kind::MissingRows => "missing-rows",
            Kind::NotANumber => "not-a-number",
            Kind::RowLength => "row-length",
            Kind::CutOffLine => "cut-off-line",
            Kind::WindowNotCovered => "window-not-covered",
            Kind::TooFewRows => "too-few-rows",
            Kind::ColumnMissing => "column-missing",
            Kind::EmptyFile => "empty-file",
        }
    }
}

/// One fault of a file.
#[derive(Clone, Debug, PartialEq)]
pub struct Finding {
    /// What is wrong.
    pub kind: Kind,
    /// The line it is seen at, counted from one.
    pub line: Option<u64>,
    /// In words.
    pub text: String,
    /// True where the file cannot pass because of it.
    pub fatal: bool,
}

/// Findings of one file: the first few of each kind, and how many there were.
#[derive(Clone, Debug, Default)]
pub struct Findings {
    list: Vec<Finding>,
    counts: Vec<(Kind, u64)>,
}

/// How many findings of one kind are kept in full.
const KEPT_OF_A_KIND: u64 = 3;

impl Findings {
    /// Takes note of a fault that the file cannot pass with.
    pub fn fatal(&mut self, kind: Kind, line: impl Into<Option<u64>>, text: impl Into<String>) {
        self.add(Finding {
            kind,
            line: line.into(),
            text: text.into(),
            fatal: true,
        });
    }

    /// Takes note of a fault that does not decide; of one that is seen in every other row the
    /// words are found only as long as they are kept.
    pub fn note(
        &mut self,
        kind: Kind,
        line: impl Into<Option<u64>>,
        text: impl FnOnce() -> String,
    ) {
        let known = self.counts.iter_mut().find(|(known, _)| *known == kind);
        if let Some((_, count)) = known.filter(|(_, count)| *count >= KEPT_OF_A_KIND) {
            *count += 1;
            return;
        }
        self.add(Finding {
            kind,
            line: line.into(),
            text: text(),
            fatal: false,
        });
    }

    fn add(&mut self, finding: Finding) {
        let kind = finding.kind;
        let place = self.counts.iter().position(|(known, _)| *known == kind);
        let place = place.unwrap_or_else(|| {
            self.counts.push((kind, 0));
            self.counts.len() - 1
        });
        self.counts[place].1 += 1;
        // A fatal one is never crowded out by others of its kind.
        let kept_fatal = self.list.iter().any(|f| f.kind == kind && f.fatal);
        if self.counts[place].1 <= KEPT_OF_A_KIND || finding.fatal && !kept_fatal {
            self.list.push(finding);
        }
    }

    /// Takes over those of another pass.
    pub fn append(&mut self, other: Findings) {
        for finding in other.into_list() {
            self.add(finding);
        }
    }

    /// True where something of this kind was found.
    pub fn has(&self, kind: Kind) -> bool {
        self.counts.iter().any(|(known, _)| *known == kind)
    }

    /// True where one of them keeps the file from passing.
    pub fn any_fatal(&self) -> bool {
        self.list.iter().any(|finding| finding.fatal)
    }

    /// The findings in order of their lines; where more of a kind were seen than
    /// kept, its last one says so.
    pub fn into_list(self) -> Vec<Finding> {
        let Findings { mut list, counts } = self;
        list.sort_by_key(|finding| finding.line);
        for (kind, count) in counts {
            let kept = list.iter().filter(|finding| finding.kind == kind).count() as u64;
            if let Some(last) = list.iter_mut().rfind(|finding| finding.kind == kind)
                && count > kept
            {
                last.text += &format!(" (and {} more like this)", count - kept);
            }
        }
        list
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn only_the_first_few_are_kept_but_all_are_counted() {
        let mut findings = Findings::default();
        for line in 0..10 {
            findings.note(Kind::RepeatedStamp, line, || "again".to_owned());
        }
        findings.fatal(Kind::RepeatedStamp, 11, "doubled");
        assert!(findings.any_fatal());
        let list = findings.into_list();
        assert_eq!(list.len(), 4);
        assert_eq!(list[3].text, "doubled (and 7 more like this)");
    }
}
