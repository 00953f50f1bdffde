//! The OpenAPI 3.1 document, generated from the handlers and the forms.

use axum::Json;
use utoipa::openapi::security::{HttpAuthScheme, HttpBuilder, SecurityScheme};
use utoipa::{Modify, OpenApi};

use super::api::form::Form;
use super::api::{banks, deeds, explain, line, looks, notices, plant, stream};
use super::problem::Problem;

/// How tokens are sent.
struct Token;

impl Modify for Token {
    fn modify(&self, document: &mut utoipa::openapi::OpenApi) {
        let scheme = HttpBuilder::new()
            .scheme(HttpAuthScheme::Bearer)
            .description(Some(
                "A line of the token file. Looking needs none on a loopback address.",
            ))
            .build();
        let components = document.components.get_or_insert_default();
        components.add_security_scheme("token", SecurityScheme::Http(scheme));
    }
}

#[derive(OpenApi)]
#[openapi(
    info(
        title = "evenrow",
        description = "Banks of parallel sources, their windows, looks and notices. evenrow \
            advises; it is no safety function, no interlock and no legal measuring instrument.",
        license(name = "MIT", identifier = "MIT"),
    ),
    paths(
        banks::list, banks::one, banks::sources, banks::source, banks::windows, banks::refusals,
        line::list, line::enter,
        explain::bank_explained, explain::evidence,
        looks::list, looks::one,
        notices::list, notices::one,
        deeds::acknowledge, deeds::comment, deeds::shelve, deeds::unshelve, deeds::out_of_service,
        deeds::in_service,
        super::pages::handover::data,
        plant::settings, plant::health, plant::refusals, stream::stream,
    ),
    components(schemas(Problem, Form)),
    tags(
        (name = "banks", description = "What is compared, now"),
        (name = "looks", description = "What the examinations said, now and before"),
        (name = "notices", description = "What people receive and act on"),
        (name = "refusals", description = "What arrived and could not be used"),
        (name = "plant", description = "Settings and health"),
        (name = "stream", description = "What changes, as it changes"),
    ),
    modifiers(&Token),
)]
struct Document;

/// The document.
pub fn document() -> utoipa::openapi::OpenApi {
    Document::openapi()
}

/// Gives the document.
pub async fn answer() -> Json<utoipa::openapi::OpenApi> {
    Json(document())
}
