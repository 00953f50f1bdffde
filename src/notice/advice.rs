//! What people are told to do, in words: one cause first, then each source by itself.

use crate::model::Value;
use crate::verdict::{Effect, Estimate, PatternKind, Standing, Suggestion, suggest};

use super::{Facts, Kind, NamedSource};

impl Facts<'_> {
    /// What to check or adjust.
    pub(super) fn advice(&self) -> String {
        match self.kind {
            Kind::SpreadApart if self.all(|s| s.deviation < 1.0) => {
                "Check that the instrument or signal of this source is alive: values this steady are rarely good news.".to_owned()
            }
            Kind::SpreadApart => "Check valve, seal, supply and sensor of what is named; an adjustment of its level will not steady it.".to_owned(),
            _ if self.slip.is_some() => "Check how positions are told (encoder, first-head signal, counter) before touching any source; adjust nobody until that is clear.".to_owned(),
            _ if self.pattern.is_some() => self.one_cause(),
            Kind::BankSplit => "One cause is likelier than many: check what the named sources share (supply, drive, lot, instrument) before adjusting any.".to_owned(),
            _ if self.is_pair() => self.pair_advice(),
            _ => self.adjustments(),
        }
    }

    fn pair_advice(&self) -> String {
        "Two sources alone do not tell which of them left: compare both with the target before adjusting.".to_owned()
    }

    /// Where one cause for many is looked for first.
    fn one_cause(&self) -> String {
        let where_first = match self.pattern.map(|p| &p.kind) {
            Some(PatternKind::Wave { .. }) => {
                "whether the ring stands and turns level, and is fed evenly".to_owned()
            }
            Some(PatternKind::Slope { .. }) => {
                "what changes along the row: pressure, temperature, feed".to_owned()
            }
            Some(PatternKind::Group { name }) => format!("{name}, which its sources share"),
            _ => "what those places share: supply, drive, instrument".to_owned(),
        };
        format!(
            "One cause is likelier than many: check {where_first}, before adjusting any source by itself."
        )
    }

    fn adjustments(&self) -> String {
        let recent = self.adjustment.filter(|a| a.effect == Effect::NotSure);
        if let Some(recent) = recent {
            return format!(
                "Wait for more values before adjusting {} again: it was adjusted, and they do not tell yet.",
                recent.source
            );
        }
        let sure: Vec<String> = self
            .sources
            .iter()
            .filter_map(|s| self.adjustment(s))
            .collect();
        if sure.is_empty() {
            return "The size is not sure yet: watch the next looks before adjusting.".to_owned();
        }
        format!("Suggested: {}.", sure.join("; "))
    }

    fn adjustment(&self, s: &NamedSource) -> Option<String> {
        let c = &self.bank.characteristic;
        let size = Estimate {
            value: s.deviation,
            low: s.low,
            high: s.high,
        };
        let standing = Standing {
            even_mean: self.even_mean,
            wanted: c.target.or(c.declared).map(Value::to_f64),
            margin: self.bank.margin,
        };
        let by = |v: f64| format!("{} {}", c.deviation(v), c.unit);
        Some(match suggest(&size, &standing) {
            Suggestion::NotSure => return None,
            Suggestion::Adjust { by: step } => format!("adjust {} by {}", s.source, by(step)),
            Suggestion::RaiseRest { by: step } => format!(
                "do not lower {}: the others are low, so raise the rest by {} first",
                s.source,
                by(step)
            ),
            Suggestion::LevelFirst => format!(
                "do not lower {}: the others are not above what is wanted, so judge the bank's level \
                 first",
                s.source
            ),
        })
    }
}
