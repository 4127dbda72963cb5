//! sinc^2 in single precision, written so that the compiler evaluates several pixels at once.

/// (sin(x)/x)^2 for |x| below 10^5, to 3e-7.
///
/// sin^2 has the period pi, so r = x - n pi with |r| <= pi/2 has the same sin^2 = r^2 p(r^2)^2; p is the Taylor series
/// of sin(r)/r to r^12. pi is split in two so that n times its first part is exact.
#[inline(always)]
pub(super) fn sinc_squared(x: f32) -> f32 {
    // adding and taking away 1.5 2^23 rounds to the nearest integer
    const ROUND: f32 = 12_582_912.0;
    const PI_HIGH: f32 = 3.140_625;
    const PI_LOW: f32 = 9.676_536e-4;
    const TINY: f32 = 1e-30;
    let n = (x * std::f32::consts::FRAC_1_PI + ROUND) - ROUND;
    let r = (x - n * PI_HIGH) - n * PI_LOW;
    let z = r * r;
    let mut p = 1.0 / 6_227_020_800.0;
    for c in [-1.0 / 39_916_800.0, 1.0 / 362_880.0, -1.0 / 5040.0, 1.0 / 120.0, -1.0 / 6.0, 1.0] {
        p = p * z + c;
    }
    p * p * (z + TINY) / (x * x + TINY)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn agrees_with_double_precision() {
        let mut worst: f64 = 0.0;
        for j in -200_000..=200_000 {
            let x = f64::from(j) * 1.37e-3;
            let exact =
                if x == 0.0 { 1.0 } else { (f64::from(x as f32).sin() / f64::from(x as f32)).powi(2) };
            worst = worst.max((f64::from(sinc_squared(x as f32)) - exact).abs());
        }
        assert!(worst < 3e-7, "{worst}");
        assert!(sinc_squared(9e4) < 1e-9);
    }
}
