//! `[[outlet]]` as written.

use crate::settings::fault::{FaultList, Place};
use crate::settings::raw::Node;
use crate::settings::section::{Field, Section};

/// `[[outlet]]`, with the keys of every way.
pub(in crate::settings) struct WrittenOutlet {
    pub(in crate::settings) place: Place,
    pub(in crate::settings) name: Field<String>,
    pub(in crate::settings) way: Field<String>,
    pub(in crate::settings) url: Field<String>,
    pub(in crate::settings) secret_file: Field<String>,
    pub(in crate::settings) ca_file: Field<String>,
    pub(in crate::settings) user: Field<String>,
    pub(in crate::settings) password_file: Field<String>,
    pub(in crate::settings) in_clear: Field<bool>,
    pub(in crate::settings) from: Field<String>,
    pub(in crate::settings) to: Field<Vec<Node>>,
    pub(in crate::settings) program: Field<String>,
    pub(in crate::settings) arguments: Field<Vec<Node>>,
    pub(in crate::settings) time_limit: Field<String>,
    pub(in crate::settings) banks: Field<Vec<Node>>,
    pub(in crate::settings) kinds: Field<Vec<Node>>,
    pub(in crate::settings) priorities: Field<Vec<Node>>,
    pub(in crate::settings) shifts: Field<Vec<Node>>,
    pub(in crate::settings) escalate_after: Field<String>,
    pub(in crate::settings) updates: Field<String>,
    pub(in crate::settings) at_most: Field<String>,
}

impl WrittenOutlet {
    pub(super) fn read(mut s: Section, faults: &mut FaultList) -> Self {
        let written = Self {
            place: s.place.clone(),
            name: s.text("name", faults),
            way: s.text("way", faults),
            url: s.text("url", faults),
            secret_file: s.text("secret_file", faults),
            ca_file: s.text("ca_file", faults),
            user: s.text("user", faults),
            password_file: s.text("password_file", faults),
            in_clear: s.flag("in_clear", faults),
            from: s.text("from", faults),
            to: s.list("to", faults),
            program: s.text("program", faults),
            arguments: s.list("arguments", faults),
            time_limit: s.text("time_limit", faults),
            banks: s.list("banks", faults),
            kinds: s.list("kinds", faults),
            priorities: s.list("priorities", faults),
            shifts: s.list("shifts", faults),
            escalate_after: s.text("escalate_after", faults),
            updates: s.text("updates", faults),
            at_most: s.text("at_most", faults),
        };
        s.close(faults);
        written
    }
}
