//! Windows -> look -> finding: are the sources alike, which left the even set, since when, by how
//! much, and is there evidence that they came back.
//!
//! Pure: no clock, no randomness, no input or output. Statistics come from [`crate::stats`]; this
//! room decides what they mean for a bank. Start reading at [`examine()`].

mod adjusted;
mod advice;
mod causes;
mod contrast;
mod data;
mod dependence;
mod errors;
mod even;
mod examine;
mod judged;
mod kept;
mod level;
mod look;
mod naming;
mod parsimony;
mod pattern;
mod shares;
mod slip;
mod spread;
mod steps;
mod track;
mod usual;
pub mod watch;
mod worked;

pub use adjusted::{Effect, FEWEST_AFTER, effect_of_adjustment};
pub use advice::{Standing, Suggestion, cost_per_hour, suggest};
pub use causes::{Causes, causes};
pub use data::{Data, Need, Rows, Values};
pub use examine::{Asked, Began, Call, Examination, Participant, examine};
pub use kept::{BudgetKept, Came, Keeping, budget_kept};
pub use level::Level;
pub use look::{Dependence, Digest, Estimate, Finding, Look, Method, SourceLook, TestEntry};
pub use naming::Party;
pub use pattern::{Machine, Pattern, PatternKind, find as find_pattern};
pub use shares::Shares;
pub use slip::{Places, Slip, SlipFinding, find as find_slip};
pub use track::{
    Aspect, Located, Moment, Yardstick, cleared_margin, locate, returned, size_since,
    values_to_clear,
};
pub use usual::{Usual, learn_usual};
pub use worked::{Step, Worked, WorkedPair, WorkedTest, work_through, work_through_since};
