//! What a file most likely looks like as a whole, from a part of it: a file of moderate size is
//! read once and kept, of a larger one a few stretches are read. A guess is never the last
//! word: whoever goes through all rows with it looks whether it has come true.

use std::fs::File;
use std::io::{Read, Seek, SeekFrom};

use super::batch::{Batch, Columns, Known};
use super::layout::{Layout, Stated};
use super::open::{Origin, Source};
use super::pieces::{Piece, last_line_end};
use super::survey::{Selection, Survey, Surveyor};
use crate::fault::{Fault, Result};

/// A guess, and all rows where there are few.
pub(crate) struct Sample {
    pub survey: Survey,
    pub batches: Option<Vec<Batch>>,
}

/// A file up to this size is read at once.
const WHOLE_BYTES: usize = 512 * 1024;
/// The same for a table.
const WHOLE_ROWS: u64 = 10_000;
/// Stretches of a larger file beside its beginning, and their size.
const STRETCHES: u64 = 16;
const STRETCH_BYTES: u64 = 64 * 1024;

impl Source {
    /// Looks at a part of the rows.
    ///
    /// # Errors
    /// A file that cannot be read.
    pub(crate) fn sample_rows(
        &self,
        layout: &Layout,
        of: &Selection,
        stated: &Stated,
    ) -> Result<Sample> {
        if let Some(table) = self.table() {
            return self.sample_table(table, layout, of, stated);
        }
        let columns = Columns::new(layout, of, Known::default());
        let (mut batches, mut read) = (Vec::new(), 0);
        let mut take = |batch, bytes| {
            batches.push(batch);
            read += bytes;
            Ok(read <= WHOLE_BYTES)
        };
        let whole = match &layout.long {
            Some(long) => self.long_batches(long, of, &mut take),
            None => self.text_batches(layout, &columns, &mut take),
        }?;
        let mut surveyor = Surveyor::new(of.channels.len());
        // Of a larger file the beginning counts no more than any other stretch.
        let beginning = if whole { batches.len() } else { 1 };
        batches
            .iter()
            .take(beginning)
            .for_each(|batch| surveyor.add(batch));
        // Rows of a long table cannot be cut out of its middle.
        if !whole && layout.long.is_none() {
            self.stretches(&mut |text| {
                let piece = Piece { text, last: false };
                // A line that is too long is complained of when its turn comes.
                if let Ok(batch) = columns.parse(&piece) {
                    surveyor.interrupt();
                    surveyor.add(&batch);
                }
            })?;
        }
        Ok(Sample {
            survey: surveyor.conclude(layout, of, stated),
            batches: whole.then_some(batches),
        })
    }

    /// Of a table with more than a few rows the survey is made first: it is quickly read.
    fn sample_table(
        &self,
        table: &dyn super::columns::Columns,
        layout: &Layout,
        of: &Selection,
        stated: &Stated,
    ) -> Result<Sample> {
        let whole = table.rows() <= WHOLE_ROWS;
        let mut batches = Vec::new();
        let survey = self.survey(layout, of, stated, &mut |batch| {
            if whole {
                batches.push(batch);
            }
        })?;
        Ok(Sample {
            survey,
            batches: whole.then_some(batches),
        })
    }

    /// Whole lines from here and there in a file that can be read from anywhere.
    fn stretches(&self, each: &mut dyn FnMut(Vec<u8>)) -> Result<()> {
        let size = self.size();
        for number in 1..=STRETCHES {
            let from = (size * number / STRETCHES).saturating_sub(STRETCH_BYTES);
            let mut text = Vec::new();
            match &self.origin {
                Origin::Memory(bytes, _) => {
                    let from = from as usize;
                    let to = (from + STRETCH_BYTES as usize).min(bytes.len());
                    text.extend_from_slice(&bytes[from.min(to)..to]);
                }
                // Packed text can be read from its beginning only.
                Origin::Packed(..) | Origin::Table(..) => return Ok(()),
                Origin::File(path) => {
                    let read = |text: &mut Vec<u8>| {
                        let mut file = File::open(path)?;
                        file.seek(SeekFrom::Start(from))?;
                        file.take(STRETCH_BYTES).read_to_end(text)
                    };
                    read(&mut text).map_err(|error| Fault::io(path, &error))?;
                }
            }
            let begin = memchr::memchr(b'\n', &text).map(|end| end + 1);
            let end = last_line_end(&text);
            if let (Some(begin), Some(end)) = (begin, end)
                && begin < end
            {
                text.truncate(end);
                text.drain(..begin);
                each(text);
            }
        }
        Ok(())
    }
}
