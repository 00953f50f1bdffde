//! What a call rests on, whole: the values in the windows, and everything else that the look and the
//! watch knew. With it a call made in March can be worked out again in June, to the last bit.
//!
//! Must hold: [`Evidence::examine`] is the examination of then, whatever the configuration is now.
//! Deliberately absent: the evidence of the watch from before the windows, which is larger than a store
//! should keep with each notice; what it came to is told ([`WatchSaid`]).

use std::sync::Arc;

use serde::{Deserialize, Serialize};

use crate::model::{Bank, LineEvent, Name, SourceIx, Time, Value};
use crate::verdict::watch::thresholds::{Account, Basis, account, thresholds};
use crate::verdict::watch::{Crossing, Reading};
use crate::verdict::{
    Asked, Call, Examination, Look, Need, Participant, Worked, examine, work_through,
    work_through_since,
};
use crate::window::{Entry, Ring, Windows};

use super::bank::Watched;
use super::snapshot::WindowView;

/// What a call rests on.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Evidence {
    /// The looks that were taken, one for each span, shortest first.
    pub looks: Vec<Arc<Look>>,
    /// The windows then, sources in display order.
    pub windows: Vec<WindowView>,
    /// Everything else that was known.
    pub premises: Premises,
}

/// What a look and the watch know besides the values.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Premises {
    /// When the look was taken.
    pub at: Time,
    /// The bank as it was set up then.
    pub bank: Bank,
    /// Who was compared, in display order.
    pub who: Vec<Participant>,
    /// For each of these, the place before which its values no longer counted.
    pub fresh_from: Vec<i64>,
    /// Everything up to this cycle or slot was closed.
    pub closed_to: i64,
    /// Time between values of the slowest source.
    pub interval_us: Option<i64>,
    /// What the watch found, when that was the reason.
    pub crossing: Option<Crossing>,
    /// What the watch said then; `None` where sources share no cycle.
    pub watch: Option<WatchSaid>,
    /// What the line made.
    pub product: Option<Name>,
    /// The newest line events then, oldest first.
    pub line_events: Vec<LineEvent>,
}

/// The watch at the moment of a look.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct WatchSaid {
    /// How far each part was from its threshold; empty while it learnt.
    pub readings: Vec<Reading>,
    /// Sd of a single value within its source, in the unit.
    pub sigma: Option<f64>,
    /// Correlation of neighbours, and what of it was paid for.
    pub phi: (f64, f64),
    /// What the thresholds rested on; `None` while it learnt.
    pub basis: Option<Basis>,
}

impl WatchSaid {
    /// How the budget became thresholds.
    pub fn account(&self) -> Option<Account> {
        let basis = self.basis.as_ref()?;
        Some(account(basis, &thresholds(basis)))
    }
}

impl Evidence {
    /// The examination of then, worked out again.
    pub fn examine(&self) -> Examination {
        let Premises {
            bank,
            who,
            at,
            interval_us,
            crossing,
            ..
        } = &self.premises;
        let asked = Asked {
            at: *at,
            need: Need::WholeSpan,
            interval_us: *interval_us,
            crossing: crossing.as_ref(),
            open: None,
        };
        examine(bank, &self.recalled(), who, asked)
    }

    /// Whether the looks of then come out again to the last bit.
    pub fn agrees_with(&self, again: &Examination) -> bool {
        let then = self.looks.iter().map(|look| &**look);
        then.eq(&again.looks)
    }

    /// The looks taken apart.
    pub fn work_through(&self, again: &Examination) -> Vec<Worked> {
        work_through(&self.premises.bank, &self.premises.who, again)
    }

    /// The naming of the watch's call taken apart; `None` when a look called.
    pub fn work_through_since(&self, again: &Examination) -> Option<(Call, Worked)> {
        work_through_since(&self.premises.bank, &self.premises.who, again)
    }

    fn recalled(&self) -> Windows {
        let Premises {
            bank,
            who,
            fresh_from,
            closed_to,
            ..
        } = &self.premises;
        let places = who.iter().map(|p| p.source.index() + 1).max().unwrap_or(0);
        let mut rings = vec![Ring::new(1); places];
        for (one, from) in who.iter().zip(fresh_from) {
            let window = self.windows.iter().find(|w| w.source == one.name);
            let entries = window.into_iter().flat_map(|w| &w.values).map(|v| Entry {
                // Without pairing values stand in the order of their times.
                place: v.cycle.unwrap_or(v.taken.us()),
                taken: v.taken,
                offset: v.offset,
            });
            rings[one.source.index()] = Ring::recalled(entries.collect(), *from);
        }
        const ZERO: Value = Value::Decimal {
            coefficient: 0,
            exponent: 0,
        };
        let origin = self.windows.first().map_or(ZERO, |w| w.origin);
        Windows::recalled(bank, origin, rings, *closed_to)
    }
}

impl Watched {
    /// What a look taken now rests on besides the values.
    pub fn premises_of(&self, now: Time, crossing: Option<&Crossing>) -> Premises {
        let who = self.participants();
        let ring = |s: SourceIx| self.state.windows.ring(s);
        let watch = self.state.watch.as_ref().map(|watch| {
            let figures = watch.figures();
            WatchSaid {
                readings: watch.readings(),
                sigma: figures.sigma,
                phi: (figures.phi, figures.phi_paid),
                basis: figures.account.map(|a| a.basis),
            }
        });
        Premises {
            at: now,
            bank: Bank::clone(&self.bank),
            fresh_from: who.iter().map(|p| ring(p.source).fresh_from()).collect(),
            who,
            closed_to: self
                .state
                .windows
                .blocks()
                .map_or(i64::MIN, |blocks| blocks.closed_to()),
            interval_us: self.slowest_interval_us(),
            crossing: crossing.cloned(),
            watch,
            product: self.state.line.product.clone(),
            line_events: self.state.line.newest.iter().cloned().collect(),
        }
    }

    /// What a call rests on, from the looks it was made with and what they knew.
    pub fn evidence(&self, looks: &[Arc<Look>], premises: &Premises) -> Evidence {
        Evidence {
            looks: looks.to_vec(),
            windows: self.window_views(),
            premises: premises.clone(),
        }
    }

    /// A look taken now, without consequences, and what it rests on.
    pub fn evidence_now(&self, now: Time) -> Evidence {
        let exam = self.examine(now, Need::WholeSpan, None);
        let looks: Vec<Arc<Look>> = exam.looks.into_iter().map(Arc::new).collect();
        self.evidence(&looks, &self.premises_of(now, None))
    }
}
