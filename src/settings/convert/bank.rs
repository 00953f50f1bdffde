//! `[[bank]]`: what is compared, how, and when somebody is called.

use std::collections::BTreeSet;

use crate::model::{Bank, BankIx, Budget, Characteristic, Layout, Name, Offsets, Sources, Value};
use crate::settings::check::{Check, D, S, unfit};
use crate::settings::fault::{FaultList, Place};
use crate::settings::keys;
use crate::settings::raw::{Kind, Node};
use crate::settings::section::{Field, Spot};
use crate::settings::written::{WrittenBank, WrittenLimits, WrittenSources};
use crate::settings::{Feed, ToldBy};
use crate::stats::dist::studentized_range;

use super::feed::{WrittenFeed, feed};
use super::known::{WrittenKnown, known as known_of};
use super::pairing;
use super::shifts::{self, OfPlant};

/// Spans when nothing else is said: a factor 4 apart, as the call budget's arithmetic prefers.
const SPANS: [usize; 4] = [10, 40, 160, 640];
/// The longest span: 60 sources of as many values are 100 MB.
const LONGEST_SPAN: i64 = 100_000;
/// The longest span where places are learnt.
const LONGEST_LEARNT: i64 = 640;
/// Every span takes its share of the budget; more than these would leave none.
const MOST_SPANS: usize = 20;
/// Time between looks when nothing else is said.
const LOOK_EVERY_US: i64 = 30 * S;
/// Largest ratio of standard deviations that does not matter, when nothing else is said.
const SPREAD_MARGIN: f64 = 1.5;
/// The statistics compare at most this many.
const MOST_SOURCES: i64 = studentized_range::MOST_SOURCES as i64;
/// Sources that may be discovered when nothing else is said: the largest fillers have fewer heads.
const DISCOVERED: u16 = 120;
/// A cycle waits this long when nothing else is said.
const WAIT_CYCLES: u32 = 3;
/// A value may be this old when nothing else is said.
const OLDEST_DAYS: i64 = 30;

/// The bank and its feed.
pub(super) fn bank(
    ix: BankIx,
    written: WrittenBank,
    plant: &OfPlant,
    faults: &mut FaultList,
) -> Option<(Bank, Feed)> {
    let WrittenBank {
        place,
        name,
        equipment,
        characteristic,
        unit,
        resolution,
        target,
        declared,
        limits,
        topic,
        payload,
        sentinels,
        plausible,
        sources,
        most_sources,
        pairing,
        spans,
        look_every,
        margin,
        spread_margin,
        false_calls,
        wait_cycles,
        silent_after,
        oldest_days,
        layout,
        groups,
        cost_per_unit,
        reference,
        offsets,
        recording,
    } = written;
    let told_by = shifts::told_by(&sources);
    let heard = feed(
        ix,
        WrittenFeed {
            place: place.clone(),
            topic,
            payload,
            sentinels,
            plausible,
            recording,
            unit: unit.peek().map(|spot| spot.value.clone()),
            listed: listed_names(&sources),
            zone: plant.zone.clone(),
            told_by,
        },
        faults,
    );
    let limits = limits_of(limits, faults);
    let mut check = Check::new("bank", &place, faults);
    let name = check.required(name, "name");
    let name = check.name(name, "name");
    let equipment = check.name(equipment, "equipment");
    let unit = check.required(unit, "unit");
    let measured = Measured {
        name: check.name(characteristic, "characteristic"),
        unit: check.name(unit, "unit"),
        resolution: check.number(resolution, "resolution", |x| x > 0.0, "above 0"),
        target: check.value(target, "target"),
        declared: check.value(declared, "declared"),
        limits,
    };
    let margin = margin_of(margin, measured.resolution.as_ref(), &mut check);
    let is_declared = measured.declared.is_some();
    let characteristic = measured.characteristic(&mut check);
    if told_by == ToldBy::Time {
        let keys = [
            ("most_sources", most_sources.peek().map(|spot| &spot.place)),
            ("look_every", look_every.peek().map(|spot| &spot.place)),
            ("wait_cycles", wait_cycles.peek().map(|spot| &spot.place)),
            ("layout", layout.peek().map(|spot| &spot.place)),
            ("groups", groups.peek().map(|spot| &spot.place)),
        ];
        shifts::mean_nothing(&keys, &mut check);
    }
    let usual = Usual::of(told_by);
    let in_topic = heard.source_in_topic;
    let sources = who(sources, most_sources, (in_topic, plant), &mut check);
    let pairing = pairing::pairing(pairing, (told_by, heard.without_cycle), &mut check);
    pairing::waits_for_cycles(&wait_cycles, pairing, &mut check);
    let known = WrittenKnown {
        groups,
        cost_per_unit,
        reference,
        offsets,
    };
    let known = known_of(known, sources.as_ref(), is_declared, &mut check);
    let learns = known.offsets == Offsets::Learn;
    no_long_spans(&spans, learns, &mut check);
    let spans = spans_of(spans, usual.spans, &mut check);
    let look_every_us = check.duration_us(look_every, "look_every", S..=7 * D);
    let look_every_us = look_every_us.unwrap_or(usual.look_every_us);
    let above_1 = "above 1: a ratio of two standard deviations";
    let spread = check.number(spread_margin, "spread_margin", |x| x > 1.0, above_1);
    let budget = budget_of(false_calls, look_every_us, &mut check);
    let layouts = [("row", Layout::Row), ("ring", Layout::Ring)];
    let layout = check.word(layout, "layout", &layouts);
    let wait_cycles = check.whole(wait_cycles, "wait_cycles", 1..=1000);
    let silent_after_us = check.duration_us(
        silent_after,
        "silent_after",
        usual.least_silent_us..=366 * D,
    );
    let oldest_days = check.whole(oldest_days, "oldest_days", 1..=36_525);
    let bank = Bank {
        name: name?,
        equipment,
        characteristic: characteristic?,
        sources: sources?,
        pairing: pairing?,
        spans: spans?,
        look_every_us,
        margin: margin?,
        spread_margin: spread.map_or(SPREAD_MARGIN, |spot| spot.value),
        budget: budget?,
        wait_cycles: wait_cycles.unwrap_or(usual.wait_cycles),
        silent_after_us: silent_after_us.or(usual.silent_after_us),
        oldest_us: oldest_days.unwrap_or(OLDEST_DAYS) * D,
        layout: layout.map_or(Layout::Row, |spot| spot.value),
        groups: known.groups,
        cost_per_unit: known.cost_per_unit,
        reference: known.reference,
        offsets: known.offsets,
    };
    Some((bank, heard.feed?))
}

/// What holds when nothing else is said.
struct Usual {
    spans: &'static [usize],
    look_every_us: i64,
    wait_cycles: u32,
    silent_after_us: Option<i64>,
    /// Nobody is silent sooner.
    least_silent_us: i64,
}

impl Usual {
    fn of(told_by: ToldBy) -> Self {
        match told_by {
            ToldBy::Message => Self {
                spans: &SPANS,
                look_every_us: LOOK_EVERY_US,
                wait_cycles: WAIT_CYCLES,
                silent_after_us: None,
                least_silent_us: S,
            },
            ToldBy::Time => Self {
                spans: &shifts::SPANS,
                look_every_us: shifts::LOOK_EVERY_US,
                wait_cycles: shifts::WAIT_CYCLES,
                silent_after_us: Some(shifts::SILENT_AFTER_US),
                // A shift is away for most of every day.
                least_silent_us: 2 * D,
            },
        }
    }
}

/// What is measured, while it is being checked.
struct Measured {
    name: Option<Name>,
    unit: Option<Name>,
    resolution: Option<Spot<f64>>,
    target: Option<Spot<Value>>,
    declared: Option<Spot<Value>>,
    limits: Limits,
}

/// Limits of a single value.
#[derive(Default)]
struct Limits {
    lower: Option<Spot<f64>>,
    upper: Option<Spot<f64>>,
}

impl Measured {
    fn characteristic(self, check: &mut Check<'_>) -> Option<Characteristic> {
        let Self {
            name,
            unit,
            resolution,
            target,
            declared,
            limits: Limits { lower, upper },
        } = self;
        let lower = lower.map(|spot| spot.value);
        let upper = upper.map(|spot| spot.value);
        if let Some(target) = &target {
            let at = target.value.to_f64();
            if lower.is_some_and(|l| at < l) || upper.is_some_and(|u| at > u) {
                let hint = "a source that gives what it should must pass its limits";
                check.add(&target.place, "`target` lies outside `limits`", hint);
            }
        }
        Some(Characteristic {
            name: name.unwrap_or_else(|| Name::from("value")),
            unit: unit?,
            resolution: resolution.map(|spot| spot.value),
            target: target.map(|spot| spot.value),
            declared: declared.map(|spot| spot.value),
            lower,
            upper,
        })
    }
}

fn limits_of(field: Field<WrittenLimits>, faults: &mut FaultList) -> Limits {
    let Spot { value, place } = match field {
        Field::Given(spot) => spot,
        Field::Absent | Field::Faulty => return Limits::default(),
    };
    let WrittenLimits { lower, upper } = value;
    let mut check = Check::new("bank.limits", &place, faults);
    if matches!((&lower, &upper), (Field::Absent, Field::Absent)) {
        let hint = keys::example("bank", "limits");
        check.add(&place, "`limits` holds neither `lower` nor `upper`", hint);
    }
    let any = |_: f64| true;
    let limits = Limits {
        lower: check.number(lower, "lower", any, "a number"),
        upper: check.number(upper, "upper", any, "a number"),
    };
    if let (Some(lower), Some(upper)) = (&limits.lower, &limits.upper)
        && lower.value >= upper.value
    {
        let hint = keys::example("bank", "limits");
        check.add(&lower.place, "`lower` must lie below `upper`", hint);
    }
    limits
}

fn margin_of(
    field: Field<String>,
    resolution: Option<&Spot<f64>>,
    check: &mut Check<'_>,
) -> Option<f64> {
    let field = check.required(field, "margin");
    let margin = check.number(field, "margin", |x| x >= 0.0, "0 or more")?;
    if let Some(step) = resolution.map(|spot| spot.value)
        && margin.value > 0.0
        && margin.value < step
    {
        let message = format!("`margin` is below the resolution, {step}");
        let hint = "a difference smaller than the instrument's step cannot be judged; write at least \
                    the resolution, or 0 when every difference matters";
        check.add(&margin.place, message, hint);
    }
    Some(margin.value)
}

/// Which sources.
fn who(
    field: Field<WrittenSources>,
    most_sources: Field<i64>,
    (in_topic, plant): (bool, &OfPlant),
    check: &mut Check<'_>,
) -> Option<Sources> {
    let Spot { value, place } = check.required(field, "sources").given()?;
    match value {
        WrittenSources::Word(word) if word == "discover" => {
            let most = check.whole(most_sources, "most_sources", 2..=MOST_SOURCES);
            Some(Sources::Discover {
                most: most.unwrap_or(DISCOVERED),
            })
        }
        WrittenSources::Word(word) if word == "shifts" => shifts::sources(plant, &place, check),
        WrittenSources::Word(_) => {
            let hint = keys::example("bank", "sources");
            let message = "`sources` must be a list, \"discover\" or \"shifts\"";
            check.add(&place, message, hint);
            None
        }
        WrittenSources::Listed(list) => {
            if let Some(most) = most_sources.peek() {
                let message = "`most_sources` means nothing when the sources are listed";
                check.add(
                    &most.place,
                    message,
                    "take it out, or write `sources = \"discover\"`",
                );
            }
            listed(list, &place, in_topic, check)
        }
    }
}

/// The names of listed sources, good or not.
fn listed_names(field: &Field<WrittenSources>) -> Vec<Name> {
    let Some(WrittenSources::Listed(list)) = field.peek().map(|spot| &spot.value) else {
        return Vec::new();
    };
    let name = |node: &Node| match &node.kind {
        Kind::Text(name) => Some(Name::from(name.as_str())),
        _ => None,
    };
    list.iter().filter_map(name).collect()
}

fn listed(
    list: Vec<Node>,
    place: &Place,
    in_topic: bool,
    check: &mut Check<'_>,
) -> Option<Sources> {
    let example = || keys::example("bank", "sources");
    let count = list.len();
    if count < 2 {
        let message = "`sources` must hold at least two: sources are compared with each other";
        check.add(place, message, example());
    }
    if i64::try_from(count).is_ok_and(|count| count > MOST_SOURCES) {
        let message = format!("{count} sources are more than {MOST_SOURCES}");
        check.add(place, message, "make several banks of them");
    }
    let mut names = Vec::with_capacity(count);
    for node in list {
        let Kind::Text(name) = node.kind else {
            let message = format!(
                "a source is {} and must be text in quotes",
                node.kind.what()
            );
            check.add(&node.place, message, example());
            continue;
        };
        let in_no_topic = name.contains(['/', '+', '#']) && in_topic;
        let wrong = unfit(&name).or_else(|| {
            in_no_topic.then(|| "holds / + or #, which no level of a topic does".to_owned())
        });
        match wrong {
            Some(what) => check.add(&node.place, format!("a source's name {what}"), example()),
            None => names.push(Spot {
                value: Name::from(name),
                place: node.place,
            }),
        }
    }
    let mut seen = BTreeSet::new();
    for spot in names.iter().filter(|spot| !seen.insert(&spot.value)) {
        let message = format!("source \"{}\" is listed twice", spot.value);
        check.add(&spot.place, message, "take one of the two out");
    }
    Some(Sources::Listed(
        names.into_iter().map(|spot| spot.value).collect(),
    ))
}

/// The lengths of windows.
fn spans_of(field: Field<Vec<Node>>, usual: &[usize], check: &mut Check<'_>) -> Option<Vec<usize>> {
    let Spot { value, place } = match field {
        Field::Given(spot) => spot,
        Field::Absent => return Some(usual.to_vec()),
        Field::Faulty => return None,
    };
    let example = || keys::example("bank", "spans");
    if value.is_empty() || value.len() > MOST_SPANS {
        check.add(
            &place,
            format!("`spans` must hold 1 to {MOST_SPANS} lengths"),
            example(),
        );
        return None;
    }
    let mut spans: Vec<usize> = Vec::with_capacity(value.len());
    for node in value {
        let wrong = match node.kind {
            Kind::Whole(Some(length)) if (2..=LONGEST_SPAN).contains(&length) => {
                let length = usize::try_from(length).unwrap_or_default();
                let rises = spans.last().is_none_or(|last| *last < length);
                spans.push(length);
                (!rises).then(|| "is not longer than the one before it".to_owned())
            }
            Kind::Whole(_) => Some(format!("must lie between 2 and {LONGEST_SPAN} values")),
            other => Some(format!("is {} and must be a whole number", other.what())),
        };
        if let Some(what) = wrong {
            check.add(&node.place, format!("a span {what}"), example());
        }
    }
    Some(spans)
}

/// A place that is learnt is not known better than from as many values.
fn no_long_spans(spans: &Field<Vec<Node>>, learns: bool, check: &mut Check<'_>) {
    let long = |node: &&Node| matches!(node.kind, Kind::Whole(Some(n)) if n > LONGEST_LEARNT);
    let Some(node) = spans
        .peek()
        .filter(|_| learns)
        .and_then(|s| s.value.iter().find(long))
    else {
        return;
    };
    let message = format!("with `offsets = \"learn\"` no span may be longer than {LONGEST_LEARNT}");
    let hint = "over longer windows the chance in the learnt places would pass for a difference; write \
                the offsets as a table to look further";
    check.add(&node.place, message, hint);
}

/// The call budget.
fn budget_of(field: Field<String>, look_every_us: i64, check: &mut Check<'_>) -> Option<Budget> {
    let Spot { value, place } = check.required(field, "false_calls").given()?;
    let budget: Budget = match value.parse() {
        Ok(budget) => budget,
        Err(error) => {
            let hint = keys::example("bank", "false_calls");
            check.add(&place, format!("`false_calls`: {error}"), hint);
            return None;
        }
    };
    // A look's probabilities of a false call must stay probabilities.
    if budget.per_us() * look_every_us as f64 >= 1.0 {
        let message = "`false_calls` allows one at every look";
        check.add(&place, message, keys::example("bank", "false_calls"));
    }
    Some(budget)
}
