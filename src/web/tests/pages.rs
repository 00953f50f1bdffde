//! Pages: whole, safe, and saying what they must.

use std::sync::Arc;

use axum::http::StatusCode;

use crate::engine::{Condition, OutletView, RunningShift, ShiftsView, Snapshot};
use crate::web::sample::{self, Story};

use super::{Bench, Listening};

fn bench() -> Bench {
    Bench::new(Some("both-token\n"), Listening::Loopback)
}

/// Everything that a page may hold only in matching pairs.
fn balanced(html: &str) -> bool {
    [
        "svg", "g", "table", "section", "details", "article", "form", "a", "li", "text", "defs",
    ]
    .iter()
    .all(|tag| {
        let opened =
            html.matches(&format!("<{tag} ")).count() + html.matches(&format!("<{tag}>")).count();
        opened == html.matches(&format!("</{tag}>")).count()
    })
}

#[tokio::test]
async fn every_page_is_whole_and_asks_nobody_else() {
    let bench = bench();
    for path in [
        "/",
        "/banks/filler-2",
        "/banks/filler-2?span=640",
        "/banks/filler-3",
        "/banks/mould-b%20bore",
        "/banks/spindles",
        "/banks/caps",
        "/banks/filler-4",
        "/banks/sealer",
        "/banks/filler-2/sources/07",
        "/banks/filler-2/sources/01?from=2026-07-03T12:00&to=2026-07-03T14:00",
        "/banks/mould-b%20bore/sources/cavity%2011",
        "/banks/sealer/sources/01",
        "/banks/filler-2?at=2026-07-03T14:30",
        "/banks/filler-2?at=2026-07-01T14:30",
        "/banks/filler-2?from=2026-07-03T12:00&to=2026-07-03T14:00",
        "/settings",
        "/about",
        "/notices",
        "/notices?after=filler-2-2026-0006",
        "/notices/filler-2-2026-0007",
        "/notices/filler-2-2026-0005",
        "/sign-in",
    ] {
        let page = bench.page(path).await;
        assert_eq!(page.status, StatusCode::OK, "{path}: {}", page.body);
        assert!(
            page.header("content-type").starts_with("text/html"),
            "{path}"
        );
        let policy = page.header("content-security-policy");
        assert!(
            policy.contains("default-src 'none'") && !policy.contains("unsafe"),
            "{path}"
        );
        assert!(balanced(&page.body), "{path}: unbalanced");
        for foreign in [
            "src=\"http",
            "href=\"http",
            " style=",
            "<style",
            "onclick",
            "NaN",
            ">inf<",
            "\"inf",
        ] {
            let found = page.body.find(foreign).map(|at| {
                page.body
                    .chars()
                    .skip(at.saturating_sub(60))
                    .take(120)
                    .collect::<String>()
            });
            assert_eq!(found, None, "{path}: {foreign}");
        }
        assert!(
            page.body
                .contains("no interlock and no legal measuring instrument"),
            "{path}: cautions"
        );
        let pictures = page.body.matches("role=\"img\"").count();
        let described = page.body.matches("<title id=").count()
            + page.body.matches("class=\"scale\"").count()
            + page.body.matches("class=\"day\"").count();
        assert_eq!(pictures, described, "{path}: every picture has its title");
    }
}

#[tokio::test]
async fn the_plant_says_how_each_bank_stands() {
    let page = bench().page("/").await.body;
    for words in [
        "<strong>level apart</strong><span>07 −1.62 g</span>",
        "<strong>even</strong>",
        "<strong>spread apart</strong><span>cavity 11 spread 2.9×</span>",
        "<strong>source silent</strong><span>05</span>",
        "<strong>3 calls</strong><span>90 days, budget 1</span>",
        "The last day: even 5 h, apart 1",
        "✕ refused: not a number",
        "6 of 10 values per source so far",
        "<strong>waiting</strong>",
        "Arrivals that belong to no bank",
        "href=\"/banks/mould-b%20bore\"",
        "15:03:22 +01:00",
    ] {
        assert!(page.contains(words), "{words}");
    }
    assert!(!page.contains("Broker"), "no trouble, no words about it");
}

#[tokio::test]
async fn trouble_is_said_plainly() {
    let bench = bench();
    let mut now = sample::snapshot();
    now.broker =
        Condition::Trouble("connection refused at 127.0.0.1:1883, trying again in 8 s".into());
    now.store = Condition::Trouble("the disk is full".into());
    now.outlets[0].waiting = 2;
    now.outlets[0].trouble = Some("the broker is away".into());
    now.outlets.push(OutletView {
        trouble: Some("the desk answered 410".into()),
        ..OutletView::new("desk".into())
    });
    bench.snapshot.send_replace(Arc::new(now));
    let page = bench.page("/").await.body;
    for words in [
        "Broker trouble",
        "connection refused",
        "Store trouble",
        "the disk is full",
        "2 waiting",
        "Notices are not leaving by mqtt",
        "Notices are not leaving by desk",
        "the desk answered 410",
        "Notices leave by mqtt (2 waiting), desk.",
    ] {
        assert!(page.contains(words), "{words}");
    }
}

#[tokio::test]
async fn a_bank_names_its_source_by_word_and_shape() {
    let page = bench().page("/banks/filler-2").await.body;
    for words in [
        "filler-2: 07 low by 1.62 g",
        "class=\"tag\"",
        "07 low</text>",
        "Which sources are apart, and by how much?",
        "the margin, 0.8 g wide",
        "How did each source stand over time?",
        "Sign in to acknowledge",
        "decides: significant",
        "Brown–Forsythe",
        "&lt;b&gt;503.1&lt;/b&gt;",
        "not a number",
    ] {
        assert!(page.contains(words), "{words}");
    }
    let notice = page.find("07 low by 1.62").expect("the notice");
    let picture = page.find("Which sources are apart").expect("the picture");
    assert!(notice < picture, "what asks for somebody comes first");
}

#[tokio::test]
async fn a_bank_of_shifts_shows_what_gathers() {
    let bench = bench();
    let mut now = sample::snapshot();
    let mut view = (*now.banks[0]).clone();
    view.shifts = Some(ShiftsView {
        running: vec![RunningShift {
            name: "late".into(),
            end: sample::moment(),
            count: 1234,
            mean: 503.014,
        }],
        skipped: 2,
        fewest: 30,
    });
    let page = format!("/banks/{}", view.bank.name);
    now.banks[0] = Arc::new(view);
    bench.snapshot.send_replace(Arc::new(now));
    let page = bench.page(&page).await.body;
    for words in [
        "What has the running shift made so far?",
        "late",
        "1\u{202f}234",
        "503.01",
        "2 had too few",
    ] {
        assert!(page.contains(words), "{words}");
    }
    assert!(balanced(&page));
    let other = bench.page("/banks/spindles").await.body;
    assert!(!other.contains("running shift"));
}

#[tokio::test]
async fn a_plant_without_banks_and_an_unknown_bank_are_designed() {
    let bench = bench();
    let empty = Snapshot {
        banks: Vec::new(),
        ..sample::snapshot()
    };
    bench.snapshot.send_replace(Arc::new(empty));
    assert!(bench.page("/").await.body.contains("No bank yet"));
    let missing = bench.page("/banks/none").await;
    assert_eq!(missing.status, StatusCode::NOT_FOUND);
    assert!(
        missing.body.contains("There is no bank"),
        "{}",
        missing.body
    );
}

#[tokio::test]
async fn a_large_bank_fits_the_wire() {
    let bench = bench();
    let page = bench.page("/banks/filler-4").await.body;
    assert!(page.len() < 400_000, "{} bytes", page.len());
    let two = Snapshot {
        banks: vec![Arc::new(sample::view(
            sample::bank(
                "pair",
                "press",
                sample::snapshot().banks[0].bank.characteristic.clone(),
                &sample::numbered(2),
                0.0,
            ),
            Story::Even,
            3,
        ))],
        ..sample::snapshot()
    };
    bench.snapshot.send_replace(Arc::new(two));
    let page = bench.page("/banks/pair").await;
    assert_eq!(page.status, StatusCode::OK, "no margin, two sources");
}
