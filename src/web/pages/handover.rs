//! The handover of a shift, as a page that prints on A4, and in the interface.

use axum::Json;
use axum::extract::rejection::QueryRejection;
use axum::extract::{Extension, Query, State};
use maud::{Markup, html};
use serde::Deserialize;
use utoipa::IntoParams;

use crate::web::access::Caller;
use crate::web::address::percent;
use crate::web::handover::{Handover, Present, Tolerable, Wanted, gather, sheet, which};
use crate::web::problem::Problem;
use crate::web::site::App;

use super::frame::{Page, Scene, render};

/// Which shift.
#[derive(Debug, Default, Deserialize, IntoParams)]
#[into_params(parameter_in = Query)]
#[serde(deny_unknown_fields)]
pub struct Asked {
    /// The shift's name; without it the whole day where a date is given, else the newest shift.
    shift: Option<String>,
    /// The day on which it began, as 2026-03-29.
    date: Option<String>,
    /// `76/211/EEC` shows the tolerable negative error of that directive beside the declared quantity.
    tolerable: Option<String>,
}

type Queried = Result<Query<Asked>, QueryRejection>;

async fn made(app: &App, asked: Queried) -> Result<Handover, Problem> {
    let Query(asked) = asked.map_err(|e| Problem::bad_request(&e.body_text()))?;
    let tolerable = match asked.tolerable.as_deref() {
        None | Some("") => Tolerable::No,
        Some("76/211/EEC") => Tolerable::Eec76211,
        Some(_) => {
            return Err(Problem::bad_request(
                "`tolerable` is 76/211/EEC, or left out",
            ));
        }
    };
    let filled = |text: Option<String>| text.filter(|t| !t.is_empty());
    let wanted = Wanted {
        shift: filled(asked.shift),
        date: filled(asked.date),
    };
    let (snapshot, now) = (app.now(), app.site.clock.now());
    let settings = app.site.settings.clone();
    let plant = &settings.plant;
    let stretch = which(&plant.shifts, &plant.zone, &wanted, now)
        .map_err(|why| Problem::bad_request(&why))?;
    app.history(move |history| {
        let present = Present {
            settings: &settings,
            snapshot: Some(&snapshot),
            now,
            tolerable,
        };
        gather(present, history, &stretch)
    })
    .await
}

/// The handover of a shift.
#[utoipa::path(get, operation_id = "get_handover", path = "/api/v1/handover", tag = "notices", params(Asked),
    responses((status = 200, body = Handover), (status = 400, body = Problem),
        (status = 503, body = Problem), (status = "default", body = Problem)))]
pub async fn data(State(app): State<App>, asked: Queried) -> Result<Json<Handover>, Problem> {
    made(&app, asked).await.map(Json)
}

/// The page.
pub async fn page(
    State(app): State<App>,
    Extension(caller): Extension<Caller>,
    asked: Queried,
) -> Result<Markup, Problem> {
    let handover = made(&app, asked).await?;
    let snapshot = app.now();
    let scene = Scene::new(&app, &snapshot, &caller, "/handover".to_owned());
    let main = html! { (choice(&app, &handover)) (sheet::body(&handover)) };
    Ok(render(
        &scene,
        Page {
            title: format!("Handover {} {}", handover.shift, handover.date),
            live: None,
            script: None,
            way: "/handover",
            main,
        },
    ))
}

/// Ways to the shifts of the same day, and to its whole.
fn choice(app: &App, shown: &Handover) -> Markup {
    let to = |shift: Option<&str>| {
        let shift = shift.map_or_else(String::new, |s| format!("&shift={}", percent(s)));
        format!("/handover?date={}{shift}", percent(&shown.date))
    };
    html! {
        form class="spans" method="get" action="/handover" {
            label { "Day " input type="date" name="date" value=(shown.date); }
            label { "Shift "
                select name="shift" {
                    option value="" { "whole day" }
                    @for shift in &app.site.settings.plant.shifts {
                        option value=(shift.name) selected[*shift.name == *shown.shift] { (shift.name) }
                    }
                }
            }
            button { "Show" }
            @for shift in &app.site.settings.plant.shifts {
                " " a href=(to(Some(&shift.name))) { (shift.name) }
            }
        }
    }
}
