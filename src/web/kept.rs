//! Finished pages, kept for a moment: the place where one rendering waits for many viewers.
//!
//! Owns the bytes of a few pages. What must hold: memory is bounded; a page is made once however many
//! ask at the same time. Deliberately absent: when a page may be shared (that is `sharing`).

use std::collections::BTreeMap;
use std::sync::{Arc, Mutex, PoisonError};

use axum::body::{Body, Bytes};
use axum::http::HeaderMap;
use axum::response::Response;

use crate::engine::Snapshot;
use crate::model::Time;

/// Viewers of a plant look at a handful of pages at a time.
const MOST_PAGES: usize = 32;

/// The pages, by address and whether they are compressed.
#[derive(Default)]
pub struct Kept {
    pages: Mutex<BTreeMap<(String, bool), Place>>,
}

/// One page; whoever holds the lock makes it, the others wait.
pub type Place = Arc<tokio::sync::Mutex<Option<Finished>>>;

/// A page as it leaves.
pub struct Finished {
    /// What it was made from.
    pub from: Arc<Snapshot>,
    /// When.
    pub made: Time,
    /// Its headers.
    pub headers: HeaderMap,
    /// Its body.
    pub bytes: Bytes,
}

impl Kept {
    /// The place of a page; when there are too many, all are forgotten.
    pub fn place(&self, key: (String, bool)) -> Place {
        // Every change is one step on plain data, so a poisoned map is still a whole one.
        let mut pages = self.pages.lock().unwrap_or_else(PoisonError::into_inner);
        if pages.len() >= MOST_PAGES && !pages.contains_key(&key) {
            pages.clear();
        }
        pages.entry(key).or_default().clone()
    }
}

impl Finished {
    /// The page as an answer.
    pub fn answer(&self) -> Response {
        let mut response = Response::new(Body::from(self.bytes.clone()));
        response.headers_mut().clone_from(&self.headers);
        response
    }
}
