//! Audits what a time-stepping simulator wrote.
//!
//! stepgauge takes trajectory files of any tool, evaluates the exact solution of the
//! linear model that they claim to solve at the files' own time stamps, and decides:
//! how large is the error, does it shrink with the step at the promised order, and
//! does it pass. Where the file cannot support a decision, it says so.
//!
//! # Example
//!
//! ```
//! use stepgauge::Library;
//!
//! let case = Library::new().load("electrical/rc-constant", &Default::default()).unwrap();
//! let exact = case.exact().unwrap();
//! // The capacitor's voltage halfway through the window, to the last digit.
//! let middle = 0.5 * (exact.from().to_f64() + exact.to().to_f64());
//! let voltage = exact.at(middle).unwrap()[0];
//! assert!(voltage.bound <= 2e-16 * voltage.value.abs());
//! ```
//!
//! # Modules
//!
//! Data flows down this list, and no module imports one below it (`tests/it/tidy.rs`
//! holds the allowed edges).
//!
//! | module | holds |
//! | --- | --- |
//! | [`fault`] | complaints about input: place, text, cure |
//! | [`number`] | double-double and quad-double arithmetic, decimals, the matrix exponential |
//! | [`formula`] | the arithmetic of case files, over any number |
//! | [`case`] | linear models and the built-in library |
//! | [`exact`] | exact solutions with error bounds |
//! | [`trajectory`] | text files to rows, with what their digits resolve |
//! | [`submission`] | `submission.toml`, the search, columns and units |
//! | [`compare`] | errors, coverage, observed orders |
//! | [`method`] | the catalogue of integration methods, their order and stability |
//! | [`judge`] | verdicts |
//! | [`explain`] | sentences: what, where, how to mend it; which step a case needs |
//! | [`outcome`] | results as plain data |
//! | [`report`] | terminal, JSON, JUnit XML, Markdown, CSV |
//! | [`audit`] | the pipeline on one screen |
//! | [`against`] | an audit beside an earlier report: what became worse |
//! | [`parts`] | an audit divided among machines: the share of one, the reports of all joined |
//! | [`draft`] | files to a first `submission.toml`: likely case, columns, units, steps |
//! | [`cli`] | arguments, plan, printing, exit status |
//! | [`references`] | the published sources that doc comments and methods cite |

#![deny(missing_docs)]
#![forbid(unsafe_code)]

pub mod against;
pub mod audit;
pub mod case;
pub mod cli;
pub mod compare;
pub mod draft;
pub mod exact;
pub mod explain;
pub mod fault;
pub mod formula;
pub mod judge;
pub mod method;
pub mod number;
pub mod outcome;
pub mod parts;
pub mod references;
pub mod report;
pub mod submission;
pub mod trajectory;

pub use audit::{Rows, audit_rows};
pub use case::{Case, Library};
pub use exact::{Exact, Value};
pub use fault::Fault;
pub use judge::Verdict;
pub use submission::Claims;
