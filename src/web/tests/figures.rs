//! Figures that users were promised: sizes of pages, and how often they are made. Times are
//! measured by `cargo bench --bench pages`.

use std::io::Write as _;

use super::{Bench, Listening, request};

/// Where the sample plant's pages are left, to be looked at.
const LEFT_AT: &str = concat!(env!("CARGO_MANIFEST_DIR"), "/target/pages");

#[tokio::test]
async fn the_page_of_a_large_bank_is_small() {
    let bench = Bench::new(Some("both-token\n"), Listening::Loopback);
    let path = "/banks/filler-4?from=2026-07-02T15:03&to=2026-07-03T15:03";
    let page = bench.page(path).await.body;
    let mut encoder = flate2::write::GzEncoder::new(Vec::new(), flate2::Compression::default());
    encoder.write_all(page.as_bytes()).expect("written");
    let squeezed = encoder.finish().expect("finished").len();
    println!(
        "120 sources, a day: {} bytes, {squeezed} squeezed",
        page.len()
    );
    assert!(page.len() <= 400_000, "{} bytes", page.len());
    assert!(squeezed <= 80_000, "{squeezed} bytes squeezed");
}

#[tokio::test]
async fn one_rendering_serves_all_who_are_not_signed_in() {
    let bench = Bench::new(Some("both-token\n"), Listening::Loopback);
    let ask = |headers: Vec<(&'static str, &'static str)>| {
        let headers = [vec![("accept", "text/html")], headers].concat();
        request("GET", "/", &headers, "")
    };
    let first = bench.send(ask(vec![])).await;
    let mut next = crate::web::sample::snapshot();
    next.banks.truncate(1);
    next.version = 9;
    bench.snapshot.send_replace(std::sync::Arc::new(next));
    let told = bench.send(ask(vec![("evenrow-at-least", "1")])).await;
    assert_eq!(told.body, first.body, "version 1 will do");
    let later = bench.send(ask(vec![("evenrow-at-least", "9")])).await;
    assert_ne!(later.body, first.body, "version 9 was asked for");
    let cookie = bench.sign_in("both-token").await;
    let own = bench
        .send(request(
            "GET",
            "/",
            &[("accept", "text/html"), ("cookie", &cookie)],
            "",
        ))
        .await;
    assert!(own.body.contains("Sign out"));
    let others = bench.send(ask(vec![])).await;
    assert!(!others.body.contains("Sign out"));
}

#[tokio::test]
async fn the_sample_pages_are_left_to_be_looked_at() {
    let bench = Bench::new(Some("both-token\n"), Listening::Loopback);
    std::fs::create_dir_all(LEFT_AT).expect("a folder");
    for (name, path) in [
        ("plant", "/"),
        ("bank", "/banks/filler-2"),
        ("large", "/banks/filler-4"),
        ("then", "/banks/filler-2?at=2026-07-03T14:30"),
        ("source", "/banks/filler-2/sources/07"),
        ("notices", "/notices"),
        ("notice", "/notices/filler-2-2026-0007"),
        ("settings", "/settings"),
        ("about", "/about"),
    ] {
        let page = bench.page(path).await.body;
        let assets = concat!(env!("CARGO_MANIFEST_DIR"), "/src/web/assets/");
        let page = page.replace("\"/assets/", &format!("\"file://{assets}"));
        std::fs::write(format!("{LEFT_AT}/{name}.html"), page).expect("written");
    }
}
