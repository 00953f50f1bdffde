//! Statistics for comparing groups: plain `f64` in, plain structs out. Knows nothing of a plant.
//!
//! Every function is pure: no clock, no randomness, no input or output. Input without an answer is
//! a named [`Degenerate`] outcome, never a made-up small number. P-values are upper tails computed
//! as such, so they keep their digits where a call budget works, at 1e-5 to 1e-9 and beyond.

mod blocked;
pub mod dist;
mod level;
mod order;
mod outcome;
mod pairs;
mod rank;
mod serial;
mod spread;
mod summary;

pub use blocked::{Blocked, Blocks, blocked_anova};
pub use level::{Anova, anova, anova_from, welch, welch_from};
pub use order::{mad, median, median_of};
pub use outcome::{Degenerate, Df, Test};
pub use pairs::{Pair, games_howell, games_howell_from, tukey_kramer, tukey_kramer_from};
pub use rank::{friedman, kruskal_wallis};
pub use serial::{LagOne, lag_one};
pub use spread::{bartlett, brown_forsythe, brown_forsythe_summaries, levene_mean};
pub use summary::{Summary, summarize, summarize_about};
