//! The plant's page: one strip per bank, made to be read from three metres.

use std::collections::BTreeMap;
use std::sync::Arc;

use axum::extract::{Extension, State};
use maud::{Markup, html};

use crate::engine::{BankView, OutletView, RefusalView};
use crate::model::{Name, Reason, US_PER_S};
use crate::web::access::Caller;
use crate::web::address;
use crate::web::days::{Day, Half};
use crate::web::pictures::{day, glyph, mini};
use crate::web::problem::Problem;
use crate::web::site::App;
use crate::web::standing::Standing;

use super::frame::{Page, Scene, render};
use super::sources;

/// Data trouble is shown while it lasts, and a little longer.
const TROUBLE_LASTS_US: i64 = 600 * US_PER_S;

/// The page.
pub async fn page(State(app): State<App>, Extension(caller): Extension<Caller>) -> Markup {
    let snapshot = app.now();
    let days = app.last_day(&snapshot).await;
    let scene = Scene::new(&app, &snapshot, &caller, "/".to_owned());
    let main = html! {
        h1 class="hidden" { "Banks of " (snapshot.plant.name) }
        @if snapshot.banks.is_empty() {
            section class="alone" {
                (glyph::draw(glyph::Glyph::Unknown))
                h2 { "No bank yet" }
                p { "A bank is a set of sources that should give the same result. Describe one under "
                    code { "[[bank]]" } " in the configuration, then start evenrow again; "
                    code { "evenrow vet --config FILE" } " says what is missing." }
            }
        }
        @if !snapshot.banks.is_empty() { (columns()) }
        ol class="strips" {
            @for view in &snapshot.banks { li { (strip(&scene, view, day_of(&days, view))) } }
        }
        @if let Err(problem) = &days { p class="empty" { "The last day is missing: " (problem.detail) } }
        (strangers(&scene, &snapshot.refusals))
        (ways_out(&snapshot.outlets))
    };
    render(
        &scene,
        Page {
            title: "Plant".to_owned(),
            live: Some("/live".to_owned()),
            script: None,
            way: "/",
            main,
        },
    )
}

/// The last day of every bank, or why it could not be read.
type Days = Result<Arc<BTreeMap<Name, Day>>, Problem>;

fn day_of<'a>(days: &'a Days, view: &BankView) -> Option<&'a Day> {
    days.as_ref().ok()?.get(&view.bank.name)
}

/// What stands over the columns of the strips.
fn columns() -> Markup {
    html! {
        div class="strip columns" aria-hidden="true" {
            span {} span class="who" { "Bank" } span class="state" { "Stands" }
            span class="sketch" { "Sources within ± 2 margins" } span class="lastday" { "Last 24 hours" }
            span class="calls" { "Calls" } span class="since" { "Since" }
        }
    }
}

fn strip(scene: &Scene<'_>, view: &BankView, day: Option<&Day>) -> Markup {
    let standing = Standing::of(view);
    let bank = &view.bank;
    let asks = if standing.asks() { " asks" } else { "" };
    html! {
        a class={ "strip" (asks) } href=(address::bank(&bank.name)) {
            (glyph::draw(standing.glyph()))
            span class="who" {
                strong { (bank.name) }
                @if let Some(trouble) = data_trouble(scene, view) { span class="data-trouble" { (trouble) } }
                @else { span { (bank.characteristic.name)
                    @if let Some(equipment) = &bank.equipment { ", " (equipment) } } }
            }
            span class="state" {
                strong { (standing.words()) }
                @let detail = standing.detail();
                @if !detail.is_empty() { span { (detail) } }
            }
            span class="sketch" { (mini::draw(view)) }
            span class="lastday" { (last_day(&standing, day)) }
            span class="calls" { (calls(view, day)) }
            span class="since" { (since(scene, view, &standing)) }
        }
    }
}

/// The band of the last day; what the bank says now rules the half hour that goes on.
fn last_day(standing: &Standing, day: Option<&Day>) -> Markup {
    let mut halves = day.map_or_else(Vec::new, |d| d.halves.clone());
    if let (Standing::Apart { .. }, Some(last)) = (standing, halves.last_mut()) {
        *last = Half::Apart;
    }
    html! { @if !halves.is_empty() { (day::draw(&halves, &day::words(&halves))) } }
}

/// How often the bank called in the time that its budget is for; the budget says how many may be false.
fn calls(view: &BankView, day: Option<&Day>) -> Markup {
    let budget = view.bank.budget;
    html! {
        @if let Some(day) = day {
            strong { @match day.calls { 0 => { "no call" } 1 => { "1 call" } n => { (n) " calls" } } }
            span { (budget.days()) @if budget.days() == 1.0 { " day" } @else { " days" }
                ", budget " (budget.calls()) }
        }
    }
}

/// What is wrong with what arrives, while it is.
fn data_trouble(scene: &Scene<'_>, view: &BankView) -> Option<String> {
    let lately = |r: &&RefusalView| {
        r.reason != Reason::Double && scene.times.now.us_since(r.at) < TROUBLE_LASTS_US
    };
    let newest = view.refusals.iter().filter(lately).max_by_key(|r| r.at)?;
    let word = newest.reason.word().replace('_', " ");
    Some(format!("✕ refused: {word}"))
}

fn since(scene: &Scene<'_>, view: &BankView, standing: &Standing) -> Markup {
    let lasting = |at| {
        html! {
            strong { (scene.time(at, &scene.times.short(at))) }
            " " span { "for " (scene.times.ago(at)) }
        }
    };
    match standing {
        Standing::Apart { since, .. } => lasting(*since),
        Standing::Silent {
            since: Some(since), ..
        } => lasting(*since),
        _ => match view.looks.iter().map(|l| l.at).max() {
            Some(at) => html! { span { "last look " (scene.time(at, &scene.times.second(at))) } },
            None => html! { span { "no look yet" } },
        },
    }
}

/// Where notices leave, and how many wait there; said where there is more than the broker.
fn ways_out(outlets: &[OutletView]) -> Markup {
    let one = |o: &OutletView| match o.waiting {
        0 => o.name.to_string(),
        waiting => format!("{} ({waiting} waiting)", o.name),
    };
    let all: Vec<String> = outlets.iter().map(one).collect();
    html! {
        @if all.len() > 1 { p class="asof" { "Notices leave by " (all.join(", ")) "." } }
    }
}

/// Arrivals whose topic matches no bank.
fn strangers(scene: &Scene<'_>, refusals: &[RefusalView]) -> Markup {
    html! {
        @if !refusals.is_empty() {
            details class="more" {
                summary { "Arrivals that belong to no bank" }
                (sources::refusal_table(scene, refusals))
            }
        }
    }
}
