//! sinc^2 in single precision, written so that the compiler evaluates several pixels at once.

/// a b + c, in one rounding where the processor has an instruction for it.
#[inline(always)]
pub(super) fn fused<const FUSED: bool>(a: f32, b: f32, c: f32) -> f32 {
    if FUSED { a.mul_add(b, c) } else { a * b + c }
}

/// sinc^2(pi t) = (sin(pi t)/(pi t))^2 for |t| below 10^5, to 3e-7.
///
/// sin^2(pi t) has the period 1, so f = t - n with |f| <= 1/2 has the same sin^2(pi f) = (pi f)^2 R(f^2), with R fitted in
/// Chebyshev polynomials of degree 5 on [0, 1/4] (computed here; off by 1e-8 at most before rounding).
#[inline(always)]
pub(super) fn sinc_squared<const FUSED: bool>(t: f32) -> f32 {
    // adding and taking away 1.5 2^23 rounds to the nearest integer
    const ROUND: f32 = 12_582_912.0;
    const TINY: f32 = 1e-30;
    let f = t - ((t + ROUND) - ROUND);
    let z = f * f;
    let mut r = -0.340_093_94;
    for c in [1.322_251_4, -3.049_916_3, 4.329_17, -3.289_865_5, 1.0] {
        r = fused::<FUSED>(r, z, c);
    }
    r * (z + TINY) / fused::<FUSED>(t, t, TINY)
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::f64::consts::PI;

    #[test]
    fn agrees_with_double_precision() {
        let mut worst: f64 = 0.0;
        for j in -200_000..=200_000 {
            let t = (f64::from(j) * 1.37e-3) as f32;
            let x = PI * f64::from(t);
            let exact = if x == 0.0 { 1.0 } else { (x.sin() / x).powi(2) };
            for value in [sinc_squared::<false>(t), sinc_squared::<true>(t)] {
                worst = worst.max((f64::from(value) - exact).abs());
            }
        }
        assert!(worst < 3e-7, "{worst}");
        assert!(sinc_squared::<false>(9e4) < 1e-9);
    }
}
