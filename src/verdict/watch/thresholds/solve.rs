//! The one solver of this folder: where ln(rate / asked) reaches 0 as its threshold grows.

/// Relative accuracy of a threshold: far below what a rate is known to.
const ACCURACY: f64 = 1e-7;

/// The x within `low` and `high` at which `f` falls through 0; the nearer end when it does not. By the
/// secant method inside a shrinking bracket, from `start` with the slope −`start` that logarithms of
/// normal tails have.
pub fn falling_root((mut low, mut high): (f64, f64), start: f64, f: impl Fn(f64) -> f64) -> f64 {
    let mut x = start.clamp(low, high);
    let mut slope = -x.max(1.0);
    let mut before: Option<(f64, f64)> = None;
    for _ in 0..100 {
        let value = f(x);
        if value > 0.0 {
            low = x;
        } else {
            high = x;
        }
        if let Some((x0, value0)) = before {
            let secant = (value - value0) / (x - x0);
            if secant.is_finite() && secant < 0.0 {
                slope = secant;
            }
        }
        before = Some((x, value));
        let next = x - value / slope;
        // Also when the value is infinite or no number.
        let next = if next > low && next < high {
            next
        } else {
            0.5 * (low + high)
        };
        if (next - x).abs() <= ACCURACY * x {
            return next;
        }
        x = next;
    }
    x
}
