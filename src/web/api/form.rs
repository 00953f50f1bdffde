//! In which form an answer is given: JSON, or CSV for spreadsheets.
//!
//! What must hold: CSV has the same figures as JSON in full precision, one header line, RFC 4180's
//! quoting; where a list goes on, a `Link` header leads to the next part.

use axum::http::{HeaderMap, HeaderValue, Uri, header};
use axum::response::{IntoResponse, Response};
use serde::{Deserialize, Serialize};
use utoipa::{IntoParams, ToSchema};

use crate::web::address::percent;
use crate::web::problem::Problem;
use crate::web::wire::{List, Rows};

/// A form.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Deserialize, ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum Form {
    /// JSON.
    Json,
    /// Comma-separated values.
    Csv,
}

/// The query of addresses that take nothing but the form.
#[derive(Debug, Default, Deserialize, IntoParams)]
#[into_params(parameter_in = Query)]
#[serde(deny_unknown_fields)]
pub struct OnlyForm {
    /// `csv` for comma-separated values; else what the Accept header says, else JSON.
    pub form: Option<Form>,
}

/// How this request wants to be answered.
#[derive(Clone, Debug)]
pub struct Wish {
    form: Form,
    uri: Uri,
}

impl Wish {
    /// By the query, else by the Accept header, else JSON.
    pub fn new(asked: Option<Form>, headers: &HeaderMap, uri: Uri) -> Self {
        Self {
            form: asked.unwrap_or_else(|| accepted(headers)),
            uri,
        }
    }

    /// Answers with a list.
    pub fn answer<T: Serialize + Rows>(&self, list: List<T>) -> Result<Response, Problem> {
        match self.form {
            Form::Json => Ok(axum::Json(list).into_response()),
            Form::Csv => {
                let next = list.next.as_ref().map(|next| self.link(T::NEXT, next));
                let mut response = csv(&list.items)?;
                if let Some(Ok(link)) = next.map(|link| HeaderValue::from_str(&link)) {
                    response.headers_mut().insert(header::LINK, link);
                }
                Ok(response)
            }
        }
    }

    /// Answers with one thing, whose rows are its parts.
    pub fn answer_one<T: Serialize + Rows>(&self, one: T) -> Result<Response, Problem> {
        match self.form {
            Form::Json => Ok(axum::Json(one).into_response()),
            Form::Csv => csv(&[one]),
        }
    }

    /// This address with another value of `key`, as a relative reference.
    fn link(&self, key: &str, value: &str) -> String {
        let query = self.uri.query().unwrap_or_default();
        let others = query
            .split('&')
            .filter(|pair| !pair.is_empty() && pair.split('=').next() != Some(key));
        let mut parts: Vec<String> = others.map(str::to_owned).collect();
        parts.push(format!("{key}={}", percent(value)));
        format!("<?{}>; rel=\"next\"", parts.join("&"))
    }
}

/// The first of the forms we have that the header names.
fn accepted(headers: &HeaderMap) -> Form {
    let accept = headers.get(header::ACCEPT).and_then(|a| a.to_str().ok());
    let mut parts = accept.unwrap_or_default().split(',');
    let named = parts.find_map(|part| match part.split(';').next().map(str::trim) {
        Some("text/csv") => Some(Form::Csv),
        Some("application/json" | "*/*" | "application/*") => Some(Form::Json),
        _ => None,
    });
    named.unwrap_or(Form::Json)
}

fn csv<T: Rows>(items: &[T]) -> Result<Response, Problem> {
    let failed = |e: &dyn std::fmt::Display| Problem::internal(&format!("no CSV was made: {e}"));
    let mut writer = csv::Writer::from_writer(Vec::new());
    writer.write_record(T::HEAD).map_err(|e| failed(&e))?;
    for row in items.iter().flat_map(Rows::rows) {
        writer.write_record(row).map_err(|e| failed(&e))?;
    }
    let bytes = writer.into_inner().map_err(|e| failed(&e))?;
    let kind = "text/csv; charset=utf-8; header=present";
    Ok(([(header::CONTENT_TYPE, kind)], bytes).into_response())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_form_is_the_first_that_is_named() {
        for (accept, form) in [
            ("", Form::Json),
            ("text/csv", Form::Csv),
            ("text/html, text/csv;q=0.5, application/json", Form::Csv),
            ("application/json, text/csv", Form::Json),
            ("*/*", Form::Json),
        ] {
            let mut headers = HeaderMap::new();
            headers.insert(header::ACCEPT, HeaderValue::from_static(accept));
            assert_eq!(accepted(&headers), form, "{accept:?}");
        }
    }

    #[test]
    fn the_next_part_keeps_the_rest_of_the_query() {
        let uri: Uri = "/api/v1/notices?after=a&most=2".parse().expect("a uri");
        let wish = Wish::new(None, &HeaderMap::new(), uri);
        let link = wish.link("after", "b c");
        assert_eq!(link, "<?most=2&after=b%20c>; rel=\"next\"");
    }
}
