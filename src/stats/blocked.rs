//! Level within blocks (cycles): two-way analysis without interaction, cells may be missing.

use super::level::f_test;
use super::pairs::{Pair, studentized_pair};
use super::{Degenerate, Test};

/// A table of values: one row per block (cycle), one column per source, cells may be missing.
#[derive(Clone, Debug, PartialEq)]
pub struct Blocks {
    sources: usize,
    /// Row by row; NaN is a missing cell.
    cells: Vec<f64>,
}

impl Blocks {
    /// An empty table for `sources` columns.
    pub fn new(sources: usize) -> Self {
        Self {
            sources,
            cells: Vec::new(),
        }
    }

    /// A table from rows; short rows are filled with missing cells, long ones are cut.
    pub fn from_rows(rows: &[Vec<Option<f64>>]) -> Self {
        let mut blocks = Self::new(rows.iter().map(Vec::len).max().unwrap_or(0));
        for row in rows {
            blocks.push((0..blocks.sources).map(|j| row.get(j).copied().flatten()));
        }
        blocks
    }

    /// Adds a block. Cells that are not given are missing; cells beyond the last source are ignored.
    /// A NaN counts as missing.
    pub fn push(&mut self, row: impl IntoIterator<Item = Option<f64>>) {
        let end = self.cells.len() + self.sources;
        self.cells.extend(
            row.into_iter()
                .take(self.sources)
                .map(|v| v.unwrap_or(f64::NAN)),
        );
        self.cells.resize(end, f64::NAN);
    }

    /// Number of columns.
    pub fn sources(&self) -> usize {
        self.sources
    }

    /// Number of rows.
    pub fn len(&self) -> usize {
        self.cells.len().checked_div(self.sources).unwrap_or(0)
    }

    /// Whether there is no row.
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// The value of a cell; none where it is missing or outside the table.
    pub fn get(&self, block: usize, source: usize) -> Option<f64> {
        if source >= self.sources {
            return None;
        }
        self.cells
            .get(block * self.sources + source)
            .copied()
            .filter(|v| !v.is_nan())
    }

    /// The values of one source in the order of the blocks, missing ones left out.
    pub fn source_values(&self, source: usize) -> Vec<f64> {
        (0..self.len())
            .filter_map(|b| self.get(b, source))
            .collect()
    }

    /// The rows; NaN stands for a missing cell.
    pub fn rows(&self) -> impl Iterator<Item = &[f64]> {
        self.cells.chunks_exact(self.sources.max(1))
    }
}

/// Two-way analysis without interaction: sources adjusted for blocks.
#[derive(Clone, Debug, PartialEq)]
pub struct Blocked {
    /// F for the sources, adjusted for blocks.
    pub test: Test,
    /// Adjusted source effects, in the unit, adding up to zero.
    pub effects: Vec<f64>,
    /// Sum of squares of the sources adjusted for blocks.
    pub ss_sources: f64,
    /// Sum of squares of the residuals.
    pub ss_residual: f64,
    /// N - blocks - sources + 1.
    pub residual_df: f64,
    /// ss_residual / residual_df.
    pub ms_residual: f64,
    /// Value less block and source effect, in the shape of the input.
    pub residuals: Blocks,
    inverse: Vec<f64>,
}

impl Blocked {
    /// The factor c with Var(effect i - effect j) = c · sigma^2; 2/n for n complete blocks.
    ///
    /// Indices must be below the number of sources.
    pub fn difference_variance(&self, i: usize, j: usize) -> f64 {
        let k = self.effects.len();
        let at = |a: usize, b: usize| self.inverse[a * k + b];
        at(i, i) + at(j, j) - 2.0 * at(i, j)
    }

    /// All pairs of sources by Tukey's studentized range with the residual mean square (Kramer's
    /// form where cells are missing, Hayter 1984 for why that is safe).
    ///
    /// # Errors
    /// [`Degenerate::Distribution`] for more sources than the studentized range reaches.
    pub fn tukey(&self) -> Result<Vec<Pair>, Degenerate> {
        let table = super::dist::studentized_range::table(self.effects.len())?;
        let mut pairs = Vec::new();
        for a in 0..self.effects.len() {
            for b in a + 1..self.effects.len() {
                let difference = self.effects[a] - self.effects[b];
                let std_error = (self.ms_residual * self.difference_variance(a, b)).sqrt();
                pairs.push(studentized_pair(
                    &table,
                    (a, b),
                    difference,
                    std_error,
                    self.residual_df,
                )?);
            }
        }
        Ok(pairs)
    }
}

/// Two-way analysis of variance without interaction, blocks by sources, missing cells allowed.
///
/// Blocks are eliminated exactly (intra-block analysis, Yates 1936; Searle 1971, chapter 7): the
/// reduced normal equations of the sources are solved by Cholesky's method. The treatment sum of
/// squares is that of the sources after the blocks. Values are centred within their block first, so
/// common movement of all sources costs no digits. Two sources give the square of the paired t.
///
/// # Errors
/// [`Degenerate`] for fewer than two sources, a source without values, blocks that do not connect
/// the sources, no residual df, infinite values, all equal within blocks, and no residual spread.
pub fn blocked_anova(blocks: &Blocks) -> Result<Blocked, Degenerate> {
    let k = blocks.sources;
    if k < 2 {
        return Err(Degenerate::FewerThanTwoSources);
    }
    let centred = centre_blocks(blocks)?;
    let normal = NormalEquations::gather(&centred)?;
    let inverse = normal.inverse()?;
    let effects = effects(&inverse, &normal.right, k);
    let residuals = residuals(&centred, &effects);
    let ss_residual: f64 = residuals
        .cells
        .iter()
        .filter(|r| !r.is_nan())
        .map(|r| r * r)
        .sum();
    let ss_sources = effects
        .iter()
        .zip(&normal.right)
        .map(|(e, q)| e * q)
        .sum::<f64>()
        .max(0.0);
    let df1 = (k - 1) as f64;
    let residual_df = normal.cells as f64 - normal.used as f64 - df1;
    if residual_df < 1.0 {
        return Err(Degenerate::TooFewValues {
            source: 0,
            needed: 2,
        });
    }
    // Residuals of exactly additive data are rounding of the centred values, and no spread.
    let scale: f64 = centred
        .cells
        .iter()
        .filter(|v| !v.is_nan())
        .map(|v| v * v)
        .sum();
    if ss_residual <= scale * 1e-28 {
        return Err(if scale == 0.0 {
            Degenerate::AllEqual
        } else {
            Degenerate::ZeroSpreadWithin
        });
    }
    let ms_residual = ss_residual / residual_df;
    Ok(Blocked {
        test: f_test(ss_sources / df1 / ms_residual, df1, residual_df)?,
        effects,
        ss_sources,
        ss_residual,
        residual_df,
        ms_residual,
        residuals,
        inverse,
    })
}

/// Each value less the mean of its block's present values, in two passes.
fn centre_blocks(blocks: &Blocks) -> Result<Blocks, Degenerate> {
    let mut centred = blocks.clone();
    let (mut low, mut high) = (0.0_f64, 0.0_f64);
    for row in centred.cells.chunks_exact_mut(blocks.sources) {
        let Some(&origin) = row.iter().find(|v| !v.is_nan()) else {
            continue;
        };
        for v in row.iter_mut() {
            *v -= origin;
        }
        for _ in 0..2 {
            let present = row.iter().filter(|v| !v.is_nan());
            let (n, sum) = present.fold((0.0, 0.0), |(n, sum), v| (n + 1.0, sum + v));
            for v in row.iter_mut() {
                *v -= sum / n;
            }
        }
        if !origin.is_finite() || row.iter().any(|v| v.is_infinite()) {
            return Err(Degenerate::NotFinite);
        }
        low = row.iter().copied().fold(low, f64::min);
        high = row.iter().copied().fold(high, f64::max);
    }
    super::summary::spread_in_range(low, high)?;
    Ok(centred)
}

/// The reduced normal equations of the sources after eliminating the blocks.
struct NormalEquations {
    k: usize,
    /// Row-major k by k.
    matrix: Vec<f64>,
    right: Vec<f64>,
    /// Present cells, and blocks that have any.
    cells: usize,
    used: usize,
}

impl NormalEquations {
    fn gather(centred: &Blocks) -> Result<Self, Degenerate> {
        let k = centred.sources;
        let mut all = Self {
            k,
            matrix: vec![0.0; k * k],
            right: vec![0.0; k],
            cells: 0,
            used: 0,
        };
        let mut complete = 0.0;
        let mut present = Vec::with_capacity(k);
        for row in centred.rows() {
            present.clear();
            present.extend((0..k).filter(|&j| !row[j].is_nan()));
            all.cells += present.len();
            all.used += usize::from(!present.is_empty());
            for &j in &present {
                all.right[j] += row[j];
            }
            if present.len() == k {
                complete += 1.0;
            } else {
                all.add_block(&present, 1.0);
            }
        }
        present.clear();
        present.extend(0..k);
        all.add_block(&present, complete);
        all.connected()?;
        Ok(all)
    }

    fn add_block(&mut self, present: &[usize], times: f64) {
        let share = times / present.len() as f64;
        for &i in present {
            self.matrix[i * self.k + i] += times;
            for &j in present {
                self.matrix[i * self.k + j] -= share;
            }
        }
    }

    /// Every source has values and is reached from the first one.
    fn connected(&self) -> Result<(), Degenerate> {
        let mut reached = vec![false; self.k];
        let mut open = vec![0];
        reached[0] = true;
        while let Some(i) = open.pop() {
            let row = &self.matrix[i * self.k..(i + 1) * self.k];
            for (j, (seen, entry)) in reached.iter_mut().zip(row).enumerate() {
                if !*seen && *entry < 0.0 {
                    *seen = true;
                    open.push(j);
                }
            }
        }
        if reached.iter().all(|r| *r) {
            Ok(())
        } else {
            Err(Degenerate::DisconnectedBlocks)
        }
    }

    /// Inverse of the matrix plus a constant in every cell, which fixes the sum of effects at zero.
    fn inverse(&self) -> Result<Vec<f64>, Degenerate> {
        let k = self.k;
        let trace: f64 = (0..k).map(|i| self.matrix[i * k + i]).sum();
        let fixing = trace / (k * k) as f64;
        let mut l: Vec<f64> = self.matrix.iter().map(|m| m + fixing).collect();
        for j in 0..k {
            for i in j..k {
                let dot: f64 = (0..j).map(|m| l[i * k + m] * l[j * k + m]).sum();
                let rest = l[i * k + j] - dot;
                if i == j && rest <= trace * 1e-14 {
                    return Err(Degenerate::DisconnectedBlocks);
                }
                l[i * k + j] = if i == j {
                    rest.sqrt()
                } else {
                    rest / l[j * k + j]
                };
            }
        }
        Ok(cholesky_inverse(&l, k))
    }
}

fn cholesky_inverse(l: &[f64], k: usize) -> Vec<f64> {
    // Columns of the inverse of L, then their products.
    let mut m = vec![0.0; k * k];
    for j in 0..k {
        m[j * k + j] = 1.0 / l[j * k + j];
        for i in j + 1..k {
            let dot: f64 = (j..i).map(|t| l[i * k + t] * m[t * k + j]).sum();
            m[i * k + j] = -dot / l[i * k + i];
        }
    }
    let mut inverse = vec![0.0; k * k];
    for i in 0..k {
        for j in 0..=i {
            let dot: f64 = (i..k).map(|t| m[t * k + i] * m[t * k + j]).sum();
            inverse[i * k + j] = dot;
            inverse[j * k + i] = dot;
        }
    }
    inverse
}

fn effects(inverse: &[f64], right: &[f64], k: usize) -> Vec<f64> {
    let mut effects: Vec<f64> = (0..k)
        .map(|i| (0..k).map(|j| inverse[i * k + j] * right[j]).sum())
        .collect();
    let mean = effects.iter().sum::<f64>() / k as f64;
    for e in &mut effects {
        *e -= mean;
    }
    effects
}

/// Centred values less their source's effect, centred once more within the block.
fn residuals(centred: &Blocks, effects: &[f64]) -> Blocks {
    let mut residuals = centred.clone();
    for row in residuals.cells.chunks_exact_mut(centred.sources) {
        let (mut n, mut sum) = (0.0, 0.0);
        for (v, e) in row.iter_mut().zip(effects) {
            *v -= e;
            if !v.is_nan() {
                n += 1.0;
                sum += *v;
            }
        }
        for v in row.iter_mut() {
            *v -= sum / n;
        }
    }
    residuals
}
