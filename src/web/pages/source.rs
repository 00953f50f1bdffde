//! One source's page: its raw values beside its siblings', how they are distributed and follow each
//! other, its course over time, its clock, and the notices that named it.

use axum::extract::{Extension, Path, Query, State};
use maud::{Markup, html};

use crate::engine::{BankView, Command, Outcome, SourceView, WindowView};
use crate::model::{BankIx, US_PER_S};
use crate::notice::Notice;
use crate::web::access::Caller;
use crate::web::address::{self, percent};
use crate::web::format::{self, span_of_time};
use crate::web::pictures::glyph::{self, Glyph};
use crate::web::pictures::{course, spread, values};
use crate::web::problem::Problem;
use crate::web::site::{App, bank};
use crate::web::story;

use super::frame::{Page, Scene, render, sentence};
use super::history::{self, Past};
use super::when::{Wanted, When};
use super::{looks, notices, source_pictures as drawn};

/// The page.
pub async fn page(
    State(app): State<App>,
    Extension(caller): Extension<Caller>,
    Path((bank_name, name)): Path<(String, String)>,
    Query(wanted): Query<Wanted>,
) -> Result<Markup, Problem> {
    let snapshot = app.now();
    let (ix, view) = bank(&snapshot, &bank_name)?;
    let mut sources = view.sources.iter();
    let source = sources.find(|s| *s.name == *name).ok_or_else(|| {
        Problem::not_found(&format!(
            "the bank \"{bank_name}\" has no source \"{name}\""
        ))
    })?;
    let when = When::new(&wanted, &app.times(&snapshot))?;
    let windows = if when.is_past {
        Ok(None)
    } else {
        windows(&app, ix).await.map(Some)
    };
    let span = looks::shown(view, wanted.span).map(|s| s.look.span);
    let past = history::read(&app, &bank_name, span, &when).await;
    let here = format!("{}{}", address::source(&bank_name, &name), when.query());
    let scene = Scene::new(&app, &snapshot, &caller, here);
    let main = html! {
        (heading(&scene, view, source))
        (facts(&scene, view, source))
        @match &windows {
            Err(problem) => section { h2 { (values::TITLE) } p class="empty" { (sentence(&problem.detail)) } },
            Ok(None) => section { h2 { (values::TITLE) }
                p class="empty" { "Raw values are kept in the windows only: those of then are gone." } },
            Ok(Some(windows)) => (raw(&scene, view, source, windows)),
        }
        @match &past {
            Err(problem) => section { h2 { (course::TITLE) } p class="empty" { (sentence(&problem.detail)) } },
            Ok(past) => {
                (drawn::course(&scene, view, source, past, &when))
                (named_by(&scene, source, past))
            }
        }
    };
    Ok(render(
        &scene,
        Page {
            title: format!("{name} · {bank_name}"),
            live: when
                .is_live()
                .then(|| format!("/live?bank={}", percent(&bank_name))),
            script: None,
            way: "",
            main,
        },
    ))
}

/// The windows as the engine holds them.
async fn windows(app: &App, bank: BankIx) -> Result<Vec<WindowView>, Problem> {
    match app.ask("pages".into(), Command::Windows { bank }).await? {
        Outcome::Windows(windows) => Ok(windows),
        Outcome::NotFound(why) => Err(Problem::not_found(&why)),
        Outcome::Refused(why) => Err(Problem::unavailable(&why)),
        Outcome::Notice(_) | Outcome::Line(_) | Outcome::Evidence(_) => {
            Err(Problem::internal("the answer was to another question"))
        }
    }
}

fn heading(scene: &Scene<'_>, view: &BankView, source: &SourceView) -> Markup {
    let (glyph, words) = match (source.named.first(), source.state.word()) {
        (Some(kind), _) => (super::notice::glyph_of(*kind), kind.words()),
        (None, word @ "silent") => (Glyph::Silent, word),
        (None, word @ ("awaited" | "new")) => (Glyph::Unknown, word),
        (None, _) => (Glyph::Even, "not named"),
    };
    let asks = glyph != Glyph::Even && glyph != Glyph::Unknown;
    let at = view.sources.iter().position(|s| s.source == source.source);
    let beside = |step: isize| {
        let next = at?.checked_add_signed(step)?;
        view.sources.get(next)
    };
    let way = |to: &SourceView, rel: &str| {
        html! { a rel=(rel) href=(address::source(&view.bank.name, &to.name)) { (to.name) } }
    };
    html! {
        div class="heading" {
            div {
                p class="trail" { a href=(address::bank(&view.bank.name)) { (view.bank.name) } " / source" }
                h1 { (source.name) }
                p class="quiet" { (view.bank.characteristic.name)
                    @if let Some(equipment) = &view.bank.equipment { ", " (equipment) } }
            }
            p class={ "verdict" @if asks { " asks" } } { (glyph::draw(glyph)) span { strong { (words) }
                @for open in view.open.iter().filter(|n| story::names(n, &source.name)) {
                    " since " (scene.time(open.since.at, &scene.times.short(open.since.at)))
                } } }
        }
        nav class="beside" aria-label="Sources beside it" {
            @if let Some(before) = beside(-1) { span { "before " (way(before, "prev")) } }
            @if let Some(after) = beside(1) { span { "after " (way(after, "next")) } }
        }
    }
}

fn facts(scene: &Scene<'_>, view: &BankView, source: &SourceView) -> Markup {
    let what = &view.bank.characteristic;
    let unit = &what.unit;
    html! {
        dl class="facts" {
            @if let Some(x) = source.last_value { div { dt { "last value" } dd { (what.value(x)) " " (unit) } } }
            @if let Some(d) = source.deviation {
                div { dt { "deviation from the others" } dd { (what.deviation(d.value)) " " (unit)
                    span class="quiet" { " " (what.deviation(d.low)) " to " (what.deviation(d.high)) } } }
            }
            @if let Some(r) = source.sd_ratio {
                div { dt { "scatter beside the others’" } dd { (spread::ratio_words(r)) } }
            }
            div { dt { "values in the window" } dd { (format::count(source.values as u64)) } }
            @if let Some(at) = source.last_taken { div { dt { "taken" } dd { (scene.time(at, &scene.times.second(at))) } } }
            @if let Some(at) = source.last_received { div { dt { "received" } dd { (scene.time(at, &scene.times.second(at))) } } }
        }
    }
}

/// What rests on the raw values.
fn raw(scene: &Scene<'_>, view: &BankView, source: &SourceView, windows: &[WindowView]) -> Markup {
    let own = windows.iter().find(|w| w.source == source.name);
    let others: Vec<&WindowView> = windows.iter().filter(|w| w.source != source.name).collect();
    html! {
        @match own.filter(|w| !w.values.is_empty()) {
            None => section { h2 { (values::TITLE) } p class="empty" { "Nothing has arrived from this source yet." } },
            Some(own) => {
                (drawn::values(scene, view, own, &others))
                (drawn::shares(view, own, &others))
                (drawn::lags(view, own, &others))
                (clock(scene, view, source, own))
            }
        }
    }
}

/// Whether its times can be believed, as far as what is kept tells.
fn clock(scene: &Scene<'_>, view: &BankView, source: &SourceView, own: &WindowView) -> Markup {
    let behind = |s: &SourceView| Some(s.last_received?.us_since(s.last_taken?));
    let mut others: Vec<i64> = view
        .sources
        .iter()
        .filter(|s| s.source != source.source)
        .filter_map(behind)
        .collect();
    others.sort_unstable();
    let usual = others.get(others.len() / 2).copied();
    let mut steps: Vec<i64> = own
        .values
        .windows(2)
        .filter_map(|pair| Some(pair.last()?.taken.us_since(pair.first()?.taken)))
        .collect();
    steps.sort_unstable();
    let words = |us: i64| {
        let seconds = us as f64 / US_PER_S as f64;
        if seconds.abs() < 60.0 {
            format!("{} s", format::plain(seconds, 1))
        } else if us < 0 {
            format!("−{}", span_of_time(-us))
        } else {
            span_of_time(us)
        }
    };
    html! {
        section {
            h2 { "Can its clock be believed?" }
            p class="caption" { "Taken is the time that came with a value, received is when it reached us. A value that seems \
                received before it was taken comes from a clock that is ahead." }
            dl class="counts" {
                @if let Some(us) = behind(source) { div { dt { "received after taken, newest value" } dd { (words(us)) } } }
                @if let Some(us) = usual { div { dt { "the same for the middle one of the others" } dd { (words(us)) } } }
                @if let Some(us) = steps.get(steps.len() / 2) { div { dt { "usual step between values" } dd { (words(*us)) } } }
                @if let Some(us) = steps.last() { div { dt { "longest step in the window" } dd { (words(*us)) } } }
                @if let Some(first) = own.values.first() { div { dt { "the window reaches back to" }
                    dd { (scene.time(first.taken, &scene.times.second(first.taken))) } } }
            }
        }
    }
}

/// The notices that named it.
fn named_by(scene: &Scene<'_>, source: &SourceView, past: &Past) -> Markup {
    let own = past.notices.iter();
    let own: Vec<&Notice> = own.filter(|n| story::names(n, &source.name)).collect();
    html! {
        section {
            h2 { "Which notices named it?" }
            @if own.is_empty() { p class="empty" { "None in this time." } }
            (notices::rows(scene, &own))
        }
    }
}
