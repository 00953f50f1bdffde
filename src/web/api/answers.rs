//! What every address of the interface may also answer, for the OpenAPI document.

use std::collections::BTreeMap;

use utoipa::IntoResponses;
use utoipa::openapi::{ContentBuilder, Ref, RefOr, Response, ResponseBuilder};

/// 304 for who has the newest already, and a problem for everything else.
pub struct Usual;

impl IntoResponses for Usual {
    fn responses() -> BTreeMap<String, RefOr<Response>> {
        let unchanged = ResponseBuilder::new()
            .description(
                "The answer with the entity tag that If-None-Match names is still the newest.",
            )
            .build();
        BTreeMap::from([
            ("304".to_owned(), unchanged.into()),
            ("default".to_owned(), problem().into()),
        ])
    }
}

/// A problem only: for addresses that change something.
pub struct Faults;

impl IntoResponses for Faults {
    fn responses() -> BTreeMap<String, RefOr<Response>> {
        BTreeMap::from([("default".to_owned(), problem().into())])
    }
}

fn problem() -> Response {
    let schema = Ref::from_schema_name("Problem");
    let content = ContentBuilder::new().schema(Some(schema)).build();
    ResponseBuilder::new()
        .description("What is wrong and what to do (RFC 9457).")
        .content("application/problem+json", content)
        .build()
}
