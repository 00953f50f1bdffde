//! Statistics for comparing groups: plain `f64` in, plain structs out. Knows nothing of a plant.
//!
//! Every function is pure: no clock, no randomness, no input or output; tables that are kept between
//! calls are pure functions of their key. Input without an answer is a named [`Degenerate`] outcome,
//! never a made-up small number. P-values are upper tails computed as such, so they keep their digits
//! where a call budget works, at 1e-5 to 1e-9 and beyond.
//!
//! Bounds are relative errors against exact arithmetic on the same doubles, unless said otherwise;
//! what is measured stands in `tests/certified`, which prints every row and fails when one grows.
//!
//! | method | source | bound | test |
//! | --- | --- | --- | --- |
//! | [`summarize`], [`Summary::merge`] | Chan, Golub and LeVeque 1983; Knuth 1969 | 1e-15 of the sum of squares | certified (NIST StRD), stats::invariance |
//! | [`anova`] | NIST e-Handbook 1.3.5.4; omega squared Hays 1963 | 1e-15 of the sums of squares, 1e-12 of p | certified, stats::uniformity |
//! | [`welch`] | Welch 1951 | 1e-12 | certified, stats::uniformity |
//! | [`blocked_anova`], [`Blocked::tukey`] | Yates 1936; Searle 1971 | 1e-12 | certified (R, cells missing), stats::uniformity |
//! | [`kruskal_wallis`], [`friedman`] | Kruskal and Wallis 1952; Friedman 1937 | 1e-12 of the chi-square form | certified |
//! | [`brown_forsythe`], [`levene_mean`] | Brown and Forsythe 1974; Levene 1960 | as [`anova`] | certified |
//! | [`bartlett`] | Bartlett 1937 | 1e-12 | certified |
//! | [`max_f_ratio`] | Hartley 1950, own quadrature | 1e-12 | certified, stats::uniformity |
//! | [`cochran_c`] | Cochran 1941 | 1e-12 of the bound, exact from C = 1/2 | certified |
//! | [`spread_against_rest`], [`each_against_rest`] | Welch 1947 errors, Holm 1979 | 1e-12 | certified, stats::uniformity |
//! | [`tukey_kramer`], [`games_howell`] | Tukey 1953, Kramer 1956; Games and Howell 1976 | 1e-12 | certified, stats::uniformity |
//! | [`dunnett`] | Dunnett 1955, own quadrature | 1e-10 equal counts, 1e-8 unequal | certified, stats::uniformity |
//! | [`analysis_of_means`] | Ott 1967; Nelson 1982; Šidák 1967 | 1e-10 equal counts; conservative otherwise | certified, stats::uniformity |
//! | [`dunn`] | Dunn 1964 | 1e-12 of the normal form | certified, stats::uniformity |
//! | [`holm`], [`hochberg`], [`benjamini_hochberg`], [`sidak`], [`bonferroni`] | as named, 1979, 1988, 1995, 1967 | 1e-15 | certified, stats::followups |
//! | [`shared_letters`] | Piepho 2004 | exact | certified, stats::followups |
//! | [`shapiro_wilk`] | Royston 1995 | 1e-9 of Royston's p | certified, stats::uniformity |
//! | [`anderson_darling`] | D'Agostino and Stephens 1986 | 1e-9 of their p | certified, stats::uniformity |
//! | [`lag_one`], [`effective_sample_size`] | Box and Jenkins 1976; Kendall 1954; Bayley and Hammersley 1946 | 1e-14 | certified |
//! | [`ljung_box`], [`von_neumann_ratio`] | Ljung and Box 1978; von Neumann 1941, Young 1941 | 1e-12 of the approximation | certified, stats::uniformity |
//! | [`ties`], [`median_outliers`], [`generalised_esd`] | Hampel 1974; Rosner 1983 | 1e-12 | certified |
//! | [`anova_power`], [`welch_power`], [`naming_power`] | Scheffé 1959; Jan and Shieh 2014 | 1e-9 of the noncentral F | certified, stats::uniformity |
//! | [`dist`] | its own table | 1e-12 down to 1e-100; studentized range 1e-12 down to 1e-12 | certified |

mod adjust;
mod blocked;
mod deviations;
pub mod dist;
mod dunn;
mod letters;
mod level;
mod normality;
mod order;
mod outcome;
mod outliers;
mod pairs;
mod planning;
mod rank;
mod serial;
mod spread;
mod summary;
mod variances;

pub use adjust::{benjamini_hochberg, bonferroni, hochberg, holm, sidak};
pub use blocked::{Blocked, Blocks, blocked_anova};
pub use deviations::{
    Deviation, MeansAnalysis, analysis_of_means, analysis_of_means_from, dunnett, dunnett_from,
    each_against_rest, each_against_rest_from,
};
pub use dist::maximum::Side;
pub use dunn::{dunn, dunn_interval};
pub use letters::{letters_text, shared_letters};
pub use level::{Anova, anova, anova_from, welch, welch_from};
pub use normality::{anderson_darling, shapiro_wilk};
pub use order::{mad, median, median_of};
pub use outcome::{Degenerate, Df, Test};
pub use outliers::{Esd, EsdStep, Outlier, Ties, generalised_esd, median_outliers, ties};
pub use pairs::{Pair, games_howell, games_howell_from, tukey_kramer, tukey_kramer_from};
pub use planning::{anova_power, naming_power, smallest_deviation, smallest_n, welch_power};
pub use rank::{friedman, kruskal_wallis};
pub use serial::{LagOne, effective_sample_size, lag_one, ljung_box, von_neumann_ratio};
pub use spread::{bartlett, brown_forsythe, brown_forsythe_summaries, levene_mean};
pub use summary::{Summary, summarize, summarize_about};
pub use variances::{VarianceRatio, cochran_c, max_f_ratio, spread_against_rest};
