//! What happened on the line: the newest line events, and forms to enter one.

use axum::extract::{Extension, Form, Path, State};
use axum::response::{IntoResponse, Redirect, Response};
use maud::{Markup, html};
use serde::Deserialize;

use crate::engine::{BankView, SourceState};
use crate::model::{LineChange, LineEvent, signed};
use crate::web::access::{Caller, SessionPass};
use crate::web::address::percent;
use crate::web::line::submit;
use crate::web::problem::Problem;
use crate::web::site::App;
use crate::web::wire::{LineEntryBody, LineKind};

use super::frame::Scene;
use super::notice::{Pressed, press};

/// The section on a bank's page.
pub fn section(scene: &Scene<'_>, view: &BankView) -> Markup {
    html! {
        section id="line" {
            h2 { "What happened on the line?" }
            @if let Some(product) = &view.product { p class="facts" { "It makes " strong { (product) } "." } }
            @if let Some(stop) = &view.stopped { p class="remark" {
                "The line stands since " (scene.time(stop.at, &scene.times.full(stop.at)))
                ": what arrives is not judged until its start is entered." } }
            @if view.line_events.is_empty() { p class="empty" { "Nothing was entered. A changeover or an adjustment makes older values \
                wrong: enter it, so that they no longer count." } }
            @else { (table(scene, view)) }
            @if let Some(pass) = may_act(scene) { (forms(scene, view, pass)) }
            @else { (how_to_act(scene)) }
        }
    }
}

fn table(scene: &Scene<'_>, view: &BankView) -> Markup {
    html! {
        div class="wide" tabindex="0" role="region" aria-label="Line events" {
            table {
                thead { tr { th scope="col" { "When" } th scope="col" { "What" } th scope="col" { "Reason" } th scope="col" { "By" } } }
                tbody { @for event in view.line_events.iter().rev() { tr {
                    td { (scene.time(event.at, &scene.times.full(event.at))) }
                    td { (words(event, view)) }
                    td { (event.reason) }
                    td { (event.by) }
                } } }
            }
        }
    }
}

/// A line event in words.
pub fn words(event: &LineEvent, view: &BankView) -> String {
    let unit = &view.bank.characteristic.unit;
    let what = event.change.words();
    match &event.change {
        LineChange::Adjustment {
            source,
            by: Some(by),
        } => format!("{source}: {what} by {} {unit}", signed(*by, 3)),
        LineChange::Adjustment { source, by: None }
        | LineChange::OutOfUse { source }
        | LineChange::BackInUse { source } => format!("{source}: {what}"),
        LineChange::Changeover {
            product,
            target: Some(target),
            ..
        } => format!("{what} to {product}, target {target} {unit}"),
        LineChange::Changeover { product, .. } => format!("{what} to {product}"),
        LineChange::Stop | LineChange::Start => what.to_owned(),
    }
}

fn may_act<'a>(scene: &'a Scene<'_>) -> Option<&'a SessionPass> {
    let session = scene.caller.session.as_ref();
    session.filter(|_| scene.caller.rights.act)
}

fn how_to_act(scene: &Scene<'_>) -> Markup {
    html! {
        @match (&scene.caller.session, &scene.app.tokens) {
            (Some(_), _) => p class="quiet" { "Your token may only look; entering needs one that may act." },
            (None, Some(_)) => p { a href={ "/sign-in?next=" (percent(&scene.here)) } { "Sign in to enter an adjustment or a changeover" } },
            (None, None) => {},
        }
    }
}

fn forms(scene: &Scene<'_>, view: &BankView, pass: &SessionPass) -> Markup {
    let out = |s: &&crate::engine::SourceView| s.state == SourceState::OutOfUse;
    let used: Vec<&str> = view
        .sources
        .iter()
        .filter(|s| !out(s))
        .map(|s| &*s.name)
        .collect();
    let unused: Vec<&str> = view.sources.iter().filter(out).map(|s| &*s.name).collect();
    let unit = &view.bank.characteristic.unit;
    let form =
        |kind: &str, title: &str, fields: Markup| entry(scene, view, pass, (kind, title), fields);
    html! {
        (form("adjustment", "Enter an adjustment", html! {
            (choice("adjustment", &used))
            label for="amount" { "By how much, in " (unit) ", if known" }
            input id="amount" name="amount" inputmode="decimal" autocomplete="off";
        }))
        (form("changeover", "Enter a changeover", html! {
            label for="product" { "Product" } input id="product" name="product" required maxlength="120";
            label for="target" { "Target in " (unit) ", if it changes" } input id="target" name="target" inputmode="decimal" autocomplete="off";
            label for="declared" { "Declared quantity in " (unit) ", if it changes" } input id="declared" name="declared" inputmode="decimal" autocomplete="off";
        }))
        @if view.stopped.is_some() { (form("start", "The line runs again", html! {})) }
        @else { (form("stop", "The line stops", html! {})) }
        @if used.len() > 2 { (form("out_of_use", "Take a source out of use", choice("out_of_use", &used))) }
        @if !unused.is_empty() { (form("back_in_use", "Put a source back in use", choice("back_in_use", &unused))) }
    }
}

fn choice(id: &str, names: &[&str]) -> Markup {
    html! {
        label for={ "source-" (id) } { "Source" }
        select id={ "source-" (id) } name="source" required {
            option value="" { "–" }
            @for name in names { option value=(name) { (name) } }
        }
    }
}

fn entry(
    scene: &Scene<'_>,
    view: &BankView,
    pass: &SessionPass,
    (kind, title): (&str, &str),
    fields: Markup,
) -> Markup {
    html! {
        details class="act" id={ "line-" (kind) } {
            summary class="button" { (title) }
            form class="entry" method="post" action={ "/banks/" (percent(&view.bank.name)) "/events" } {
                input type="hidden" name="field" value=(pass.field);
                input type="hidden" name="back" value=(scene.here);
                input type="hidden" name="kind" value=(kind);
                (fields)
                label for={ "reason-" (kind) } { "Reason or finding, if you like" }
                input id={ "reason-" (kind) } name="reason" maxlength="2000";
                label for={ "by-" (kind) } { "Your name" }
                input id={ "by-" (kind) } name="by" required maxlength="80" autocomplete="name";
                button { (title) }
            }
        }
    }
}

/// The filled form; a field left empty counts as not given.
#[derive(Deserialize)]
pub struct Filled {
    field: String,
    by: String,
    kind: LineKind,
    #[serde(default)]
    back: String,
    #[serde(default)]
    source: String,
    #[serde(default)]
    amount: String,
    #[serde(default)]
    product: String,
    #[serde(default)]
    target: String,
    #[serde(default)]
    declared: String,
    #[serde(default)]
    reason: String,
}

/// Takes a form; the guard has seen to it that the caller may act.
pub async fn enter(
    State(app): State<App>,
    Extension(caller): Extension<Caller>,
    Path(name): Path<String>,
    Form(filled): Form<Filled>,
) -> Result<Response, Problem> {
    let back = crate::web::address::local(&filled.back);
    if press(&app, caller, &filled.field)? == Pressed::Once {
        submit(&app, &name, &entered(filled)?).await?;
    }
    Ok(Redirect::to(&back).into_response())
}

fn entered(filled: Filled) -> Result<LineEntryBody, Problem> {
    let text = |s: String| Some(s).filter(|s| !s.trim().is_empty());
    Ok(LineEntryBody {
        by: filled.by,
        kind: filled.kind,
        source: text(filled.source),
        amount: number("the amount", &filled.amount)?,
        product: text(filled.product),
        target: number("the target", &filled.target)?,
        declared: number("the declared quantity", &filled.declared)?,
        reason: filled.reason,
    })
}

/// People write a decimal comma where their country does.
fn number(what: &str, text: &str) -> Result<Option<f64>, Problem> {
    let text = text.trim().replace(',', ".").replace('\u{2212}', "-");
    if text.is_empty() {
        return Ok(None);
    }
    let finite = text.parse().ok().filter(|x: &f64| x.is_finite());
    let wrong = || Problem::bad_request(&format!("{what} must be a number like -1.5"));
    finite.map(Some).ok_or_else(wrong)
}
