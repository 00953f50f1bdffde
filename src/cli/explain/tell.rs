//! The explanation for people: from the values to the call, step by step.

use std::fmt::Write as _;

use comfy_table::{CellAlignment, Table, presets};
use jiff::tz::TimeZone;

use crate::model::Time;
use crate::web::wire::{
    CallApartBody, ExplanationBody, PartBody, SpanBody, WatchApartBody, WorkedTestBody,
};

/// Pairs shown in a table; the JSON form has them all.
const MOST_PAIRS: usize = 10;

/// Everything, as text.
pub fn tell(explained: &ExplanationBody, zone: &TimeZone) -> String {
    let mut parts = vec![head(explained, zone)];
    if let Some(watch) = &explained.watch {
        parts.push(self::watch(watch, &explained.unit, zone));
    }
    if let Some(call) = &explained.call {
        parts.push(self::call(call, explained));
    }
    parts.extend(explained.spans.iter().map(|s| span(s, explained)));
    parts.join("\n\n") + "\n"
}

fn head(explained: &ExplanationBody, zone: &TimeZone) -> String {
    let mut text = format!("{}, look at {}", explained.bank, moment(explained.at, zone));
    if let Some(id) = &explained.notice {
        let _ = write!(text, ": notice {id} was raised with it");
    }
    text.push('\n');
    text.push_str(match explained.agrees {
        Some(true) => "Worked out again from the kept values: agrees to the last bit.",
        Some(false) => {
            "Worked out again from the kept values: does NOT agree with what was kept. This version of evenrow \
             may compute differently; the figures of the tests below are those that were kept, their sums are new."
        }
        None => "The values of this look were not kept (they are kept with calls): its results stand alone.",
    });
    if let (Some(calls), Some(margin)) = (&explained.false_calls, explained.margin) {
        let _ = write!(
            text,
            "\nBudget: {calls}. Margin: {margin} {}.",
            explained.unit
        );
    }
    if let Some(decides) = &explained.decides {
        let _ = write!(text, " The {decides} decided.");
    }
    if let Some(product) = &explained.product {
        let _ = write!(text, "\nProduct: {product}.");
    }
    for event in &explained.line_events {
        let _ = write!(text, "\nLine event before: {event}");
    }
    text
}

/// The names of the watch's call.
fn call(call: &CallApartBody, explained: &ExplanationBody) -> String {
    let since = &call.since;
    let mut text = format!(
        "The call: {}, named {} on the {} values since the start",
        since.finding.replace('_', " "),
        call.named.join(", "),
        since.span
    );
    if call.aspect == "level" {
        text.push_str(&inside(since, &explained.unit));
    }
    text
}

fn watch(watch: &WatchApartBody, unit: &str, zone: &TimeZone) -> String {
    let mut text = "The watch".to_owned();
    if let Some(sigma) = watch.sigma {
        let _ = write!(text, ": sigma {} {unit}", figure(Some(sigma)));
    }
    let _ = write!(
        text,
        ", correlation {} ({} paid)",
        figure(watch.phi),
        figure(watch.phi_paid)
    );
    if let Some(cycles) = watch.cycles_per_false_call {
        let df = watch.df.map_or_else(
            || "sigma counts as known".to_owned(),
            |df| format!("sigma on {df:.0} degrees of freedom"),
        );
        let _ = write!(
            text,
            "; margin {} sd; one false call in {cycles:.0} cycles; {df}",
            figure(watch.margin_sd)
        );
    }
    if watch.parts.is_empty() {
        text.push_str("\nIt was still learning: the looks decided, with half the budget.");
        return text;
    }
    if let (Some(called), Some(since), Some(earliest), Some(latest)) =
        (&watch.called, watch.since, watch.earliest, watch.latest)
    {
        let _ = write!(
            text,
            "\nPart {called} called; since {} (95 %: {} to {})",
            moment(since, zone),
            moment(earliest, zone),
            moment(latest, zone)
        );
    }
    let mut table = table(&[
        "part",
        "statistic",
        "threshold",
        "source",
        "share",
        "cycles to a false call",
        "threshold from",
    ]);
    for part in &watch.parts {
        table.add_row(part_row(part));
    }
    align_right(&mut table, 1..3);
    let _ = write!(text, "\n{table}");
    text
}

fn part_row(part: &PartBody) -> [String; 7] {
    [
        part.part.clone(),
        figure(part.statistic),
        figure(part.threshold),
        part.source.clone().unwrap_or_default(),
        part.share.map_or_else(String::new, |s| format!("{s:.3}")),
        part.cycles_per_false_call
            .map_or_else(String::new, |c| format!("{c:.0}")),
        part.formula.clone().unwrap_or_default(),
    ]
}

fn span(span: &SpanBody, explained: &ExplanationBody) -> String {
    let mut text = format!("Span {}: {}", span.span, span.finding.replace('_', " "));
    if !span.remark.is_empty() {
        let _ = write!(text, " ({})", span.remark);
    }
    if span.tests.is_empty() {
        return text;
    }
    let _ = write!(
        text,
        "\nA look over this span may call level at p below {:.3e} and spread at p below {:.3e}.",
        span.alpha_level, span.alpha_spread
    );
    text.push_str(&inside(span, &explained.unit));
    text
}

/// Tests, pairs and naming, each on lines of their own.
fn inside(span: &SpanBody, unit: &str) -> String {
    let mut text = String::new();
    for one in &span.tests {
        let _ = write!(text, "\n{}", test(one));
    }
    if !span.pairs.is_empty() {
        let _ = write!(text, "\n{}", pairs(span, unit));
    }
    if !span.order.is_empty() {
        let _ = write!(text, "\n{}", naming(span, unit));
    }
    text
}

fn test(test: &WorkedTestBody) -> String {
    let role = if test.decides { "decides" } else { "beside" };
    let mut text = format!("  {} ({role})", test.name);
    for step in &test.steps {
        let _ = write!(text, "\n    {:<46} {}", step.what, exact(step.value));
    }
    text
}

fn pairs(span: &SpanBody, unit: &str) -> String {
    let mut table = table(&[
        "pair",
        "difference",
        "standard error",
        "df",
        "margin",
        "q",
        "p",
        "at least",
    ]);
    for pair in span.pairs.iter().take(MOST_PAIRS) {
        table.add_row([
            format!("{} over {}", pair.above, pair.below),
            figure(pair.difference),
            figure(pair.std_error),
            figure(pair.df),
            figure(Some(pair.margin)),
            figure(pair.q),
            pair.p.map_or_else(String::new, |p| format!("{p:.3e}")),
            figure(pair.low),
        ]);
    }
    align_right(&mut table, 1..8);
    let more = span.pairs.len().saturating_sub(MOST_PAIRS);
    let more = if more > 0 {
        format!("\n  … and {more} more")
    } else {
        String::new()
    };
    format!(
        "  Pairs beyond the margin, in {unit}; \"at least\" at the level of this look\n{table}{more}"
    )
}

/// The even set, step by step.
fn naming(span: &SpanBody, unit: &str) -> String {
    let one = |p: &crate::web::wire::PlaceBody| {
        let mark = if p.even { "" } else { " (outside)" };
        format!("{} {}{mark}", p.source, figure(p.mean))
    };
    let order: Vec<String> = span.order.iter().map(one).collect();
    let outside: Vec<&str> = span
        .order
        .iter()
        .filter(|p| !p.even)
        .map(|p| p.source.as_str())
        .collect();
    let outside = if outside.is_empty() {
        "nobody".to_owned()
    } else {
        outside.join(", ")
    };
    format!(
        "  Naming: sorted by their means ({unit}, about the origin): {}.\n  The even set is the longest run in which no \
         pair differs by more than its margin at a family-wise error rate of {}; outside: {outside}.",
        order.join(", "),
        span.naming_alpha.unwrap_or(0.0)
    )
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

/// Four places after the point, for reading.
fn figure(value: Option<f64>) -> String {
    value.map_or_else(|| "–".to_owned(), |v| format!("{v:.4}"))
}

/// All digits there are, for repeating.
fn exact(value: Option<f64>) -> String {
    value.map_or_else(|| "–".to_owned(), |v| format!("{v:?}"))
}

/// A time in the plant's zone.
fn moment(at: Time, zone: &TimeZone) -> String {
    match at.to_jiff() {
        Some(stamp) => {
            let local = stamp.to_zoned_datetime(zone.clone());
            local.strftime("%Y-%m-%d %H:%M:%S%.3f").to_string()
        }
        None => at.to_string(),
    }
}
