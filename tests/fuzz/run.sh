#!/bin/sh
# Builds the targets with coverage and runs one of them:
#     tests/fuzz/run.sh TARGET [options of libFuzzer]
# New inputs go to target/fuzz/corpus/TARGET, what fails to target/fuzz/found. A sanitizer of
# addresses is left out: no unsafe code is ours, and it would hide how much memory is used.
set -eu
here=$(cd "$(dirname "$0")" && pwd)
target=$1
shift
out=${STEPGAUGE_FUZZ_OUT:-$here/../../target/fuzz}
machine=$(rustc -vV | sed -n 's/^host: //p')
# Only what is built for the machine by name is instrumented, not what builds it.
CARGO_TARGET_DIR=$out RUSTFLAGS="--cfg fuzzing -Cpasses=sancov-module\
 -Cllvm-args=-sanitizer-coverage-level=4 -Cllvm-args=-sanitizer-coverage-inline-8bit-counters\
 -Cllvm-args=-sanitizer-coverage-pc-table -Cllvm-args=-sanitizer-coverage-trace-compares" \
    cargo +nightly build --quiet -j1 --release --target "$machine" --manifest-path "$here/Cargo.toml"
mkdir -p "$out/corpus/$target" "$out/found"
# What the program prints is of no use here; findings are printed by the fuzzer itself.
exec "$out/$machine/release/$target" -rss_limit_mb=256 -timeout=2 -max_len=8192 -close_fd_mask=1 \
    "-artifact_prefix=$out/found/$target-" "$@" "$out/corpus/$target" "$here/seeds/$target"
