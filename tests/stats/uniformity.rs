//! Under the null, p is uniform: Kolmogorov and Smirnov's test on 20 000 simulated cases per test.
//!
//! Values are normal and independent, from a fixed seed, so a run repeats exactly. Tests whose p is an
//! approximation (Welch, Games–Howell, Brown–Forsythe, rank tests, Shapiro–Wilk) are given counts at
//! which the approximation is good, and a wider bound that says how good.

use evenrow::stats::dist::normal;
use evenrow::stats::*;

const CASES: usize = 20_000;
/// Kolmogorov's distance exceeded with probability 1e-4 at 20 000 cases: sqrt(ln(2e4)/2)/sqrt(n).
const EXACT: f64 = 2.2253 / 141.42;

/// SplitMix64 (Steele, Lea and Flood 2014), turned normal by the quantile.
struct Source(u64);

impl Source {
    fn uniform(&mut self) -> f64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        ((z ^ (z >> 31)) >> 11) as f64 / 9_007_199_254_740_992.0 + 0.5 / 9_007_199_254_740_992.0
    }

    fn groups(&mut self, sizes: &[usize]) -> Vec<Vec<f64>> {
        let mut one = || normal::isf(self.uniform()).expect("strictly between 0 and 1");
        sizes
            .iter()
            .map(|n| (0..*n).map(|_| one()).collect())
            .collect()
    }
}

/// Kolmogorov's distance of the p-values of `CASES` samples from the uniform distribution.
fn distance(seed: u64, sizes: &[usize], p: impl Fn(&[&[f64]]) -> f64) -> f64 {
    distance_of(seed, sizes, p, |p| p, 1)
}

/// The same for a statistic whose p falls as it grows and is slow to compute: `to_p` is asked for
/// every `stride`-th of the ordered statistics only, which can miss `stride` cases at most.
fn distance_of(
    seed: u64,
    sizes: &[usize],
    statistic: impl Fn(&[&[f64]]) -> f64,
    to_p: impl Fn(f64) -> f64,
    stride: usize,
) -> f64 {
    let mut source = Source(seed);
    let mut values: Vec<f64> = (0..CASES)
        .map(|_| {
            let groups = source.groups(sizes);
            let slices: Vec<&[f64]> = groups.iter().map(Vec::as_slice).collect();
            statistic(&slices)
        })
        .collect();
    values.sort_by(f64::total_cmp);
    let falling = to_p(values[0]) > to_p(values[CASES - 1]);
    let n = CASES as f64;
    let apart = |i: usize| {
        let place = if falling { CASES - 1 - i } else { i } as f64;
        let p = to_p(values[i]);
        (p - place / n).abs().max((p - (place + 1.0) / n).abs())
    };
    (0..CASES).step_by(stride).map(apart).fold(0.0, f64::max)
}

fn check(name: &str, bound: f64, distance: f64) {
    assert!(
        distance < bound,
        "{name}: distance {distance:.4} from uniform, bound {bound:.4}"
    );
}

const EQUAL: &[usize] = &[6, 6, 6, 6];
const UNEQUAL: &[usize] = &[4, 7, 12];

#[test]
fn anova_is_exact() {
    check(
        "equal",
        EXACT,
        distance(1, EQUAL, |g| anova(g).unwrap().test.p),
    );
    check(
        "unequal",
        EXACT,
        distance(2, UNEQUAL, |g| anova(g).unwrap().test.p),
    );
}

#[test]
fn the_smallest_tukey_p_is_exact_for_equal_counts() {
    let p = |g: &[&[f64]]| smallest(tukey_kramer(g).unwrap().iter().map(|p| p.p_adjusted));
    check("tukey", EXACT, distance(3, EQUAL, p));
}

#[test]
fn the_smallest_dunnett_p_is_exact() {
    // The table of one configuration serves all cases.
    use dist::maximum::Maximum;
    for (seed, side) in [(4, Side::Both), (5, Side::Upper)] {
        let maximum = Maximum::dunnett(12, &[4, 7], side).unwrap();
        let p = |g: &[&[f64]]| {
            let a = anova(g).unwrap();
            let [control, one, two] = [2, 0, 1].map(|i| summarize(g[i]));
            let t = |s: Summary| {
                let sizes = 1.0 / s.n as f64 + 1.0 / control.n as f64;
                let t = (s.mean - control.mean) / (a.ms_within * sizes).sqrt();
                if side == Side::Both { t.abs() } else { t }
            };
            maximum.sf(t(one).max(t(two)), 20.0).unwrap()
        };
        check("dunnett", EXACT, distance(seed, UNEQUAL, p));
    }
}

#[test]
fn the_smallest_analysis_of_means_p_is_exact_for_equal_counts() {
    let maximum = dist::maximum::Maximum::means(4).unwrap();
    let p = |g: &[&[f64]]| {
        let a = anova(g).unwrap();
        let means: Vec<f64> = g.iter().map(|s| summarize(s).mean).collect();
        let centre = means.iter().sum::<f64>() / 4.0;
        let largest = means.iter().map(|m| (m - centre).abs()).fold(0.0, f64::max);
        maximum
            .sf(largest / (a.ms_within * 0.75 / 6.0).sqrt(), 20.0)
            .unwrap()
    };
    check("analysis of means", EXACT, distance(6, EQUAL, p));
}

#[test]
fn the_largest_variance_ratio_is_exact() {
    for (seed, sizes) in [(7, EQUAL), (8, UNEQUAL)] {
        let dfs: Vec<f64> = sizes.iter().map(|n| (n - 1) as f64).collect();
        let ratio = |g: &[&[f64]]| {
            let variances = g.iter().map(|v| summarize(v).variance().unwrap());
            let (low, high) = variances.fold((f64::INFINITY, 0.0_f64), |(low, high), v| {
                (low.min(v), high.max(v))
            });
            high / low
        };
        let p = |ratio| dist::maximum_f_ratio::sf(ratio, &dfs).unwrap();
        check("ratio", EXACT, distance_of(seed, sizes, ratio, p, 20));
    }
}

#[test]
fn cochran_keeps_its_level_closely_in_the_tail() {
    let mut source = Source(22);
    let mut below = 0.0;
    for _ in 0..CASES {
        let groups = source.groups(EQUAL);
        let slices: Vec<&[f64]> = groups.iter().map(Vec::as_slice).collect();
        below += f64::from(cochran_c(&slices).unwrap().p < 0.05) / CASES as f64;
    }
    // At 5 % C is beyond one half for four sources of six: there the bound is exact.
    assert!(
        (below - 0.05).abs() < 4.0 * (0.05_f64 * 0.95 / CASES as f64).sqrt(),
        "{below}"
    );
}

#[test]
fn blocks_are_exact_with_cells_missing() {
    let p = |g: &[&[f64]]| {
        let mut blocks = Blocks::new(4);
        for row in 0..6 {
            let cell = |(j, source): (usize, &&[f64])| {
                let missing = row * 4 + j == 9 || row * 4 + j == 14;
                (!missing).then(|| source[row])
            };
            blocks.push(g.iter().enumerate().map(cell));
        }
        blocked_anova(&blocks).unwrap().test.p
    };
    check("blocks", EXACT, distance(9, EQUAL, p));
}

#[test]
fn approximate_tests_are_near_uniform() {
    let sizes: &[usize] = &[40, 50, 60, 45];
    check(
        "welch",
        EXACT + 0.004,
        distance(10, sizes, |g| welch(g).unwrap().p),
    );
    check(
        "brown-forsythe",
        EXACT + 0.02,
        distance(11, sizes, |g| brown_forsythe(g).unwrap().p),
    );
    check(
        "levene",
        EXACT + 0.02,
        distance(12, sizes, |g| levene_mean(g).unwrap().p),
    );
    check(
        "bartlett",
        EXACT + 0.002,
        distance(13, sizes, |g| bartlett(g).unwrap().p),
    );
    check(
        "kruskal-wallis",
        EXACT + 0.005,
        distance(14, sizes, |g| kruskal_wallis(g).unwrap().p),
    );
}

#[test]
fn follow_ups_keep_their_family_wise_rate() {
    let sizes: &[usize] = &[15, 25, 20, 18];
    type Smallest = fn(&[&[f64]]) -> f64;
    let methods: [(&str, Smallest); 4] = [
        ("games-howell", |g| {
            smallest(games_howell(g).unwrap().iter().map(|p| p.p_adjusted))
        }),
        ("dunn", |g| {
            smallest(dunn(g).unwrap().iter().map(|p| p.p_adjusted))
        }),
        ("rest", |g| {
            smallest(
                each_against_rest(g, 0.05)
                    .unwrap()
                    .iter()
                    .map(|d| d.p_adjusted),
            )
        }),
        ("spread", |g| {
            smallest(
                spread_against_rest(g, 0.05)
                    .unwrap()
                    .iter()
                    .map(|d| d.p_adjusted),
            )
        }),
    ];
    let mut source = Source(21);
    let mut named = [0.0; 4];
    for _ in 0..CASES {
        let groups = source.groups(sizes);
        let slices: Vec<&[f64]> = groups.iter().map(Vec::as_slice).collect();
        for (count, (_, method)) in named.iter_mut().zip(methods) {
            *count += f64::from(method(&slices) < 0.05) / CASES as f64;
        }
    }
    for (rate, (name, _)) in named.into_iter().zip(methods) {
        // Four standard errors above 0.05; spreads of few values are a little liberal.
        let bound = if name == "spread" { 0.065 } else { 0.0562 };
        assert!(
            rate > 0.01 && rate < bound,
            "{name}: {rate:.4} of cases name somebody"
        );
    }
}

fn smallest(p: impl Iterator<Item = f64>) -> f64 {
    p.fold(1.0, f64::min)
}

#[test]
fn approximate_tests_of_one_series_are_near_uniform() {
    let sizes: &[usize] = &[60];
    check(
        "shapiro",
        EXACT + 0.01,
        distance(15, sizes, |g| shapiro_wilk(g[0]).unwrap().p),
    );
    check(
        "anderson",
        EXACT + 0.01,
        distance(16, sizes, |g| anderson_darling(g[0]).unwrap().p),
    );
    check(
        "von neumann",
        EXACT + 0.005,
        distance(17, sizes, |g| von_neumann_ratio(g[0]).unwrap().p),
    );
    check(
        "ljung-box",
        EXACT + 0.03,
        distance(18, sizes, |g| ljung_box(g[0], 3).unwrap().p),
    );
}

#[test]
fn friedman_is_near_uniform_in_its_steps() {
    // Ranks of 40 blocks of 4 leave steps of a few thousandths.
    let sizes: &[usize] = &[40, 40, 40, 40];
    let p = |g: &[&[f64]]| {
        let mut blocks = Blocks::new(4);
        for row in 0..40 {
            blocks.push(g.iter().map(|s| Some(s[row])));
        }
        friedman(&blocks).unwrap().p
    };
    check("friedman", EXACT + 0.02, distance(19, sizes, p));
}

#[test]
fn a_drift_of_power_matches_planning() {
    // 4 sources, one off by 0.8 sd, 20 values each, alpha 0.05: the share found is the power planned.
    let mut source = Source(20);
    let mut found = [0.0; 2];
    for _ in 0..CASES {
        let mut groups = source.groups(&[20; 4]);
        groups[3].iter_mut().for_each(|v| *v += 0.8);
        let slices: Vec<&[f64]> = groups.iter().map(Vec::as_slice).collect();
        found[0] += f64::from(anova(&slices).unwrap().test.p < 0.05) / CASES as f64;
        found[1] += f64::from(welch(&slices).unwrap().p < 0.05) / CASES as f64;
    }
    let anova = anova_power(&[0.0, 0.0, 0.0, 0.8], 20, 1.0, 0.05).unwrap();
    let sources = [0.0, 0.0, 0.0, 0.8].map(|mean| Summary {
        n: 20,
        mean,
        ss: 19.0,
    });
    let welch = welch_power(&sources, 0.05).unwrap();
    // Four standard errors of a share of 20 000.
    assert!(
        (found[0] - anova).abs() < 0.014,
        "{} planned {anova}",
        found[0]
    );
    assert!(
        (found[1] - welch).abs() < 0.024,
        "{} planned {welch}",
        found[1]
    );
}
