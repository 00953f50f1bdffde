//! Which notices leave, by which way, and what became of them.
//!
//! Owns what each outlet has been told, and the deliveries that nobody has confirmed. What must hold:
//! every change of a notice goes to the broker; an outlet that has a notice hears of it until it is
//! over; what an outlet has is part of its bank's checkpoint, so it is the same after a crash.
//! Deliberately absent: who gets what (that is [`crate::notice::Route`]) and the sending itself.

use std::collections::{BTreeMap, BTreeSet};
use std::sync::Arc;

use serde::{Deserialize, Serialize};

use crate::model::{BankIx, Name, Time};
use crate::notice::{Delivery, Notice, State, Way};

use super::bank::Watched;
use super::papers::{is_repeat, wants_sending};
use super::{Effect, Onward, OutletView, Plant, Record};

/// The outlets that have each open notice of a bank.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Told(BTreeMap<Name, BTreeSet<Name>>);

impl Told {
    fn has(&self, notice: &Name, outlet: &Name) -> bool {
        self.0.get(notice).is_some_and(|all| all.contains(outlet))
    }

    fn note(&mut self, notice: &Name, outlet: &Name) {
        let all = self.0.entry(notice.clone()).or_default();
        all.insert(outlet.clone());
    }
}

/// The moment of a turn.
#[derive(Clone, Copy)]
pub struct Moment {
    /// The turn's number.
    pub turn: u64,
    /// Its time.
    pub now: Time,
}

/// The notices on their way out.
pub struct Post {
    told: Vec<Told>,
    waiting: BTreeMap<u64, Way>,
    outlets: Vec<(Way, OutletView)>,
    /// When it was last asked what goes on: what becomes due is due after that.
    asked: Time,
}

impl Post {
    /// Nothing is on its way yet.
    pub fn new(plant: &Plant, banks: usize) -> Self {
        let outlets = plant.routes.iter().map(|r| Way::Outlet(r.outlet.clone()));
        let view = |way: Way| {
            let name = Name::from(way.name());
            (way, OutletView::new(name))
        };
        Self {
            told: vec![Told::default(); banks],
            waiting: BTreeMap::new(),
            outlets: std::iter::once(Way::Mqtt)
                .chain(outlets)
                .map(view)
                .collect(),
            asked: Time::from_us(i64::MIN),
        }
    }

    /// What a bank's outlets have been told, for its checkpoint.
    pub fn told(&self, bank: usize) -> &Told {
        &self.told[bank]
    }

    /// Goes on from a checkpoint.
    pub fn restore(&mut self, bank: usize, told: Told) {
        self.told[bank] = told;
    }

    /// Goes on with what the store's outbox holds; what was counted in a replay was counted before.
    pub fn resume(&mut self, outbox: &[Delivery]) {
        self.waiting = outbox.iter().map(|d| (d.number, d.way.clone())).collect();
        for (_, view) in &mut self.outlets {
            *view = OutletView::new(view.name.clone());
        }
    }

    /// Sends what people should receive now of a bank's notices.
    pub fn send(
        &mut self,
        b: usize,
        bank: &mut Watched,
        plant: &Plant,
        at: Moment,
        effects: &mut Vec<Effect>,
    ) {
        for (notice, sent) in bank.state.papers_mut() {
            let again = is_repeat(notice, sent, &plant.manners, at.now);
            if !again && !wants_sending(notice, sent, at.now) {
                continue;
            }
            let notice = notice.clone();
            let before = sent.replace((at.now, notice.clone()));
            if let Some((_, before)) = before.as_ref().filter(|b| b.1.kind != notice.kind) {
                // The kind is part of the topic: the old one is emptied before the new one is filled.
                let over = Notice {
                    state: State::Normal,
                    ..Notice::clone(before)
                };
                self.deliver(Way::Mqtt, &Arc::new(over), at, effects);
            }
            self.deliver(Way::Mqtt, &notice, at, effects);
            for route in &plant.routes {
                let goes = match &before {
                    Some((_, before)) if self.told[b].has(&notice.id, &route.outlet) => {
                        again || route.wants(before, &notice)
                    }
                    _ => route.takes(&notice, &plant.zone, at.now),
                };
                if goes {
                    self.told[b].note(&notice.id, &route.outlet);
                    self.deliver(Way::Outlet(route.outlet.clone()), &notice, at, effects);
                }
            }
        }
        bank.state.file_away();
        self.told[b]
            .0
            .retain(|id, _| bank.state.papers().any(|n| n.id == *id));
    }

    /// Sends one notice to an outlet that does not have it yet. Its bank's look may have ended it, or
    /// sent it there already.
    pub fn go_on(
        &mut self,
        onward: &Onward,
        bank: &Watched,
        at: Moment,
        effects: &mut Vec<Effect>,
    ) {
        let b = onward.bank.index();
        let mut papers = bank.state.papers();
        let Some(notice) = papers.find(|n| n.id == onward.notice).cloned() else {
            return;
        };
        let is_wanted = notice.state == State::Unacknowledged;
        if is_wanted && !self.told[b].has(&notice.id, &onward.outlet) {
            self.told[b].note(&notice.id, &onward.outlet);
            self.deliver(Way::Outlet(onward.outlet.clone()), &notice, at, effects);
        }
    }

    fn deliver(&mut self, way: Way, notice: &Arc<Notice>, at: Moment, effects: &mut Vec<Effect>) {
        let already = effects.iter().filter(|e| matches!(e, Effect::Deliver(_)));
        let delivery = Delivery {
            // A turn sends far fewer than 2^16 notices.
            number: (at.turn << 16) + already.count() as u64,
            way,
            at: at.now,
            notice: notice.clone(),
        };
        self.waiting.insert(delivery.number, delivery.way.clone());
        effects.push(Effect::Keep(Record::Delivery(delivery.clone())));
        effects.push(Effect::Deliver(delivery));
    }

    /// The notices that go to a further outlet now.
    pub fn due(&mut self, banks: &[Watched], plant: &Plant, now: Time) -> Vec<Onward> {
        self.asked = now;
        let all = self.untold(banks, plant);
        all.filter(|(_, at)| *at <= now)
            .map(|(onward, _)| onward)
            .collect()
    }

    /// When the next one does.
    pub fn next_due(&self, banks: &[Watched], plant: &Plant) -> Option<Time> {
        self.untold(banks, plant).map(|(_, at)| at).min()
    }

    /// Every notice that will go to an outlet that does not have it, and when.
    fn untold<'a>(
        &'a self,
        banks: &'a [Watched],
        plant: &'a Plant,
    ) -> impl Iterator<Item = (Onward, Time)> + 'a {
        let open = banks
            .iter()
            .enumerate()
            .flat_map(|(b, bank)| bank.state.papers().map(move |notice| (b, notice)));
        open.flat_map(move |(b, notice)| {
            plant.routes.iter().filter_map(move |route| {
                if self.told[b].has(&notice.id, &route.outlet) {
                    return None;
                }
                let at = route.next(notice, &plant.zone, self.asked)?;
                let onward = Onward {
                    bank: BankIx(b as u16),
                    notice: notice.id.clone(),
                    outlet: route.outlet.clone(),
                };
                Some((onward, at))
            })
        })
    }

    /// An outlet has confirmed a delivery.
    pub fn delivered(&mut self, number: u64) {
        let way = self.waiting.remove(&number);
        if let Some(view) = self.view_of(way.as_ref()) {
            view.delivered += 1;
            view.trouble = None;
        }
    }

    /// An outlet could not deliver and keeps it.
    pub fn not_delivered(&mut self, number: u64, why: String) {
        let way = self.waiting.get(&number).cloned();
        if let Some(view) = self.view_of(way.as_ref()) {
            view.failed += 1;
            view.trouble = Some(why);
        }
    }

    fn view_of(&mut self, way: Option<&Way>) -> Option<&mut OutletView> {
        let mut outlets = self.outlets.iter_mut();
        let found = outlets.find(|(own, _)| Some(own) == way);
        found.map(|(_, view)| view)
    }

    /// The outlets, now: the broker first, then in the order of the configuration.
    pub fn views(&self) -> Vec<OutletView> {
        let mut counts: BTreeMap<&Way, usize> = BTreeMap::new();
        for way in self.waiting.values() {
            *counts.entry(way).or_default() += 1;
        }
        let all = self.outlets.iter().map(|(way, view)| OutletView {
            waiting: counts.get(way).copied().unwrap_or(0),
            ..view.clone()
        });
        all.collect()
    }
}
