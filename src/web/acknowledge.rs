//! Acknowledging a notice: the one change that pages and interface take.

use std::sync::Arc;

use crate::engine::{Command, Outcome};
use crate::notice::Notice;

use super::problem::Problem;
use super::site::App;

/// A name on a badge.
const LONGEST_NAME: usize = 80;
/// A few paragraphs.
const LONGEST_COMMENT: usize = 2000;

/// Checks and sends an acknowledgement, for the interface and the pages.
///
/// # Errors
/// 400 for a missing or overlong name or comment, else what the engine says.
pub async fn submit(app: &App, id: &str, by: &str, comment: &str) -> Result<Arc<Notice>, Problem> {
    let (by, comment) = (by.trim(), comment.trim());
    let is_good_name =
        !by.is_empty() && by.chars().count() <= LONGEST_NAME && !by.chars().any(char::is_control);
    if !is_good_name {
        return Err(Problem::bad_request(
            "an acknowledgement needs the name of the person, at most 80 characters on one line",
        ));
    }
    if comment.chars().count() > LONGEST_COMMENT {
        return Err(Problem::bad_request(
            "a comment has at most 2000 characters",
        ));
    }
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
        Outcome::Windows(_) => Err(Problem::internal("the answer was to another question")),
    }
}
