//! What is around every page: head, plant, ways to go, trouble said plainly, cautions.

use maud::{DOCTYPE, Markup, PreEscaped, html};

use crate::engine::{Condition, Snapshot};
use crate::model::Time;
use crate::web::access::Caller;
use crate::web::address::percent;
use crate::web::assets;
use crate::web::format::Times;
use crate::web::pictures::glyph::{self, Glyph};
use crate::web::problem::Problem;
use crate::web::site::App;

/// Everything a page is made from.
pub struct Scene<'a> {
    /// What handlers share.
    pub app: &'a App,
    /// The present.
    pub snapshot: &'a Snapshot,
    /// Times in the plant's zone.
    pub times: Times,
    /// Who looks.
    pub caller: &'a Caller,
    /// This page's address, to come back to.
    pub here: String,
}

impl<'a> Scene<'a> {
    /// A page at `here`.
    pub fn new(app: &'a App, snapshot: &'a Snapshot, caller: &'a Caller, here: String) -> Self {
        Self {
            app,
            snapshot,
            times: app.times(snapshot),
            caller,
            here,
        }
    }

    /// A time: short in the text, in full for programs and for pointing at it.
    pub fn time(&self, at: Time, text: &str) -> Markup {
        html! { time datetime=(at.to_string()) title=(self.times.full(at)) { (text) } }
    }
}

/// A script that makes something easier; without it the page is whole.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Script {
    /// Values of the time band by pointer and keys, and its zoom.
    Band,
}

/// A page's own parts.
pub struct Page {
    /// What the browser's tab says before the plant's name.
    pub title: String,
    /// What the stream of changes is asked for; `None` for a page that does not change by itself.
    pub live: Option<String>,
    /// A script besides the one that keeps the page current.
    pub script: Option<Script>,
    /// Which of the ways to go is this.
    pub way: &'static str,
    /// The contents.
    pub main: Markup,
}

/// Puts a page into the frame.
pub fn render(scene: &Scene<'_>, page: Page) -> Markup {
    let plant = &scene.snapshot.plant.name;
    html! {
        (DOCTYPE)
        html lang="en" {
            (head(&format!("{} · {plant}", page.title), page.live.is_some(), page.script))
            body data-zone=[scene.times.zone.iana_name()] {
                a class="skip" href="#main" { "To the contents" }
                header class="top" {
                    a class="home" href="/" { (glyph::draw(Glyph::Apart)) span { "evenrow" } }
                    p class="plant" { (plant) }
                    nav aria-label="Pages" {
                        (way("/", "Plant", page.way)) (way("/notices", "Notices", page.way))
                        (way("/handover", "Handover", page.way))
                        (way("/settings", "Settings", page.way)) (way("/about", "About", page.way))
                        (sign(scene))
                    }
                }
                main id="main" data-live=[page.live] {
                    (trouble(scene))
                    (page.main)
                    p class="asof" {
                        "As of " (scene.time(scene.times.now, &scene.times.full(scene.times.now)))
                        @if let Some(zone) = scene.times.zone.iana_name() { " (" (zone) ")" }
                        span id="live-state" role="status" {}
                    }
                }
                (cautions())
            }
        }
    }
}

fn head(title: &str, is_live: bool, script: Option<Script>) -> Markup {
    html! {
        head {
            meta charset="utf-8";
            title { (title) }
            meta name="viewport" content="width=device-width, initial-scale=1";
            meta name="color-scheme" content="light dark";
            link rel="icon" href=(PreEscaped(assets::ICON));
            link rel="stylesheet" href=(*assets::STYLE);
            @if is_live {
                script src=(*assets::LIVE) defer {}
            }
            @if script == Some(Script::Band) {
                script src=(*assets::BAND) defer {}
            }
        }
    }
}

fn way(to: &str, words: &str, here: &str) -> Markup {
    html! { a href=(to) aria-current=[(to == here).then_some("page")] { (words) } }
}

fn sign(scene: &Scene<'_>) -> Markup {
    html! {
        @match (&scene.caller.session, &scene.app.tokens) {
            (Some(pass), _) => form method="post" action="/sign-out" {
                input type="hidden" name="field" value=(pass.field);
                button class="plain" { "Sign out" }
            },
            (None, Some(_)) => a href={ "/sign-in?next=" (percent(&scene.here)) } { "Sign in" },
            (None, None) => {}
        }
    }
}

/// Broker, store and outlets, only while something is wrong with them.
fn trouble(scene: &Scene<'_>) -> Markup {
    let snapshot = scene.snapshot;
    let part = |name: &str, condition: &Condition| match condition {
        Condition::Well => None,
        Condition::Starting => Some((format!("{name}: not ready yet"), String::new())),
        Condition::Noted(what) => Some((format!("{name}: good to know"), what.clone())),
        Condition::Trouble(why) => Some((format!("{name} trouble"), why.clone())),
    };
    let outlets = snapshot.outlets.iter().filter_map(|outlet| {
        let waiting = format!("{} waiting. {}", outlet.waiting, outlet.trouble.as_ref()?);
        Some((
            format!("Notices are not leaving by {}", outlet.name),
            waiting,
        ))
    });
    let parts = [
        part("Broker", &snapshot.broker),
        part("Store", &snapshot.store),
    ];
    let all = parts.into_iter().flatten().chain(outlets);
    html! {
        @for (head, why) in all {
            div class="trouble" role="status" {
                (glyph::draw(Glyph::Trouble))
                p { strong { (head) } @if !why.is_empty() { " " (why) } }
            }
        }
    }
}

fn cautions() -> Markup {
    html! {
        footer {
            p { strong { "evenrow advises; a qualified person decides." }
                " It is no safety function, no interlock and no legal measuring instrument. Follow lock-out \
                  and the plant’s procedures before touching a machine. Net-content rules are those of the \
                  local authority; figures here are information for the packer." }
            p class="quiet" { "evenrow " (env!("CARGO_PKG_VERSION")) " · "
                a href="/about" { "about" } " · " a href="/api/v1/openapi.json" { "interface" } " · " a href="/metrics" { "metrics" } }
        }
    }
}

/// A problem as a page. It shows nothing of the plant: who sees it may not be allowed to look.
pub fn error(app: &App, problem: &Problem) -> Markup {
    html! {
        (DOCTYPE)
        html lang="en" {
            (head(&format!("{} · evenrow", problem.title), false, None))
            body {
                header class="top" { a class="home" href="/" { (glyph::draw(Glyph::Apart)) span { "evenrow" } } }
                main id="main" {
                    section class="alone" {
                        (glyph::draw(Glyph::Trouble))
                        h1 { (problem.title) }
                        p { (sentence(&problem.detail)) }
                        p { a href="/" { "To the plant’s page" }
                            @if app.tokens.is_some() { " · " a href="/sign-in" { "Sign in" } } }
                    }
                }
                (cautions())
            }
        }
    }
}

/// A page that asks one thing and shows nothing of the plant.
pub fn alone(title: &str, body: Markup) -> Markup {
    html! {
        (DOCTYPE)
        html lang="en" {
            (head(&format!("{title} · evenrow"), false, None))
            body {
                header class="top" { a class="home" href="/" { (glyph::draw(Glyph::Apart)) span { "evenrow" } } }
                main id="main" { section class="alone" { (body) } }
                (cautions())
            }
        }
    }
}

/// With a capital and a full stop.
pub fn sentence(text: &str) -> String {
    let mut chars = text.chars();
    let first = chars
        .next()
        .map(|c| c.to_uppercase().to_string())
        .unwrap_or_default();
    let stop = if text.ends_with(['.', '!', '?']) {
        ""
    } else {
        "."
    };
    format!("{first}{}{stop}", chars.as_str())
}
