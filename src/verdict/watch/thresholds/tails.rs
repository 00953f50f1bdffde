//! Normal and t tails as the thresholds use them.

use crate::stats::dist::{normal, t};

/// From here on ln of the tail comes from its asymptotic series, to 1e-4.
const FAR: f64 = 5.0;

/// ln P(Z > z), finite far beyond where the tail itself underflows; minus infinity at infinity.
pub fn ln_sf(z: f64) -> f64 {
    if z < FAR {
        return normal::sf(z).ln();
    }
    let y = 1.0 / (z * z);
    // Abramowitz and Stegun 26.2.12.
    let series = 1.0 - y * (1.0 - 3.0 * y * (1.0 - 5.0 * y * (1.0 - 7.0 * y)));
    -0.5 * z * z + (series / (z * (2.0 * std::f64::consts::PI).sqrt())).ln()
}

/// The t quantile with the tail probability of the normal `z`: sigma is estimated with `df` degrees.
pub fn t_of_normal(z: f64, df: f64) -> f64 {
    if df.is_infinite() {
        return z;
    }
    // A tail that underflows asks for a threshold beyond any in use: z itself is as good.
    t::isf(normal::sf(z), df).unwrap_or(z)
}
