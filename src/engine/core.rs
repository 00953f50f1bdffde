//! The engine itself: which bank an event is for, what is kept of it, and what is to be done.

use std::sync::Arc;

use crate::model::{Bank, BankIx, Measurement, Reason, Refusal, Time};
use crate::notice::{Delivery, Detail, Notice, Trouble};
use crate::verdict::{Finding, Look, Need};

use super::bank::{SILENCE_EVERY_US, Watched};
use super::judge::Intake;
use super::look::{Freshness, Looked};
use super::restore::{self, RestoreError, checkpoint};
use super::send::{Moment, Post};
use super::view;
use super::{
    Condition, Due, Effect, Event, Judged, Part, Plant, Record, RefusalView, Snapshot, Turn,
};

/// A bank writes its whole state at least this often.
const CHECKPOINT_EVERY_US: i64 = 600_000_000;

/// Owns every bank.
pub struct Engine {
    pub(super) plant: Arc<Plant>,
    pub(super) banks: Vec<Watched>,
    last_turn: u64,
    post: Post,
    broker: Condition,
    /// Since when it is as it is.
    broker_since: Time,
    store: Condition,
    refusals: Vec<RefusalView>,
    changed: bool,
    snapshot: Arc<Snapshot>,
}

impl Engine {
    /// An engine that knows nothing yet.
    pub fn new(plant: Plant, banks: Vec<Arc<Bank>>) -> Self {
        let plant = Arc::new(plant);
        let mut engine = Self {
            snapshot: Arc::new(view::empty(plant.clone())),
            post: Post::new(&plant, banks.len()),
            plant,
            banks: banks.into_iter().map(Watched::new).collect(),
            last_turn: 0,
            broker: Condition::Starting,
            broker_since: Time::from_us(0),
            store: Condition::Starting,
            refusals: Vec::new(),
            changed: true,
        };
        engine.snapshot();
        engine
    }

    /// Goes on from a checkpoint of a bank.
    ///
    /// # Errors
    /// [`RestoreError`]; the bank then starts afresh.
    pub fn restore(&mut self, bank: &str, state: &[u8]) -> Result<(), RestoreError> {
        let own = || bank.to_owned();
        let found = self.banks.iter().position(|b| &*b.bank.name == bank);
        let b = found.ok_or_else(|| RestoreError::NoSuchBank(own()))?;
        let watched = &mut self.banks[b];
        let (mut state, told) = restore::decode(bank, state)?;
        self.post.restore(b, told);
        let adapted = state.windows.adapt(&watched.bank);
        if !adapted {
            state.start_over(&watched.bank);
        }
        *watched = Watched::with_state(watched.bank.clone(), state);
        self.changed = true;
        if adapted {
            Ok(())
        } else {
            Err(RestoreError::PairingChanged(own()))
        }
    }

    /// Goes on counting after what the store holds, when all of it has been replayed: the number of
    /// the last turn, and the deliveries that wait.
    pub fn resume(&mut self, last_turn: u64, outbox: &[Delivery]) {
        self.last_turn = self.last_turn.max(last_turn);
        self.post.resume(outbox);
        // What was replayed has been counted before this process began.
        for bank in &mut self.banks {
            bank.outcomes.clear();
            bank.raised.clear();
            bank.dirty = true;
        }
        self.changed = true;
    }

    /// Numbers a bank's notices after `last`, where its state is lost and its notices are not.
    pub fn number_notices_after(&mut self, bank: &str, last: u64) {
        let found = self.banks.iter_mut().find(|b| &*b.bank.name == bank);
        if let Some(bank) = found {
            bank.state.notices = bank.state.notices.max(last);
        }
    }

    /// Applies a turn from the journal again. Banks whose checkpoint already contains it leave it
    /// alone; nothing is asked for, since what the turn asked for was done then.
    pub fn replay(&mut self, turn: Turn) {
        let number = turn.number;
        let _ = self.apply(number, turn.event, turn.now);
        self.last_turn = self.last_turn.max(number);
    }

    /// Takes in an event and says what is to be done.
    pub fn handle(&mut self, event: Event, now: Time) -> Vec<Effect> {
        let number = self.last_turn + 1;
        let (kept, mut effects) = self.apply(number, event, now);
        if let Some(event) = kept {
            self.last_turn = number;
            let turn = Turn { number, now, event };
            effects.insert(0, Effect::Keep(Record::Turn(turn)));
        }
        effects
    }

    /// Applies an event; returns what of it the journal must hold, and what is to be done.
    fn apply(&mut self, number: u64, event: Event, now: Time) -> (Option<Event>, Vec<Effect>) {
        self.changed = true;
        match event {
            Event::Measurements(all) => {
                let mut effects = Vec::new();
                let kept = self.measurements(number, all, now, &mut effects);
                let kept = (!kept.is_empty()).then_some(Event::Measurements(kept));
                (kept, effects)
            }
            Event::Refusals(refusals) => {
                for refusal in refusals {
                    self.refuse(refusal, now);
                }
                (None, Vec::new())
            }
            Event::Deadline => self.deadline(number, now),
            Event::Due(due) => {
                let mut effects = Vec::new();
                self.do_due(number, &due, now, &mut effects);
                (Some(Event::Due(due)), effects)
            }
            Event::Command { ticket, who, what } => self.command(number, (ticket, who), what, now),
            Event::Delivered { number } => {
                self.post.delivered(number);
                (None, vec![Effect::Keep(Record::Delivered { number })])
            }
            Event::NotDelivered { number, why } => {
                self.post.not_delivered(number, why);
                (None, Vec::new())
            }
            Event::Condition { part, condition } => {
                match part {
                    Part::Broker => self.broker_is(condition, now),
                    Part::Store => self.store = condition,
                }
                (None, Vec::new())
            }
        }
    }

    fn measurements(
        &mut self,
        number: u64,
        all: Vec<Measurement>,
        now: Time,
        effects: &mut Vec<Effect>,
    ) -> Vec<Measurement> {
        let mut kept = Vec::with_capacity(all.len());
        let contained: Vec<bool> = self.banks.iter().map(|b| b.state.turn >= number).collect();
        for m in all {
            let b = m.bank.index();
            let Some(bank) = self.banks.get_mut(b) else {
                continue;
            };
            if contained[b] {
                continue;
            }
            bank.dirty = true;
            match bank.accept(&m, now) {
                Ok(()) => {
                    bank.mark(number);
                    if let Some(taken) = m.taken {
                        bank.senses.timed(&m.source, taken, now);
                    }
                    let called = bank.watch(&self.plant, now);
                    kept.push(m);
                    if let Some(called) = called {
                        self.tell(b, called, number, now, effects);
                    }
                }
                Err(reason) => {
                    if matches!(reason, Reason::TooFarAhead | Reason::TooOld) {
                        bank.senses.refused(&m.source, now);
                    }
                    let refusal = view::refusal_of(&m, reason, bank, now);
                    self.refuse(refusal, now);
                }
            }
        }
        kept
    }

    fn refuse(&mut self, refusal: Refusal, now: Time) {
        let bank = refusal.bank.and_then(|b| self.banks.get_mut(b.index()));
        let list = match bank {
            Some(bank) => {
                bank.dirty = true;
                *bank.outcomes.entry(refusal.reason.word()).or_insert(0) += 1;
                &mut bank.refusals
            }
            None => &mut self.refusals,
        };
        view::count_refusal(list, refusal, now);
    }

    fn deadline(&mut self, number: u64, now: Time) -> (Option<Event>, Vec<Effect>) {
        let due = self.what_is_due(now);
        let nothing = due == Due::default();
        let mut effects = Vec::new();
        if !nothing {
            self.do_due(number, &due, now, &mut effects);
        }
        for b in 0..self.banks.len() {
            effects.extend(self.checkpoint_if_due(b, now));
        }
        ((!nothing).then_some(Event::Due(due)), effects)
    }

    fn what_is_due(&mut self, now: Time) -> Due {
        let mut due = Due::default();
        let intake = self.intake();
        for (b, bank) in self.banks.iter_mut().enumerate() {
            let ix = BankIx(b as u16);
            if bank.next_silence_check.is_none_or(|at| at <= now) {
                bank.next_silence_check = Some(now.plus_us(SILENCE_EVERY_US));
                due.silent
                    .extend(bank.fallen_silent(now).into_iter().map(|s| (ix, s)));
                // Trouble of the whole plant is told once, with the first bank.
                let intake = (b == 0).then_some(&intake);
                let judged = bank.judge(&self.plant.manners, intake, now).into_iter();
                due.conditions.extend(judged.map(|(kind, troubles)| Judged {
                    bank: ix,
                    kind,
                    troubles,
                }));
            }
            if bank.state.look_due.is_some_and(|at| at <= now) {
                due.looks.push(ix);
            }
            if bank.wants_upkeep(&self.plant.manners, now) {
                due.upkeep.push(ix);
            }
        }
        due.onward = self.post.due(&self.banks, &self.plant, now);
        due
    }

    fn do_due(&mut self, number: u64, due: &Due, now: Time, effects: &mut Vec<Effect>) {
        let contained: Vec<bool> = self.banks.iter().map(|b| b.state.turn >= number).collect();
        let open = |b: BankIx| contained.get(b.index()) == Some(&false);
        for &(b, source) in due.silent.iter().filter(|(b, _)| open(*b)) {
            let bank = &mut self.banks[b.index()];
            bank.silence(source);
            bank.mark(number);
            // Nobody waits for it any more, so cycles may have closed.
            if let Some(called) = bank.watch(&self.plant, now) {
                self.tell(b.index(), called, number, now, effects);
            }
        }
        for &b in due.looks.iter().filter(|b| open(**b)) {
            let bank = &mut self.banks[b.index()];
            let looked = bank.look(&self.plant, now);
            bank.mark(number);
            self.tell(b.index(), looked, number, now, effects);
        }
        for judged in due.conditions.iter().filter(|j| open(j.bank)) {
            let bank = &mut self.banks[judged.bank.index()];
            let changed = bank.condition(&self.plant, judged, now);
            bank.mark(number);
            let kept = changed.map(|(notice, _)| notice);
            self.keep_and_send(judged.bank.index(), kept, number, now, effects);
        }
        for &b in due.upkeep.iter().filter(|b| open(**b)) {
            let bank = &mut self.banks[b.index()];
            let changed = bank.upkeep(&self.plant.manners, now);
            bank.mark(number);
            self.keep_and_send(b.index(), changed, number, now, effects);
        }
        for onward in due.onward.iter().filter(|o| open(o.bank)) {
            let bank = &mut self.banks[onward.bank.index()];
            self.post
                .go_on(onward, bank, Moment { turn: number, now }, effects);
            bank.mark(number);
        }
    }

    fn keep_and_send(
        &mut self,
        b: usize,
        changed: impl IntoIterator<Item = Arc<Notice>>,
        number: u64,
        now: Time,
        effects: &mut Vec<Effect>,
    ) {
        let kept = changed.into_iter().map(Record::Notice);
        effects.extend(kept.map(Effect::Keep));
        self.send(b, number, now, effects);
    }

    /// What a look brought, as effects.
    fn tell(
        &mut self,
        b: usize,
        looked: Looked,
        number: u64,
        now: Time,
        effects: &mut Vec<Effect>,
    ) {
        let bank = &mut self.banks[b];
        let premises = bank.premises.take();
        let bank = &self.banks[b];
        let name = bank.bank.name.clone();
        for look in &looked.looks {
            effects.push(Effect::Keep(Record::Digest(name.clone(), look.digest())));
            if looked.keep_whole {
                effects.push(Effect::Keep(Record::Look(look.clone())));
            }
        }
        for (notice, freshness) in looked.changed {
            effects.push(Effect::Keep(Record::Notice(notice.clone())));
            if freshness == Freshness::Raised
                && let Some(premises) = &premises
            {
                effects.push(Effect::Keep(Record::Evidence {
                    notice: notice.id.clone(),
                    evidence: Box::new(bank.evidence(&looked.looks, premises)),
                }));
            }
        }
        self.send(b, number, now, effects);
    }

    pub(super) fn send(&mut self, b: usize, turn: u64, now: Time, effects: &mut Vec<Effect>) {
        let (bank, at) = (&mut self.banks[b], Moment { turn, now });
        self.post.send(b, bank, &self.plant, at, effects);
    }

    fn checkpoint_if_due(&mut self, b: usize, now: Time) -> Option<Effect> {
        let bank = &mut self.banks[b];
        let last = *bank.last_checkpoint.get_or_insert(now);
        let due = bank.is_behind(self.last_turn) && now.us_since(last) >= CHECKPOINT_EVERY_US;
        let told = self.post.told(b);
        due.then(|| Effect::Keep(checkpoint(bank, told, self.last_turn, now)))
    }

    /// The state of every bank that changed since its last checkpoint; for the end of the program.
    pub fn checkpoints(&mut self, now: Time) -> Vec<Record> {
        let (last, post) = (self.last_turn, &self.post);
        let banks = self.banks.iter_mut().enumerate();
        let behind = banks.filter_map(|(b, bank)| bank.is_behind(last).then_some((b, bank)));
        behind
            .map(|(b, bank)| checkpoint(bank, post.told(b), last, now))
            .collect()
    }

    /// The broker is another than before.
    fn broker_is(&mut self, condition: Condition, now: Time) {
        if condition != self.broker {
            self.broker_since = now;
        }
        self.broker = condition;
        if matches!(self.broker, Condition::Trouble(_)) {
            self.banks.iter_mut().for_each(Watched::lose_hearing);
        }
        // Also a plant that has never heard anything is told why.
        if let Some(first) = self.banks.first_mut() {
            first.next_silence_check.get_or_insert(now);
        }
    }

    fn intake(&self) -> Intake {
        match &self.broker {
            Condition::Starting => Intake::Unknown,
            Condition::Well | Condition::Noted(_) => Intake::Well,
            Condition::Trouble(what) => Intake::Trouble(Trouble {
                source: None,
                since: self.broker_since,
                detail: Detail::Intake(what.clone()),
            }),
        }
    }

    /// When [`Event::Deadline`] should come next.
    pub fn next_deadline(&self) -> Option<Time> {
        let onward = self.post.next_due(&self.banks, &self.plant);
        let banks = self.banks.iter().filter_map(next_deadline);
        let manners = &self.plant.manners;
        let upkeep = self.banks.iter().filter_map(|b| b.next_upkeep(manners));
        banks.chain(onward).chain(upkeep).min()
    }

    /// Looks at every bank with whatever is there, without consequences: what a rehearsal ends with.
    pub fn look_now(&self, now: Time) -> Vec<Arc<Look>> {
        let all = self
            .banks
            .iter()
            .flat_map(|b| b.examine(now, Need::Whatever, None).looks);
        all.map(Arc::new).collect()
    }

    /// Whether any bank's newest look at its spans found something apart.
    pub fn anything_apart(&self) -> bool {
        let apart = |l: &Arc<Look>| matches!(l.finding, Finding::LevelApart | Finding::SpreadApart);
        self.banks.iter().any(|b| b.state.looks.iter().any(apart))
    }

    /// Whether [`Engine::snapshot`] would give a new one.
    pub fn has_changed(&self) -> bool {
        self.changed
    }

    /// The present, for pages and metrics; the same `Arc` while nothing changed.
    pub fn snapshot(&mut self) -> Arc<Snapshot> {
        if !std::mem::take(&mut self.changed) {
            return self.snapshot.clone();
        }
        let before = self.snapshot.clone();
        let banks = self
            .banks
            .iter_mut()
            .enumerate()
            .map(|(b, bank)| match before.banks.get(b) {
                Some(old) if !std::mem::take(&mut bank.dirty) => old.clone(),
                _ => {
                    bank.dirty = false;
                    Arc::new(view::bank_view(bank))
                }
            });
        self.snapshot = Arc::new(Snapshot {
            version: before.version + 1,
            plant: self.plant.clone(),
            broker: self.broker.clone(),
            store: self.store.clone(),
            banks: banks.collect(),
            refusals: self.refusals.clone(),
            outlets: self.post.views(),
        });
        self.snapshot.clone()
    }
}

fn next_deadline(bank: &Watched) -> Option<Time> {
    let began = bank.state.began.or(bank.next_silence_check)?;
    let checkpoint = bank
        .last_checkpoint
        .map(|at| at.plus_us(CHECKPOINT_EVERY_US));
    let checkpoint = checkpoint.filter(|_| bank.unsaved);
    let silence = bank.next_silence_check.unwrap_or(began);
    [bank.state.look_due, checkpoint, Some(silence)]
        .into_iter()
        .flatten()
        .min()
}
