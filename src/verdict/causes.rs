//! One cause for what was called, looked for once its start is known: a pattern over the machine, all
//! sources read as their neighbours, and what the others did meanwhile.

use crate::model::{Bank, Name, SourceIx};
use crate::stats;

use super::data::{Data, Values};
use super::examine::{Began, Call, Participant};
use super::level::Level;
use super::look::Dependence;
use super::pattern::{self, Machine, Pattern};
use super::slip::{self, Places, Slip, SlipFinding};

/// Fewest values of each source on which a cause is looked for.
const FEWEST: usize = 5;

/// What explains a call besides names.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Causes {
    /// The machine's geometry explains it.
    pub pattern: Option<Pattern>,
    /// All sources read as others.
    pub slip: Option<Slip>,
    /// Mean of the others since the start less their mean before it, in the unit; `None` where nothing
    /// is left from before.
    pub common_movement: Option<f64>,
}

/// Looks for the causes of a call about level that began at `start`. A slip moves many sources, so it is
/// looked for when more than one is named.
pub fn causes(
    bank: &Bank,
    who: &[Participant],
    data: &Data,
    start: &Began,
    call: &Call,
    known: Option<Dependence>,
) -> Causes {
    let judged = |cut: Option<Data>| {
        let cut = cut.filter(|c| c.columns().iter().all(|v| v.len() >= FEWEST))?;
        let level = Level::judge(&cut, &vec![bank.margin; cut.sources.len()], None, known).ok()?;
        Some((cut, level))
    };
    let common_movement = common_movement(data, start, &call.reference);
    let Some((since, after)) = judged(data.since(start.start.place)) else {
        return Causes {
            common_movement,
            ..Causes::default()
        };
    };
    let Some(machine) = Machine::of(bank) else {
        return Causes {
            common_movement,
            ..Causes::default()
        };
    };
    let earlier = (call.named.len() > 1).then(|| data.before(start.earliest.place));
    let before = judged(earlier.flatten());
    let slip = before.and_then(|(cut, before)| {
        let places = |cut: &Data, level: &Level| places(cut, level, who, &machine);
        match slip::find(&places(&cut, &before)?, &places(&since, &after)?) {
            SlipFinding::Slipped(slip) => Some(slip),
            SlipFinding::No | SlipFinding::CannotTell => None,
        }
    });
    Causes {
        pattern: pattern::find(&after, &names(&since, who), &machine),
        slip,
        common_movement,
    }
}

fn names(cut: &Data, who: &[Participant]) -> Vec<Name> {
    let name = |s: &SourceIx| who.iter().find(|p| p.source == *s);
    let names = cut.sources.iter().map(|s| name(s).map(|p| p.name.clone()));
    names.map(|n| n.unwrap_or_else(|| "".into())).collect()
}

/// The places as read, when every listed source is there.
fn places(cut: &Data, level: &Level, who: &[Participant], machine: &Machine) -> Option<Places> {
    let names = names(cut, who);
    let column = |listed: &Name| names.iter().position(|n| n == listed);
    let order: Vec<usize> = machine.listed.iter().map(column).collect::<Option<_>>()?;
    let offsets: Vec<f64> = cut.usual.iter().map(|u| u.place).collect();
    Some(Places::of(level, &order, &offsets))
}

/// How far the others moved together: their mean since the start less that of as many values before the
/// earliest start.
fn common_movement(data: &Data, start: &Began, reference: &[SourceIx]) -> Option<f64> {
    let mean = |cut: &Data, newest: usize| -> Option<f64> {
        let columns = cut.columns();
        let those = reference.iter().filter_map(|s| cut.column_of(*s));
        let means = those.map(|c| {
            let column = &columns[c];
            stats::summarize(&column[column.len().saturating_sub(newest)..]).mean
        });
        let means: Vec<f64> = means.collect();
        (!means.is_empty()).then(|| means.iter().sum::<f64>() / means.len() as f64)
    };
    let (since, before) = (
        data.since(start.start.place)?,
        data.before(start.earliest.place)?,
    );
    let length = match &since.values {
        Values::Paired(rows) => rows.len(),
        Values::Alone(series) => series.iter().map(Vec::len).max()?,
    };
    Some(mean(&since, length)? - mean(&before, length)?)
}
