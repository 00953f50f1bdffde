//! Which time a page is asked to show: the moment it is seen from, and the stretch its pictures cover.

use maud::{Markup, html};
use serde::Deserialize;

use crate::model::{Time, US_PER_DAY, US_PER_S};
use crate::web::address::percent;
use crate::web::format::{Times, span_of_time};
use crate::web::problem::Problem;

/// A shift: what pictures cover when nothing else is asked.
const USUAL_US: i64 = 8 * 3600 * US_PER_S;
/// The shortest stretch that has something to show.
const SHORTEST_US: i64 = 60 * US_PER_S;
/// The longest that makes a picture of single looks.
const LONGEST_US: i64 = 90 * US_PER_DAY;
/// Stretches offered, in hours.
const OFFERED_H: [f64; 5] = [0.5, 2.0, 8.0, 24.0, 168.0];

/// The times in a page's query.
#[derive(Debug, Default, Deserialize)]
pub struct Wanted {
    /// The span to show.
    pub span: Option<usize>,
    /// The moment to see the page from.
    pub at: Option<String>,
    /// Where the pictures begin.
    pub from: Option<String>,
    /// Where they end.
    pub to: Option<String>,
}

/// The times of a page.
#[derive(Clone, Debug)]
pub struct When {
    /// The moment it is seen from.
    pub seen: Time,
    /// Whether that was asked for; else it is now.
    pub is_past: bool,
    /// Where the pictures begin.
    pub from: Time,
    /// Where they end.
    pub to: Time,
    /// Whether a stretch was asked for.
    pub is_cut: bool,
    span: Option<usize>,
}

impl When {
    /// Reads the query.
    ///
    /// # Errors
    /// 400 for what is no time, and for a stretch that ends before it begins.
    pub fn new(wanted: &Wanted, times: &Times) -> Result<Self, Problem> {
        let read = |key: &str, text: &Option<String>| {
            let text = text.as_deref().filter(|t| !t.trim().is_empty());
            text.map(|text| {
                times.read(text).ok_or_else(|| {
                    Problem::bad_request(&format!(
                        "`{key}` must be a time like 2026-07-03T14:00 (the plant's) or \
                         2026-07-03T14:00:00Z"
                    ))
                })
            })
            .transpose()
        };
        let at = read("at", &wanted.at)?.filter(|at| *at < times.now);
        let (from, to) = (read("from", &wanted.from)?, read("to", &wanted.to)?);
        let seen = at.unwrap_or(times.now);
        let to_used = to.unwrap_or(seen).min(seen);
        let from_used = from.unwrap_or_else(|| to_used.plus_us(-USUAL_US));
        if to_used.us_since(from_used) < SHORTEST_US {
            return Err(Problem::bad_request(
                "`from` must be at least a minute before `to`, and before now",
            ));
        }
        Ok(Self {
            seen,
            is_past: at.is_some(),
            from: from_used.max(to_used.plus_us(-LONGEST_US)),
            to: to_used,
            is_cut: from.is_some() || to.is_some(),
            span: wanted.span,
        })
    }

    /// Whether the page goes with the time.
    pub fn is_live(&self) -> bool {
        !self.is_past && !self.is_cut
    }

    /// The query that shows this page again.
    pub fn query(&self) -> String {
        self.query_over(self.span)
    }

    /// The query that shows the same time over another span, or over the one that stands for it.
    pub fn query_over(&self, span: Option<usize>) -> String {
        self.write(span, self.is_cut.then_some((self.from, self.to)))
    }

    fn query_for(&self, cut: Option<(Time, Time)>) -> String {
        self.write(self.span, cut)
    }

    fn write(&self, span: Option<usize>, cut: Option<(Time, Time)>) -> String {
        let mut parts: Vec<String> = Vec::new();
        parts.extend(span.map(|span| format!("span={span}")));
        let time = |key: &str, at: Time| format!("{key}={}", percent(&at.to_string()));
        parts.extend(self.is_past.then(|| time("at", self.seen)));
        if let Some((from, to)) = cut {
            parts.push(time("from", from));
            parts.push(time("to", to));
        }
        if parts.is_empty() {
            String::new()
        } else {
            format!("?{}", parts.join("&"))
        }
    }

    /// Ways to another stretch: shorter and longer ones that end where this one does, and the ones
    /// before and after.
    pub fn stretches(&self, page: &str, anchor: &str) -> Markup {
        let length = self.to.us_since(self.from);
        let to_cut = |cut| format!("{page}{}#{anchor}", self.query_for(Some(cut)));
        let ends_now = self.to == self.seen;
        html! {
            p class="spans" {
                "The last "
                @for hours in OFFERED_H {
                    @let us = (hours * 3600.0) as i64 * US_PER_S;
                    @let cut = (self.seen.plus_us(-us), self.seen);
                    @let here = ends_now && (length - us).abs() < SHORTEST_US;
                    @let href = if us == USUAL_US { format!("{page}{}#{anchor}", self.query_for(None)) } else { to_cut(cut) };
                    a href=(href) aria-current=[here.then_some("true")] { (span_of_time(us)) } " "
                }
                span class="ways" {
                    a href=(to_cut((self.from.plus_us(-length / 2), self.to.plus_us(-length / 2)))) { "earlier" } " "
                    @if !ends_now {
                        a href=(to_cut((self.from.plus_us(length / 2), self.to.plus_us(length / 2)))) { "later" } " "
                    }
                    a href=(to_cut((self.from.plus_us(length / 4), self.to.plus_us(-length / 4)))) { "closer" } " "
                    a href=(to_cut((self.from.plus_us(-length / 2), self.to.plus_us(length / 2).min(self.seen)))) { "wider" }
                }
            }
        }
    }

    /// The way to the page as it was seen at another moment.
    pub fn past_form(&self, page: &str, times: &Times) -> Markup {
        html! {
            form class="past" method="get" action=(page) {
                label for="at" { "As it was seen at" }
                input id="at" name="at" type="datetime-local" value=(times.field(self.seen)) max=(times.field(times.now));
                button class="plain" { "Show" }
                @if self.is_past { a href=(page) { "Now" } }
            }
        }
    }

    /// What a page of the past says first.
    pub fn banner(&self, times: &Times, page: &str) -> Markup {
        html! {
            @if self.is_past {
                div class="then" role="note" {
                    p { strong { "As it was seen at " (times.full(self.seen)) "." }
                        " From looks and notices that were kept; the figures are those of the last looks kept \
                          whole before then. Raw values, counts and refusals of then are gone." }
                    p { a href=(page) { "Back to now" } }
                }
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn times() -> Times {
        Times {
            zone: jiff::tz::TimeZone::get("Europe/Lisbon").expect("bundled"),
            now: Time::parse_rfc3339("2026-07-03T14:00:00Z").expect("a time"),
        }
    }

    fn wanted(at: &str, from: &str, to: &str) -> Wanted {
        let text = |t: &str| (!t.is_empty()).then(|| t.to_owned());
        Wanted {
            span: None,
            at: text(at),
            from: text(from),
            to: text(to),
        }
    }

    #[test]
    fn queries_are_read_and_written_again() {
        for (at, from, to, query) in [
            ("", "", "", ""),
            ("2026-07-03T13:00", "", "", "?at=2026-07-03T12%3A00%3A00Z"),
            // The future is now.
            ("2026-07-04T13:00", "", "", ""),
            (
                "",
                "2026-07-03T10:00:00Z",
                "",
                "?from=2026-07-03T10%3A00%3A00Z&to=2026-07-03T14%3A00%3A00Z",
            ),
        ] {
            let when = When::new(&wanted(at, from, to), &times()).expect("good");
            assert_eq!(when.query(), query);
        }
        for (at, from, to) in [
            ("yesterday", "", ""),
            ("", "2026-07-03T14:00:00Z", ""),
            ("", "2026-07-03T12:00:00Z", "2026-07-03T11:00:00Z"),
            ("", "2026-07-09T12:00:00Z", ""),
        ] {
            let fault = When::new(&wanted(at, from, to), &times());
            assert_eq!(fault.map(|_| ()).map_err(|p| p.status), Err(400));
        }
    }
}
