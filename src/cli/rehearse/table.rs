//! The result as tables for people.
//!
//! Deliberately absent: colours; a result is often kept or mailed.

use std::fmt::Write as _;
use std::sync::Arc;

use comfy_table::{CellAlignment, Table, presets};
use jiff::tz::TimeZone;

use crate::model::{Time, fixed, signed};
use crate::notice::{Kind, NamedSource, Notice};
use crate::verdict::{Estimate, Look, TestEntry};

use super::ledger::Ledger;

/// Everything, as text.
pub fn tell(ledger: &Ledger, zone: &TimeZone) -> String {
    let mut parts = vec![read(ledger, zone)];
    if !ledger.first_refused.is_empty() {
        parts.push(refused(ledger));
    }
    parts.push(notices(ledger, zone));
    for look in &ledger.last_looks {
        parts.push(last_look(look, zone));
    }
    parts.join("\n\n")
}

/// What was read, and how the banks took it.
fn read(ledger: &Ledger, zone: &TimeZone) -> String {
    let mut text = format!(
        "{} measurements from {}",
        ledger.measurements,
        ledger.recordings.join(", ")
    );
    if let (Some(from), Some(to)) = (ledger.from, ledger.to) {
        let _ = write!(text, ", {} to {}", moment(from, zone), moment(to, zone));
    }
    for (name, tally) in &ledger.banks {
        let outcomes = tally
            .outcomes
            .iter()
            .map(|(what, n)| format!("{n} {}", words(what)));
        let outcomes: Vec<String> = outcomes.collect();
        let _ = write!(
            text,
            "\n{name}: {}; {} looks while it ran",
            if outcomes.is_empty() {
                "nothing".to_owned()
            } else {
                outcomes.join(", ")
            },
            tally.looks
        );
        if let Some((closed, needed)) = tally.days {
            let _ = write!(
                text,
                "; {closed} production days are over, and the shortest span needs {needed}"
            );
        }
    }
    text
}

/// What was refused, with the first rows.
fn refused(ledger: &Ledger) -> String {
    let total: u64 = ledger.refused.values().sum();
    let mut table = table(&["where", "reason", "what"]);
    for row in &ledger.first_refused {
        table.add_row([&row.place, words(row.reason.word()).as_str(), &row.detail]);
    }
    let more = total.saturating_sub(ledger.first_refused.len() as u64);
    let mut text = format!("Refused: {total}\n{table}");
    if more > 0 {
        let _ = write!(text, "\n… and {more} more");
    }
    text
}

/// The notices in the order in which they were raised.
fn notices(ledger: &Ledger, zone: &TimeZone) -> String {
    if ledger.notices.is_empty() {
        return "No notice was raised.".to_owned();
    }
    let mut all: Vec<_> = ledger.notices.values().collect();
    all.sort_by(|a, b| (a.raised, &a.id).cmp(&(b.raised, &b.id)));
    let mut table = table(&["raised", "returned", "bank", "since", "what"]);
    for notice in all {
        table.add_row([
            moment(notice.raised, zone),
            notice
                .returned
                .map_or_else(|| "no".to_owned(), |at| moment(at, zone)),
            notice.bank.to_string(),
            moment(notice.since.at, zone),
            what(notice),
        ]);
    }
    format!("Notices raised: {}\n{table}", ledger.notices.len())
}

/// What it was about and how large that was; at worst, when it is over.
fn what(notice: &Notice) -> String {
    let size = |s: &NamedSource| match notice.kind {
        Kind::SpreadApart => fixed(s.deviation, 2),
        _ => signed(s.deviation, 2),
    };
    let one = |s: &NamedSource| format!("{} {}", s.source, size(s));
    let all: Vec<String> = notice.sources.iter().map(one).collect();
    let (kind, unit) = (notice.kind.words(), &notice.unit);
    format!("{kind}: {} {unit}", all.join(", "))
}

/// One of the looks at what is there in the end.
fn last_look(look: &Arc<Look>, zone: &TimeZone) -> String {
    let mut text = format!(
        "{}, the last {} values per source at {}: {}",
        look.bank,
        look.span,
        moment(look.at, zone),
        look.finding.words()
    );
    if !look.remark.is_empty() {
        let _ = write!(text, " ({})", look.remark);
    }
    if !look.tests.is_empty() {
        let _ = write!(text, "\n{}", tests(look));
    }
    if !look.sources.is_empty() {
        let _ = write!(text, "\n{}", sources(look));
    }
    text
}

fn tests(look: &Look) -> Table {
    let mut table = table(&["test", "statistic", "df", "p", "decides"]);
    for test in &look.tests {
        table.add_row([
            test_name(test),
            format!("{:.4}", test.statistic),
            test.df
                .iter()
                .map(|d| figure(*d))
                .collect::<Vec<_>>()
                .join(", "),
            probability(test.p),
            if test.decides { "yes" } else { "" }.to_owned(),
        ]);
    }
    align_right(&mut table, 1..4);
    table
}

fn test_name(test: &TestEntry) -> String {
    let raw = if test.raw { ", raw" } else { "" };
    format!("{}{raw}", test.method.words())
}

fn sources(look: &Look) -> Table {
    let mut table = table(&[
        "source",
        "n",
        "mean",
        "sd",
        "deviation",
        "sd ratio",
        "named",
    ]);
    for source in &look.sources {
        let named = match (source.named_level, source.named_spread) {
            (true, true) => "level, spread",
            (true, false) => "level",
            (false, true) => "spread",
            (false, false) => "",
        };
        table.add_row([
            source.name.to_string(),
            source.n.to_string(),
            figure(source.mean),
            figure(source.sd),
            estimate(source.deviation),
            estimate(source.sd_ratio),
            named.to_owned(),
        ]);
    }
    align_right(&mut table, 1..6);
    table
}

fn table(header: &[&str]) -> Table {
    let mut table = Table::new();
    table.load_preset(presets::UTF8_BORDERS_ONLY);
    table.set_header(header);
    table
}

fn align_right(table: &mut Table, columns: std::ops::Range<usize>) {
    for column in columns {
        if let Some(column) = table.column_mut(column) {
            column.set_cell_alignment(CellAlignment::Right);
        }
    }
}

/// Four significant places after the point at most, without trailing zeros.
fn figure(value: f64) -> String {
    if !value.is_finite() {
        return "–".to_owned();
    }
    let text = format!("{value:.4}");
    text.trim_end_matches('0').trim_end_matches('.').to_owned()
}

fn probability(p: f64) -> String {
    if p < 0.000_1 {
        format!("{p:.1e}")
    } else {
        format!("{p:.6}")
    }
}

fn estimate(of: Option<Estimate>) -> String {
    match of {
        Some(Estimate { value, low, high }) => {
            format!("{} ({} to {})", figure(value), figure(low), figure(high))
        }
        None => "–".to_owned(),
    }
}

/// A time in the plant's zone.
fn moment(at: Time, zone: &TimeZone) -> String {
    match at.to_jiff() {
        Some(stamp) => {
            let local = stamp.to_zoned_datetime(zone.clone());
            local.strftime("%Y-%m-%d %H:%M:%S").to_string()
        }
        None => at.to_string(),
    }
}

/// The interface's word as people write it.
fn words(word: &str) -> String {
    word.replace('_', " ")
}
