//! Statistics for comparing groups: plain `f64` in, plain structs out. Knows nothing of a plant.
//!
//! Every function is pure: no clock, no randomness, no input or output. Input without an answer is
//! a named [`Degenerate`] outcome, never a made-up small number. P-values are upper tails computed
//! as such, so they keep their digits where a call budget works, at 1e-5 to 1e-9 and beyond.

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
