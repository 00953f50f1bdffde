//! What this is: version, cautions, and the licences of what is embedded.

use std::collections::BTreeMap;

use axum::extract::{Extension, State};
use maud::{Markup, html};

use crate::web::access::Caller;
use crate::web::site::App;

use super::frame::{Page, Scene, render};

/// The crates of the build with their versions.
const LOCK: &str = include_str!("../../../Cargo.lock");
/// Each crate's licence, a line with a tab between.
const LICENCES: &str = include_str!("../licences.tsv");
/// Our own licence.
const OWN: &str = include_str!("../../../LICENSE");

/// The page.
pub async fn page(State(app): State<App>, Extension(caller): Extension<Caller>) -> Markup {
    let snapshot = app.now();
    let scene = Scene::new(&app, &snapshot, &caller, "/about".to_owned());
    let main = html! {
        h1 { "About evenrow" }
        p class="caption" { "evenrow " (env!("CARGO_PKG_VERSION")) " watches the parallel sources of one plant operation and names \
            the ones that drift apart, rarely and with the evidence beside it." }
        section { h2 { "What to mind" } (cautions()) }
        section { h2 { "Licence" } pre class="licence" tabindex="0" role="region" aria-label="Licence" { (OWN) } }
        section {
            h2 { "What is embedded" }
            div class="wide" tabindex="0" role="region" aria-label="Embedded data" { table {
                thead { tr { th scope="col" { "What" } th scope="col" { "Whose" } th scope="col" { "Licence" } } }
                tbody {
                    tr { th scope="row" { "Colour scale vik" }
                        td { "Fabio Crameri, Scientific colour maps, doi:10.5281/zenodo.1243862" } td { "MIT" } }
                    tr { th scope="row" { "Time zone database" } td { "IANA" } td { "public domain" } }
                    tr { th scope="row" { "Pages, pictures, scripts" } td { "evenrow’s own" } td { "MIT" } }
                }
            } }
            details class="data" {
                summary { (crates().len()) " Rust crates of the build" }
                div class="wide" tabindex="0" role="region" aria-label="Crates" { table class="dense" {
                    thead { tr { th scope="col" { "Crate" } th scope="col" { "Version" } th scope="col" { "Licence" } } }
                    tbody { @for one in crates() {
                        tr { th scope="row" { (one.name) } td { (one.version) } td { (one.licence.unwrap_or("see its page")) } }
                    } }
                } }
            }
        }
    };
    render(
        &scene,
        Page {
            title: "About".to_owned(),
            live: None,
            script: None,
            way: "/about",
            main,
        },
    )
}

fn cautions() -> Markup {
    html! {
        ul class="cautions" {
            li { "evenrow advises; a qualified person decides. It is no safety function, no interlock and no legal measuring instrument." }
            li { "Follow lock-out and the plant’s procedures before touching a machine." }
            li { "Net-content rules are those of the local authority; figures here are information for the packer." }
            li { "Silence is not proof: a bank that is not looked at, or has not enough data, says nothing about its sources." }
            li { "The call budget bounds false calls as long as what the configuration says of the bank is true: how its values \
                pair, and which differences do not matter." }
        }
    }
}

/// A crate of the build.
struct Embedded {
    name: &'static str,
    version: &'static str,
    licence: Option<&'static str>,
}

fn crates() -> Vec<Embedded> {
    let licences: BTreeMap<&str, &str> = LICENCES
        .lines()
        .filter_map(|line| line.split_once('\t'))
        .collect();
    let blocks = LOCK.split("[[package]]").skip(1);
    let field = |block: &'static str, key: &str| {
        let mut lines = block.lines();
        let line = lines.find_map(|line| line.strip_prefix(key))?;
        Some(line.trim_matches([' ', '=', '"']))
    };
    let found = blocks.filter_map(|block| {
        let name = field(block, "name")?;
        Some(Embedded {
            licence: licences.get(name).copied(),
            version: field(block, "version")?,
            name,
        })
    });
    found.filter(|one| one.name != "evenrow").collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_crate_has_its_licence() {
        let all = crates();
        assert!(all.len() > 100, "{}", all.len());
        let without = all.iter().filter(|c| c.licence.is_none());
        let names: Vec<&str> = without.map(|c| c.name).collect();
        let hint = "run tests/licences and commit src/web/licences.tsv";
        assert!(names.is_empty(), "no licence of {names:?}; {hint}");
        let good = all.iter().all(|c| c.version.contains('.'));
        assert!(good, "a version is missing");
    }
}
