//! The upper tail R_k(w) of the range of k standard normals, as a Chebyshev table.
//!
//! R_k(w) = k ∫ phi(z) Phi(z)^(k-1) [1 - (1 - Phi(z-w)/Phi(z))^(k-1)] dz, z the largest of the k:
//! the upper tail itself, so nothing cancels. Trapezoid rule with step 1/8 outward from the larger
//! of the mode and w/2; the integrand is entire but for the zeros of Phi, and the error is below
//! rounding. What is tabulated is ln B(w), B = R_k exp(w^2/4): smooth and slowly varying.

use super::super::normal;

/// Step of the inner trapezoid rule; a power of two, so that lattice points are exact.
const STEP: f64 = 0.125;
/// Lattice reach: z from -10 to 42 in steps of 1/8.
const LOWEST: i32 = -80;
const HIGHEST: i32 = 336;
/// Up to here pieces are narrow, for the bend where R leaves 1.
const NARROW_TO: f64 = 14.0;
const NARROW: f64 = 0.5;
/// Beyond, ln B bends slowly. At 60 the tail is below the smallest f64.
const WIDE_TO: f64 = 60.0;
const WIDE: f64 = 2.0;
/// Coefficients per piece.
const TERMS: usize = 16;

/// ln(R_k(w) exp(w^2/4)) for w from 0 to 60, in Chebyshev pieces.
pub struct RangeTable {
    k: usize,
    pieces: Vec<[f64; TERMS]>,
}

impl RangeTable {
    /// Builds the table of `k` normals, k at least 2.
    pub(super) fn build(k: usize) -> Self {
        let lattice = Lattice::new(k);
        let narrow = (NARROW_TO / NARROW) as usize;
        let wide = ((WIDE_TO - NARROW_TO) / WIDE) as usize;
        let nodes = chebyshev_nodes();
        let pieces = (0..narrow)
            .map(|i| (i as f64 * NARROW, NARROW))
            .chain((0..wide).map(|i| (NARROW_TO + i as f64 * WIDE, WIDE)))
            .map(|(from, width)| {
                let values = nodes.map(|x| lattice.ln_scaled_tail(from + 0.5 * width * (x + 1.0)));
                chebyshev_fit(&values)
            })
            .collect();
        Self { k, pieces }
    }

    /// The number of normals.
    pub fn k(&self) -> usize {
        self.k
    }

    /// ln B(w) for w >= 0; beyond the table its last value, where R is 0 in any case.
    pub(super) fn ln_scaled(&self, w: f64) -> f64 {
        let w = w.min(WIDE_TO);
        let (index, x) = if w < NARROW_TO {
            let place = w * (1.0 / NARROW);
            let whole = place.floor();
            (whole as usize, 2.0 * (place - whole) - 1.0)
        } else {
            let place = (w - NARROW_TO) * (1.0 / WIDE);
            let whole = place.floor().min((WIDE_TO - NARROW_TO) / WIDE - 1.0);
            (
                (NARROW_TO / NARROW) as usize + whole as usize,
                2.0 * (place - whole) - 1.0,
            )
        };
        clenshaw(&self.pieces[index], x)
    }

    /// R_k(w), the tail for infinite degrees of freedom.
    pub(super) fn tail(&self, w: f64) -> f64 {
        if w > WIDE_TO {
            return 0.0;
        }
        (self.ln_scaled(w) - 0.25 * w * w).exp().min(1.0)
    }
}

/// What does not depend on w: the lattice with Phi and k phi Phi^(k-1) on it.
struct Lattice {
    k: f64,
    cdf: Vec<f64>,
    weight: Vec<f64>,
    mode: i32,
}

impl Lattice {
    fn new(k: usize) -> Self {
        let k = k as f64;
        let z = |j: i32| f64::from(j) * STEP;
        let cdf: Vec<f64> = (LOWEST..=HIGHEST).map(|j| normal::cdf(z(j))).collect();
        let weight: Vec<f64> = (LOWEST..=HIGHEST)
            .zip(&cdf)
            .map(|(j, &cdf)| {
                let tail = normal::sf(z(j));
                // ln Phi from the smaller side, for large k.
                let ln_cdf = if cdf < 0.5 { cdf.ln() } else { (-tail).ln_1p() };
                // Divided by the density of w/2's peak later; kept as a logarithm.
                -0.5 * z(j) * z(j) + (k - 1.0) * ln_cdf
            })
            .collect();
        let mut mode = 0;
        for j in LOWEST..=HIGHEST {
            if weight[(j - LOWEST) as usize] > weight[(mode - LOWEST) as usize] {
                mode = j;
            }
        }
        Self {
            k,
            cdf,
            weight,
            mode,
        }
    }

    /// ln(R_k(w) exp(w^2/4)).
    fn ln_scaled_tail(&self, w: f64) -> f64 {
        let centre = self.mode.max((0.5 * w / STEP) as i32);
        let mut sum = 0.0;
        let mut largest = 0.0_f64;
        for direction in [1, -1] {
            let mut j = if direction == 1 { centre } else { centre - 1 };
            while (LOWEST..=HIGHEST).contains(&j) {
                let term = self.term(j, w);
                sum += term;
                largest = largest.max(term);
                // Past the peak on either side terms fall faster than geometrically.
                if term < largest * 1e-19 {
                    break;
                }
                j += direction;
            }
        }
        (sum * STEP * self.k / (2.0 * std::f64::consts::PI).sqrt()).ln()
    }

    /// phi Phi^(k-1) [1 - (1 - rho)^(k-1)] exp(w^2/4) without the constant, at lattice point j.
    fn term(&self, j: i32, w: f64) -> f64 {
        let i = (j - LOWEST) as usize;
        let z = f64::from(j) * STEP;
        let exponent = self.weight[i] + 0.25 * w * w;
        let x = w - z;
        if x > 8.0 {
            // Phi(-x) = exp(-x^2/2) M(x): the exponentials are joined before they underflow.
            let joined = exponent - 0.5 * x * x;
            return (self.k - 1.0) * (joined).exp() * mills(x) / self.cdf[i];
        }
        let rho = normal::sf(x) / self.cdf[i];
        let inner = if rho >= 1.0 {
            1.0
        } else {
            -((self.k - 1.0) * (-rho).ln_1p()).exp_m1()
        };
        exponent.exp() * inner
    }
}

/// exp(x^2/2) P(Z > x) for x >= 8, by its continued fraction (Abramowitz and Stegun 26.2.14).
fn mills(x: f64) -> f64 {
    let mut fraction = x;
    for n in (1..40).rev() {
        fraction = x + f64::from(n) / fraction;
    }
    1.0 / (fraction * (2.0 * std::f64::consts::PI).sqrt())
}

fn chebyshev_nodes() -> [f64; TERMS] {
    std::array::from_fn(|i| (std::f64::consts::PI * (i as f64 + 0.5) / TERMS as f64).cos())
}

/// Coefficients of the interpolating polynomial at the Chebyshev nodes, the first one halved.
fn chebyshev_fit(values: &[f64; TERMS]) -> [f64; TERMS] {
    std::array::from_fn(|m| {
        let sum: f64 = values
            .iter()
            .enumerate()
            .map(|(i, v)| {
                v * (std::f64::consts::PI * m as f64 * (i as f64 + 0.5) / TERMS as f64).cos()
            })
            .sum();
        sum * if m == 0 { 1.0 } else { 2.0 } / TERMS as f64
    })
}

fn clenshaw(coefficients: &[f64; TERMS], x: f64) -> f64 {
    let (mut one, mut two) = (0.0, 0.0);
    for &c in coefficients[1..].iter().rev() {
        (one, two) = (2.0 * x * one - two + c, one);
    }
    x * one - two + coefficients[0]
}
