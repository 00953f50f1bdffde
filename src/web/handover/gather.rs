//! Gathers a handover.

use crate::engine::{BankView, History, HistoryError, Load, Snapshot};
use crate::model::{Bank, LineChange, LineEvent, Name, Time, US_PER_DAY, US_PER_S, fixed, signed};
use crate::notice::{Kind, NamedSource, Notice};
use crate::settings::Settings;
use crate::verdict::{Look, SourceLook};

use super::figures::{LevelFigures, Tolerable};
use super::stretch::Stretch;
use super::{BankPart, BudgetPart, EventPart, Handover, LoadPart, NoticePart, SourcePart};

/// Line events of a shift and bank: one a minute.
const MOST_EVENTS: usize = 500;
/// Notices read at once.
const PART: usize = 200;
/// A notice that stands for longer than this is no news for a handover.
const BACK_US: i64 = 60 * US_PER_DAY;

/// What is known besides the history.
#[derive(Clone, Copy)]
pub struct Present<'a> {
    /// The settings.
    pub settings: &'a Settings,
    /// The present, where the daemon runs.
    pub snapshot: Option<&'a Snapshot>,
    /// Now.
    pub now: Time,
    /// Whether tolerable errors are shown.
    pub tolerable: Tolerable,
}

/// The handover of a shift.
///
/// # Errors
/// When the history cannot be read.
pub fn gather(
    present: Present<'_>,
    history: &dyn History,
    stretch: &Stretch,
) -> Result<Handover, HistoryError> {
    let settings = present.settings;
    let notices = notices(history, stretch)?;
    let banks = settings.banks.iter().enumerate();
    let banks = banks.map(|(b, bank)| {
        let view = present.snapshot.and_then(|s| s.banks.get(b));
        let view = view.map(AsRef::as_ref);
        let own: Vec<&Notice> = notices.iter().filter(|n| n.bank == bank.name).collect();
        bank_part(present, history, stretch, (bank, view), &own)
    });
    Ok(Handover {
        plant: settings.plant.name.to_string(),
        zone: settings.plant.zone.iana_name().unwrap_or("UTC").to_owned(),
        shift: stretch.name.to_string(),
        date: stretch.date.to_string(),
        from: stretch.from,
        to: stretch.to,
        made: present.now,
        banks: banks.collect::<Result<_, _>>()?,
        load: present.snapshot.map(|s| load(s, present.now)),
    })
}

fn load(snapshot: &Snapshot, now: Time) -> LoadPart {
    let load = Load::of(snapshot.banks.iter().map(AsRef::as_ref), now);
    LoadPart {
        last_day: load.last_day,
        most_a_day: Load::MOST_A_DAY,
        last_ten_minutes: load.last_ten_minutes,
        chattering: load.chattering,
        standing: load.standing,
        stale: load.stale,
        flood: load.is_flood(),
    }
}

/// Every notice that was raised in the stretch or not over when it began, oldest first.
fn notices(history: &dyn History, stretch: &Stretch) -> Result<Vec<Notice>, HistoryError> {
    let oldest = stretch.from.plus_us(-BACK_US);
    let concerns = |n: &Notice| {
        let lasted = n.state.is_open() || n.changed >= stretch.from;
        n.raised < stretch.to && (n.raised >= stretch.from || lasted)
    };
    let mut found = Vec::new();
    let mut after: Option<String> = None;
    loop {
        let part = history.notices(after.as_deref(), PART)?;
        let over = part.items.last().is_none_or(|n| n.raised < oldest);
        found.extend(part.items.into_iter().filter(concerns));
        after = part.next.filter(|_| !over);
        if after.is_none() {
            found.reverse();
            return Ok(found);
        }
    }
}

fn bank_part(
    present: Present<'_>,
    history: &dyn History,
    stretch: &Stretch,
    (bank, view): (&Bank, Option<&BankView>),
    notices: &[&Notice],
) -> Result<BankPart, HistoryError> {
    let Stretch { from, to, .. } = *stretch;
    // The product of now says target and declared quantity, where the daemon runs.
    let bank = view.map_or(bank, |v| &v.bank);
    let look = shown(history.looks_at(&bank.name, to)?, from);
    let is_new = |n: &&&Notice| n.raised >= from;
    let raised: Vec<NoticePart> = notices.iter().filter(is_new).map(notice).collect();
    let carried = notices.iter().filter(|n| !is_new(n)).map(notice);
    let events = history.line_events(&bank.name, from, to, MOST_EVENTS)?;
    let interval_us = view.and_then(|v| v.interval_us);
    let what = &bank.characteristic;
    Ok(BankPart {
        bank: bank.name.to_string(),
        characteristic: what.name.to_string(),
        unit: what.unit.to_string(),
        places: what.places() + 1,
        margin: bank.margin,
        response_s: median(raised.iter().filter_map(|n| n.response_s).collect()),
        raised,
        carried: carried.collect(),
        events: events.iter().map(|e| event(e, bank)).collect(),
        looked: look.as_ref().map(|l| l.at),
        sources: look.iter().flat_map(|l| &l.sources).map(source).collect(),
        level: look
            .as_ref()
            .and_then(|l| LevelFigures::of(bank, l, interval_us, present.tolerable)),
        measurements: view.map(|v| {
            let outcomes = v.outcomes.iter();
            outcomes.map(|(word, n)| ((*word).to_owned(), *n)).collect()
        }),
        silent: view.map_or_else(Vec::new, silent),
        budget: view.and_then(|v| v.kept.as_ref()).map(|k| BudgetPart {
            keeping: k.keeping.word().to_owned(),
            words: k.keeping.words().to_owned(),
            calls: k.calls,
            told: k.told,
            nothing_found: k.nothing_found,
            days: k.days,
            allowed: k.allowed,
        }),
    })
}

/// The longest look of the shift that could judge: the most certain picture of its end.
fn shown(looks: Vec<Look>, from: Time) -> Option<Look> {
    let judged = looks.into_iter().filter(|l| !l.sources.is_empty());
    judged.filter(|l| l.at >= from).max_by_key(|l| l.span)
}

fn silent(view: &BankView) -> Vec<String> {
    let silent = view.sources.iter();
    let silent = silent.filter(|s| s.state == crate::engine::SourceState::Silent);
    silent.map(|s| s.name.to_string()).collect()
}

fn source(look: &SourceLook) -> SourcePart {
    let three = |e: &crate::verdict::Estimate| [e.value, e.low, e.high];
    SourcePart {
        source: look.name.to_string(),
        deviation: look.deviation.as_ref().map(three),
        sd_ratio: look.sd_ratio.as_ref().map(three),
        named: look.named_level || look.named_spread,
    }
}

fn notice(notice: &&Notice) -> NoticePart {
    let seen = notice.acknowledged.as_ref();
    let response_us = seen.map(|a| a.at.us_since(notice.raised));
    let said = notice.handling.entries.iter();
    let said = said.filter(|e| !e.comment.is_empty());
    NoticePart {
        id: notice.id.to_string(),
        kind: notice.kind.word().to_owned(),
        subject: notice.subject.clone(),
        was: was(notice),
        state: notice.state.words().to_owned(),
        open: notice.state.is_open(),
        raised: notice.raised,
        returned: notice.returned,
        by: seen.map(|a| a.by.to_string()),
        response_s: response_us.map(|us| us as f64 / US_PER_S as f64),
        shelved_until: notice.handling.shelved_until,
        outcome: notice.handling.outcome.map(|o| o.words().to_owned()),
        comments: said.map(|e| format!("{}: {}", e.by, e.comment)).collect(),
    }
}

/// What it was about, whatever its subject says by now: up to three names with their figures.
fn was(notice: &Notice) -> String {
    let figure = |s: &NamedSource| match notice.kind {
        Kind::SpreadApart => format!("{} {}×", s.source, fixed(s.deviation, 1)),
        kind if kind.is_call() => {
            format!("{} {} {}", s.source, signed(s.deviation, 2), notice.unit)
        }
        _ => s.source.to_string(),
    };
    let named = notice.sources.iter().take(3).map(figure);
    let named: Vec<String> = named.collect();
    let more = notice.sources.len().saturating_sub(3);
    let more = (more > 0).then(|| format!(" and {more} more"));
    let what = notice.kind.words();
    match named.is_empty() {
        true => what.to_owned(),
        false => format!("{what}: {}{}", named.join(", "), more.unwrap_or_default()),
    }
}

fn event(event: &LineEvent, bank: &Bank) -> EventPart {
    let what = &bank.characteristic;
    let of = |source: &Name| format!("{} of {source}", event.change.words());
    let words = match &event.change {
        LineChange::Changeover { product, .. } => format!("changeover to {product}"),
        LineChange::Adjustment {
            source,
            by: Some(by),
        } => format!(
            "{} by {} {}",
            of(source),
            signed(*by, what.places() + 1),
            what.unit
        ),
        LineChange::Adjustment { source, by: None } => of(source),
        LineChange::OutOfUse { source } | LineChange::BackInUse { source } => {
            format!("{source} {}", event.change.words())
        }
        LineChange::Stop | LineChange::Start => event.change.words().to_owned(),
    };
    EventPart {
        at: event.at,
        what: words,
        by: event.by.to_string(),
        reason: event.reason.clone(),
    }
}

fn median(mut all: Vec<f64>) -> Option<f64> {
    all.sort_by(f64::total_cmp);
    let middle = all.len() / 2;
    match all.len() {
        0 => None,
        n if n % 2 == 1 => Some(all[middle]),
        _ => Some((all[middle - 1] + all[middle]) / 2.0),
    }
}
