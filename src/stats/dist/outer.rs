//! The average of a tail R(q s) over s = chi/sqrt(df): the outer integral of every studentized
//! maximum (range, Dunnett, analysis of means), by the trapezoid rule.
//!
//! With s = exp(x), completing the square moves the peak of the integrand to y = 0 whatever q is.
//! With B(w) = R(w) exp(w^2/4), which varies little,
//!
//! E R(q s) = (1 + q^2/2df)^(-df/2) sqrt(df/pi) e^-d ∫ exp(-df (e^2y - 1 - 2y)/2) B(w0 e^y) dy,
//!
//! w0 = q / sqrt(1 + q^2/2df), d Stirling's error of df/2. The rule converges geometrically on it.
//! From df 40 on the step follows the peak's width; below, one grid serves every df, densely over
//! the bend of R and ever more widely to the left, where a small df decays slowly.

use super::kernel::{deviance, stirling_error};
use super::tail_table::TailTable;
use std::f64::consts::PI;
use std::sync::LazyLock;

/// Step of the trapezoid rule in widths of the peak. Error of a normal peak: 2 exp(-2 pi^2/step^2).
const STEP: f64 = 0.55;
/// Below this df one grid serves all df. Its step by the number of variables: the more, the sharper
/// the bend (0.068 gives 4e-13 at k 60, 0.06 gives 8e-13 at k 200 and 7e-9 at k 1000).
const BROAD_DF: f64 = 40.0;
const BROAD_STEPS: [(usize, f64); 3] = [(64, 0.064), (250, 0.05), (usize::MAX, 0.033)];
/// Grids up to this df, each for a range of a factor sqrt(2); above, nodes are found in passing.
const GRIDS: usize = 9;
const GRID_DF: f64 = 640.0;
/// Exponents below this are beneath the last digit.
const CUT: f64 = -37.0;
/// Room for the nodes of any grid that count.
const ROOM: usize = 192;

/// E R(q s) for q > 0, 1 <= df < infinity, R from its table.
pub(super) fn tail(table: &TailTable, q: f64, df: f64) -> f64 {
    let z = q * q / (2.0 * df);
    if z.is_infinite() {
        return 0.0;
    }
    let w0 = q / (1.0 + z).sqrt();
    let ln_front = -0.5 * df * z.ln_1p() - stirling_error(0.5 * df);
    let sum = if df >= GRID_DF {
        passing(table, w0, df)
    } else {
        grid_for(table.variables, df).sum(table, w0, df)
    };
    (df / PI).sqrt() * exp(ln_front) * sum
}

/// E f(s) for a function between 0 and 1 that is not a Gaussian tail, absolute error about 1e-13.
pub(super) fn average(variables: usize, df: f64, f: impl Fn(f64) -> f64) -> f64 {
    if df == f64::INFINITY {
        return f(1.0);
    }
    let front = (df / PI).sqrt() * exp(-stirling_error(0.5 * df));
    if df < GRID_DF {
        return front * grid_for(variables, df).average(df, f);
    }
    let step = 0.5 * STEP / (2.0 * df).sqrt();
    let term = |j: i32| {
        let y = f64::from(j) * step;
        exp(-0.5 * df * excess(y)) * f(y.exp())
    };
    front * step * (-36..=36).map(term).sum::<f64>()
}

/// Nodes of a rule in y, with what does not depend on the table and on df.
struct Grid {
    step: f64,
    /// Nodes below y = 0; their half excess falls, that of the others rises.
    below: usize,
    /// exp(y).
    growth: Vec<f64>,
    /// (e^2y - 1 - 2y)/2.
    half_excess: Vec<f64>,
    /// ln dy/dt.
    ln_slope: Vec<f64>,
}

static NARROW: LazyLock<Vec<Grid>> = LazyLock::new(|| {
    let grid = |i: usize| {
        let largest_df = BROAD_DF * 2.0_f64.powf(0.5 * i as f64);
        Grid::new(STEP / (2.0 * largest_df).sqrt(), 1.6, |_| 0.0)
    };
    (1..=GRIDS).map(grid).collect()
});

/// y = t - a exp(-3t), which reaches y = -40 near t = -3. Below `SMALL_DF` w0 is below 2.9, the bend of
/// R lies to the right of y = 0, and the wide steps may begin nearer.
static BROAD: LazyLock<[[Grid; 3]; 2]> = LazyLock::new(|| {
    [0.08, 0.004]
        .map(|a| BROAD_STEPS.map(|(_, step)| Grid::new(step, 3.1, |t| a * (-3.0 * t).exp())))
});

const SMALL_DF: f64 = 4.0;

fn grid_for(variables: usize, df: f64) -> &'static Grid {
    if df < BROAD_DF {
        let step = BROAD_STEPS
            .iter()
            .take_while(|(most, _)| variables > *most)
            .count();
        return &BROAD[usize::from(df >= SMALL_DF)][step];
    }
    // A sharp bend wants the finer grid of a larger df.
    let finer = if variables > BROAD_STEPS[1].0 { 3 } else { 0 };
    let index = (2.0 * (df / BROAD_DF).log2()) as usize + finer;
    &NARROW[index.min(GRIDS - 1)]
}

impl Grid {
    /// Equal steps in t from -reach to reach, y = t - fall(t), fall exponential with rate 3 or none.
    fn new(step: f64, reach: f64, fall: impl Fn(f64) -> f64) -> Self {
        let mut grid = Self {
            step,
            below: 0,
            growth: Vec::new(),
            half_excess: Vec::new(),
            ln_slope: Vec::new(),
        };
        let side = (reach / step) as i32;
        for j in -side..=side {
            let t = f64::from(j) * step;
            let y = t - fall(t);
            let u = (2.0 * y).exp_m1();
            let ratio = if y < -0.2 { (2.0 * y).exp() } else { 1.0 + u };
            grid.below += usize::from(y < 0.0);
            grid.growth.push(y.exp());
            grid.half_excess.push(0.5 * deviance(u, ratio));
            grid.ln_slope.push((3.0 * fall(t)).ln_1p());
        }
        grid
    }

    fn sum(&self, table: &TailTable, w0: f64, df: f64) -> f64 {
        let most = -CUT / df;
        let (below, above) = self.half_excess.split_at(self.below);
        let from = below.partition_point(|e| *e > most);
        let to = (self.below + above.partition_point(|e| *e <= most)).min(from + ROOM);
        let mut ln_terms = [f64::NEG_INFINITY; ROOM];
        let nodes = self.growth[from..to]
            .iter()
            .zip(&self.half_excess[from..to]);
        for ((term, (growth, excess)), slope) in
            ln_terms.iter_mut().zip(nodes).zip(&self.ln_slope[from..to])
        {
            *term = table.ln_scaled(w0 * growth) + slope - df * excess;
        }
        self.step * sum_of_exp(&ln_terms[..(to - from).next_multiple_of(2)])
    }

    fn average(&self, df: f64, f: impl Fn(f64) -> f64) -> f64 {
        let mut sum = 0.0;
        for (j, excess) in self.half_excess.iter().enumerate() {
            let ln_weight = self.ln_slope[j] - df * excess;
            if ln_weight > CUT {
                sum += exp(ln_weight) * f(self.growth[j]);
            }
        }
        self.step * sum
    }
}

/// df >= 640: the peak is nearly normal, and its excess a short series.
///
/// It leans to the left: with a = sqrt(-CUT/df) the exponent reaches `CUT` near -a (1 + a/3 + a^2/7)
/// and before a (1 - a/3 + a^2/8).
fn passing(table: &TailTable, w0: f64, df: f64) -> f64 {
    let step = STEP / (2.0 * df).sqrt();
    let a = (-CUT / df).sqrt();
    let left = (a * (1.0 + a * (1.0 / 3.0 + a / 7.0)) / step) as usize + 1;
    let right = (a * (1.0 - a * (1.0 / 3.0 - a / 8.0)) / step) as usize + 1;
    let mut ln_terms = [f64::NEG_INFINITY; 64];
    ln_terms[0] = table.ln_scaled(w0);
    let mut side = |from: usize, count: usize, step: f64| {
        let factor = step.exp();
        let mut growth = w0;
        for j in 0..count {
            growth *= factor;
            let y = (j + 1) as f64 * step;
            ln_terms[from + j] = table.ln_scaled(growth) - 0.5 * df * excess(y);
        }
    };
    side(1, right, step);
    side(1 + right, left, -step);
    step * sum_of_exp(&ln_terms[..(1 + right + left).next_multiple_of(2)])
}

/// e^2y - 1 - 2y by its series, for |y| below 0.3.
fn excess(y: f64) -> f64 {
    let x = 2.0 * y;
    let x2 = x * x;
    let (mut even, mut odd) = (1.0, 1.0);
    for n in (0..6).rev() {
        let n = 2.0 * f64::from(n);
        even = 1.0 + even * x2 * (1.0 / ((n + 3.0) * (n + 4.0)));
        odd = 1.0 + odd * x2 * (1.0 / ((n + 4.0) * (n + 5.0)));
    }
    x2 * (0.5 * even + x * (1.0 / 6.0) * odd)
}

/// Sum of exponentials, two lanes at a time; terms below e^-700 count as nothing.
fn sum_of_exp(ln_terms: &[f64]) -> f64 {
    let (mut even, mut odd) = (0.0, 0.0);
    let (pairs, _) = ln_terms.as_chunks::<2>();
    for pair in pairs {
        even += exp(pair[0]);
        odd += exp(pair[1]);
    }
    even + odd
}

/// exp(x) for x below 700, within 1 unit in the last place; below -700 it is 0.
///
/// Cody and Waite's reduction and Taylor's polynomial of degree 13. Without a call and a branch, so
/// that sums of it fill vector registers, and the same to the last bit on every machine.
#[inline(always)]
fn exp(x: f64) -> f64 {
    const SHIFT: f64 = 6_755_399_441_055_744.0;
    const LN2_HIGH: f64 = 0.693_147_180_369_123_8;
    const LN2_LOW: f64 = 1.908_214_929_270_587_7e-10;
    let clipped = if x > -700.0 { x } else { -700.0 };
    let shifted = clipped * std::f64::consts::LOG2_E + SHIFT;
    let n = shifted - SHIFT;
    let r = (clipped - n * LN2_HIGH) - n * LN2_LOW;
    let r2 = r * r;
    let r4 = r2 * r2;
    let a = (1.0 + r) + r2 * (0.5 + r * (1.0 / 6.0));
    let b = (1.0 / 24.0 + r * (1.0 / 120.0)) + r2 * (1.0 / 720.0 + r * (1.0 / 5040.0));
    let c = (1.0 / 40320.0 + r * (1.0 / 362_880.0))
        + r2 * (1.0 / 3_628_800.0 + r * (1.0 / 39_916_800.0));
    let polynomial = a + r4 * (b + r4 * c);
    let scale = f64::from_bits(shifted.to_bits().wrapping_add(1023) << 52);
    if x > -700.0 { polynomial * scale } else { 0.0 }
}
