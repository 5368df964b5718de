//! Text behind gzip or zstd: a plain stream of what is inside, without a temporary
//! file and without memory that grows with it.
//!
//! All members and frames of a file are read. A file that is cut off, has something
//! behind its last member, does not agree with its checksums or unpacks to far more than its
//! size ends in an error.

use std::io::{BufRead, BufReader, Cursor, Error, ErrorKind, Read, Result as IoResult};

use flate2::bufread::MultiGzDecoder;
use ruzstd::decoding::errors::{FrameDecoderError, ReadFrameHeaderError};
use ruzstd::decoding::{BlockDecodingStrategy, FrameDecoder};

use super::budget::{Budget, Within};
use super::columns::{Data, Format};
use crate::fault::Result;

/// Opens packed text; the stream complains while it is read.
///
/// # Errors
/// The file cannot be opened, or the format is no packed text.
pub fn open(data: &Data, format: Format) -> Result<Box<dyn Read + Send>> {
    let bytes = BufReader::new(data.handle()?);
    let name = format.name();
    let budget = Budget::of(data.length()?);
    match format {
        Format::Gzip => {
            let text = Named(MultiGzDecoder::new(bytes), name);
            Ok(Box::new(Within(text, budget)))
        }
        Format::Zstd => Ok(Box::new(Within(Named(Frames::new(bytes), name), budget))),
        other => Err(data.named(other.refusal())),
    }
}

/// A stream whose complaints say what it is.
struct Named<R>(R, &'static str);

impl<R: Read> Read for Named<R> {
    fn read(&mut self, buffer: &mut [u8]) -> std::io::Result<usize> {
        self.0.read(buffer).map_err(|error| {
            let text = format!("the {} is damaged or cut off: {error}", self.1);
            std::io::Error::new(error.kind(), text)
        })
    }
}

/// All frames of a zstd file, one after the other.
///
/// The library decodes one frame, and neither compares its checksum nor its stated
/// size: both are compared here.
struct Frames<R> {
    bytes: R,
    decoder: FrameDecoder,
    /// True within a frame.
    inside: bool,
    /// Bytes that the frame has given.
    given: u64,
    failed: bool,
}

impl<R: BufRead> Frames<R> {
    fn new(bytes: R) -> Frames<R> {
        Frames {
            bytes,
            decoder: FrameDecoder::new(),
            inside: false,
            given: 0,
            failed: false,
        }
    }

    /// Begins the next frame with content; false at the end of the file.
    fn begin(&mut self) -> IoResult<bool> {
        while !self.bytes.fill_buf()?.is_empty() {
            let mut magic = [0; 4];
            self.bytes.read_exact(&mut magic)?;
            let mut frame = Cursor::new(magic).chain(&mut self.bytes);
            match self.decoder.reset(&mut frame) {
                Ok(()) => {
                    self.inside = true;
                    self.given = 0;
                    return Ok(true);
                }
                Err(FrameDecoderError::ReadFrameHeaderError(ReadFrameHeaderError::SkipFrame {
                    length,
                    ..
                })) => {
                    let length = u64::from(length);
                    let mut skipped = (&mut self.bytes).take(length);
                    if std::io::copy(&mut skipped, &mut std::io::sink())? != length {
                        return Err(ErrorKind::UnexpectedEof.into());
                    }
                }
                Err(error) => return Err(Error::other(error.to_string())),
            }
        }
        Ok(false)
    }

    /// Compares what the frame gave with what it states.
    fn end(&mut self) -> IoResult<()> {
        self.inside = false;
        let stated = self.decoder.content_size();
        if stated != 0 && stated != self.given {
            return Err(Error::other("a frame does not have its stated size"));
        }
        let stated = self.decoder.get_checksum_from_data();
        if stated.is_some() && stated != self.decoder.get_calculated_checksum() {
            return Err(Error::other("damaged: a checksum does not agree"));
        }
        Ok(())
    }

    fn next(&mut self, buffer: &mut [u8]) -> IoResult<usize> {
        loop {
            if !self.inside && !self.begin()? {
                return Ok(0);
            }
            while self.decoder.can_collect() == 0 && !self.decoder.is_finished() {
                self.decoder
                    .decode_blocks(&mut self.bytes, BlockDecodingStrategy::UptoBlocks(1))
                    .map_err(|error| Error::other(error.to_string()))?;
            }
            let count = self.decoder.read(buffer)?;
            self.given += count as u64;
            if count > 0 {
                return Ok(count);
            }
            self.end()?;
        }
    }
}

impl<R: BufRead> Read for Frames<R> {
    fn read(&mut self, buffer: &mut [u8]) -> IoResult<usize> {
        if buffer.is_empty() {
            return Ok(0);
        }
        // Whoever reads on after an error must not be told that the text is over.
        if self.failed {
            return Err(Error::other("the data before are damaged"));
        }
        let result = self.next(buffer);
        self.failed = result.is_err();
        result
    }
}
