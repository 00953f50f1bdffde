//! The plant's page: one strip per bank, made to be read from three metres.

use axum::extract::{Extension, State};
use maud::{Markup, html};

use crate::engine::{BankView, OutletView, RefusalView};
use crate::web::access::Caller;
use crate::web::pictures::{glyph, mini};
use crate::web::signin::percent;
use crate::web::site::App;

use super::frame::{Page, Scene, render};
use super::sources;
use super::standing::Standing;

/// The page.
pub async fn page(State(app): State<App>, Extension(caller): Extension<Caller>) -> Markup {
    let snapshot = app.now();
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
        ol class="strips" {
            @for view in &snapshot.banks { li { (strip(&scene, view)) } }
        }
        (strangers(&scene, &snapshot.refusals))
        (ways_out(&snapshot.outlets))
    };
    render(
        &scene,
        Page {
            title: "Plant".to_owned(),
            live: Some("/live".to_owned()),
            way: "/",
            main,
        },
    )
}

fn strip(scene: &Scene<'_>, view: &BankView) -> Markup {
    let standing = Standing::of(view);
    let bank = &view.bank;
    let asks = if standing.asks() { " asks" } else { "" };
    html! {
        a class={ "strip" (asks) } href={ "/banks/" (percent(&bank.name)) } {
            (glyph::draw(standing.glyph()))
            span class="who" {
                strong { (bank.name) }
                span { (bank.characteristic.name)
                    @if let Some(equipment) = &bank.equipment { ", " (equipment) } }
            }
            span class="state" {
                strong { (standing.words()) }
                @let detail = standing.detail();
                @if !detail.is_empty() { span { (detail) } }
            }
            span class="sketch" { (mini::draw(view)) }
            span class="since" { (since(scene, view, &standing)) }
        }
    }
}

fn since(scene: &Scene<'_>, view: &BankView, standing: &Standing) -> Markup {
    let lasting = |at| {
        html! {
            "since " (scene.time(at, &scene.times.short(at)))
            " " span { "for " (scene.times.ago(at)) }
        }
    };
    match standing {
        Standing::Apart { since, .. } => lasting(*since),
        Standing::Silent {
            since: Some(since), ..
        } => lasting(*since),
        _ => match view.looks.iter().map(|l| l.at).max() {
            Some(at) => html! { "last look " (scene.time(at, &scene.times.second(at))) },
            None => html! { "no look yet" },
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
