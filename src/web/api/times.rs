//! Times and counts in queries.

use crate::model::Time;
use crate::web::problem::Problem;

/// A time of a query.
///
/// # Errors
/// 400 for what is no RFC 3339 time.
pub fn read(key: &str, text: Option<String>) -> Result<Option<Time>, Problem> {
    let parse = |text: String| {
        Time::parse_rfc3339(&text).map_err(|why| {
            Problem::bad_request(&format!(
                "`{key}` must be a time like 2026-07-03T14:00:00Z (a + is written %2B): {why}"
            ))
        })
    };
    text.map(parse).transpose()
}

/// How many at most.
///
/// # Errors
/// 400 beyond 1 to `limit`.
pub fn most(asked: Option<usize>, usual: usize, limit: usize) -> Result<usize, Problem> {
    let most = asked.unwrap_or(usual);
    if (1..=limit).contains(&most) {
        return Ok(most);
    }
    Err(Problem::bad_request(&format!(
        "`most` must be a whole number from 1 to {limit}"
    )))
}
