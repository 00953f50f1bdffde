//! `evenrow vet --broker`: listens for a while, and tells what a daemon with this configuration would take,
//! refuse and miss.
//!
//! What must hold: nothing is written to the broker. Deliberately absent: the store and the engine.

mod figures;
mod guess;
mod propose;
mod report;
mod survey;

use std::io::Write as _;
use std::path::Path;
use std::time::Duration;

use crate::cli::exit::Exit;
use crate::intake::mqtt::overhear;
use crate::settings::Settings;

use report::Report;
use survey::Survey;

/// How the outcome is told.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Form {
    /// Text for people.
    Text,
    /// One line of JSON.
    Json,
}

/// Listens and tells. `config` is read once more, to propose banks as they are written.
pub(super) fn run(settings: &Settings, config: &Path, listen: Duration, form: Form) -> Exit {
    let runtime = tokio::runtime::Builder::new_current_thread()
        .enable_all()
        .build();
    let runtime = match runtime {
        Ok(runtime) => runtime,
        Err(error) => {
            eprintln!("the runtime cannot be started: {error}");
            return Exit::Failed;
        }
    };
    let broker = &settings.broker;
    let place = format!("{}:{}", broker.host, broker.port);
    eprintln!("listening to {place} for {} s", listen.as_secs());
    let mut survey = Survey::new(settings);
    let filters = filters(settings);
    let heard = overhear(broker, &filters, listen, |message| survey.hear(message));
    let refused = match runtime.block_on(heard) {
        Ok(refused) => refused,
        Err(why) => {
            eprintln!("{why} ({place})");
            return Exit::Failed;
        }
    };
    // It was read a moment ago; what a person may have broken since is only left out.
    let written = std::fs::read_to_string(config)
        .ok()
        .and_then(|text| text.parse().ok());
    let proposals = propose::proposals(settings, &survey, &written.unwrap_or_default());
    let report = Report {
        settings,
        survey: &survey,
        listened_s: listen.as_secs_f64(),
        refused: &refused,
        proposals: &proposals,
    };
    let text = match form {
        Form::Text => report.text(),
        Form::Json => report.json(),
    };
    match std::io::stdout().write_all(text.as_bytes()) {
        Ok(()) => Exit::Done,
        Err(error) => {
            eprintln!("what was heard cannot be written: {error}");
            Exit::Failed
        }
    }
}

/// Everything below the first levels of the banks' topics, so that topics are heard too that a slip of the
/// pen keeps from matching.
fn filters(settings: &Settings) -> Vec<String> {
    let mut all: Vec<String> = Vec::new();
    for feed in &settings.feeds {
        let filter = match feed.topic.levels.first().map(String::as_str) {
            // Whatever begins with any word is everything.
            None | Some("+" | "#" | "{source}") => return vec!["#".to_owned()],
            Some(first) => format!("{first}/#"),
        };
        if !all.contains(&filter) {
            all.push(filter);
        }
    }
    all
}
