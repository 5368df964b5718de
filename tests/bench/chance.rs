//! Chance that is the same in every run.

/// A number from zero to one that looks like chance: the top bits of two rounds of multiplying by odd
/// numbers and folding.
pub fn scatter(number: u64) -> f64 {
    let fold = |x: u64| x ^ (x >> 29);
    let mixed = fold(number.wrapping_add(1).wrapping_mul(0xd134_2543_de82_ef95));
    let mixed = fold(mixed.wrapping_mul(0xaf25_1af3_b0f0_25b5));
    (mixed >> 11) as f64 / 2f64.powi(53)
}
