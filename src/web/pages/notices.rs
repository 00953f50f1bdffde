//! The list of notices: open ones first, then the past, in parts.

use axum::extract::{Extension, Query, State};
use maud::{Markup, html};
use serde::Deserialize;

use crate::notice::Notice;
use crate::web::access::Caller;
use crate::web::address::{self, percent};
use crate::web::pictures::glyph;
use crate::web::problem::Problem;
use crate::web::site::App;

use super::frame::{Page, Scene, render};
use super::notice::shape;

/// One screen and a bit.
const PART: usize = 50;

/// Which part.
#[derive(Debug, Default, Deserialize)]
pub struct Wanted {
    after: Option<String>,
}

/// The page.
pub async fn list(
    State(app): State<App>,
    Extension(caller): Extension<Caller>,
    Query(wanted): Query<Wanted>,
) -> Result<Markup, Problem> {
    let snapshot = app.now();
    let is_first = wanted.after.is_none();
    let part = app
        .history(move |h| h.notices(wanted.after.as_deref(), PART))
        .await?;
    let scene = Scene::new(&app, &snapshot, &caller, "/notices".to_owned());
    let open: Vec<&Notice> = snapshot
        .banks
        .iter()
        .flat_map(|b| b.open.iter().map(AsRef::as_ref))
        .collect();
    let past: Vec<&Notice> = part
        .items
        .iter()
        .filter(|n| !open.iter().any(|o| o.id == n.id))
        .collect();
    let main = html! {
        h1 { "Notices" }
        @if is_first {
            section { h2 { "Open" }
                @if open.is_empty() { p class="empty" { "Nothing asks for you: no notice is open." } }
                (rows(&scene, &open)) }
        }
        section { h2 { @if is_first { "Past" } @else { "Past, continued" } }
            @if past.is_empty() { p class="empty" { @if is_first { "None yet." } @else { "No more." } } }
            (rows(&scene, &past))
            @if let Some(next) = &part.next { p { a href={ "/notices?after=" (percent(next)) } { "Older notices" } } } }
    };
    Ok(render(
        &scene,
        Page {
            title: "Notices".to_owned(),
            live: is_first.then(|| "/live".to_owned()),
            script: None,
            way: "/notices",
            main,
        },
    ))
}

/// Notices in lines.
pub fn rows(scene: &Scene<'_>, notices: &[&Notice]) -> Markup {
    html! {
        ul class="list" {
            @for notice in notices {
                li { a class={ "line" @if notice.state.is_active() { " asks" } } href=(address::notice(&notice.id)) {
                    (glyph::draw(shape(notice)))
                    span class="what" { strong { (notice.subject) }
                        span class="quiet" { (notice.bank) " · " (notice.kind.words()) " · " (notice.state.words()) } }
                    span class="when" { (scene.time(notice.raised, &scene.times.minute(notice.raised)))
                        @if let Some(seen) = &notice.acknowledged { span class="quiet" { "seen by " (seen.by) } } }
                } }
            }
        }
    }
}
