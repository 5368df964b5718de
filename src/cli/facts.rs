//! What the solution of a case says of it beside its equations.

use crate::case::Case;
use crate::exact::{Exact, approx_time_scales};
use crate::outcome::CaseFacts;

/// Jumps, closed form and time scales.
pub(super) fn facts(case: &Case, exact: &Exact) -> CaseFacts {
    let scales = approx_time_scales(case);
    CaseFacts {
        jumps: exact.jumps().collect(),
        closed_form_gap: exact.closed_form_gap(),
        shortest_time_constant: scales.time_constant,
        shortest_period: scales.period,
    }
}
