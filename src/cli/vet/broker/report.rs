//! What was heard, told to people and to programs.

use serde_json::json;

use crate::model::{Bank, Sources};
use crate::settings::{Feed, Settings};

use super::super::Lines;
use super::figures::{figures, median, rounded};
use super::propose::Proposal;
use super::survey::{BankHeard, Survey};

/// Topics of no bank that people are shown; programs get all.
const SHOWN_TOPICS: usize = 20;
/// Sources that are shown by name.
const SHOWN_SOURCES: usize = 60;

/// Everything that is to be told.
pub(super) struct Report<'r> {
    pub(super) settings: &'r Settings,
    pub(super) survey: &'r Survey<'r>,
    pub(super) listened_s: f64,
    /// Filters that the broker refused.
    pub(super) refused: &'r [String],
    pub(super) proposals: &'r [Proposal],
}

impl Report<'_> {
    /// For people.
    pub(super) fn text(&self) -> String {
        let Self {
            settings,
            survey,
            listened_s,
            refused,
            proposals,
        } = self;
        let mut lines = Lines(format!(
            "\nheard in {listened_s:.0} s, without writing anything to the broker\n"
        ));
        lines.add("messages", per_second(survey.messages, *listened_s));
        for filter in *refused {
            lines.add("caution", format!("the broker does not deliver {filter}"));
        }
        let mut all = lines.0;
        for ((bank, feed), heard) in settings
            .banks
            .iter()
            .zip(&settings.feeds)
            .zip(&survey.banks)
        {
            all.push('\n');
            all.push_str(&self.bank(bank, feed, heard));
        }
        all.push_str(&self.strangers());
        for proposal in *proposals {
            let Proposal {
                name,
                topic,
                figures,
                toml,
            } = proposal;
            let mut lines = Lines(format!(
                "\nproposal {name}, from {topic}, to paste and edit\n"
            ));
            if let Some(interval) = figures.interval_s {
                lines.add(
                    "interval",
                    format!("{} s between two values of a source", rounded(interval)),
                );
            }
            if let Some(sd) = figures.sd {
                lines.add("sd", format!("{} within sources", rounded(sd)));
            }
            all.push_str(&lines.0);
            all.push('\n');
            all.push_str(toml);
        }
        all
    }

    fn bank(&self, bank: &Bank, feed: &Feed, heard: &BankHeard) -> String {
        let unit = &bank.characteristic.unit;
        let mut lines = Lines(format!("bank {}\n", bank.name));
        let template = feed.topic.levels.join("/");
        lines.add("topics", format!("{} match {template}", heard.topics.len()));
        let sources = heard.in_order();
        let values = per_second(heard.values, self.listened_s);
        lines.add("values", format!("{values}, of {} sources", sources.len()));
        if !sources.is_empty() {
            let names: Vec<&str> = sources
                .iter()
                .take(SHOWN_SOURCES)
                .map(|name| name.as_ref())
                .collect();
            lines.add("sources", names.join(", "));
        }
        let newest = sources
            .first()
            .and_then(|name| Some((name, heard.sources.get(*name)?.last()?)));
        if let Some((name, newest)) = newest {
            let mut sample = format!("{name}: {} {unit}", newest.value);
            if let Some(taken) = newest.taken {
                sample.push_str(&format!(", taken {taken}"));
            }
            if let Some(cycle) = newest.cycle {
                sample.push_str(&format!(", cycle {cycle}"));
            }
            lines.add("sample", sample);
        }
        if let Some(behind) = median(&mut heard.behind_us.clone()) {
            lines.add("clock", clock(behind));
        }
        for (reason, (count, newest)) in &heard.refused {
            let words = format!(
                "{count} as {}: {} ({})",
                reason.word(),
                newest.detail,
                newest.topic
            );
            lines.add("refused", words);
        }
        if let Sources::Listed(names) = &bank.sources {
            let missing = names
                .iter()
                .filter(|name| !heard.sources.contains_key(*name));
            let missing: Vec<&str> = missing.map(AsRef::as_ref).collect();
            if !missing.is_empty() {
                lines.add(
                    "caution",
                    format!("listed and not heard: {}", missing.join(", ")),
                );
            }
        }
        lines.0
    }

    fn strangers(&self) -> String {
        let strangers = &self.survey.strangers;
        if strangers.is_empty() {
            return String::new();
        }
        let mut text = "\ntopics of no bank\n".to_owned();
        for (topic, (count, newest)) in strangers.iter().take(SHOWN_TOPICS) {
            let often = per_second(*count, self.listened_s);
            text.push_str(&format!("  {topic}  {often}, such as {newest}\n"));
        }
        if let Some(more) = strangers.len().checked_sub(SHOWN_TOPICS + 1) {
            text.push_str(&format!("  … and {} more\n", more + 1));
        }
        if self.survey.uncounted > 0 {
            let uncounted = self.survey.uncounted;
            text.push_str(&format!("  {uncounted} messages on further topics\n"));
        }
        text
    }

    /// For programs, on one line.
    pub(super) fn json(&self) -> String {
        let Self {
            settings,
            survey,
            listened_s,
            refused,
            proposals,
        } = self;
        let banks = settings
            .banks
            .iter()
            .zip(&survey.banks)
            .map(|(bank, heard)| {
                let sources: Vec<_> = heard
                    .in_order()
                    .into_iter()
                    .filter_map(|name| {
                        let values = heard.sources.get(name)?;
                        let newest = values.last()?;
                        Some(json!({
                            "source": name, "values": values.len(), "newest": newest.value.to_f64(),
                            "taken": newest.taken, "cycle": newest.cycle,
                        }))
                    })
                    .collect();
                let refusals: Vec<_> = heard
                    .refused
                    .iter()
                    .map(|(reason, (count, newest))| {
                        json!({"reason": reason, "count": count, "detail": newest.detail,
                        "topic": newest.topic, "excerpt": newest.excerpt})
                    })
                    .collect();
                let figures = figures(heard);
                json!({
                    "bank": bank.name, "topics": heard.topics.len(), "values": heard.values,
                    "values_per_s": heard.values as f64 / listened_s,
                    "interval_s": figures.interval_s, "sd": figures.sd,
                    "behind_s": median(&mut heard.behind_us.clone()).map(|us| us as f64 / 1e6),
                    "sources": sources, "refused": refusals,
                })
            });
        let strangers = survey.strangers.iter().map(
            |(topic, (count, newest))| json!({"topic": topic, "messages": count, "newest": newest}),
        );
        let proposals = proposals.iter().map(|proposal| {
            json!({"name": proposal.name, "topic": proposal.topic, "toml": proposal.toml,
                "interval_s": proposal.figures.interval_s, "sd": proposal.figures.sd})
        });
        let all = json!({
            "type": "heard", "listened_s": listened_s, "messages": survey.messages,
            "not_delivered": refused, "banks": banks.collect::<Vec<_>>(),
            "topics_of_no_bank": strangers.collect::<Vec<_>>(),
            "messages_on_further_topics": survey.uncounted,
            "proposals": proposals.collect::<Vec<_>>(),
        });
        format!("{all}\n")
    }
}

fn per_second(count: u64, listened_s: f64) -> String {
    format!("{count}, {} a second", rounded(count as f64 / listened_s))
}

/// How far the senders' clocks and the way together are off.
fn clock(behind_us: i64) -> String {
    let s = behind_us as f64 / 1e6;
    if behind_us < 0 {
        format!(
            "values are taken {:.3} s after they arrive, in the median: the sender's clock is ahead",
            -s
        )
    } else {
        format!("values are taken {s:.3} s before they arrive, in the median")
    }
}
