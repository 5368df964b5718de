//! Readers against hostile headers.
