//! Entering line events, for the interface and the pages alike.

use crate::engine::{Command, Outcome};
use crate::model::LineEvent;

use super::deeds::{comment, person};
use super::problem::Problem;
use super::site::{App, bank};
use super::wire::LineEntryBody;

/// A product code or source name on a form.
const LONGEST_WORD: usize = 120;

/// Checks and sends a line event.
///
/// # Errors
/// 400 for what is missing or too long, else what the engine says.
pub async fn submit(app: &App, name: &str, entry: &LineEntryBody) -> Result<LineEvent, Problem> {
    let (ix, _) = bank(&app.now(), name).map(|(ix, b)| (ix, b.clone()))?;
    let by = person(&entry.by)?;
    let reason = comment(&entry.reason)?;
    let words = [&entry.source, &entry.product];
    let too_long = |w: &&Option<String>| {
        w.as_ref()
            .is_some_and(|w| w.chars().count() > LONGEST_WORD || w.chars().any(char::is_control))
    };
    if words.iter().any(too_long) {
        return Err(Problem::bad_request(
            "a source or product has at most 120 characters on one line",
        ));
    }
    let change = entry.change().map_err(|why| Problem::bad_request(&why))?;
    let what = Command::Line {
        bank: ix,
        change,
        reason: reason.to_owned(),
    };
    match app.ask(by.into(), what).await? {
        Outcome::Line(event) => Ok(event),
        Outcome::NotFound(why) => Err(Problem::not_found(&why)),
        Outcome::Refused(why) => Err(Problem::conflict(&why)),
        Outcome::Notice(_) | Outcome::Windows(_) | Outcome::Evidence(_) => {
            Err(Problem::internal("the answer was to another question"))
        }
    }
}
