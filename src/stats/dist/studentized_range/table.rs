//! The upper tail R_k(w) of the range of k standard normals.
//!
//! R_k(w) = k ∫ phi(z) Phi(z)^(k-1) [1 - (1 - Phi(z-w)/Phi(z))^(k-1)] dz, z the largest of the k:
//! the upper tail itself, so nothing cancels. Trapezoid rule with step 1/8 outward from the larger
//! of the mode and w/2; the integrand is entire but for the zeros of Phi, and the error is below
//! rounding (tests/certified, all rows).

use super::super::normal;
use super::super::tail_table::TailTable;
use std::f64::consts::{FRAC_1_SQRT_2, PI};

/// Step of the inner trapezoid rule; a power of two, so that lattice points are exact.
const STEP: f64 = 0.125;
/// Lattice reach: z from -10 to 42 in steps of 1/8.
const LOWEST: i32 = -80;
const HIGHEST: i32 = 336;

/// The range of k normals, tabulated.
pub struct RangeTable {
    k: usize,
    pub(super) tail: TailTable,
}

impl RangeTable {
    /// Builds the table of `k` normals, k at least 2.
    pub(super) fn build(k: usize) -> Self {
        let lattice = Lattice::new(k);
        Self {
            k,
            tail: TailTable::build(k, move |w| lattice.ln_scaled_tail(w)),
        }
    }

    /// The number of normals.
    pub fn k(&self) -> usize {
        self.k
    }
}

/// What does not depend on w: the lattice with Phi and ln(phi Phi^(k-1)) on it.
struct Lattice {
    k: f64,
    inverse_cdf: Vec<f64>,
    ln_weight: Vec<f64>,
    weight: Vec<f64>,
    mode: i32,
}

impl Lattice {
    fn new(k: usize) -> Self {
        let k = k as f64;
        let points = (LOWEST..=HIGHEST).map(|j| f64::from(j) * STEP);
        let inverse_cdf = points.clone().map(|z| 1.0 / normal::cdf(z)).collect();
        // ln Phi from the smaller side, for large k.
        let ln_cdf = |z: f64| {
            if z < 0.0 {
                normal::cdf(z).ln()
            } else {
                (-normal::sf(z)).ln_1p()
            }
        };
        let ln_weight: Vec<f64> = points
            .map(|z| -0.5 * z * z + (k - 1.0) * ln_cdf(z))
            .collect();
        let weight = ln_weight.iter().map(|l| l.exp()).collect();
        let mode = (LOWEST..=HIGHEST)
            .max_by(|&a, &b| ln_weight[at(a)].total_cmp(&ln_weight[at(b)]))
            .unwrap_or(0);
        Self {
            k,
            inverse_cdf,
            ln_weight,
            weight,
            mode,
        }
    }

    /// ln(R_k(w) exp(w^2/4)).
    fn ln_scaled_tail(&self, w: f64) -> f64 {
        let centre = self.mode.max((0.5 * w / STEP) as i32);
        let up = self.one_side(w, centre, 1);
        let down = self.one_side(w, centre - 1, -1);
        ((up + down) * (STEP * self.k / (2.0 * PI).sqrt())).ln() + 0.25 * w * w * self.scale(w)
    }

    /// 1 where terms carry no factor exp(w^2/4), 0 where they do.
    fn scale(&self, w: f64) -> f64 {
        if w < FACTORED { 1.0 } else { 0.0 }
    }

    /// The sum from lattice point `j` in one direction, until terms no longer count.
    fn one_side(&self, w: f64, mut j: i32, direction: i32) -> f64 {
        let (mut sum, mut largest) = (0.0, 0.0_f64);
        while (LOWEST..=HIGHEST).contains(&j) {
            let term = self.term(j, w);
            sum += term;
            largest = largest.max(term);
            // Past the peak terms fall faster than geometrically.
            if term < largest * 1e-18 {
                break;
            }
            j += direction;
        }
        sum
    }

    /// phi Phi^(k-1) [1 - (1 - rho)^(k-1)] without the constant, times exp(w^2/4) from `FACTORED` on.
    fn term(&self, j: i32, w: f64) -> f64 {
        let i = at(j);
        let x = w - f64::from(j) * STEP;
        if w >= FACTORED {
            let exponent = self.ln_weight[i] + 0.25 * w * w;
            if x > 8.0 {
                // Phi(-x) = exp(-x^2/2) M(x): the exponentials are joined before they underflow.
                let joined = (exponent - 0.5 * x * x).exp();
                return (self.k - 1.0) * joined * normal::scaled_sf(x) * self.inverse_cdf[i];
            }
            return exponent.exp() * self.inner(normal::sf(x) * self.inverse_cdf[i]);
        }
        self.weight[i] * self.inner(plain_sf(x) * self.inverse_cdf[i])
    }

    /// 1 - (1 - rho)^(k-1).
    fn inner(&self, rho: f64) -> f64 {
        if rho >= 1.0 {
            1.0
        } else if rho < 1e-18 {
            (self.k - 1.0) * rho
        } else {
            -((self.k - 1.0) * (-rho).ln_1p()).exp_m1()
        }
    }
}

/// From here on terms are joined with exp(w^2/4) before they underflow.
const FACTORED: f64 = 24.0;

fn at(j: i32) -> usize {
    (j - LOWEST) as usize
}

/// [`normal::sf`] without its correction near the centre, where it is below the last digit.
fn plain_sf(x: f64) -> f64 {
    if x < 2.0 {
        0.5 * libm::erfc(x * FRAC_1_SQRT_2)
    } else {
        normal::sf(x)
    }
}
