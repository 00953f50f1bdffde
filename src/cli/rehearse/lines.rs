//! The result as JSON, one object per line: `type` is `look`, `notice` or `summary`.
//!
//! Looks and notices have the form they have in the interface. Deliberately absent: pretty printing.

use std::collections::BTreeMap;
use std::io::{self, Write};

use serde::Serialize;

use crate::model::Time;
use crate::notice::NoticeData;
use crate::web::wire::LookBody;

use super::ledger::{BankTally, Ledger, RefusedRow, Said};

/// A body with its type in front.
#[derive(Serialize)]
struct Line<T> {
    r#type: &'static str,
    #[serde(flatten)]
    body: T,
}

#[derive(Serialize)]
struct Summary<'a> {
    recordings: &'a [String],
    from: Option<Time>,
    to: Option<Time>,
    measurements: u64,
    refused: BTreeMap<&'static str, u64>,
    first_refused: Vec<Refused<'a>>,
    banks: Vec<Bank<'a>>,
    notices: usize,
}

#[derive(Serialize)]
struct Refused<'a> {
    place: &'a str,
    reason: &'static str,
    detail: &'a str,
}

#[derive(Serialize)]
struct Bank<'a> {
    bank: &'a str,
    looks: u64,
    outcomes: &'a BTreeMap<&'static str, u64>,
    notices: usize,
}

/// Writes lines.
pub struct Lines<W>(W);

impl<W: Write> Lines<W> {
    /// To `out`.
    pub fn new(out: W) -> Self {
        Self(out)
    }

    /// What the engine said.
    ///
    /// # Errors
    /// When it cannot be written.
    pub fn said(&mut self, said: &Said) -> io::Result<()> {
        match said {
            Said::Digest(..) => Ok(()),
            Said::Look(look) => self.line("look", LookBody::from(&**look)),
            Said::Notice(notice) => self.line("notice", NoticeData::of(notice)),
        }
    }

    /// The last line.
    ///
    /// # Errors
    /// When it cannot be written.
    pub fn summary(&mut self, ledger: &Ledger) -> io::Result<()> {
        let words = ledger.refused.iter().map(|(r, n)| (r.word(), *n));
        let summary = Summary {
            recordings: &ledger.recordings,
            from: ledger.from,
            to: ledger.to,
            measurements: ledger.measurements,
            refused: words.collect(),
            first_refused: ledger.first_refused.iter().map(refused).collect(),
            banks: ledger
                .banks
                .iter()
                .map(|(name, tally)| bank(name, tally, ledger))
                .collect(),
            notices: ledger.notices_raised(),
        };
        self.line("summary", summary)?;
        self.0.flush()
    }

    fn line<T: Serialize>(&mut self, r#type: &'static str, body: T) -> io::Result<()> {
        serde_json::to_writer(&mut self.0, &Line { r#type, body })?;
        self.0.write_all(b"\n")
    }
}

fn refused(row: &RefusedRow) -> Refused<'_> {
    Refused {
        place: &row.place,
        reason: row.reason.word(),
        detail: &row.detail,
    }
}

fn bank<'a>(name: &'a str, tally: &'a BankTally, ledger: &Ledger) -> Bank<'a> {
    let of_bank = ledger.notices.values().filter(|n| *n.bank == *name);
    Bank {
        bank: name,
        looks: tally.looks,
        outcomes: &tally.outcomes,
        notices: of_bank.count(),
    }
}
