#![no_main]
libfuzzer_sys::fuzz_target!(|bytes: &[u8]| stepgauge_fuzz::gzip(bytes));
