//! Who may do what, over every combination that the rules of tokens name.

use axum::http::StatusCode;

use super::{Answer, Bench, FORM, JSON, Listening, request};

const TOKENS: &str = "look see-only-token\nact do-only-token\nboth-token\n";
const ACKNOWLEDGE: &str = "/api/v1/notices/filler-2-2026-0007/acknowledge";
const SAID: &str = "{\"by\":\"Rita\",\"comment\":\"on my way\"}";

async fn with_token(bench: &Bench, method: &str, path: &str, token: &str) -> Answer {
    let bearer = format!("Bearer {token}");
    let mut headers = vec![JSON];
    if !token.is_empty() {
        headers.push(("authorization", &bearer));
    }
    bench.send(request(method, path, &headers, SAID)).await
}

#[tokio::test]
async fn the_rules_of_tokens_hold() {
    use Listening::{Beyond, Loopback};
    for (file, listening, token, look, act) in [
        (None, Loopback, "", 200, 403),
        (None, Loopback, "any", 200, 403),
        (Some(TOKENS), Loopback, "", 200, 401),
        (Some(TOKENS), Loopback, "unknown", 401, 401),
        (Some(TOKENS), Loopback, "see-only-token", 200, 403),
        (Some(TOKENS), Loopback, "do-only-token", 200, 200),
        (Some(TOKENS), Loopback, "both-token", 200, 200),
        (None, Beyond, "", 403, 403),
        (Some(TOKENS), Beyond, "", 401, 401),
        (Some(TOKENS), Beyond, "unknown", 401, 401),
        (Some(TOKENS), Beyond, "see-only-token", 200, 403),
        (Some(TOKENS), Beyond, "do-only-token", 403, 200),
        (Some(TOKENS), Beyond, "both-token", 200, 200),
    ] {
        let bench = Bench::new(file, listening);
        for path in ["/api/v1/banks", "/metrics", "/"] {
            let answer = with_token(&bench, "GET", path, token).await;
            assert_eq!(answer.status.as_u16(), look, "GET {path} {token:?}");
        }
        let answer = with_token(&bench, "POST", ACKNOWLEDGE, token).await;
        assert_eq!(
            answer.status.as_u16(),
            act,
            "POST {token:?}: {}",
            answer.body
        );
        for path in ["/health/live", "/health/ready"] {
            assert_eq!(bench.get(path).await.status, StatusCode::OK, "{path}");
        }
    }
}

#[tokio::test]
async fn without_a_token_file_the_answer_has_a_hint() {
    let bench = Bench::new(None, Listening::Loopback);
    let answer = with_token(&bench, "POST", ACKNOWLEDGE, "").await;
    assert_eq!(answer.header("content-type"), "application/problem+json");
    assert!(answer.body.contains("token_file"), "{}", answer.body);
    let page = bench.page("/sign-in").await;
    assert_eq!(page.status, StatusCode::FORBIDDEN);
    assert!(page.body.contains("token_file"), "{}", page.body);
}

#[tokio::test]
async fn a_browser_is_led_to_sign_in_and_back() {
    let bench = Bench::new(Some(TOKENS), Listening::Beyond);
    let turned = bench.page("/banks/filler-2?span=40").await;
    assert_eq!(turned.status, StatusCode::SEE_OTHER);
    assert_eq!(
        turned.header("location"),
        "/sign-in?next=%2Fbanks%2Ffiller-2%3Fspan%3D40"
    );
    let form = bench.page(turned.header("location")).await;
    assert!(
        form.body.contains("value=\"/banks/filler-2?span=40\""),
        "{}",
        form.body
    );
    assert!(
        !form.body.contains("filler 2"),
        "nothing of the plant before signing in"
    );
    let cookie = bench.sign_in("both-token").await;
    let page = bench
        .send(request(
            "GET",
            "/banks/filler-2",
            &[("cookie", &cookie)],
            "",
        ))
        .await;
    assert_eq!(page.status, StatusCode::OK);
    assert!(page.body.contains("Sign out"));
}

#[tokio::test]
async fn signing_in_needs_the_right_token_and_a_fresh_form() {
    let bench = Bench::new(Some(TOKENS), Listening::Loopback);
    let form = bench.page("/sign-in").await;
    let set = form.header("set-cookie");
    assert!(
        set.contains("HttpOnly") && set.contains("SameSite=Strict"),
        "{set}"
    );
    let (cookie, field) = (form.cookie(), form.field());
    for (body, headers, status) in [
        (
            format!("token=wrong&field={field}"),
            vec![("cookie", &*cookie), FORM],
            200,
        ),
        (
            "token=both-token&field=made-up".to_owned(),
            vec![("cookie", &*cookie), FORM],
            200,
        ),
        (format!("token=both-token&field={field}"), vec![FORM], 200),
        (
            format!("token=both-token&field={field}"),
            vec![("cookie", &*cookie), FORM, ("sec-fetch-site", "cross-site")],
            403,
        ),
    ] {
        let answer = bench
            .send(request("POST", "/sign-in", &headers, &body))
            .await;
        assert_eq!(answer.status.as_u16(), status, "{body}");
        let set = answer.header("set-cookie");
        assert!(!set.starts_with("evenrow_7310="), "no session for {body}");
    }
}

#[tokio::test]
async fn a_page_acknowledges_once_with_its_field() {
    let bench = Bench::new(Some(TOKENS), Listening::Loopback);
    let cookie = bench.sign_in("both-token").await;
    let path = "/banks/filler-2";
    let page = bench
        .send(request("GET", path, &[("cookie", &cookie)], ""))
        .await;
    let body = format!(
        "field={}&by=Rita&comment=&back=%2Fbanks%2Ffiller-2",
        page.field()
    );
    let to = "/notices/filler-2-2026-0007/acknowledge";
    let headers = [("cookie", &*cookie), FORM];
    for (body, status) in [
        ("field=made-up&by=Rita", 403),
        (&*body, 303),
        // Pressed twice.
        (&*body, 303),
    ] {
        let answer = bench.send(request("POST", to, &headers, body)).await;
        assert_eq!(answer.status.as_u16(), status, "{body}: {}", answer.body);
    }
    let by_cookie = bench
        .send(request(
            "POST",
            ACKNOWLEDGE,
            &[("cookie", &cookie), JSON],
            SAID,
        ))
        .await;
    assert_eq!(
        by_cookie.status,
        StatusCode::UNAUTHORIZED,
        "the interface takes tokens only"
    );
    let looker = bench.sign_in("see-only-token").await;
    let answer = bench
        .send(request("POST", to, &[("cookie", &looker), FORM], &body))
        .await;
    assert_eq!(answer.status, StatusCode::FORBIDDEN);
}

#[tokio::test]
async fn signing_out_ends_the_session() {
    let bench = Bench::new(Some(TOKENS), Listening::Beyond);
    let cookie = bench.sign_in("see-only-token").await;
    let headers = [("cookie", &*cookie), FORM, ("accept", "text/html")];
    let page = bench.send(request("GET", "/", &headers, "")).await;
    assert_eq!(page.status, StatusCode::OK);
    let body = format!("field={}", page.field());
    let refused = bench
        .send(request("POST", "/sign-out", &headers, "field=made-up"))
        .await;
    assert_eq!(refused.status, StatusCode::FORBIDDEN);
    let left = bench
        .send(request("POST", "/sign-out", &headers, &body))
        .await;
    assert_eq!(left.status, StatusCode::SEE_OTHER);
    let after = bench.send(request("GET", "/", &headers, "")).await;
    assert_eq!(after.status, StatusCode::SEE_OTHER, "led to sign in");
}
