//! `evenrow handover`: the report that one shift leaves to the next.
//!
//! Asks the running daemon; opens the store itself only when none runs, and then lacks what only the
//! present knows (silence, the call budget, the rate of production).

use std::io::Write as _;
use std::path::Path;

use crate::clock::Clock;
use crate::model::Name;
use crate::settings::Settings;
use crate::store;
use crate::web::handover::{Handover, Present, Tolerable, Wanted, gather, sheet, which};

use super::args::{HandoverArgs, TolerableError};
use super::ask::{Asked, ask};
use super::configuration;
use super::exit::Exit;

/// Runs the command.
pub fn run(args: HandoverArgs) -> Exit {
    let settings = match configuration::read(&args.config) {
        Ok(settings) => settings,
        Err(exit) => return exit,
    };
    let handover = match made(&args, &settings) {
        Ok(handover) => handover,
        Err(why) => {
            eprintln!("evenrow: {why}");
            return Exit::Failed;
        }
    };
    let text = if args.json {
        serde_json::to_string(&handover).map_err(|e| e.to_string())
    } else {
        Ok(sheet::whole(&handover))
    };
    let written = text.and_then(|text| {
        let mut out = std::io::stdout().lock();
        writeln!(out, "{text}").map_err(|e| e.to_string())
    });
    match written {
        Ok(()) => Exit::Done,
        Err(why) => {
            eprintln!("evenrow: the handover cannot be written: {why}");
            Exit::Failed
        }
    }
}

fn made(args: &HandoverArgs, settings: &Settings) -> Result<Handover, String> {
    let token_file: Option<&Path> = args
        .token_file
        .as_deref()
        .or(settings.web.token_file.as_deref());
    match ask(settings, token_file, &path(args)).map_err(|e| e.to_string())? {
        Asked::Answer(body) => serde_json::from_str(&body).map_err(|e| {
            format!("the daemon's answer cannot be read ({e}); is it another version?")
        }),
        Asked::NobodyThere => from_store(args, settings),
    }
}

fn path(args: &HandoverArgs) -> String {
    let tolerable = args.tolerable.map(|TolerableError::Eec76211| "76/211/EEC");
    let asked = [
        ("shift", args.shift.as_deref()),
        ("date", args.date.as_deref()),
        ("tolerable", tolerable),
    ];
    let asked = asked.into_iter();
    let asked = asked.filter_map(|(name, text)| Some(format!("{name}={}", percent(text?))));
    let query = asked.collect::<Vec<_>>().join("&");
    format!("/api/v1/handover?{query}")
}

/// For an address (RFC 3986): everything but the unreserved in percents.
fn percent(text: &str) -> String {
    let one = |byte: u8| {
        if byte.is_ascii_alphanumeric() || b"-._~".contains(&byte) {
            char::from(byte).to_string()
        } else {
            format!("%{byte:02X}")
        }
    };
    text.bytes().map(one).collect()
}

fn from_store(args: &HandoverArgs, settings: &Settings) -> Result<Handover, String> {
    let now = Clock::System.now();
    let wanted = Wanted {
        shift: args.shift.clone(),
        date: args.date.clone(),
    };
    let plant = &settings.plant;
    let stretch = which(&plant.shifts, &plant.zone, &wanted, now)?;
    let folder = &settings.store.folder;
    if !folder.exists() {
        let shown = folder.display();
        return Err(format!(
            "no daemon answers and there is no store in {shown}; start evenrow watch, or check \
             web.listen and store.folder"
        ));
    }
    eprintln!("evenrow: no daemon runs, so this is read from the store alone");
    let banks: Vec<Name> = settings.banks.iter().map(|b| b.name.clone()).collect();
    let opened = store::open(&settings.store, &banks, now).map_err(|e| e.to_string())?;
    let present = Present {
        settings,
        snapshot: None,
        now,
        tolerable: match args.tolerable {
            Some(TolerableError::Eec76211) => Tolerable::Eec76211,
            None => Tolerable::No,
        },
    };
    gather(present, &*opened.history, &stretch).map_err(|e| e.to_string())
}
