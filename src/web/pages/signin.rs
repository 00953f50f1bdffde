//! The sign-in page.

use maud::{Markup, html};

use crate::web::site::App;

use super::frame;

/// The form, with what was wrong with the last attempt.
pub fn form(app: &App, field: &str, next: &str, complaint: Option<&str>) -> Markup {
    let plant = &app.site.settings.plant.name;
    frame::alone(
        "Sign in",
        html! {
            h1 { "Sign in" }
            p { "Enter a token of " (plant) " once. It stands in the token file that the configuration \
                 names; whoever runs evenrow gives it to you." }
            @if let Some(complaint) = complaint { p class="complaint" role="alert" { (complaint) } }
            form class="entry" method="post" action="/sign-in" {
                input type="hidden" name="field" value=(field);
                input type="hidden" name="next" value=(next);
                label for="token" { "Token" }
                input id="token" name="token" type="password" autocomplete="current-password" required autofocus;
                button { "Sign in" }
            }
        },
    )
}
