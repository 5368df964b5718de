//! Integration methods: a catalogue of coefficients, what each is on paper (order,
//! stability), what each would have written on a linear model, and from that the evidence
//! which method and step wrote a file.
//!
//! `catalogue` and `scheme` hold the coefficients, `stability` and `characteristic` what
//! follows from them alone; `linear` and `recurrence` turn a method, a step and a case into
//! matrices; `record` is what is kept of a file and `evidence` lays the two beside each other;
//! `growth` reads the factor of a step off the rows without knowing the method.

mod against;
mod catalogue;
mod characteristic;
mod crossing;
mod drive;
mod estimate;
mod evidence;
mod exactly;
mod exponential;
mod growth;
mod iterated;
mod jumps;
mod laid;
mod leg;
mod linear;
mod march;
mod powers;
mod precise;
mod ranks;
mod record;
mod recurrence;
mod scale;
mod scheme;
mod search;
mod sheet;
mod shelf;
mod stability;
mod starts;
mod trial;
mod variant;

pub use catalogue::{METHODS, Method, find, find_all};
pub use characteristic::Characteristic;
pub use drive::Drive;
pub use evidence::{Evidence, Family, Skipped, Tried, evidence, evidence_of, fitting};
pub use growth::{Growth, Likeness, Unmeasured, growth, likeness};
pub use iterated::{Form, Iterated, forms};
pub use leg::Leg;
pub use linear::{Linear, Side, Signal};
pub use march::{March, NEAR, Sides, add_forcing};
pub use ranks::rank_orders;
pub use record::{LATER_ROWS, Piece, Record, START_ROWS, Window, next_wanted, windows};
pub use recurrence::{Node, Ranks, Reading, Recurrence};
pub use scheme::{Coefficients, Scheme, Slopes, Stages};
pub use search::MOST_STEPS;
pub use shelf::Shelf;
pub use stability::{
    Rational, Stability, amplification, approx_stability, approx_stable_length, of_stages, roots,
};
pub use trial::{Fit, Room, Trial};
