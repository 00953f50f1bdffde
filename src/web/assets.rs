//! The style sheet and the script, embedded.
//!
//! What must hold: their addresses carry a mark of their content, so that a browser may keep them for
//! ever and never mixes two versions.

use std::sync::LazyLock;

use axum::extract::Path;
use axum::http::header;
use axum::response::{IntoResponse, Response};
use rust_embed::RustEmbed;

use super::problem::Problem;

#[derive(RustEmbed)]
#[folder = "src/web/assets"]
struct Files;

/// The address of the style sheet.
pub static STYLE: LazyLock<String> = LazyLock::new(|| address("style.css"));
/// The address of the script that keeps pages current.
pub static LIVE: LazyLock<String> = LazyLock::new(|| address("live.js"));
/// The address of the time band's script.
pub static BAND: LazyLock<String> = LazyLock::new(|| address("band.js"));

/// The glyph of the house as a picture in the page itself, so that no browser asks for a file.
pub const ICON: &str = "data:image/svg+xml,%3Csvg xmlns='http://www.w3.org/2000/svg' \
    viewBox='0 0 24 24'%3E%3Cg fill='none' stroke='%23808080' stroke-width='3' \
    stroke-linecap='round'%3E%3Cpath d='M4 7v8M9.3 7v8M20 7v8'/%3E%3Cpath stroke='%23c2185b' \
    d='M14.7 12v8'/%3E%3C/g%3E%3C/svg%3E";

fn address(file: &str) -> String {
    let mark = Files::get(file).map_or(0, |f| {
        let hash = f.metadata.sha256_hash();
        hash.iter()
            .take(4)
            .fold(0_u32, |mark, byte| mark << 8 | u32::from(*byte))
    });
    format!("/assets/{file}?{mark:08x}")
}

/// The style sheet as text, for a page that is a file of its own.
pub fn style() -> String {
    let found = Files::get("style.css");
    let bytes = found.map(|f| f.data.into_owned()).unwrap_or_default();
    String::from_utf8_lossy(&bytes).into_owned()
}

/// Gives a file.
pub async fn answer(Path(file): Path<String>) -> Response {
    let Some(found) = Files::get(&file) else {
        return Problem::not_found(&format!("there is no file \"{file}\"")).into_response();
    };
    let kind = if file.ends_with(".css") {
        "text/css; charset=utf-8"
    } else {
        "text/javascript; charset=utf-8"
    };
    let headers = [
        (header::CONTENT_TYPE, kind),
        (header::CACHE_CONTROL, "public, max-age=31536000, immutable"),
    ];
    (headers, found.data).into_response()
}
