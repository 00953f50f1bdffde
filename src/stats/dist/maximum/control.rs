//! The largest of several normals that share a control.
//!
//! T_i = lambda_i z + gamma_i e_i with z the control's deviation, gamma_i^2 = 1 - lambda_i^2. Given
//! z they are independent, so the upper tail is
//!
//! ∫ phi(z) {1 - prod_i [1 - P(T_i beyond w | z)]} dz,
//!
//! computed as such: 1 - prod(1 - s_i) = -expm1(sum log1p(-s_i)). Trapezoid rule in z.

use super::super::{OutOfReach, normal};
use super::Side;
use std::f64::consts::PI;

/// One group of equally sized sources.
struct Others {
    lambda: f64,
    gamma: f64,
    count: f64,
}

pub(super) struct Control {
    others: Vec<Others>,
    side: Side,
    step: f64,
    reach: f64,
}

/// Below this smallest gamma the trapezoid rule would take too many nodes.
const LEAST_GAMMA: f64 = 0.02;

impl Control {
    pub fn new(control: usize, others: &[usize], side: Side) -> Result<Self, OutOfReach> {
        if control == 0 || others.contains(&0) {
            return Err(OutOfReach::Argument(
                "a source without values cannot be compared",
            ));
        }
        let mut sorted = others.to_vec();
        sorted.sort_unstable();
        let others: Vec<Others> = sorted
            .chunk_by(|a, b| a == b)
            .map(|same| {
                let (n, n0) = (same[0] as f64, control as f64);
                Others {
                    lambda: (n / (n + n0)).sqrt(),
                    gamma: (n0 / (n + n0)).sqrt(),
                    count: same.len() as f64,
                }
            })
            .collect();
        let gamma = others.iter().fold(1.0, |g: f64, o| g.min(o.gamma));
        if gamma < LEAST_GAMMA {
            return Err(OutOfReach::Argument(
                "the control has too few values beside the others",
            ));
        }
        let reach = others.iter().fold(0.0, |l: f64, o| l.max(o.lambda));
        Ok(Self {
            others,
            side,
            step: (0.18 * gamma).min(0.125),
            reach,
        })
    }

    /// ln(R(w) exp(w^2/2)) for w >= 0, R the upper tail.
    pub fn ln_scaled_tail(&self, w: f64) -> f64 {
        // Given T_i = w, z is about lambda_i w with an sd below 1.
        let above = ((self.reach * w + 9.5) / self.step) as i32;
        let below = match self.side {
            Side::Both => 0,
            Side::Upper => -((9.5 / self.step) as i32),
        };
        let mut sum = 0.0;
        for j in below..=above {
            let weight = if self.side == Side::Both && j > 0 {
                2.0
            } else {
                1.0
            };
            sum += weight * self.term(f64::from(j) * self.step, w);
        }
        (sum * self.step / (2.0 * PI).sqrt()).ln()
    }

    /// exp((w^2 - z^2)/2) {1 - prod_i [1 - s_i]}, small s_i joined with the exponential.
    fn term(&self, z: f64, w: f64) -> f64 {
        let exponent = 0.5 * (w - z) * (w + z);
        let (mut joined, mut ln_inside, mut largest) = (0.0, 0.0, 0.0_f64);
        for other in &self.others {
            let far = (w - other.lambda * z) / other.gamma;
            let near = (w + other.lambda * z) / other.gamma;
            let sides: &[f64] = match self.side {
                Side::Both => &[far, near],
                Side::Upper => &[far],
            };
            let mut s = 0.0;
            for &x in sides {
                s += normal::sf(x);
                joined += other.count * joined_tail(exponent, x);
            }
            largest = largest.max(s);
            ln_inside += other.count * (-s.min(1.0)).ln_1p();
        }
        if largest < 1e-17 {
            return joined;
        }
        -exponent.exp() * ln_inside.exp_m1()
    }

    /// P(all T_i <= w), for w <= 0 of a one-sided maximum.
    pub fn lower_tail(&self, w: f64) -> f64 {
        let side = (9.5 / self.step) as i32;
        let term = |j: i32| {
            let z = f64::from(j) * self.step;
            let product: f64 = self
                .others
                .iter()
                .map(|o| normal::cdf((w - o.lambda * z) / o.gamma).powf(o.count))
                .product();
            normal::pdf(z) * product
        };
        self.step * (-side..=side).map(term).sum::<f64>()
    }
}

/// exp(exponent) P(Z > x), without underflow in between.
fn joined_tail(exponent: f64, x: f64) -> f64 {
    if x > 8.0 {
        (exponent - 0.5 * x * x).exp() * normal::scaled_sf(x)
    } else if exponent < 600.0 {
        exponent.exp() * normal::sf(x)
    } else {
        0.0
    }
}
