//! How much may come out of a compressed file. A file of a megabyte can be made to unpack to
//! gigabytes, which would keep an audit busy for as long as the submitter likes; what
//! simulators write does not, since its times go on.

use std::io::{Error, Read, Result};
use std::sync::Arc;
use std::sync::atomic::{AtomicU64, Ordering};

/// So much may come out of any file.
const FREE_BYTES: u64 = 16 << 20;
/// And so many times its size: more than a model at rest with 64 states, of which only the
/// time goes on. Deflate reaches 1032.
const MOST_TIMES: u64 = 200;

/// What may come out of one file, shared by all that is packed in it.
#[derive(Clone, Debug)]
pub(super) struct Budget {
    most: u64,
    spent: Arc<AtomicU64>,
}

impl Budget {
    /// For a file of so many bytes.
    pub fn of(packed: u64) -> Budget {
        Budget {
            most: FREE_BYTES.saturating_add(packed.saturating_mul(MOST_TIMES)),
            spent: Arc::default(),
        }
    }

    /// Counts bytes that have come out, or that the file says will.
    ///
    /// # Errors
    /// More than may come out; the text says how to mend it.
    pub fn spend(&self, bytes: u64) -> std::result::Result<(), String> {
        let before = self.spent.fetch_add(bytes, Ordering::Relaxed);
        // The sum of sizes that a file makes up may go beyond all numbers.
        if before
            .checked_add(bytes)
            .is_some_and(|all| all <= self.most)
        {
            return Ok(());
        }
        self.spent.store(self.most, Ordering::Relaxed);
        Err(format!(
            "unpacks to more than {} bytes, far beyond its size: hand it in unpacked",
            self.most
        ))
    }
}

/// A stream that ends in an error once the budget is spent.
pub(super) struct Within<R>(pub R, pub Budget);

impl<R: Read> Read for Within<R> {
    fn read(&mut self, buffer: &mut [u8]) -> Result<usize> {
        let count = self.0.read(buffer)?;
        self.1.spend(count as u64).map_err(Error::other)?;
        Ok(count)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn all_that_is_allowed_and_one_byte_more() {
        let most = FREE_BYTES + 10 * MOST_TIMES;
        let budget = Budget::of(10);
        assert_eq!(budget.spend(most - 1), Ok(()));
        // Shared by all that is packed in one file.
        assert_eq!(budget.clone().spend(1), Ok(()));
        let told = budget.spend(1).unwrap_err();
        let wanted = format!("unpacks to more than {most} bytes, far beyond its size");
        assert!(told.starts_with(&wanted), "{told}");
        assert!(Budget::of(u64::MAX).spend(u64::MAX).is_ok());
        let budget = Budget::of(0);
        assert!(budget.spend(u64::MAX).is_err() && budget.spend(u64::MAX).is_err());
    }

    #[test]
    fn a_stream_ends_in_an_error_where_the_budget_does() {
        let read = |bytes: u64| {
            let stream = std::io::repeat(0).take(bytes);
            std::io::copy(&mut Within(stream, Budget::of(0)), &mut std::io::sink())
        };
        assert_eq!(read(FREE_BYTES).unwrap(), FREE_BYTES);
        assert!(read(FREE_BYTES + 1).is_err());
    }
}
