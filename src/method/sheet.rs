//! The rows of a record laid out for the comparison, once for all methods.

use super::drive::Drive;
use super::laid::Laid;
use super::linear::Linear;
use super::record::{Piece, Record};

/// Pairs of rows that are compared where the spacing varies.
const MOST_PAIRS: usize = 120;

/// Rows laid out for the comparison: of the file, or the exact values in their place.
pub(super) struct Sheet {
    pub(super) record: Record,
    /// The largest magnitude of each channel.
    pub(super) all_peaks: Vec<f64>,
    /// Of each state, where all are there.
    pub(super) peaks: Vec<f64>,
    /// Stretches without a jump, or pairs of rows where the spacing varies; none where states
    /// are missing.
    pub(super) laid: Vec<Laid>,
}

impl Sheet {
    pub(super) fn new(linear: &Linear, record: Record, pieces: &[Piece]) -> Sheet {
        let drive = Drive::new(linear);
        let lay = |piece: Piece| Laid::new(linear, &drive, &record, piece);
        let laid = if record.spacing.is_some() {
            pieces.iter().filter_map(|piece| lay(*piece)).collect()
        } else {
            let pairs = pieces.iter().flat_map(|piece| {
                let rows = piece.start..piece.start + piece.rows - 1;
                rows.map(|start| Piece {
                    start,
                    rows: 2,
                    ..*piece
                })
            });
            let pairs: Vec<Piece> = pairs.collect();
            let stride = pairs.len() / MOST_PAIRS + 1;
            pairs.into_iter().step_by(stride).filter_map(lay).collect()
        };
        let all = record.peaks();
        let places = record.states(linear.size()).unwrap_or_default();
        Sheet {
            peaks: places.iter().map(|&place| all[place]).collect(),
            all_peaks: all,
            record,
            laid,
        }
    }
}
