//! Banks to paste and edit, from what was heard.
//!
//! What must hold: a proposal is a good configuration of a bank; it is read back before it is shown.

use crate::model::Name;
use crate::settings::Settings;

use super::figures::{Figures, figures, rounded};
use super::guess::{guesses, quoted};
use super::survey::{BankHeard, Kept, Survey};
use crate::intake::mqtt::Overheard;

/// Proposals that are told; more would not be read.
const MOST: usize = 10;

/// A bank to paste.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Proposal {
    pub(super) name: String,
    /// From which topic.
    pub(super) topic: String,
    pub(super) figures: Figures,
    pub(super) toml: String,
}

/// Proposals for the configured banks (`written` is the configuration as it stands) and for messages of
/// none.
pub(super) fn proposals(
    settings: &Settings,
    survey: &Survey<'_>,
    written: &toml::Table,
) -> Vec<Proposal> {
    let banks = written.get("bank").and_then(toml::Value::as_array);
    let tables = banks
        .into_iter()
        .flatten()
        .filter_map(toml::Value::as_table);
    let known = settings.banks.iter().zip(&survey.banks).zip(tables);
    let mut all: Vec<Proposal> = known
        .filter_map(|((bank, heard), table)| configured(&bank.name, heard, table))
        .filter(|proposal| read_back(settings, &proposal.toml).is_some())
        .collect();
    for (number, (guess, messages)) in (1..).zip(guesses(&survey.kept)) {
        if all.len() == MOST {
            break;
        }
        let name = format!("heard-{number}");
        let pairing = if guess.cycle { "\"cycle\"" } else { "\"none\"" };
        let head = format!(
            "name = {}\nunit = \"?\"\ntopic = {}\npayload = {}\npairing = {pairing}\n\
             false_calls = \"1 per 90 days\"\n",
            quoted(&name),
            quoted(&guess.topic),
            guess.payload
        );
        all.extend(guessed(
            settings,
            &name,
            &guess.topic,
            &head,
            guess.cycle,
            &messages,
        ));
    }
    all
}

/// The bank as written, with sources, resolution and margin from what was heard.
fn configured(name: &Name, heard: &BankHeard, table: &toml::Table) -> Option<Proposal> {
    let figures = figures(heard);
    if heard.sources.len() < 2 {
        return None;
    }
    let replaced = ["sources", "most_sources", "margin", "resolution"];
    let mut lines = String::new();
    for (key, value) in table
        .iter()
        .filter(|(key, _)| !replaced.contains(&key.as_str()))
    {
        lines.push_str(&format!("{key} = {}\n", inline(value)));
    }
    let topic = table
        .get("topic")
        .and_then(toml::Value::as_str)
        .unwrap_or_default();
    Some(Proposal {
        name: name.to_string(),
        topic: topic.to_owned(),
        figures,
        toml: block(&lines, heard, figures),
    })
}

/// A bank for messages of none, when at least two sources can be read with it.
fn guessed(
    settings: &Settings,
    name: &str,
    topic: &str,
    head: &str,
    cycle: bool,
    messages: &[&Kept],
) -> Option<Proposal> {
    let trial = format!("[[bank]]\n{head}sources = \"discover\"\nmost_sources = 200\nmargin = 0\n");
    let trial = read_back(settings, &trial)?;
    let mut survey = Survey::new(&trial);
    for Kept {
        topic,
        payload,
        now,
    } in messages.iter().copied()
    {
        survey.hear(Overheard {
            topic,
            payload,
            retained: false,
            now: *now,
        });
    }
    let heard = survey.banks.first()?;
    let figures = figures(heard);
    if heard.sources.len() < 2 {
        return None;
    }
    // Sources that deliver at about the same pace can be put side by side in time.
    let slot = figures
        .interval_s
        .filter(|_| !cycle)
        .map(|s| s.ceil().clamp(1.0, 86_400.0));
    let head = match slot {
        Some(s) => head.replace(
            "pairing = \"none\"",
            &format!("pairing = {{ slot = \"{s}s\" }}"),
        ),
        None => head.to_owned(),
    };
    let toml = block(&head, heard, figures);
    read_back(settings, &toml)?;
    Some(Proposal {
        name: name.to_owned(),
        topic: topic.to_owned(),
        figures,
        toml,
    })
}

/// The settings with this bank alone; `None` when it is not good.
fn read_back(settings: &Settings, bank: &str) -> Option<Settings> {
    let text = format!(
        "[plant]\nname = \"x\"\ntime_zone = \"UTC\"\n[broker]\nurl = \"mqtt://127.0.0.1\"\n\
         [store]\nfolder = \"x\"\n{bank}"
    );
    let mut read = Settings::parse(&text, "a proposal", []).ok()?;
    read.plant = settings.plant.clone();
    read.broker = settings.broker.clone();
    Some(read)
}

fn block(lines: &str, heard: &BankHeard, figures: Figures) -> String {
    let names: Vec<String> = heard
        .in_order()
        .into_iter()
        .map(|name| quoted(name))
        .collect();
    let mut text = format!("[[bank]]\n{lines}sources = [{}]\n", names.join(", "));
    if let Some(resolution) = figures.resolution {
        text.push_str(&format!("resolution = {resolution}\n"));
    }
    let margin = figures
        .sd
        .filter(|sd| *sd > 0.0)
        .map(|sd| sd.max(figures.resolution.unwrap_or(0.0)));
    match margin {
        Some(margin) => text.push_str(&format!(
            "margin = {}         # one standard deviation within sources, as heard\n",
            rounded(margin)
        )),
        None => text.push_str("margin = 0         # too little was heard; write the largest difference that does not matter\n"),
    }
    text
}

/// A value of TOML on one line.
fn inline(value: &toml::Value) -> String {
    match value {
        toml::Value::String(text) => quoted(text),
        toml::Value::Integer(number) => number.to_string(),
        toml::Value::Float(number) => format!("{number:?}"),
        toml::Value::Boolean(flag) => flag.to_string(),
        toml::Value::Datetime(moment) => moment.to_string(),
        toml::Value::Array(list) => {
            let items: Vec<String> = list.iter().map(inline).collect();
            format!("[{}]", items.join(", "))
        }
        toml::Value::Table(table) => {
            let members = table
                .iter()
                .map(|(key, value)| format!("{} = {}", quoted(key), inline(value)));
            format!("{{ {} }}", members.collect::<Vec<_>>().join(", "))
        }
    }
}
