//! The settings as used: every key, its value, and where that came from.

use axum::extract::{Extension, State};
use maud::{Markup, html};

use crate::settings::{Origin, Setting};
use crate::web::access::Caller;
use crate::web::site::App;

use super::frame::{Page, Scene, render};
use super::looks::csv;

/// The page.
pub async fn page(State(app): State<App>, Extension(caller): Extension<Caller>) -> Markup {
    let snapshot = app.now();
    let scene = Scene::new(&app, &snapshot, &caller, "/settings".to_owned());
    let list = app.site.settings.list();
    let mut sections: Vec<(&str, Vec<&Setting>)> = Vec::new();
    for setting in &list {
        match sections.last_mut() {
            Some((name, keys)) if *name == setting.section => keys.push(setting),
            _ => sections.push((&setting.section, vec![setting])),
        }
    }
    let main = html! {
        h1 { "Settings as used" }
        p class="caption" { "As evenrow was started with them: the file, with environment variables laid over it, and what holds \
            where nothing is given. Secrets stand in files of their own; here are only those files’ names." }
        (csv("/api/v1/settings?form=csv"))
        @for (name, keys) in &sections {
            section class="settings" { h2 { (heading(name)) } (table(name, keys)) }
        }
    };
    render(
        &scene,
        Page {
            title: "Settings".to_owned(),
            live: None,
            script: None,
            way: "/settings",
            main,
        },
    )
}

fn heading(section: &str) -> String {
    match section.strip_prefix("bank.") {
        Some(bank) => format!("Bank {bank}"),
        None => format!("[{section}]"),
    }
}

fn table(section: &str, keys: &[&Setting]) -> Markup {
    html! {
        div class="wide" tabindex="0" role="region" aria-label={ "Settings of " (section) } {
            table {
                thead { tr { th scope="col" { "Key" } th scope="col" { "Value" } th scope="col" { "From" } } }
                tbody { @for setting in keys {
                    tr class=[(setting.origin == Origin::Default).then_some("default")] {
                        th scope="row" { code { (setting.key) } }
                        td class="value" { @if setting.value.is_empty() { span class="quiet" { "not set" } } @else { (setting.value) } }
                        td { (origin(&setting.origin)) }
                    }
                } }
            }
        }
    }
}

fn origin(origin: &Origin) -> Markup {
    html! {
        @match origin {
            Origin::File { line } => { "line " (line) " of the file" }
            Origin::Variable(name) => code { (name) },
            Origin::Default => span class="quiet" { "default" },
        }
    }
}
