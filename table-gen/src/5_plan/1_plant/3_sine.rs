//! Sine and cosine of many angles.
//!
//! The standard library's call the platform's library one angle at a time: half of the simulation's time, and results that
//! may differ between machines. This one has no branch, so a loop over it vectorises, and rounds the same way everywhere.

use std::f64::consts::FRAC_2_PI;

/// pi/2 in two parts; the first has 33 bits, so that its product with a small whole number is exact (Cody and Waite,
/// Software Manual for the Elementary Functions, 1980, ch. 8).
const HALF_PI: [f64; 2] = [1.570_796_326_734_125_6, 6.077_100_506_506_192e-11];
/// Adding and taking away this rounds to a whole number and leaves that number in the lowest bits.
const ROUND: f64 = 6_755_399_441_055_744.0;

/// `(sin x, cos x)` to 3e-16 for `|x|` up to 1000; further out the error grows with `|x|`.
#[inline(always)]
pub(super) fn sin_cos(x: f64) -> (f64, f64) {
    let shifted = x * FRAC_2_PI + ROUND;
    let turns = shifted - ROUND;
    let quarter = shifted.to_bits();
    let r = (x - turns * HALF_PI[0]) - turns * HALF_PI[1];
    let r2 = r * r;
    // Taylor series: on |r| <= pi/4 the first term left out is below 1e-17.
    let sin = r + r * r2 * series(r2, &SIN);
    let cos = 1.0 + r2 * series(r2, &COS);
    let (s, c) = if quarter & 1 == 0 {
        (sin, cos)
    } else {
        (cos, sin)
    };
    let s = if quarter & 2 == 0 { s } else { -s };
    let c = if quarter.wrapping_add(1) & 2 == 0 {
        c
    } else {
        -c
    };
    (s, c)
}

/// `(-1)^k / (2k + 1)!`, k = 1..=8.
const SIN: [f64; 8] = [
    -1.0 / 6.0,
    1.0 / 120.0,
    -1.0 / 5040.0,
    1.0 / 362_880.0,
    -1.0 / 39_916_800.0,
    1.0 / 6_227_020_800.0,
    -1.0 / 1_307_674_368_000.0,
    1.0 / 355_687_428_096_000.0,
];
/// `(-1)^k / (2k)!`, k = 1..=8.
const COS: [f64; 8] = [
    -1.0 / 2.0,
    1.0 / 24.0,
    -1.0 / 720.0,
    1.0 / 40_320.0,
    -1.0 / 3_628_800.0,
    1.0 / 479_001_600.0,
    -1.0 / 87_178_291_200.0,
    1.0 / 20_922_789_888_000.0,
];

#[inline(always)]
fn series(x: f64, coefficients: &[f64; 8]) -> f64 {
    coefficients.iter().rev().fold(0.0, |sum, c| sum * x + c)
}

#[cfg(test)]
mod tests {
    use super::sin_cos;

    #[test]
    fn agrees_with_the_standard_library() {
        for k in -20_000..=20_000 {
            let x = f64::from(k) * 0.012_345_678_9;
            let (sin, cos) = sin_cos(x);
            assert!(
                (sin - x.sin()).abs() < 3e-16 && (cos - x.cos()).abs() < 3e-16,
                "{x}: {sin} {cos}"
            );
        }
    }
}
