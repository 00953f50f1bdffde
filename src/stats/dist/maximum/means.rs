//! The largest absolute deviation of k equally sized means from their common mean.
//!
//! The deviations are k independent normals given that they add up to zero. Three and four sources
//! have integrals with positive terms only; for more, the density at zero of the sum of k normals
//! cut off at ±h is inverted from its characteristic function psi^k, psi = e - tau with e =
//! exp(-t^2/2) and tau what lies beyond the cut. The first-order part is 2k P(Z > h') in closed form,
//! h' = h sqrt(k/(k-1)), and only the rest is integrated, so that small tails keep their digits:
//!
//! P(max > h') = 2k P(Z > h') - sqrt(k/2pi) ∫ [(e - tau)^k - e^k + k e^(k-1) tau] dt.

use super::super::normal;
use super::super::tail_table::TailTable;
use std::f64::consts::{PI, SQRT_2};

/// Beyond this h' the first-order part is the whole: what is left is below e^-43 of it.
const FIRST_ORDER: f64 = 12.0;

pub(super) fn table(k: usize) -> TailTable {
    match k {
        3 => TailTable::build(k, |w| three(w / SQRT_2).ln()),
        4 => TailTable::build(k, |w| four(w / SQRT_2).ln()),
        _ => {
            let faddeeva = Faddeeva::new();
            TailTable::build(k, move |w| many(k, w / SQRT_2, &faddeeva).ln())
        }
    }
}

/// R(h') exp(h'^2/2) outside a regular hexagon: (6/pi) ∫_0^(1/sqrt 3) exp(-h'^2 u^2/2)/(1+u^2) du.
fn three(h: f64) -> f64 {
    6.0 / PI
        * integrate(0.0, 1.0 / 3.0_f64.sqrt(), 24, |u| {
            (-0.5 * h * h * u * u).exp() / (1.0 + u * u)
        })
}

/// Two pair sums x and -x, each with both members within the cut: x is standard normal.
fn four(h: f64) -> f64 {
    let cut = h * 0.75_f64.sqrt();
    let scaled = |exponent: f64, y: f64| {
        if y > 8.0 {
            (exponent - 0.5 * y * y).exp() * normal::scaled_sf(y)
        } else {
            exponent.exp() * normal::sf(y)
        }
    };
    let inside = integrate(0.0, 2.0 * cut, 8 + (4.0 * cut) as usize, |x| {
        let y = SQRT_2 * (cut - 0.5 * x);
        let s = 2.0 * normal::sf(y);
        2.0 * scaled(0.5 * (h - x) * (h + x), y) * (2.0 - s)
    });
    let outside = scaled(0.5 * h * h, 2.0 * cut);
    2.0 * (outside + inside / (2.0 * PI).sqrt())
}

/// R(h') exp(h'^2/2) for k >= 5 by inversion.
fn many(k: usize, h: f64, faddeeva: &Faddeeva) -> f64 {
    let count = k as f64;
    if h > FIRST_ORDER {
        return 2.0 * count * normal::scaled_sf(h);
    }
    let first = 2.0 * count * normal::sf(h);
    let cut = h * ((count - 1.0) / count).sqrt();
    // The step resolves the cut sum, and leaves Gaussian aliases below the last digit.
    let band = (1.02 * count * cut).max((2.0 * count * (40.0 + 0.5 * h * h)).sqrt());
    let step = 2.0 * PI / band;
    let amplitude = 2.0 * normal::pdf(cut);
    let rest = |t: f64| second_order(k, t, amplitude * faddeeva.beyond(cut, t));
    let mut sum = 0.5 * rest(0.0);
    let mut t = step;
    loop {
        sum += rest(t);
        let decayed = 0.5 * (count - 2.0) * t * t > 42.0;
        let left = (count * (amplitude / t).ln()).exp() * t / (count - 1.0);
        if decayed && left < 1e-15 * first.min(1.0) {
            break;
        }
        t += step;
    }
    let tail = first - (count / (2.0 * PI)).sqrt() * 2.0 * step * sum;
    tail * (0.5 * h * h).exp()
}

/// (e - tau)^k - e^k + k e^(k-1) tau, by its series where the terms would cancel.
fn second_order(k: usize, t: f64, tau: f64) -> f64 {
    let e = (-0.5 * t * t).exp();
    let count = k as f64;
    let ratio = tau / e;
    if (count * ratio).abs() < 0.1 {
        let mut term = -count * ratio;
        let mut sum = 0.0;
        for m in 2..=12.min(k) {
            term *= -ratio * (count - m as f64 + 1.0) / m as f64;
            sum += term;
        }
        return e.powi(k as i32) * sum;
    }
    (e - tau).powi(k as i32) - e.powi(k as i32) + count * e.powi(k as i32 - 1) * tau
}

/// The complex error function by Weideman's (1994) rational expansion, SIAM J. Numer. Anal. 31.
struct Faddeeva {
    scale: f64,
    coefficients: [f64; TERMS],
}

const TERMS: usize = 44;

impl Faddeeva {
    fn new() -> Self {
        let scale = (TERMS as f64 / SQRT_2).sqrt();
        let points = 2 * TERMS as i32;
        let sample = |j: i32| {
            let t = scale * (0.5 * PI * f64::from(j) / f64::from(points)).tan();
            (-t * t).exp() * (scale * scale + t * t)
        };
        let coefficient = |n: usize| {
            let cos = |j: i32| (n as f64 * PI * f64::from(j) / f64::from(points)).cos();
            (1 - points..points)
                .map(|j| sample(j) * cos(j))
                .sum::<f64>()
                / f64::from(2 * points)
        };
        Self {
            scale,
            coefficients: std::array::from_fn(|i| coefficient(i + 1)),
        }
    }

    /// Re[exp(ith) ∫_0^∞ exp(-(h - it) u - u^2/2) du] for h >= 0: the transform of the normal beyond
    /// the cut h, without its factor phi(h).
    fn beyond(&self, h: f64, t: f64) -> f64 {
        // w(z) at z = (t + ih)/sqrt 2; L - iz and L + iz in parts.
        let (x, y) = (t / SQRT_2, h / SQRT_2);
        let low = (self.scale + y, -x);
        let z = divide((self.scale - y, x), low);
        let mut sum = (0.0, 0.0);
        for &c in self.coefficients.iter().rev() {
            sum = multiply(sum, z);
            sum.0 += c;
        }
        let square = multiply(low, low);
        let first = divide((2.0 * sum.0, 2.0 * sum.1), square);
        let second = divide((1.0 / PI.sqrt(), 0.0), low);
        let w = (first.0 + second.0, first.1 + second.1);
        let (sin, cos) = (t * h).sin_cos();
        (PI / 2.0).sqrt() * (w.0 * cos - w.1 * sin)
    }
}

type Complex = (f64, f64);

fn multiply(a: Complex, b: Complex) -> Complex {
    (a.0 * b.0 - a.1 * b.1, a.0 * b.1 + a.1 * b.0)
}

fn divide(a: Complex, b: Complex) -> Complex {
    let size = b.0 * b.0 + b.1 * b.1;
    (
        (a.0 * b.0 + a.1 * b.1) / size,
        (a.1 * b.0 - a.0 * b.1) / size,
    )
}

/// Gauss and Legendre's rule with eight nodes on each of `panels` equal panels.
fn integrate(from: f64, to: f64, panels: usize, f: impl Fn(f64) -> f64) -> f64 {
    const NODES: [(f64, f64); 4] = [
        (0.183_434_642_495_649_8, 0.362_683_783_378_362),
        (0.525_532_409_916_329, 0.313_706_645_877_887_27),
        (0.796_666_477_413_626_7, 0.222_381_034_453_374_48),
        (0.960_289_856_497_536_3, 0.101_228_536_290_376_26),
    ];
    let half = 0.5 * (to - from) / panels as f64;
    let mut sum = 0.0;
    for panel in 0..panels {
        let centre = from + (2 * panel + 1) as f64 * half;
        for (x, weight) in NODES {
            sum += weight * (f(centre - half * x) + f(centre + half * x));
        }
    }
    sum * half
}
