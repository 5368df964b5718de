//! The rows of one piece with everything about them that does not depend on a method: laid
//! out once, since every method at every number of steps is held against them.

use super::drive::Drive;
use super::linear::{Linear, Side};
use super::record::{Piece, Record};
use super::scale::{Rows, Scale};

/// Rows of a piece, every state of them in order, as flat lists row by row.
#[derive(Clone, Debug)]
pub(super) struct Laid {
    /// Number of the first row in the file.
    pub(super) first: u64,
    pub(super) times: Vec<f64>,
    pub(super) values: Vec<f64>,
    pub(super) doubts: Vec<f64>,
    /// How fast each state moves about a row.
    pub(super) rates: Vec<f64>,
    /// What the inputs are made of, see [`Drive::state`].
    pub(super) drive: Vec<f64>,
    /// How fast each state moves at most.
    pub(super) steepest: Vec<f64>,
    pub(super) scale: Scale,
}

impl Laid {
    /// `None` where the record does not hold every state.
    pub(super) fn new(
        linear: &Linear,
        drive: &Drive,
        record: &Record,
        piece: Piece,
    ) -> Option<Laid> {
        let places = record.states(linear.size())?;
        let rows = Rows { record, places };
        let window = &record.windows[piece.window];
        let range = piece.start..piece.start + piece.rows;
        let all = |of: &dyn Fn(usize) -> Vec<f64>| range.clone().flat_map(of).collect();
        let drive = |row| drive.state(linear, window.times[row], Side::After, 0.0);
        Some(Laid {
            first: window.first + piece.start as u64,
            times: window.times[range.clone()].to_vec(),
            values: all(&|row| rows.values(window, row)),
            doubts: all(&|row| rows.doubts(window, row)),
            rates: all(&|row| rows.rates(window, piece, row)),
            drive: all(&drive),
            steepest: rows.steepest(window, piece),
            scale: rows.scale(linear, window, piece),
        })
    }

    pub(super) fn rows(&self) -> usize {
        self.times.len()
    }
}
