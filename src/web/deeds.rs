//! What people do with a notice, for the interface and the pages alike.

use std::sync::Arc;

use crate::engine::{Command, Outcome};
use crate::model::US_PER_S;
use crate::notice::{CallOutcome, Deed, Notice, Shelving};

use super::problem::Problem;
use super::site::App;

/// A name on a badge.
const LONGEST_NAME: usize = 80;
/// A few paragraphs.
const LONGEST_COMMENT: usize = 2000;

/// Checks and sends a deed.
///
/// # Errors
/// 400 for a missing or overlong name or comment, else what the engine says.
pub async fn submit(
    app: &App,
    id: &str,
    deed: Deed,
    (by, comment): (&str, &str),
) -> Result<Arc<Notice>, Problem> {
    let by = person(by)?;
    let comment = self::comment(comment)?;
    let what = Command::Notice {
        notice: id.into(),
        deed,
        comment: comment.to_owned(),
    };
    match app.ask(by.into(), what).await? {
        Outcome::Notice(notice) => Ok(notice),
        // One that has been over for long has left the engine: asking again gives it as it was left.
        Outcome::NotFound(why) => match app.notice(&app.now(), id).await {
            Ok(notice) if is_repeated(deed, &notice) => Ok(notice),
            Ok(_) => Err(Problem::conflict(
                "this notice has been over for long; nothing more can be done with it",
            )),
            Err(_) => Err(Problem::not_found(&why)),
        },
        Outcome::Refused(why) => Err(Problem::conflict(&why)),
        Outcome::Windows(_) | Outcome::Line(_) | Outcome::Evidence(_) => {
            Err(Problem::internal("the answer was to another question"))
        }
    }
}

fn is_repeated(deed: Deed, notice: &Notice) -> bool {
    matches!(deed, Deed::Acknowledge(_)) && notice.acknowledged.is_some()
}

/// The outcome of this word; none for an empty one.
///
/// # Errors
/// 400 for any other word.
pub fn outcome(word: Option<&str>) -> Result<Option<CallOutcome>, Problem> {
    let Some(word) = word.filter(|w| !w.is_empty()) else {
        return Ok(None);
    };
    let words: Vec<&str> = CallOutcome::ALL.iter().map(|o| o.word()).collect();
    let found = CallOutcome::of(word).map(Some);
    found.ok_or_else(|| Problem::bad_request(&format!("`outcome` is one of: {}", words.join(", "))))
}

/// Shelving for so many minutes.
///
/// # Errors
/// 400 for none at all.
pub fn shelve(for_minutes: u32, how: Shelving) -> Result<Deed, Problem> {
    if for_minutes == 0 {
        return Err(Problem::bad_request("`for_minutes` must be 1 or more"));
    }
    Ok(Deed::Shelve(i64::from(for_minutes) * 60 * US_PER_S, how))
}

/// The name of the person who does something.
///
/// # Errors
/// 400 when it is missing, too long or not on one line.
pub fn person(by: &str) -> Result<&str, Problem> {
    let by = by.trim();
    let is_good =
        !by.is_empty() && by.chars().count() <= LONGEST_NAME && !by.chars().any(char::is_control);
    is_good.then_some(by).ok_or_else(|| {
        Problem::bad_request("this needs the name of the person, at most 80 characters on one line")
    })
}

/// What a person wrote.
///
/// # Errors
/// 400 when it is too long.
pub fn comment(text: &str) -> Result<&str, Problem> {
    let text = text.trim();
    if text.chars().count() > LONGEST_COMMENT {
        return Err(Problem::bad_request(
            "a comment or reason has at most 2000 characters",
        ));
    }
    Ok(text)
}
