//! Siegmund's nu, the correction of a continuous boundary crossing for discrete time, and what follows
//! from it for a random walk that must stay below its start.

use crate::stats::dist::normal;

/// Below this argument the closed form loses digits; the first two terms of its series do not.
const SMALL: f64 = 1e-4;

/// nu(x) = (2/x²) exp(−2 Σ Φ(−x √n/2)/n), x ≥ 0, by the closed form (2/x)(Φ(x/2) − 1/2)/((x/2) Φ(x/2) +
/// φ(x/2)) (Siegmund and Yakir 2007): at most 2.2 % below the sum, near x = 1.2 (its own test), and
/// exact at both ends.
pub fn nu(x: f64) -> f64 {
    let half = 0.5 * x;
    if half < SMALL {
        return 1.0 - half * std::f64::consts::FRAC_PI_2.sqrt();
    }
    let below = normal::cdf(half);
    (below - 0.5) / (half * (half * below + normal::pdf(half)))
}

/// The probability that a walk of standard normal steps less `drift` each never exceeds its start:
/// drift √(2 nu(2 drift)), never more than 1 (Siegmund 1985, chapter VIII).
pub fn stays_below(drift: f64) -> f64 {
    (drift * (2.0 * nu(2.0 * drift)).sqrt()).min(1.0)
}
