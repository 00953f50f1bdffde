//! CSV beside JSON, entity tags, filters, and the past as it was seen.

use axum::http::StatusCode;

use crate::web::sample::WINDOW;

use super::{Bench, Listening, request};

fn bench() -> Bench {
    Bench::new(None, Listening::Loopback)
}

#[tokio::test]
async fn every_list_is_there_as_csv_with_the_same_rows() {
    let bench = bench();
    for (path, head, rows) in [
        ("/api/v1/banks", "name,equipment,characteristic,unit", 12),
        ("/api/v1/banks?standing=even", "name,", 4),
        ("/api/v1/banks?equipment=line%209", "name,", 2),
        ("/api/v1/banks/filler-2/sources", "source,state,values", 12),
        (
            "/api/v1/banks/filler-2/windows",
            "source,taken,cycle,value",
            12 * WINDOW,
        ),
        (
            "/api/v1/banks/filler-2/windows?source=07",
            "source,taken",
            WINDOW,
        ),
        ("/api/v1/banks/filler-2/looks?most=4", "at,span,finding", 48),
        ("/api/v1/banks/filler-2/looks?most=2&span=40", "at,span", 24),
        ("/api/v1/banks/filler-2/looks/40", "at,span,source", 12),
        ("/api/v1/banks/filler-2/refusals", "reason,count,at", 2),
        ("/api/v1/refusals", "reason,count,at", 1),
        ("/api/v1/notices", "id,bank,kind,state", 7),
        ("/api/v1/notices?kind=spread_apart", "id,bank,kind,state", 2),
        ("/api/v1/notices?bank=filler-2&state=normal", "id,bank", 2),
        ("/api/v1/notices?source=07&bank=filler-2", "id,bank", 1),
        ("/api/v1/notices?from=2026-07-03T13:00:00Z", "id,bank", 4),
        ("/api/v1/settings", "section,key,value,from", 29),
    ] {
        let csv = bench
            .send(request("GET", path, &[("accept", "text/csv")], ""))
            .await;
        assert_eq!(csv.status, StatusCode::OK, "{path}: {}", csv.body);
        assert!(csv.header("content-type").starts_with("text/csv"), "{path}");
        assert!(csv.body.starts_with(head), "{path}: {}", csv.body);
        assert_eq!(csv.body.lines().count(), rows + 1, "{path}\n{}", csv.body);
        let glue = if path.contains('?') { '&' } else { '?' };
        let again = bench.get(&format!("{path}{glue}form=csv")).await;
        assert_eq!(again.body, csv.body, "{path}");
        let json = bench
            .send(request("GET", path, &[("accept", "application/json")], ""))
            .await;
        assert!(json.body.starts_with('{'), "{path}");
    }
}

#[tokio::test]
async fn parts_lead_to_the_next_in_both_forms() {
    let bench = bench();
    let (mut seen, mut path) = (Vec::new(), "/api/v1/notices?most=2&form=csv".to_owned());
    loop {
        let part = bench.get(&path).await;
        seen.extend(part.body.lines().skip(1).map(|l| l.to_owned()));
        let link = part.header("link");
        let Some(next) = link.strip_prefix('<').and_then(|l| l.split('>').next()) else {
            break;
        };
        path = format!("/api/v1/notices{next}");
    }
    assert_eq!(seen.len(), 7, "{seen:#?}");
    let filtered = bench
        .get("/api/v1/notices?bank=filler-2&most=2")
        .await
        .json();
    assert_eq!(filtered["next"], filtered["items"][1]["id"]);
}

#[tokio::test]
async fn who_has_the_newest_gets_no_body_again() {
    let bench = bench();
    let path = "/api/v1/banks/filler-2";
    let first = bench.get(path).await;
    let tag = first.header("etag").to_owned();
    assert!(tag.starts_with("W/\""), "{tag}");
    let again = bench
        .send(request("GET", path, &[("if-none-match", &tag)], ""))
        .await;
    assert_eq!(again.status, StatusCode::NOT_MODIFIED);
    assert!(again.body.is_empty());
    assert_eq!(again.header("etag"), tag);
    let other = bench
        .send(request("GET", path, &[("if-none-match", "W/\"0\"")], ""))
        .await;
    assert_eq!(other.status, StatusCode::OK);
    let csv = bench.get("/api/v1/banks?form=csv").await;
    let json = bench.get("/api/v1/banks").await;
    assert_ne!(csv.header("etag"), json.header("etag"));
}

#[tokio::test]
async fn a_bank_is_shown_as_it_was_seen() {
    let bench = bench();
    // A quarter of an hour before the notice of now, after that of the morning was over and seen.
    let before = bench.page("/banks/filler-2?at=2026-07-03T14:30").await.body;
    for words in [
        "As it was seen at 3 Jul 2026, 14:30:00 +01:00.",
        "Raw values, counts and refusals of then are gone.",
        "How did each source stand over time?",
        "<strong>even</strong>",
        "?span=40&amp;at=2026-07-03T13%3A30%3A00Z#level",
    ] {
        assert!(before.contains(words), "{words}");
    }
    for words in [
        "07 low by 1.62",
        "data-live",
        "What became of the measurements?",
    ] {
        assert!(!before.contains(words), "{words}");
    }
    // Two minutes after it began, unacknowledged.
    let during = bench.page("/banks/filler-2?at=2026-07-03T14:51").await.body;
    assert!(during.contains("07 low by 1.62"), "the notice stood then");
    let early = bench.page("/banks/filler-2?at=2026-07-01T14:30").await.body;
    assert!(early.contains("No look was kept whole before then"));
}

#[tokio::test]
async fn a_source_has_a_page_of_its_own() {
    let bench = bench();
    let page = bench.page("/banks/filler-2/sources/07").await.body;
    for words in [
        "What has it delivered, and the others meanwhile?",
        "Does it scatter like the others?",
        "Do its values follow each other?",
        "Can its clock be believed?",
        "How did it stand over time?",
        "filler-2: 07 low by 1.62 g",
        "−1.62 g",
        "href=\"/banks/filler-2/sources/06\"",
        "windows?source=07&amp;form=csv",
    ] {
        assert!(page.contains(words), "{words}");
    }
    let silent = bench.page("/banks/spindles/sources/05").await.body;
    assert!(silent.contains("<strong>silent</strong>"), "{silent}");
}
