//! A Gaussian-like upper tail R(w), kept as a table of ln(R(w) exp(w^2/4)) for w from 0 to 60.
//!
//! The factor takes out the decay, so that what is tabulated is smooth and varies little; it is
//! also what the outer integral over the chi wants ([`super::outer`]). Each piece is a polynomial of
//! degree 13 through Chebyshev nodes, evaluated by Estrin's scheme.

use std::array::from_fn;
use std::f64::consts::PI;
use std::sync::{LazyLock, OnceLock};

/// Up to here pieces are narrow, for the bend where R leaves 1.
const NARROW_TO: f64 = 14.0;
const NARROW: f64 = 0.5;
const NARROW_PIECES: usize = 28;
/// Beyond, ln(R exp(w^2/4)) bends ever more slowly. At 60 R is below the smallest `f64`.
const WIDE: [f64; 6] = [14.0, 18.0, 24.0, 32.0, 44.0, 60.0];
const PIECES: usize = NARROW_PIECES + WIDE.len() - 1;
/// Coefficients per piece.
const TERMS: usize = 14;

/// ln(R(w) exp(w^2/4)) in polynomial pieces, each fitted when it is first asked for.
///
/// A piece is a pure function of the table, so it does not matter which caller fits it.
pub(super) struct TailTable {
    pieces: [OnceLock<[f64; TERMS]>; PIECES],
    ln_scaled: Box<LnScaled>,
    /// Of how many variables R is the maximum: the more, the sharper R bends away from 1.
    pub variables: usize,
}

type LnScaled = dyn Fn(f64) -> f64 + Send + Sync;

impl TailTable {
    /// Tabulates `ln_scaled`, the function w -> ln(R(w) exp(w^2/4)) of a maximum of `variables`.
    pub fn build(variables: usize, ln_scaled: impl Fn(f64) -> f64 + Send + Sync + 'static) -> Self {
        Self {
            pieces: [const { OnceLock::new() }; PIECES],
            ln_scaled: Box::new(ln_scaled),
            variables,
        }
    }

    #[inline]
    fn piece(&self, index: usize) -> &[f64; TERMS] {
        self.pieces[index].get_or_init(|| {
            let (from, width) = if index < NARROW_PIECES {
                (index as f64 * NARROW, NARROW)
            } else {
                let from = WIDE[index - NARROW_PIECES];
                (from, WIDE[index - NARROW_PIECES + 1] - from)
            };
            FIT.piece(&self.ln_scaled, from, width)
        })
    }

    /// ln(R(w) exp(w^2/4)) for w >= 0; beyond 60 the value there, where R is 0 in any case.
    #[inline]
    pub fn ln_scaled(&self, w: f64) -> f64 {
        if w < NARROW_TO {
            let place = w * (1.0 / NARROW);
            let whole = place as usize;
            polynomial(self.piece(whole), 2.0 * (place - whole as f64) - 1.0)
        } else {
            self.beyond(w.min(WIDE[5]))
        }
    }

    #[cold]
    fn beyond(&self, w: f64) -> f64 {
        let i = (1..5).find(|&i| w < WIDE[i]).unwrap_or(5);
        let x = 2.0 * (w - WIDE[i - 1]) / (WIDE[i] - WIDE[i - 1]) - 1.0;
        polynomial(self.piece(NARROW_PIECES + i - 1), x)
    }

    /// R(w) itself.
    pub fn tail(&self, w: f64) -> f64 {
        if w > WIDE[5] {
            return 0.0;
        }
        (self.ln_scaled(w) - 0.25 * w * w).exp().min(1.0)
    }
}

static FIT: LazyLock<Fit> = LazyLock::new(Fit::new);

/// From values at Chebyshev nodes to the coefficients of powers.
struct Fit {
    nodes: [f64; TERMS],
    to_powers: [[f64; TERMS]; TERMS],
}

impl Fit {
    fn new() -> Self {
        let angle = |i: usize| PI * (i as f64 + 0.5) / TERMS as f64;
        let chebyshev: [[f64; TERMS]; TERMS] = chebyshev_powers();
        let to_powers = from_fn(|power| {
            from_fn(|i| {
                (0..TERMS)
                    .map(|m| {
                        let weight = if m == 0 { 1.0 } else { 2.0 } / TERMS as f64;
                        weight * (m as f64 * angle(i)).cos() * chebyshev[m][power]
                    })
                    .sum()
            })
        });
        Self {
            nodes: from_fn(|i| angle(i).cos()),
            to_powers,
        }
    }

    /// Interpolates about the value of the first node, which keeps the sums small.
    fn piece(&self, f: impl Fn(f64) -> f64, from: f64, width: f64) -> [f64; TERMS] {
        let values = self.nodes.map(|x| f(from + 0.5 * width * (x + 1.0)));
        let base = values[TERMS / 2];
        let mut powers = from_fn(|power| {
            self.to_powers[power]
                .iter()
                .zip(values)
                .map(|(c, v)| c * (v - base))
                .sum()
        });
        powers[0] += base;
        powers
    }
}

/// Coefficients of the powers in each Chebyshev polynomial.
fn chebyshev_powers() -> [[f64; TERMS]; TERMS] {
    let mut t = [[0.0; TERMS]; TERMS];
    t[0][0] = 1.0;
    t[1][1] = 1.0;
    for m in 2..TERMS {
        for power in 0..TERMS {
            let shifted = if power == 0 {
                0.0
            } else {
                2.0 * t[m - 1][power - 1]
            };
            t[m][power] = shifted - t[m - 2][power];
        }
    }
    t
}

#[inline(always)]
fn polynomial(c: &[f64; TERMS], x: f64) -> f64 {
    let x2 = x * x;
    let x4 = x2 * x2;
    let a = (c[0] + c[1] * x) + x2 * (c[2] + c[3] * x);
    let b = (c[4] + c[5] * x) + x2 * (c[6] + c[7] * x);
    let d = (c[8] + c[9] * x) + x2 * (c[10] + c[11] * x);
    let e = c[12] + c[13] * x;
    (a + x4 * b) + (x4 * x4) * (d + x4 * e)
}
