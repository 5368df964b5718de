//! Exact values as CSV: `t` and the channels, in the shortest digits that read back.

use std::io::{self, Write};

/// Writes a header and rows of values.
pub struct ValueWriter<W: Write> {
    csv: csv::Writer<W>,
    cells: Vec<String>,
}

impl<W: Write> ValueWriter<W> {
    /// Writes the header.
    ///
    /// # Errors
    /// What the stream says.
    pub fn new(stream: W, channels: &[&str]) -> io::Result<ValueWriter<W>> {
        let mut csv = csv::WriterBuilder::new().from_writer(stream);
        csv.write_record(std::iter::once(&"t").chain(channels))
            .map_err(kept)?;
        Ok(ValueWriter {
            csv,
            cells: Vec::new(),
        })
    }

    /// Writes one row.
    ///
    /// # Errors
    /// What the stream says.
    pub fn row(&mut self, time: f64, values: &[f64]) -> io::Result<()> {
        self.cells.clear();
        self.cells.push(shortest(time));
        self.cells
            .extend(values.iter().map(|&value| shortest(value)));
        self.csv.write_record(&self.cells).map_err(kept)?;
        Ok(())
    }

    /// Hands what is left to the stream.
    ///
    /// # Errors
    /// What the stream says.
    pub fn finish(mut self) -> io::Result<()> {
        self.csv.flush()
    }
}

/// The error of the stream itself, so that a closed pipe is still known as one.
pub(super) fn kept(error: csv::Error) -> io::Error {
    match error.into_kind() {
        csv::ErrorKind::Io(error) => error,
        other => io::Error::other(format!("{other:?}")),
    }
}

/// The shortest digits that read back equal, with an exponent where they would be
/// many.
pub fn shortest(value: f64) -> String {
    let size = value.abs();
    if value == 0.0 {
        "0".to_owned()
    } else if (1e-5..1e16).contains(&size) {
        format!("{value}")
    } else {
        format!("{value:e}")
    }
}
