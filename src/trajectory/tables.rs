//! Files of numbers in columns as if they had been printed to 17 digits: the same numbers as text
//! of that precision gives, and the same findings.

use super::batch::{Batch, Line, Odd};
use super::columns::{Columns, Precision};
use super::layout::{Layout, Separator};
use super::resolution::Resolution;
use super::scan::scan;
use super::survey::{Selection, Survey};
use crate::fault::{Fault, Result};
use crate::number::Double;

/// The layout of a table: a row is a line, and names stand beside the columns.
pub(super) fn layout(table: &dyn Columns) -> Result<Option<Layout>> {
    let heads = table.heads();
    if heads.len() > super::MOST_COLUMNS {
        let text = format!(
            "{} columns, at most {} are read",
            heads.len(),
            super::MOST_COLUMNS
        );
        return Err(Fault::new(text));
    }
    let named = heads.iter().any(|head| head.name.is_some());
    let names = heads
        .iter()
        .map(|head| head.name.clone().unwrap_or_default());
    let layout = Layout {
        separator: Separator::Columns,
        decimal_comma: false,
        comments: Vec::new(),
        columns: heads.len(),
        first_row: 1,
        last_is_empty: false,
        names: named.then(|| names.collect()),
        units: None,
        words: false,
        long: None,
    };
    Ok((table.rows() > 0).then_some(layout))
}

/// Every batch of rows, in order.
pub(super) fn batches(
    table: &dyn Columns,
    of: &Selection,
    each: &mut dyn FnMut(Batch) -> Result<()>,
) -> Result<()> {
    let wanted: Vec<usize> = [of.time].iter().chain(&of.channels).copied().collect();
    table.read(&wanted, &mut |block| {
        each(batch(block, &wanted, table.heads().len()))
    })
}

fn batch(block: &[Vec<f64>], wanted: &[usize], columns: usize) -> Batch {
    let (times, channels) = match block {
        [times, channels @ ..] => (&times[..], channels),
        [] => (&[][..], &[][..]),
    };
    let mut batch = Batch::new(channels.len(), times.len() * channels.len());
    for (row, &time) in times.iter().enumerate() {
        // No infinity counts as a number, as in text.
        let values = channels.iter().map(|channel| channel[row]);
        let start = batch.values.len();
        let finite = |x: f64| if x.is_finite() { x } else { f64::NAN };
        batch.values.extend(values.map(finite));
        let strange = [finite(time)]
            .into_iter()
            .chain(batch.values[start..].iter().copied());
        let strange = strange.zip(wanted).find(|(value, _)| value.is_nan());
        if let Some((_, &column)) = strange {
            batch.odd.push(Odd {
                columns,
                strange: Some((column, String::new())),
            });
        }
        batch.rows.push(line(row, finite(time), strange.is_some()));
    }
    batch.lines = times.len() as u64;
    batch
}

/// A stamp as its 17 digits have it.
fn line(row: usize, time: f64, is_odd: bool) -> Line {
    let text = format!("{time:.16e}");
    match scan(text.as_bytes(), b'.') {
        Some((stamp, _)) => Line::of_stamp(row as u32, is_odd, &stamp),
        None => {
            let mut line = Line::without_stamp(row as u32, is_odd);
            line.time = time;
            line.moment = Double::from(time);
            line
        }
    }
}

/// What is known of a table's digits without looking at any number.
pub(super) fn stored(table: &dyn Columns, survey: &mut Survey, digits: Option<u8>) {
    let heads = table.heads();
    let stored = |column: usize| match heads.get(column).map(|head| head.precision) {
        Some(Precision::Half) => Some(Resolution::Half),
        Some(Precision::Single) => Some(Resolution::Single),
        _ => None,
    };
    let whole = |column: usize| heads.get(column).is_some_and(|head| head.whole);
    let resolution = |column: usize| match (stored(column), digits) {
        (Some(resolution), _) => resolution,
        (None, Some(digits)) if digits < 17 => Resolution::Significant(digits),
        // As their text shows it.
        (None, _) if whole(column) => Resolution::Decimals(0),
        (None, _) => Resolution::Full,
    };
    survey.time = stored(survey.selection.time).unwrap_or(Resolution::Full);
    let channels = survey.selection.channels.clone();
    survey.channels = channels.iter().map(|&column| resolution(column)).collect();
    survey.known.time = true;
    survey.known.channels = vec![true; channels.len()];
}
