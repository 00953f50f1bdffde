//! What people ask for, and the answers.

use std::sync::Arc;

use crate::model::{BankIx, LineEvent, Name, Time};
use crate::notice::{Acknowledgement, Notice};

use super::{Command, Effect, Engine, Event, Outcome, Record, Ticket};

/// What a command came to.
struct Done {
    outcome: Outcome,
    /// What is to be done besides answering.
    effects: Vec<Effect>,
    /// Whether the journal must hold the command.
    kept: bool,
}

impl Done {
    fn answer(outcome: Outcome) -> Self {
        Self {
            outcome,
            effects: Vec::new(),
            kept: false,
        }
    }
}

impl Engine {
    /// Does what a person asks; returns what the journal must hold, and what is to be done.
    pub(super) fn command(
        &mut self,
        number: u64,
        (ticket, who): (Ticket, Name),
        what: Command,
        now: Time,
    ) -> (Option<Event>, Vec<Effect>) {
        let done = match &what {
            Command::Windows { bank } => Done::answer(match self.banks.get(bank.index()) {
                Some(b) => Outcome::Windows(b.window_views()),
                None => no_bank(),
            }),
            Command::Acknowledge { notice, comment } => {
                let acknowledgement = Acknowledgement {
                    by: who.clone(),
                    at: now,
                    comment: comment.clone(),
                };
                self.acknowledge(number, notice, acknowledgement)
            }
            Command::Line {
                bank,
                change,
                reason,
            } => {
                let event = LineEvent {
                    at: now,
                    by: who.clone(),
                    change: change.clone(),
                    reason: reason.clone(),
                };
                self.line_event(number, *bank, event)
            }
        };
        let mut effects = done.effects;
        let kept = done.kept.then_some(Event::Command { ticket, who, what });
        effects.push(Effect::Answer {
            ticket,
            outcome: done.outcome,
        });
        (kept, effects)
    }

    fn line_event(&mut self, number: u64, bank: BankIx, event: LineEvent) -> Done {
        let Some(watched) = self.banks.get_mut(bank.index()) else {
            return Done::answer(no_bank());
        };
        if watched.state.turn >= number {
            return Done::answer(Outcome::Line(event));
        }
        if let Err(why) = watched.line_event(&event) {
            let source = event.change.source();
            let is_unknown = source.is_some_and(|s| watched.source_named(s).is_none());
            let outcome = if is_unknown {
                Outcome::NotFound(why)
            } else {
                Outcome::Refused(why)
            };
            return Done::answer(outcome);
        }
        watched.mark(number);
        let record = Record::Line {
            bank: watched.bank.name.clone(),
            turn: number,
            event: event.clone(),
        };
        Done {
            outcome: Outcome::Line(event),
            effects: vec![Effect::Keep(record)],
            kept: true,
        }
    }

    fn acknowledge(&mut self, number: u64, id: &str, acknowledgement: Acknowledgement) -> Done {
        let now = acknowledgement.at;
        let Some((b, after, news)) = self.acknowledged(number, id, acknowledgement) else {
            let why = format!("no open notice has the id \"{id}\"");
            return Done::answer(Outcome::NotFound(why));
        };
        let mut effects = Vec::new();
        if news {
            effects.push(Effect::Keep(Record::Notice(after.clone())));
            self.send(b, number, now, &mut effects);
        }
        Done {
            outcome: Outcome::Acknowledged(after),
            effects,
            kept: news,
        }
    }

    /// The bank, the notice after it, and whether anything changed.
    fn acknowledged(
        &mut self,
        number: u64,
        id: &str,
        acknowledgement: Acknowledgement,
    ) -> Option<(usize, Arc<Notice>, bool)> {
        let own = |bank: &mut super::bank::Watched| {
            let incidents = bank.state.incidents.iter();
            let place = incidents.into_iter().position(|i| &*i.notice.id == id)?;
            (bank.state.turn < number).then_some(place)
        };
        let mut banks = self.banks.iter_mut().enumerate();
        let (b, i) = banks.find_map(|(b, bank)| Some((b, own(bank)?)))?;
        let bank = &mut self.banks[b];
        let incident = &mut bank.state.incidents[i];
        let before = incident.notice.state;
        incident.acknowledge(acknowledgement);
        let news = incident.notice.state != before;
        let after = incident.notice.clone();
        if news {
            bank.mark(number);
        }
        Some((b, after, news))
    }
}

fn no_bank() -> Outcome {
    Outcome::NotFound("there is no such bank".to_owned())
}
