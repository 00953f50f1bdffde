//! One notice: as a card on its bank's page, and as a page of its own; acknowledging it.

use axum::extract::{Extension, Path, State};
use maud::{Markup, html};

use crate::model::signed;
use crate::notice::{Act, Entry, Kind, Notice};
use crate::web::access::Caller;
use crate::web::address::{self, percent};
use crate::web::format;
use crate::web::pictures::glyph::{self, Glyph};
use crate::web::problem::Problem;
use crate::web::sessions::Field;
use crate::web::site::{App, bank};

use super::frame::{Page, Scene, render};

/// Where a card stands.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Place {
    /// On its bank's page.
    Bank,
    /// On its own page.
    Own,
}

/// The page of one notice.
pub async fn page(
    State(app): State<App>,
    Extension(caller): Extension<Caller>,
    Path(id): Path<String>,
) -> Result<Markup, Problem> {
    let snapshot = app.now();
    let notice = app.notice(&snapshot, &id).await?;
    let scene = Scene::new(&app, &snapshot, &caller, address::notice(&id));
    let main = html! { (card(&scene, &notice, Place::Own)) };
    let live = bank(&snapshot, &notice.bank)
        .is_ok()
        .then(|| format!("/live?bank={}", percent(&notice.bank)));
    Ok(render(
        &scene,
        Page {
            title: notice.subject.clone(),
            live,
            script: None,
            way: "",
            main,
        },
    ))
}

/// The shape of what a notice is about.
pub fn shape(notice: &Notice) -> Glyph {
    if !notice.state.is_active() {
        return Glyph::Even;
    }
    glyph_of(notice.kind)
}

/// The shape of what a kind of notice is about.
pub fn glyph_of(kind: Kind) -> Glyph {
    match kind {
        Kind::SpreadApart => Glyph::Spread,
        Kind::SourceSilent | Kind::SourceStuck => Glyph::Silent,
        Kind::IntakeTrouble | Kind::ClockWrong => Glyph::Trouble,
        Kind::LevelApart | Kind::BankSplit | Kind::LevelBelowDeclared => Glyph::Apart,
    }
}

/// A notice whole.
pub fn card(scene: &Scene<'_>, notice: &Notice, place: Place) -> Markup {
    let active = if notice.state.is_active() {
        " active"
    } else {
        ""
    };
    let name = format!("n-{}", notice.id);
    html! {
        article class={ "notice" (active) } aria-labelledby=(name) {
            header {
                (glyph::draw(shape(notice)))
                div {
                    @if place == Place::Own { h1 id=(name) { (notice.subject) } }
                    @else { h2 id=(name) { (notice.subject) } }
                    p class="quiet" { (notice.kind.words()) " · " (notice.state.words()) " · priority "
                        (notice.priority.word()) " · "
                        @if place == Place::Own { a href=(address::bank(&notice.bank)) { (notice.bank) } }
                        @else { a href=(address::notice(&notice.id)) { (notice.id) } } }
                }
            }
            (named(scene, notice))
            @if !notice.advice.is_empty() { p class="advice" { strong { "To do " } (notice.advice) } }
            p class="text" { (rest_of_text(notice)) }
            (course(scene, notice))
            (super::deeds::part(scene, notice))
        }
    }
}

/// The whole text but for the lines that the card shows in another place: the advice, and the address
/// of this page.
fn rest_of_text(notice: &Notice) -> String {
    let page = format!("Page: {}", notice.url);
    let lines = notice
        .text
        .lines()
        .filter(|l| *l != notice.advice && *l != page);
    lines.collect::<Vec<_>>().join("\n")
}

fn named(scene: &Scene<'_>, notice: &Notice) -> Markup {
    let found = bank(scene.snapshot, &notice.bank).ok();
    let what = found.map(|(_, view)| &view.bank.characteristic);
    let figure = |x: f64| match (notice.kind, what) {
        (Kind::SpreadApart, _) => format!("{}×", format::plain(x, 2)),
        (kind, _) if !kind.is_call() => format!("{} {}", format::plain(x, 0), notice.unit),
        (_, Some(what)) => format!("{} {}", what.deviation(x), notice.unit),
        (_, None) => format!("{} {}", signed(x, 3), notice.unit),
    };
    html! {
        @if !notice.sources.is_empty() {
            ul class="named" {
                @for source in &notice.sources {
                    li { strong { a href=(address::source(&notice.bank, &source.source)) { (source.source) } } " " span class="figure" { (figure(source.deviation)) }
                        @if source.low != source.high { " " span class="quiet" { (figure(source.low)) " to " (figure(source.high)) } } }
                }
            }
        }
    }
}

/// When it began, was called, came back and was seen.
fn course(scene: &Scene<'_>, notice: &Notice) -> Markup {
    let times = &scene.times;
    let since = notice.since;
    html! {
        dl class="course" {
            div { dt { "since" } dd { (scene.time(since.at, &times.full(since.at)))
                @if since.earliest != since.latest {
                    span class="quiet" { " between " (times.second(since.earliest)) " and " (times.second(since.latest)) } } } }
            div { dt { "called" } dd { (scene.time(notice.raised, &times.full(notice.raised)))
                @if notice.kind.is_call() { span class="quiet" { " by the look over " (notice.span) " values" } } } }
            @if let Some(at) = notice.returned { div { dt { "returned" } dd { (scene.time(at, &times.full(at))) } } }
            @if let Some(seen) = &notice.acknowledged {
                div { dt { "acknowledged" } dd { (scene.time(seen.at, &times.full(seen.at))) " by " (seen.by)
                    @if !seen.comment.is_empty() { span class="comment" { "“" (seen.comment) "”" } } } }
            }
            @for entry in notice.handling.entries.iter().filter(|e| e.act != Act::Acknowledged) {
                div { dt { (act(scene, entry)) } dd { (scene.time(entry.at, &times.full(entry.at))) " by " (entry.by)
                    @if !entry.comment.is_empty() { span class="comment" { "“" (entry.comment) "”" } } } }
            }
        }
    }
}

/// What an entry of the record says.
fn act(scene: &Scene<'_>, entry: &Entry) -> String {
    match entry.act {
        Act::Acknowledged => "acknowledged".to_owned(),
        Act::Shelved(until, _) => format!("shelved until {}", scene.times.second(until)),
        Act::Unshelved => "unshelved".to_owned(),
        Act::ShelvingOver => "shelving over".to_owned(),
        Act::TakenOut => "out of service".to_owned(),
        Act::PutBack => "back in service".to_owned(),
        Act::Told(outcome) => outcome.words().to_owned(),
        Act::Commented => "comment".to_owned(),
    }
}

/// Whether a form's button was pressed for the first time.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Pressed {
    /// It was: do it.
    Once,
    /// It was pressed twice: once is enough.
    Again,
}

/// Spends a form's one-time field.
///
/// # Errors
/// 403 without a session, or when the form was too old.
pub fn press(app: &App, caller: Caller, field: &str) -> Result<Pressed, Problem> {
    let pass = caller.session.ok_or_else(|| {
        Problem::forbidden("this form works for a signed-in person; with a token use the interface")
    })?;
    let spent = app.sessions.spend(&pass.id, field, app.site.clock.now());
    match spent {
        Field::Fresh => Ok(Pressed::Once),
        Field::Repeated => Ok(Pressed::Again),
        Field::Wrong => Err(Problem::forbidden(
            "this form was too old; go back, load the page again and send it once more",
        )),
    }
}
