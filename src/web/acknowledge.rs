//! Acknowledging a notice, for the interface and the pages alike.

use std::sync::Arc;

use crate::engine::{Command, Outcome};
use crate::notice::Notice;

use super::problem::Problem;
use super::site::App;

/// A name on a badge.
const LONGEST_NAME: usize = 80;
/// A few paragraphs.
const LONGEST_COMMENT: usize = 2000;

/// Checks and sends an acknowledgement.
///
/// # Errors
/// 400 for a missing or overlong name or comment, else what the engine says.
pub async fn submit(app: &App, id: &str, by: &str, comment: &str) -> Result<Arc<Notice>, Problem> {
    let by = person(by)?;
    let comment = self::comment(comment)?;
    let what = Command::Acknowledge {
        notice: id.into(),
        comment: comment.to_owned(),
    };
    match app.ask(by.into(), what).await? {
        Outcome::Acknowledged(notice) => Ok(notice),
        // One that is over has left the engine: asking again gives it as it was left.
        Outcome::NotFound(why) => match app.notice(&app.now(), id).await {
            Ok(notice) if notice.acknowledged.is_some() => Ok(notice),
            _ => Err(Problem::not_found(&why)),
        },
        Outcome::Refused(why) => Err(Problem::conflict(&why)),
        Outcome::Windows(_) | Outcome::Line(_) => {
            Err(Problem::internal("the answer was to another question"))
        }
    }
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
