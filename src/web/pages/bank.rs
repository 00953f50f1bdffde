//! A bank's page: what asks for somebody first, then the pictures, then the evidence, then the data.

use axum::extract::{Extension, Path, Query, State};
use maud::{Markup, html};
use serde::Deserialize;

use crate::engine::{BankView, SourceState};
use crate::web::access::Caller;
use crate::web::address::percent;
use crate::web::format::{self, span_of_time};
use crate::web::pictures::glyph;
use crate::web::problem::Problem;
use crate::web::site::{App, bank};

use super::frame::{Page, Scene, render};
use super::history::{self, Past};
use super::{line, looks, notice, sources, watch};
use crate::web::standing::Standing;

/// Eight hours of looks each second; a bound on what one page reads.
const MOST_DIGESTS: usize = 30_000;
/// Notices among which this bank's are sought for the time band.
const MOST_NOTICES: usize = 100;

/// Which span to show.
#[derive(Debug, Default, Deserialize)]
pub struct Wanted {
    span: Option<usize>,
}

/// The page.
pub async fn page(
    State(app): State<App>,
    Extension(caller): Extension<Caller>,
    Path(name): Path<String>,
    Query(wanted): Query<Wanted>,
) -> Result<Markup, Problem> {
    let snapshot = app.now();
    let (_, view) = bank(&snapshot, &name)?;
    let past = read(&app, &name).await;
    let span = wanted
        .span
        .map_or_else(String::new, |s| format!("?span={s}"));
    let here = format!("/banks/{}{span}", percent(&name));
    let scene = Scene::new(&app, &snapshot, &caller, here);
    let main = main(&scene, view, &past, wanted.span);
    Ok(render(
        &scene,
        Page {
            title: name.clone(),
            live: Some(format!("/live?bank={}", percent(&name))),
            way: "",
            main,
        },
    ))
}

/// The past; a page of the present is shown even when the store cannot be read, and says so.
async fn read(app: &App, name: &str) -> Result<Past, Problem> {
    let to = app.site.clock.now();
    let wanted = name.to_owned();
    app.history(move |h| {
        let from = to.plus_us(-history::BACK_US);
        let digests = h.digests(&wanted, from, to.plus_us(1), MOST_DIGESTS)?;
        let mut notices = h.notices(None, MOST_NOTICES)?.items;
        notices.retain(|n| *n.bank == *wanted);
        Ok(Past { digests, notices })
    })
    .await
}

fn main(
    scene: &Scene<'_>,
    view: &BankView,
    past: &Result<Past, Problem>,
    asked: Option<usize>,
) -> Markup {
    let shown = looks::shown(view, asked);
    html! {
        (heading(scene, view))
        @for open in &view.open { (notice::card(scene, open, notice::Place::Bank)) }
        @match &shown {
            None => (before_the_first_look(view)),
            Some(shown) => {
                (looks::level_picture(view, shown))
                (looks::spread_picture(view, shown))
                @match past {
                    Ok(past) => (history::section(scene, view, past, shown)),
                    Err(problem) => section class="picture" {
                        h2 { "The hours behind us" }
                        p class="empty" { (super::frame::sentence(&problem.detail)) " Pictures of the past are missing until then." }
                    },
                }
            }
        }
        (line::section(scene, view))
        (watch::section(view))
        @if !view.looks.is_empty() { (looks::tests(scene, view, shown.as_ref().map(|s| s.look.span))) }
        section {
            h2 { "What do the sources deliver?" }
            (sources::table(scene, view))
        }
        section {
            h2 { "What became of the measurements?" }
            p class="caption" { "Since evenrow was started." }
            @if view.outcomes.is_empty() { p class="empty" { "Nothing has arrived yet." } }
            (sources::outcomes(view))
            @if view.refusals.is_empty() { p class="empty" { "Nothing was refused." } }
            @else { h3 { "Refused, the last of each kind" } (sources::refusal_table(scene, &view.refusals)) }
        }
    }
}

fn heading(scene: &Scene<'_>, view: &BankView) -> Markup {
    let standing = Standing::of(view);
    let bank = &view.bank;
    let what = &bank.characteristic;
    let asks = if standing.asks() { " asks" } else { "" };
    html! {
        div class="heading" {
            div {
                h1 { (bank.name) }
                p class="quiet" { (what.name) @if let Some(equipment) = &bank.equipment { ", " (equipment) } }
            }
            p class={ "verdict" (asks) } {
                (glyph::draw(standing.glyph()))
                span { strong { (standing.words()) }
                    @let detail = standing.detail();
                    @if !detail.is_empty() { " " (detail) } }
            }
        }
        dl class="facts" {
            div { dt { "margin" } dd { (bank.margin) " " (what.unit) } }
            @if let Some(mean) = view.mean { div { dt { "mean of all" } dd { (what.mean(mean)) " " (what.unit) } } }
            @if let Some(target) = what.target { div { dt { "target" } dd { (target) " " (what.unit) } } }
            @if let Some(declared) = what.declared { div { dt { "declared" } dd { (declared) " " (what.unit) } } }
            div { dt { "false calls" } dd { "at most " (bank.budget) } }
            @if let Some(us) = view.interval_us { div { dt { "a value every" } dd { (interval(us)) } } }
            @if let Some(at) = view.newest_taken { div { dt { "newest value" } dd { (scene.time(at, &scene.times.second(at))) } } }
            @if let Some(at) = view.next_look { div { dt { "next look" } dd { (scene.time(at, &scene.times.second(at))) } } }
        }
    }
}

/// Short intervals need their tenths.
fn interval(us: i64) -> String {
    let s = us as f64 / crate::model::US_PER_S as f64;
    if s < 60.0 {
        format!("{} s", format::plain(s, if s < 10.0 { 2 } else { 1 }))
    } else {
        span_of_time(us)
    }
}

/// A bank that has not been looked at yet: what it has, and what it needs.
fn before_the_first_look(view: &BankView) -> Markup {
    let need = view.bank.spans.first().copied().unwrap_or(2);
    let waits = view
        .sources
        .iter()
        .filter(|s| s.state == SourceState::Awaited)
        .count();
    html! {
        section class="picture" {
            h2 { "No look yet" }
            p { "The first look needs " (need) " values of each source and comes every " (span_of_time(view.bank.look_every_us))
                " once they are there."
                @if waits > 0 { " " (waits) " of " (view.sources.len()) " sources have sent nothing so far." } }
            ul class="gather" {
                @for source in &view.sources {
                    @let have = source.values.min(need);
                    li { span { (source.name) } meter min="0" max=(need) value=(have) { (have) " of " (need) } span class="n" { (have) "/" (need) } }
                }
            }
        }
    }
}
