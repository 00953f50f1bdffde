//! A bank's page: what asks for somebody first, then the pictures, then the evidence, then the data.

use axum::extract::{Extension, Path, Query, State};
use maud::{Markup, html};

use crate::engine::{BankView, SourceState};
use crate::model::Time;
use crate::web::access::Caller;
use crate::web::address::{self, percent};
use crate::web::format::{self, Times, span_of_time};
use crate::web::pictures::glyph;
use crate::web::problem::Problem;
use crate::web::site::{App, bank};
use crate::web::standing::Standing;
use crate::web::{story, then};

use super::frame::{Page, Scene, Script, render};
use super::history::{self, Past};
use super::looks::Shown;
use super::when::{Wanted, When};
use super::{letters, line, looks, notice, shifts, sources, watch};

/// The page.
pub async fn page(
    State(app): State<App>,
    Extension(caller): Extension<Caller>,
    Path(name): Path<String>,
    Query(wanted): Query<Wanted>,
) -> Result<Markup, Problem> {
    let snapshot = app.now();
    let (_, present) = bank(&snapshot, &name)?;
    let times = app.times(&snapshot);
    let when = When::new(&wanted, &times)?;
    let then = if when.is_past {
        Some(read_then(&app, present, &when).await?)
    } else {
        None
    };
    let view = then.as_ref().unwrap_or(present);
    let shown = looks::shown(view, wanted.span);
    let span = shown.as_ref().map(|s| s.look.span);
    let past = history::read(&app, &name, span, &when).await;
    let mut scene = Scene::new(
        &app,
        &snapshot,
        &caller,
        format!("{}{}", address::bank(&name), when.query()),
    );
    scene.times.now = when.seen;
    let main = main(&scene, view, &past, shown.as_ref(), (&when, &times));
    Ok(render(
        &scene,
        Page {
            title: name.clone(),
            live: when
                .is_live()
                .then(|| format!("/live?bank={}", percent(&name))),
            script: Some(Script::Band),
            way: "",
            main,
        },
    ))
}

/// The bank as it was seen then.
async fn read_then(app: &App, present: &BankView, when: &When) -> Result<BankView, Problem> {
    let (name, at) = (present.bank.name.clone(), when.seen);
    let kept = app.history(move |h| {
        let looks = h.looks_at(&name, at)?;
        let raised = story::notices(h, Some(&name), (Time::from_us(i64::MIN), at.plus_us(1)))?;
        let open = raised.iter().filter_map(|n| story::as_of(n, at)).collect();
        Ok((looks, open))
    });
    let (looks, open) = kept.await?;
    Ok(then::view(present, looks, open))
}

fn main(
    scene: &Scene<'_>,
    view: &BankView,
    past: &Result<Past, Problem>,
    shown: Option<&Shown>,
    (when, times): (&When, &Times),
) -> Markup {
    let page = address::bank(&view.bank.name);
    html! {
        (when.banner(times, &page))
        (heading(scene, view))
        @for open in &view.open { (notice::card(scene, open, notice::Place::Bank)) }
        @match shown {
            None if when.is_past => section class="picture" {
                h2 { "No look was kept whole before then" }
                p class="empty" { "Looks are kept whole now and then, and when a notice begins or changes." }
            },
            None => (before_the_first_look(view)),
            Some(shown) => {
                (looks::level_picture(view, shown, when))
                (looks::spread_picture(view, shown, when))
                @match past {
                    Ok(past) => (history::section(scene, view, past, shown, when)),
                    Err(problem) => section class="picture" {
                        h2 { "The hours behind us" }
                        p class="empty" { (super::frame::sentence(&problem.detail)) " Pictures of the past are missing until then." }
                    },
                }
                (letters::section(view, &shown.look))
            }
        }
        @if !when.is_past { (line::section(scene, view)) (watch::section(view)) }
        @if !view.looks.is_empty() { (looks::tests(scene, view, shown.map(|s| s.look.span))) }
        @if !when.is_past { (shifts::section(scene, view)) (deliveries(scene, view)) }
        section class="another" { h2 { "Another time" } (when.past_form(&page, times)) }
    }
}

/// What the sources deliver now, and what became of it.
fn deliveries(scene: &Scene<'_>, view: &BankView) -> Markup {
    html! {
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
            @if let Some(kept) = &view.kept { div { dt { "call budget" } dd { (kept.keeping.words()) " "
                span class="quiet" { @if kept.told == 0 { "nobody has said yet what calls came to" }
                    @else { "nothing was found in " (kept.nothing_found) " of " (kept.told) " calls that were answered, in "
                        (format::plain(kept.days, 0)) " d" } } } } }
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
