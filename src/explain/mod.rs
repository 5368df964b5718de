//! What to say of a result: one sentence for each thing that decides, with what to
//! change where that is known; and which step a case needs.

mod advice;
mod causes;
mod reasons;
mod settings;
mod steps;

pub use advice::{Asked, Computed, advice, measured_step};
pub use causes::{Cause, Kind, Parameters, Trouble, causes};
pub use reasons::{Place, fatal_finding, limit_broken, limit_hidden, order_reason, without_values};
pub use settings::{SLOPE, SPREAD, is_proportional, needed_setting, settings_text};
pub use steps::{
    Grid, MOST_COMPARED, MOST_PRODUCTS, MOST_STEPS, Question, Stepper, approx_stable_step,
    largest_step, run, steps,
};
