use stepgauge::number::{Decimal, Double};

/// A decimal number of any length, to double-double; what lies below 1e-290 is zero.
pub fn read(text: &str) -> Double {
    let (mantissa, exponent) = text.split_once('e').unwrap_or((text, "0"));
    let exponent: i64 = exponent.parse().unwrap();
    let digits = mantissa
        .find(|c: char| ('1'..='9').contains(&c))
        .unwrap_or(0);
    let cut: String = mantissa.chars().take(digits + 34).collect();
    // Whole digits that were cut off move the point.
    let point = mantissa.find('.').unwrap_or(mantissa.len());
    let lost = point.saturating_sub(cut.len()) as i64;
    if exponent + lost < -280 {
        return Double::ZERO;
    }
    Decimal::parse(&format!("{cut}e{}", exponent + lost))
        .unwrap()
        .to_double()
}

/// Distance of an `f64` from the truth in units in the last place of the truth.
pub fn ulps(value: f64, truth: Double) -> f64 {
    let size = truth.to_f64().abs();
    let ulp = size.next_up() - size;
    (Double::from(value) - truth).abs().to_f64() / ulp
}

#[test]
fn long_decimals_are_read() {
    assert_eq!(
        read("147.8666224463701526967").to_f64(),
        147.866_622_446_370_15
    );
    assert_eq!(read("-1.5e-3").to_f64(), -0.0015);
    assert_eq!(read("0.0000000000000000000000001").to_f64(), 1e-25);
    let long = "1234567890123456789012345678901234567890123";
    assert_eq!(read(long).to_f64(), 1.234_567_890_123_456_8e42);
    assert_eq!(read("1e-700").to_f64(), 0.0);
    assert_eq!(ulps(1.0f64.next_up(), Double::ONE), 1.0);
}
