//! The forms as rows of a table, for CSV.
//!
//! What must hold: one row per thing that has a figure of its own; figures as in JSON; text that came
//! from outside begins with nothing that a spreadsheet would compute.

use super::{
    BankBody, DigestBody, EstimateBody, LineEventBody, LookBody, NoticeBody, RefusalBody,
    SettingBody, SourceBody, WindowBody,
};
use crate::model::Time;

/// What can be written as rows.
pub trait Rows {
    /// The header line.
    const HEAD: &'static [&'static str];
    /// The key of the query that leads to the next part of a list.
    const NEXT: &'static str = "after";

    /// Its rows, as wide as the header.
    fn rows(&self) -> Vec<Vec<String>>;
}

fn number(x: Option<f64>) -> String {
    x.map_or_else(String::new, |x| x.to_string())
}

fn time(at: Option<Time>) -> String {
    at.map_or_else(String::new, |at| at.to_string())
}

fn ends(estimate: Option<&EstimateBody>) -> [String; 3] {
    let pick = |end: fn(&EstimateBody) -> Option<f64>| number(estimate.and_then(end));
    [pick(|e| e.value), pick(|e| e.low), pick(|e| e.high)]
}

/// Text of foreign origin: what a spreadsheet would take for a formula is made text.
fn foreign(text: &str) -> String {
    if text.starts_with(['=', '+', '-', '@', '\t', '\r']) {
        format!("'{text}")
    } else {
        text.to_owned()
    }
}

impl Rows for BankBody {
    const HEAD: &'static [&'static str] = &[
        "name",
        "equipment",
        "characteristic",
        "unit",
        "margin",
        "spread_margin",
        "false_calls",
        "standing",
        "open_notices",
        "mean",
        "newest_taken",
    ];

    fn rows(&self) -> Vec<Vec<String>> {
        vec![vec![
            self.name.clone(),
            self.equipment.clone().unwrap_or_default(),
            self.characteristic.clone(),
            self.unit.clone(),
            self.margin.to_string(),
            self.spread_margin.to_string(),
            self.false_calls.clone(),
            self.standing.clone(),
            self.open_notices.join(" "),
            number(self.mean),
            time(self.newest_taken),
        ]]
    }
}

impl Rows for SourceBody {
    const HEAD: &'static [&'static str] = &[
        "source",
        "state",
        "values",
        "last_value",
        "last_taken",
        "last_received",
        "deviation",
        "deviation_low",
        "deviation_high",
        "deviation_sigmas",
        "sd_ratio",
        "sd_ratio_low",
        "sd_ratio_high",
        "named",
    ];

    fn rows(&self) -> Vec<Vec<String>> {
        let [deviation, low, high] = ends(self.deviation.as_ref());
        let [ratio, ratio_low, ratio_high] = ends(self.sd_ratio.as_ref());
        vec![vec![
            self.source.clone(),
            self.state.clone(),
            self.values.to_string(),
            number(self.last_value),
            time(self.last_taken),
            time(self.last_received),
            deviation,
            low,
            high,
            number(self.deviation_sigmas),
            ratio,
            ratio_low,
            ratio_high,
            self.named.join(" "),
        ]]
    }
}

impl Rows for LineEventBody {
    const HEAD: &'static [&'static str] = &[
        "at", "by", "kind", "source", "amount", "product", "target", "declared", "reason",
    ];

    fn rows(&self) -> Vec<Vec<String>> {
        let word = |text: &Option<String>| foreign(text.as_deref().unwrap_or_default());
        vec![vec![
            self.at.to_string(),
            foreign(&self.by),
            self.kind.to_owned(),
            word(&self.source),
            number(self.amount),
            word(&self.product),
            number(self.target),
            number(self.declared),
            foreign(&self.reason),
        ]]
    }
}

impl Rows for WindowBody {
    const HEAD: &'static [&'static str] = &["source", "taken", "cycle", "value"];

    fn rows(&self) -> Vec<Vec<String>> {
        let row = |v: &super::WindowValueBody| {
            let cycle = v.cycle.map_or_else(String::new, |c| c.to_string());
            vec![
                self.source.clone(),
                v.taken.to_string(),
                cycle,
                number(v.value),
            ]
        };
        self.values.iter().map(row).collect()
    }
}

impl Rows for DigestBody {
    const HEAD: &'static [&'static str] = &[
        "at",
        "span",
        "finding",
        "level_p",
        "alpha_level",
        "spread_p",
        "alpha_spread",
        "source",
        "deviation",
        "named_level",
        "named_spread",
    ];
    const NEXT: &'static str = "to";

    fn rows(&self) -> Vec<Vec<String>> {
        let row = |source: &str, deviation: Option<f32>| {
            let is_in = |list: &[String]| list.iter().any(|s| s == source).to_string();
            vec![
                self.at.to_string(),
                self.span.to_string(),
                self.finding.clone(),
                number(self.level_p),
                self.alpha_level.to_string(),
                number(self.spread_p),
                self.alpha_spread.to_string(),
                source.to_owned(),
                deviation.map_or_else(String::new, |d| d.to_string()),
                is_in(&self.named_level),
                is_in(&self.named_spread),
            ]
        };
        // A look that could judge nobody is a row too.
        if self.deviations.is_empty() {
            return vec![row("", None)];
        }
        let judged = self.deviations.iter();
        judged.map(|d| row(&d.source, d.deviation)).collect()
    }
}

impl Rows for LookBody {
    const HEAD: &'static [&'static str] = &[
        "at",
        "span",
        "source",
        "values",
        "mean",
        "sd",
        "deviation",
        "deviation_low",
        "deviation_high",
        "sd_ratio",
        "sd_ratio_low",
        "sd_ratio_high",
        "named_level",
        "named_spread",
    ];

    fn rows(&self) -> Vec<Vec<String>> {
        let row = |s: &super::SourceLookBody| {
            let [deviation, low, high] = ends(s.deviation.as_ref());
            let [ratio, ratio_low, ratio_high] = ends(s.sd_ratio.as_ref());
            vec![
                self.at.to_string(),
                self.span.to_string(),
                s.source.clone(),
                s.n.to_string(),
                number(s.mean),
                number(s.sd),
                deviation,
                low,
                high,
                ratio,
                ratio_low,
                ratio_high,
                s.named_level.to_string(),
                s.named_spread.to_string(),
            ]
        };
        self.sources.iter().map(row).collect()
    }
}

impl Rows for NoticeBody {
    const HEAD: &'static [&'static str] = &[
        "id",
        "bank",
        "kind",
        "state",
        "priority",
        "since",
        "raised",
        "changed",
        "returned",
        "acknowledged_by",
        "acknowledged_at",
        "source",
        "deviation",
        "deviation_low",
        "deviation_high",
        "unit",
        "subject",
    ];

    fn rows(&self) -> Vec<Vec<String>> {
        let seen = self.acknowledged.as_ref();
        let row = |source: Option<&super::NamedSourceBody>| {
            vec![
                self.id.clone(),
                self.bank.clone(),
                self.kind.clone(),
                self.state.clone(),
                self.priority.clone(),
                self.since.at.to_string(),
                self.raised.to_string(),
                self.changed.to_string(),
                time(self.returned),
                seen.map_or_else(String::new, |a| foreign(&a.by)),
                time(seen.map(|a| a.at)),
                source.map_or_else(String::new, |s| s.source.clone()),
                number(source.and_then(|s| s.deviation)),
                number(source.and_then(|s| s.low)),
                number(source.and_then(|s| s.high)),
                self.unit.clone(),
                self.subject.clone(),
            ]
        };
        if self.sources.is_empty() {
            return vec![row(None)];
        }
        self.sources.iter().map(|s| row(Some(s))).collect()
    }
}

impl Rows for RefusalBody {
    const HEAD: &'static [&'static str] = &["reason", "count", "at", "topic", "detail", "excerpt"];

    fn rows(&self) -> Vec<Vec<String>> {
        vec![vec![
            self.reason.clone(),
            self.count.to_string(),
            self.at.to_string(),
            foreign(&self.topic),
            foreign(&self.detail),
            foreign(&self.excerpt),
        ]]
    }
}

impl Rows for SettingBody {
    const HEAD: &'static [&'static str] = &["section", "key", "value", "from", "line", "variable"];

    fn rows(&self) -> Vec<Vec<String>> {
        vec![vec![
            self.section.clone(),
            self.key.clone(),
            foreign(&self.value),
            self.from.clone(),
            self.line.map_or_else(String::new, |l| l.to_string()),
            self.variable.clone().unwrap_or_default(),
        ]]
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn foreign_text_is_never_a_formula() {
        for (text, written) in [
            ("=1+1", "'=1+1"),
            ("@x", "'@x"),
            ("quayside/x", "quayside/x"),
            ("", ""),
        ] {
            assert_eq!(foreign(text), written);
        }
    }
}
