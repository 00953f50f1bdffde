//! The interface, the metrics and health: forms and statuses.

use std::collections::BTreeSet;
use std::io::Write as _;
use std::process::{Command, Stdio};
use std::sync::Arc;

use axum::http::StatusCode;

use crate::engine::Condition;
use crate::web::sample;

use super::{Bench, JSON, Listening, request};

fn bench() -> Bench {
    Bench::new(Some("both-token\n"), Listening::Loopback)
}

#[tokio::test]
async fn every_reading_address_answers() {
    let bench = bench();
    for (path, key) in [
        ("/api/v1/banks", "items"),
        ("/api/v1/banks/filler-2", "sources"),
        ("/api/v1/banks/mould-b%20bore", "sources"),
        ("/api/v1/banks/filler-2/windows", "items"),
        ("/api/v1/banks/filler-2/looks", "items"),
        ("/api/v1/banks/filler-2/looks?most=4", "next"),
        ("/api/v1/banks/filler-2/sources", "items"),
        ("/api/v1/banks/filler-2/sources/07", "deviation"),
        ("/api/v1/banks/filler-2/windows?source=07", "items"),
        ("/api/v1/banks/filler-2/looks/40", "tests"),
        ("/api/v1/banks/filler-2/refusals", "items"),
        ("/api/v1/banks/filler-2/events", "items"),
        ("/api/v1/refusals", "items"),
        ("/api/v1/settings", "items"),
        ("/api/v1/health", "store"),
        ("/api/v1/notices", "items"),
        ("/api/v1/notices?most=1", "next"),
        ("/api/v1/notices/filler-2-2026-0007", "id"),
        ("/api/v1/notices/filler-2-2026-0005", "id"),
        ("/api/v1/openapi.json", "paths"),
        ("/health/live", "status"),
        ("/health/ready", "status"),
    ] {
        let answer = bench.get(path).await;
        assert_eq!(answer.status, StatusCode::OK, "{path}: {}", answer.body);
        assert!(!answer.json()[key].is_null(), "{path}: {}", answer.body);
    }
}

#[tokio::test]
async fn errors_are_problems_everywhere() {
    let bench = bench();
    let to = "/api/v1/notices/filler-2-2026-0007/acknowledge";
    let token = ("authorization", "Bearer both-token");
    let large = format!("{{\"by\":\"{}\"}}", "x".repeat(70_000));
    let long = format!("{{\"by\":\"{}\"}}", "x".repeat(81));
    for (method, path, headers, body, status) in [
        ("GET", "/api/v1/nothing", vec![], "", 404),
        ("GET", "/nothing", vec![], "", 404),
        ("GET", "/api/v1/banks/none", vec![], "", 404),
        ("GET", "/api/v1/banks/none/windows", vec![], "", 404),
        ("GET", "/api/v1/notices/none", vec![], "", 404),
        (
            "GET",
            "/api/v1/banks/filler-2/sources/none",
            vec![],
            "",
            404,
        ),
        (
            "GET",
            "/api/v1/banks/filler-2/windows?source=none",
            vec![],
            "",
            404,
        ),
        ("GET", "/api/v1/banks/filler-2/looks/41", vec![], "", 404),
        ("GET", "/api/v1/banks/filler-2/looks/x", vec![], "", 400),
        ("GET", "/api/v1/banks?form=xml", vec![], "", 400),
        ("GET", "/api/v1/stream?bank=none", vec![], "", 404),
        ("GET", "/banks/filler-2?at=yesterday", vec![], "", 400),
        ("GET", "/banks/filler-2/sources/none", vec![], "", 404),
        ("GET", "/assets/none.js", vec![], "", 404),
        ("POST", "/api/v1/banks", vec![token, JSON], "{}", 405),
        (
            "GET",
            "/api/v1/banks/filler-2/looks?from=yesterday",
            vec![],
            "",
            400,
        ),
        (
            "GET",
            "/api/v1/banks/filler-2/looks?most=0",
            vec![],
            "",
            400,
        ),
        (
            "GET",
            "/api/v1/banks/filler-2/looks?most=x",
            vec![],
            "",
            400,
        ),
        ("GET", "/api/v1/notices?page=2", vec![], "", 400),
        ("GET", "/api/v1/notices?after=gone", vec![], "", 503),
        ("POST", to, vec![token, JSON], "{\"by\":", 400),
        ("POST", to, vec![token, JSON], "{\"by\":\" \"}", 400),
        ("POST", to, vec![token, JSON], &long, 400),
        ("POST", to, vec![token, JSON], "{\"comment\":\"x\"}", 422),
        ("POST", to, vec![token], "{}", 415),
        (
            "POST",
            to,
            vec![token, JSON, ("content-length", "70009")],
            &large,
            413,
        ),
        (
            "POST",
            to,
            vec![token, JSON, ("origin", "http://elsewhere")],
            "{}",
            403,
        ),
        (
            "POST",
            "/api/v1/notices/none/acknowledge",
            vec![token, JSON],
            "{\"by\":\"Rita\"}",
            404,
        ),
    ] {
        let answer = bench.send(request(method, path, &headers, body)).await;
        assert_eq!(
            answer.status.as_u16(),
            status,
            "{method} {path}: {}",
            answer.body
        );
        assert_eq!(
            answer.header("content-type"),
            "application/problem+json",
            "{path}"
        );
        let problem = answer.json();
        assert_eq!(problem["status"], status, "{path}");
        assert_eq!(problem["type"], "about:blank", "{path}");
        assert!(
            problem["detail"].as_str().is_some_and(|d| d.len() > 10),
            "{path}: {problem}"
        );
    }
}

#[tokio::test]
async fn an_acknowledgement_answers_with_the_notice() {
    let bench = bench();
    let to = "/api/v1/notices/filler-2-2026-0007/acknowledge";
    let headers = [JSON, ("authorization", "Bearer both-token")];
    let said = "{\"by\":\"Rita\",\"comment\":\"on my way\"}";
    let answer = bench.send(request("POST", to, &headers, said)).await;
    let notice = answer.json();
    assert_eq!(answer.status, StatusCode::OK);
    for (pointer, wanted) in [
        ("/id", "filler-2-2026-0007"),
        ("/state", "acknowledged"),
        ("/kind", "level_apart"),
        ("/sources/0/source", "07"),
        ("/acknowledged/by", "Rita"),
        ("/acknowledged/comment", "on my way"),
        ("/since/at", "2026-07-03T13:49:22Z"),
    ] {
        assert_eq!(
            notice.pointer(pointer).and_then(|v| v.as_str()),
            Some(wanted),
            "{pointer}"
        );
    }
}

#[tokio::test]
async fn looks_have_every_method_in_full_precision() {
    let whole = bench().get("/api/v1/banks/filler-2").await.json();
    let look = &whole["looks"][0];
    for (key, statistic) in [
        ("brown_forsythe", 1.7059),
        ("bartlett", 20.7859),
        ("anova_raw", 2.2969),
        ("welch_raw", 2.0558),
        ("blocked_anova", 14.21),
    ] {
        assert_eq!(look["tests"][key]["statistic"], statistic, "{key}");
        assert!(look["tests"][key]["p"].is_f64(), "{key}");
        assert!(look["tests"][key]["df"].is_array(), "{key}");
    }
    assert_eq!(look["bank"], "filler-2");
    assert_eq!(look["span"], 10);
    assert!(look["finding"].is_string() && look["at"].is_string());
}

#[tokio::test]
async fn past_looks_are_given_in_whole_moments() {
    let bench = bench();
    let first = bench
        .get("/api/v1/banks/filler-2/looks?most=6")
        .await
        .json();
    let items = first["items"].as_array().expect("a list");
    assert_eq!(
        items.len(),
        4,
        "two moments of four spans do not fit in six"
    );
    let next = first["next"].as_str().expect("more");
    let before = bench
        .get(&format!("/api/v1/banks/filler-2/looks?most=6&to={next}"))
        .await
        .json();
    let last = before["items"]
        .as_array()
        .and_then(|i| i.last())
        .expect("more looks");
    assert!(last["at"].as_str() < Some(next));
}

#[tokio::test]
async fn the_document_describes_what_there_is() {
    let document = bench().get("/api/v1/openapi.json").await.json();
    assert!(
        document["openapi"]
            .as_str()
            .is_some_and(|v| v.starts_with("3.1")),
        "{}",
        document["openapi"]
    );
    let paths = document["paths"].as_object().expect("paths");
    assert_eq!(paths.len(), 24);
    let operations = paths
        .values()
        .flat_map(|p| p.as_object().expect("methods").values());
    let ids: BTreeSet<_> = operations
        .filter_map(|o| o["operationId"].as_str())
        .collect();
    assert_eq!(ids.len(), 25, "one name each: {ids:?}");
    let schema = &document["components"]["schemas"]["NoticeBody"]["properties"]["since"];
    assert!(!schema.is_null());
}

#[tokio::test]
async fn ready_means_store_and_broker_well() {
    let bench = bench();
    for (store, broker, status, said) in [
        (Condition::Well, Condition::Well, 200, "ready"),
        (
            Condition::Starting,
            Condition::Well,
            503,
            "the store is still starting",
        ),
        (
            Condition::Well,
            Condition::Trouble("refused the password".into()),
            503,
            "broker: refused the password",
        ),
    ] {
        let mut now = sample::snapshot();
        (now.store, now.broker) = (store, broker);
        bench.snapshot.send_replace(Arc::new(now));
        let answer = bench.get("/health/ready").await;
        assert_eq!(answer.status.as_u16(), status);
        assert!(answer.body.contains(said), "{}", answer.body);
        assert_eq!(bench.get("/health/live").await.status, StatusCode::OK);
    }
}

#[tokio::test]
async fn metrics_say_what_the_snapshot_says() {
    let text = bench().get("/metrics").await.body;
    for line in [
        "evenrow_measurements_total{bank=\"filler-2\",outcome=\"accepted\"} 482113",
        "evenrow_measurements_total{bank=\"\",outcome=\"no_bank\"} 2",
        "evenrow_window_values{bank=\"filler-2\",source=\"01\"} 640",
        "evenrow_sources{bank=\"spindles\",state=\"silent\"} 1",
        "evenrow_source_named{bank=\"filler-2\",kind=\"level_apart\",source=\"07\"} 1",
        "evenrow_source_named{bank=\"filler-2\",kind=\"level_apart\",source=\"06\"} 0",
        "evenrow_source_named{bank=\"mould-b bore\",kind=\"spread_apart\",source=\"cavity 11\"} 1",
        "evenrow_look_alpha{bank=\"filler-2\",kind=\"level\",span=\"10\"} 0.00000077",
        "evenrow_look_f{bank=\"filler-2\",kind=\"level\",span=\"640\"} 14.21",
        "evenrow_notice_active{bank=\"filler-2\",kind=\"level_apart\"} 1",
        "evenrow_notice_active{bank=\"filler-3\",kind=\"level_apart\"} 0",
        "evenrow_notices_total{bank=\"filler-2\",kind=\"level_apart\"} 1",
        "evenrow_source_last_measurement_timestamp_seconds{bank=\"filler-2\",source=\"01\"} 1783087401",
        "evenrow_broker_connected 1",
        "evenrow_look_seconds_count 0",
        "evenrow_store_commit_seconds_count 0",
        "evenrow_build_info{version=\"0.1.0\"} 1",
    ] {
        assert!(text.lines().any(|l| l == line), "{line}\n{text}");
    }
}

#[tokio::test]
async fn promtool_is_content() {
    let text = bench().get("/metrics").await.body;
    let check = Command::new("promtool")
        .args(["check", "metrics"])
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn();
    // `tests/all` installs it; a bare `cargo test` elsewhere still checks the text's own form above.
    let Ok(mut check) = check else {
        return;
    };
    check
        .stdin
        .take()
        .expect("piped")
        .write_all(text.as_bytes())
        .expect("taken");
    let said = check.wait_with_output().expect("an end");
    let words = String::from_utf8_lossy(&said.stderr);
    assert!(said.status.success() && words.trim().is_empty(), "{words}");
}

#[tokio::test]
async fn line_events_are_checked_and_entered() {
    let bench = bench();
    let token = ("authorization", "Bearer both-token");
    let to = "/api/v1/banks/filler-2/events";
    for (body, status, says) in [
        (
            r#"{"by":"R. Matos","kind":"adjustment","source":"07","amount":1.5,"reason":"seat worn"}"#,
            201,
            "\"amount\":1.5",
        ),
        (
            r#"{"by":"R. Matos","kind":"changeover","product":"750 lemon","target":753.0}"#,
            201,
            "750 lemon",
        ),
        (
            r#"{"by":"R. Matos","kind":"stop"}"#,
            201,
            "\"kind\":\"stop\"",
        ),
        (r#"{"by":"R. Matos","kind":"start"}"#, 409, "runs already"),
        (
            r#"{"by":"R. Matos","kind":"adjustment","source":"none"}"#,
            404,
            "no source",
        ),
        (
            r#"{"by":"R. Matos","kind":"adjustment"}"#,
            400,
            "`source` is missing",
        ),
        (
            r#"{"by":"R. Matos","kind":"changeover"}"#,
            400,
            "`product` is missing",
        ),
        (
            r#"{"by":"R. Matos","kind":"stop","source":"07"}"#,
            400,
            "does not belong",
        ),
        (r#"{"by":" ","kind":"stop"}"#, 400, "name of the person"),
        (r#"{"by":"R. Matos","kind":"holiday"}"#, 422, "holiday"),
        (r#"{"by":"R. Matos","kind":"stop","extra":1}"#, 422, "extra"),
    ] {
        let answer = bench.send(request("POST", to, &[token, JSON], body)).await;
        assert_eq!(answer.status.as_u16(), status, "{body}: {}", answer.body);
        assert!(answer.body.contains(says), "{body}: {}", answer.body);
    }
    let denied = bench
        .send(request("POST", to, &[JSON], r#"{"by":"x","kind":"stop"}"#))
        .await;
    assert_eq!(denied.status, StatusCode::UNAUTHORIZED);
    let gone = "/api/v1/banks/none/events";
    let answer = bench
        .send(request(
            "POST",
            gone,
            &[token, JSON],
            r#"{"by":"x","kind":"stop"}"#,
        ))
        .await;
    assert_eq!(answer.status, StatusCode::NOT_FOUND);
}
