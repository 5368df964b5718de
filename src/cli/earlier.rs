//! The earlier report of `--against`: from the disk, and beside an outcome.

use std::io::Read;
use std::path::Path;

use super::args::Before;
use super::parts::whole;
use crate::against::{WORSE_BY, compare};
use crate::fault::{Fault, Result};
use crate::outcome::Changes;
use crate::report::{AuditReport, read_report};

/// Largest report that is read: that of some ten thousand submissions.
const MOST_BYTES: u64 = 1 << 28;

/// An earlier report to compare with.
pub(super) struct Earlier {
    report: AuditReport,
    name: String,
    worse_by: f64,
}

impl Earlier {
    /// Reads it, if one is named: before the audit, which may take its time.
    ///
    /// # Errors
    /// A file that is not there or too large, and what is wrong with its text.
    pub(super) fn read(before: &Before) -> Result<Option<Earlier>> {
        let Some(path) = before.against.as_deref() else {
            return Ok(None);
        };
        let text = text(path).map_err(|fault| fault.in_file(path))?;
        Ok(Some(Earlier {
            report: read_report(&text)
                .and_then(whole)
                .map_err(|fault| fault.in_file(path))?,
            name: path.to_string_lossy().into_owned(),
            worse_by: before.worse_by.unwrap_or(WORSE_BY),
        }))
    }

    /// What changed since.
    pub(super) fn changes(&self, now: &AuditReport) -> Changes {
        compare(&self.report, now, &self.name, self.worse_by)
    }
}

/// The text of a report.
///
/// # Errors
/// As for [`Earlier::read`].
pub(super) fn text(path: &Path) -> Result<String> {
    let io = |error: std::io::Error| {
        let fault = Fault::io(path, &error);
        match error.kind() {
            std::io::ErrorKind::NotFound => {
                fault.help("name a report that `audit --write FILE.json` has written")
            }
            _ => fault,
        }
    };
    let file = std::fs::File::open(path).map_err(io)?;
    let mut bytes = Vec::new();
    file.take(MOST_BYTES + 1)
        .read_to_end(&mut bytes)
        .map_err(io)?;
    if bytes.len() as u64 > MOST_BYTES {
        let fault = Fault::new(format!("has more than {MOST_BYTES} bytes"));
        return Err(fault.help("audit fewer submissions at once, with a report for each"));
    }
    String::from_utf8(bytes).map_err(|error| {
        let valid = error.utf8_error().valid_up_to();
        let line = error.as_bytes()[..valid].iter().filter(|&&b| b == b'\n');
        Fault::new("this is not UTF-8 text")
            .help("give a .json report that `audit --write` of this version wrote")
            .at(line.count() as u64 + 1, 1)
    })
}
