//! What people ask for, and the answers.

use crate::model::{BankIx, LineEvent, Name, Time};
use crate::notice::{Deed, Said};

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
            Command::Evidence { bank } => Done::answer(match self.banks.get(bank.index()) {
                Some(b) => Outcome::Evidence(Box::new(b.evidence_now(now))),
                None => no_bank(),
            }),
            Command::Notice {
                notice,
                deed,
                comment,
            } => {
                let said = Said {
                    by: who.clone(),
                    at: now,
                    comment: comment.clone(),
                };
                self.act(number, notice, *deed, said)
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

    /// Does something with a notice that is open, or has been over for a little while.
    fn act(&mut self, number: u64, id: &str, deed: Deed, said: Said) -> Done {
        let (plant, now) = (self.plant.clone(), said.at);
        let mut banks = self.banks.iter_mut().enumerate();
        let found = banks.find_map(|(b, bank)| {
            // A bank whose checkpoint contains this turn has it already.
            let fresh = bank.state.turn < number;
            let acted = fresh.then(|| bank.state.act(id, deed, said.clone(), &plant.manners))??;
            Some((b, acted))
        });
        let (b, acted) = match found {
            None => {
                let why = format!("no open notice has the id \"{id}\"");
                return Done::answer(Outcome::NotFound(why));
            }
            Some((_, Err(why))) => return Done::answer(Outcome::Refused(why)),
            Some((b, Ok(acted))) => (b, acted),
        };
        let mut effects = Vec::new();
        if acted.news {
            self.banks[b].mark(number);
            effects.push(Effect::Keep(Record::Notice(acted.notice.clone())));
            self.send(b, number, now, &mut effects);
        }
        Done {
            outcome: Outcome::Notice(acted.notice),
            effects,
            kept: acted.news,
        }
    }
}

fn no_bank() -> Outcome {
    Outcome::NotFound("there is no such bank".to_owned())
}
