//! What each target does with its bytes. Nothing is asserted beyond what a user relies on:
//! no panic, no endless work, no memory without end, and complaints that can be printed.

#![forbid(unsafe_code)]

mod files;
mod texts;
mod whole;

pub use files::{digits, gzip, mat, npy, npz, text, zstd};
pub use texts::{case, formula, plan, rules, submission};
pub use whole::whole;

/// Complaints are written out, since that is where places are looked up.
fn told(faults: &[stepgauge::Fault]) {
    assert!(!faults.is_empty(), "refused without a word");
    for fault in faults {
        assert!(!fault.to_string().is_empty());
    }
}
