//! Adjusted p-values for a family of tests.
//!
//! Each function takes the p-values of one family and gives them back adjusted, in the same order.
//! NaN stays NaN and still counts as a member of the family. Exact to a few units in the last place.

/// Holm (1979), Scand. J. Statist. 6, 65–70: family-wise, for any dependence.
pub fn holm(p: &[f64]) -> Vec<f64> {
    let m = p.len() as f64;
    let mut running = 0.0_f64;
    adjusted(p, ascending(p), |rank, p| {
        running = running.max(p * (m - rank as f64)).min(1.0);
        running
    })
}

/// Hochberg (1988), Biometrika 75, 800–802: family-wise, for independent or positively dependent tests.
pub fn hochberg(p: &[f64]) -> Vec<f64> {
    let mut running = 1.0_f64;
    let order = ascending(p).into_iter().rev().collect();
    adjusted(p, order, |rank, p| {
        running = running.min(p * (rank + 1) as f64);
        running
    })
}

/// Benjamini and Hochberg (1995), JRSS B 57, 289–300: false discovery rate.
pub fn benjamini_hochberg(p: &[f64]) -> Vec<f64> {
    let m = p.len() as f64;
    let mut running = 1.0_f64;
    let order = ascending(p).into_iter().rev().collect();
    adjusted(p, order, |rank, p| {
        running = running.min(p * m / (m - rank as f64));
        running
    })
}

/// Šidák (1967), JASA 62, 626–633: 1 - (1 - p)^m, exact for independent tests; small p keep their digits.
pub fn sidak(p: &[f64]) -> Vec<f64> {
    let m = p.len() as f64;
    p.iter().map(|p| -(m * (-p).ln_1p()).exp_m1()).collect()
}

/// Bonferroni: m p, at most 1.
pub fn bonferroni(p: &[f64]) -> Vec<f64> {
    let m = p.len() as f64;
    p.iter()
        .map(|p| if p.is_nan() { *p } else { (m * p).min(1.0) })
        .collect()
}

/// Indices by ascending p, NaN last, equal ones in their order.
fn ascending(p: &[f64]) -> Vec<usize> {
    let mut order: Vec<usize> = (0..p.len()).collect();
    order.sort_by(|&a, &b| {
        p[a].is_nan()
            .cmp(&p[b].is_nan())
            .then(p[a].total_cmp(&p[b]))
    });
    order
}

fn adjusted(p: &[f64], order: Vec<usize>, mut step: impl FnMut(usize, f64) -> f64) -> Vec<f64> {
    let mut out = vec![f64::NAN; p.len()];
    for (rank, index) in order.into_iter().enumerate() {
        if !p[index].is_nan() {
            out[index] = step(rank, p[index]);
        }
    }
    out
}
