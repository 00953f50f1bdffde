//! What a person can do with a notice, on its card: acknowledge first, the rest behind one word.

use axum::extract::{Extension, Form, Path, State};
use axum::response::{IntoResponse, Redirect, Response};
use maud::{Markup, html};
use serde::Deserialize;

use crate::notice::{CallOutcome, Deed, Notice, Shelving, State as NoticeState};
use crate::web::access::{Caller, SessionPass};
use crate::web::address::percent;
use crate::web::deeds::{outcome, shelve, submit};
use crate::web::problem::Problem;
use crate::web::site::App;

use super::frame::Scene;
use super::notice::{Pressed, press};

/// Minutes to choose from; those beyond what the plant allows are not shown.
const MINUTES: [(u32, &str); 5] = [
    (15, "15 minutes"),
    (60, "1 hour"),
    (240, "4 hours"),
    (480, "8 hours"),
    (1440, "a day"),
];

/// Words on a form, and where it goes.
struct Deal<'a> {
    path: &'a str,
    button: &'a str,
    extra: Markup,
}

/// The part of a card where something can be done.
pub fn part(scene: &Scene<'_>, notice: &Notice) -> Markup {
    let is_over = notice.state == NoticeState::Normal;
    html! {
        @match (&scene.caller.session, &scene.app.tokens) {
            (Some(pass), _) if scene.caller.rights.act => {
                @for deal in deals(scene, notice) { (form(scene, notice, pass, &deal)) }
            },
            (Some(_), _) if !is_over => p class="quiet" { "Your token may only look; acknowledging needs one that may act." },
            (None, Some(_)) if !is_over => p { a class="button" href={ "/sign-in?next=" (percent(&scene.here)) } { "Sign in to acknowledge" } },
            (None, None) if !is_over => p class="quiet" { "To acknowledge here, give evenrow a token file: "
                code { "token_file" } " under " code { "[web]" } "." },
            _ => {},
        }
    }
}

fn deals<'a>(scene: &Scene<'_>, notice: &Notice) -> Vec<Deal<'a>> {
    let plain = |path, button| Deal {
        path,
        button,
        extra: html! {},
    };
    let mut deals = Vec::new();
    if matches!(
        notice.state,
        NoticeState::Unacknowledged | NoticeState::ReturnedUnacknowledged
    ) {
        deals.push(Deal {
            path: "acknowledge",
            button: "Acknowledge",
            extra: outcomes(notice),
        });
    }
    match notice.state {
        NoticeState::OutOfService => deals.push(plain("in-service", "Back in service")),
        NoticeState::Normal => {}
        NoticeState::Shelved => deals.push(plain("unshelve", "Unshelve")),
        _ => {
            deals.push(Deal {
                path: "shelve",
                button: "Shelve",
                extra: times(scene),
            });
            deals.push(plain("out-of-service", "Out of service"));
        }
    }
    deals.push(Deal {
        path: "comment",
        button: "Say what came of it",
        extra: outcomes(notice),
    });
    deals
}

fn outcomes(notice: &Notice) -> Markup {
    let id = format!("outcome-{}", notice.id);
    html! {
        label for=(id) { "What came of it" }
        select id=(id) name="outcome" {
            option value="" { "Not known yet" }
            @for one in CallOutcome::ALL {
                option value=(one.word()) selected[notice.handling.outcome == Some(one)] { (one.words()) }
            }
        }
    }
}

fn times(scene: &Scene<'_>) -> Markup {
    let longest_us = scene.snapshot.plant.manners.longest_shelving_us;
    let longest = longest_us / (60 * crate::model::US_PER_S);
    let fits = |(minutes, _): &&(u32, &str)| i64::from(*minutes) <= longest;
    html! {
        label { "For "
            select name="for_minutes" {
                @for (minutes, words) in MINUTES.iter().filter(fits) { option value=(minutes) { (words) } }
            }
        }
        label { input type="checkbox" name="once" value="yes"; " only until it returns" }
    }
}

fn form(scene: &Scene<'_>, notice: &Notice, pass: &SessionPass, deal: &Deal<'_>) -> Markup {
    let id = &notice.id;
    let Deal {
        path,
        button,
        extra,
    } = deal;
    html! {
        details class="act" id={ "act-" (path) "-" (id) } {
            summary class="button" { (button) }
            form class="entry" method="post" action={ "/notices/" (percent(id)) "/" (path) } {
                input type="hidden" name="field" value=(pass.field);
                input type="hidden" name="back" value=(scene.here);
                label for={ "by-" (path) "-" (id) } { "Your name" }
                input id={ "by-" (path) "-" (id) } name="by" required maxlength="80" autocomplete="name";
                (extra)
                label for={ "comment-" (path) "-" (id) } { "Comment, if you like" }
                textarea id={ "comment-" (path) "-" (id) } name="comment" rows="2" maxlength="2000" {}
                button { (button) }
            }
        }
    }
}

/// The filled form.
#[derive(Deserialize)]
pub struct Filled {
    field: String,
    by: String,
    #[serde(default)]
    comment: String,
    #[serde(default)]
    back: String,
    #[serde(default)]
    outcome: Option<String>,
    #[serde(default)]
    for_minutes: Option<u32>,
    #[serde(default)]
    once: Option<String>,
}

impl Filled {
    fn deed(&self, path: &str) -> Result<Deed, Problem> {
        let how = match self.once {
            Some(_) => Shelving::Once,
            None => Shelving::Timed,
        };
        match path {
            "acknowledge" => Ok(Deed::Acknowledge(outcome(self.outcome.as_deref())?)),
            "comment" => Ok(Deed::Comment(outcome(self.outcome.as_deref())?)),
            "shelve" => shelve(self.for_minutes.unwrap_or_default(), how),
            "unshelve" => Ok(Deed::Unshelve),
            "out-of-service" => Ok(Deed::TakeOut),
            "in-service" => Ok(Deed::PutBack),
            _ => Err(Problem::not_found("a notice takes no such form")),
        }
    }
}

/// Takes a form; the guard has seen to it that the caller may act.
pub async fn enter(
    State(app): State<App>,
    Extension(caller): Extension<Caller>,
    Path((id, path)): Path<(String, String)>,
    Form(filled): Form<Filled>,
) -> Result<Response, Problem> {
    let back = crate::web::address::local(&filled.back);
    let deed = filled.deed(&path)?;
    if press(&app, caller, &filled.field)? == Pressed::Once {
        submit(&app, &id, deed, (&filled.by, &filled.comment)).await?;
    }
    Ok(Redirect::to(&back).into_response())
}
