//! Notices: what people receive and act on. A pure state machine, its wording, and deliveries as data.
//!
//! States and terms are those of IEC 62682 / ISA-18.2 as described openly in OPC 10000-9.
//! Deliberately absent: sending (that is `outlets`), clocks, and any decision about sources
//! (that is `verdict`).

mod advice;
mod condition_words;
mod handling;
mod life;
mod record;
mod route;
#[cfg(test)]
mod tests;
mod wire;
mod words;

pub use condition_words::{ConditionFacts, Detail, Trouble};
pub use handling::{Act, CallOutcome, Deed, Entry, Handling, Latching, Manners, Said, Shelving};
pub use life::{ASIDE, Aside, BENEATH, DESIGN, Design, Happening, Life};
pub use record::{
    Acknowledgement, Adjustment, Delivery, Kind, NamedSource, Notice, Priority, Since, State, Way,
};
pub use route::{Route, Updates};
pub use wire::{NoticeData, PatternData};
pub use words::{Compared, Facts, MOST_SUBJECT, SPREAD_UNIT, Words};
