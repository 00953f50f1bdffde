//! `evenrow vet`: every fault of a configuration at once or, when it is good, what it means.
//!
//! With `--broker` it also listens for a while ([`broker`]), with `--send-test` it sends one marked notice;
//! otherwise it connects to nothing. Files that
//! the configuration names are looked at, and a missing one is a caution: the configuration may be meant
//! for another machine.

mod broker;
mod forms;

use std::fmt::Write as _;
use std::fs::File;
use std::io::Write as _;
use std::path::{Path, PathBuf};

use crate::engine::FEWEST_VALUES;
use crate::model::{Bank, Pairing, Sources};
use crate::settings::{
    Broker, Feed, Means, Outlet, Protocol, Settings, bank_cautions, duration_words,
};
use crate::verdict::Shares;

use super::args::VetArgs;
use super::configuration;
use super::exit::Exit;
use super::send_test;

/// Runs the command.
pub fn run(args: VetArgs) -> Exit {
    let VetArgs {
        config,
        send_test,
        broker,
        listen,
        json,
    } = args;
    let settings = match configuration::read(&config) {
        Ok(settings) => settings,
        Err(exit) => return exit,
    };
    if json {
        return broker::run(&settings, &config, listen, broker::Form::Json);
    }
    let text = format!("{}: good\n\n{}", config.display(), summary(&settings));
    let said = say(&text);
    if said != Exit::Done {
        return said;
    }
    if broker {
        let heard = broker::run(&settings, &config, listen, broker::Form::Text);
        if heard != Exit::Done {
            return heard;
        }
    }
    if !send_test {
        return Exit::Done;
    }
    match send_test::send(&settings) {
        Ok(told) => say(&format!("\n{told}")),
        Err(told) => {
            say(&format!("\n{told}"));
            Exit::Failed
        }
    }
}

fn say(text: &str) -> Exit {
    match std::io::stdout().write_all(text.as_bytes()) {
        Ok(()) => Exit::Done,
        Err(error) => {
            eprintln!("the summary cannot be written: {error}");
            Exit::Failed
        }
    }
}

/// Lines of a name and what there is to say.
#[derive(Default)]
struct Lines(String);

impl Lines {
    fn add(&mut self, name: &str, what: impl std::fmt::Display) {
        // Writing into a String cannot fail.
        let _always = writeln!(self.0, "  {name:<11} {what}");
    }

    fn cautions(&mut self, cautions: impl IntoIterator<Item = String>) {
        for caution in cautions {
            self.add("caution", caution);
        }
    }
}

/// What a good configuration means.
fn summary(settings: &Settings) -> String {
    let mut all = plant(settings);
    for (bank, feed) in settings.banks.iter().zip(&settings.feeds) {
        all.push('\n');
        all.push_str(&bank_summary(bank, feed));
    }
    all
}

fn plant(settings: &Settings) -> String {
    let Settings {
        plant,
        broker,
        store,
        web,
        manners: _,
        banks: _,
        feeds: _,
        outlets,
        origins: _,
    } = settings;
    let mut lines = Lines(format!("plant {}\n", plant.name));
    let zone = plant.zone.iana_name().unwrap_or("without a name");
    lines.add("time zone", zone);
    let shift = |s: &crate::settings::Shift| {
        let time = |t: jiff::civil::Time| format!("{:02}:{:02}", t.hour(), t.minute());
        format!("{} {} to {}", s.name, time(s.from), time(s.to))
    };
    let shifts: Vec<String> = plant.shifts.iter().map(shift).collect();
    if !shifts.is_empty() {
        lines.add("shifts", shifts.join(", "));
    }
    lines.add("broker", broker_line(broker));
    let kept = match store.keep_days {
        0 => "keeps windows and evidence only".to_owned(),
        days => format!("keeps {days} days"),
    };
    lines.add("store", format!("{}, {kept}", store.folder.display()));
    lines.add("pages", settings.pages());
    for outlet in outlets {
        lines.add("outlet", outlet_line(outlet));
    }
    lines.cautions(settings.cautions());
    let files = [
        ("broker.password_file", &broker.password_file),
        ("broker.ca_file", &broker.ca_file),
        (
            "broker.client_certificate_file",
            &broker.client_certificate_file,
        ),
        ("broker.client_key_file", &broker.client_key_file),
        ("web.token_file", &web.token_file),
        ("web.certificate_file", &web.certificate_file),
        ("web.key_file", &web.key_file),
    ];
    let named = files
        .into_iter()
        .filter_map(|(key, file)| Some((key, file.as_deref()?)));
    lines.cautions(named.filter_map(|(key, file)| unreadable(key, file)));
    let named = outlets.iter().flat_map(outlet_files);
    lines.cautions(named.filter_map(|(key, file)| unreadable(&key, file)));
    lines.0
}

/// Says when a file that is named cannot be read here.
fn unreadable(key: &str, file: &Path) -> Option<String> {
    let error = File::open(file).err()?;
    Some(format!(
        "{key}: {} cannot be read here: {error}",
        file.display()
    ))
}

/// The files that an outlet names, each with its key.
fn outlet_files(outlet: &Outlet) -> Vec<(String, &Path)> {
    let files: Vec<(&str, Option<&PathBuf>)> = match &outlet.means {
        Means::Webhook(w) => vec![
            ("secret_file", Some(&w.secret_file)),
            ("ca_file", w.ca_file.as_ref()),
        ],
        Means::Mail(m) => vec![
            ("password_file", m.password_file.as_ref()),
            ("ca_file", m.ca_file.as_ref()),
        ],
        Means::Command(p) => vec![("program", Some(&p.path))],
    };
    let named = files.into_iter().filter_map(|(key, file)| {
        let key = format!("outlet {}, {key}", outlet.name);
        Some((key, file?.as_path()))
    });
    named.collect()
}

/// Where an outlet leads, and what goes there.
fn outlet_line(outlet: &Outlet) -> String {
    let where_to = match &outlet.means {
        Means::Webhook(w) => w.url.clone(),
        Means::Mail(m) => {
            let to: Vec<&str> = m.to.iter().map(|t| t.address.as_str()).collect();
            format!("{} by {}:{}", to.join(", "), m.host, m.port)
        }
        Means::Command(p) => p.path.display().to_string(),
    };
    let route = &outlet.route;
    let mut what = Vec::new();
    let mut list = |of: &str, names: Vec<&str>| {
        if !names.is_empty() {
            what.push(format!("{of} {}", names.join(", ")));
        }
    };
    list("banks", route.banks.iter().map(|b| &**b).collect());
    list("kinds", route.kinds.iter().map(|k| k.word()).collect());
    list(
        "priorities",
        route.priorities.iter().map(|p| p.word()).collect(),
    );
    list("shifts", route.shifts.iter().map(|s| &*s.name).collect());
    if route.escalate_after_us > 0 {
        what.push(format!(
            "unacknowledged for {}",
            duration_words(route.escalate_after_us)
        ));
    }
    if what.is_empty() {
        what.push("every notice".to_owned());
    }
    let (name, way) = (&outlet.name, outlet.means.word());
    format!("{name}, {way} to {where_to}: {}", what.join("; "))
}

fn broker_line(broker: &Broker) -> String {
    let scheme = if broker.tls { "mqtts" } else { "mqtt" };
    let version = match broker.protocol {
        Protocol::V5 => "MQTT 5",
        Protocol::V4 => "MQTT 3.1.1",
    };
    let host = if broker.host.contains(':') {
        format!("[{}]", broker.host)
    } else {
        broker.host.clone()
    };
    let user = broker
        .user
        .as_ref()
        .map_or_else(String::new, |user| format!(" for {user}"));
    let (port, id) = (broker.port, &broker.client_id);
    format!("{scheme}://{host}:{port}, {version}, client id {id}{user}")
}

fn bank_summary(bank: &Bank, feed: &Feed) -> String {
    let characteristic = &bank.characteristic;
    let unit = &characteristic.unit;
    let mut lines = Lines(format!("bank {}\n", bank.name));
    if let Some(equipment) = &bank.equipment {
        lines.add("equipment", equipment);
    }
    lines.add("measures", format!("{} in {unit}", characteristic.name));
    lines.add("sources", sources(&bank.sources));
    lines.add("topic", feed.topic.levels.join("/"));
    lines.add("payload", forms::payload(&feed.payload));
    if let Some(refused) = forms::belief(&feed.belief, unit) {
        lines.add("refuses", refused);
    }
    lines.add("pairing", pairing(bank.pairing));
    let spans: Vec<String> = bank.spans.iter().map(usize::to_string).collect();
    let spans = spans.join(", ");
    if let Sources::Shifts(_) = bank.sources {
        lines.add("spans", format!("{spans} production days"));
        lines.add("look", "when a shift is over");
        lines.add("needs", days_needed(bank));
    } else {
        lines.add("spans", format!("{spans} values of each source"));
        lines.add("look every", duration_words(bank.look_every_us));
    }
    let spread = bank.spread_margin;
    lines.add(
        "margin",
        format!(
            "{} {unit}; {spread} for the ratio of two standard deviations",
            bank.margin
        ),
    );
    lines.add("budget", format!("{} (false calls)", bank.budget));
    let shares = Shares::of(bank);
    let alpha = format!(
        "{:.2e} for level, {:.2e} for spread, at each look and span",
        shares.level, shares.spread
    );
    if bank.is_watched() {
        lines.add(
            "decides",
            "the watch, on every cycle, with the whole budget".to_owned(),
        );
        lines.add(
            "at first",
            format!("the looks, while the watch learns: {alpha}"),
        );
    } else {
        lines.add("decides", format!("the looks: at most {alpha}"));
    }
    lines.cautions(bank_cautions(bank));
    lines.0
}

/// What a bank of shifts needs before it can say anything.
fn days_needed(bank: &Bank) -> String {
    let days = bank.spans.first().copied().unwrap_or_default();
    format!(
        "{days} production days before the first look says anything, each with {FEWEST_VALUES} values \
         or more of every shift"
    )
}

fn sources(sources: &Sources) -> String {
    match sources {
        Sources::Listed(names) => {
            let names: Vec<&str> = names.iter().map(AsRef::as_ref).collect();
            format!("{}: {}", names.len(), names.join(", "))
        }
        Sources::Discover { most } => format!("discovered, at most {most}"),
        Sources::Shifts(calendar) => {
            let names: Vec<&str> = calendar.names().map(AsRef::as_ref).collect();
            let count = names.len();
            format!(
                "{count} shifts, by the time a value was taken: {}",
                names.join(", ")
            )
        }
    }
}

fn pairing(pairing: Pairing) -> String {
    match pairing {
        Pairing::Cycle => "by cycle".to_owned(),
        Pairing::Slot { length_us } => format!("by slots of {}", duration_words(length_us)),
        Pairing::Day => "by production day, the date on which a shift began".to_owned(),
        Pairing::None => {
            "none: a movement that all sources share can hide their differences".to_owned()
        }
    }
}
