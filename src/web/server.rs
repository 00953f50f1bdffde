//! The server: routes, the layers around them, and a bounded end.
//!
//! What must hold: every answer carries the security headers; bodies, requests and the drain are
//! bounded; live streams end with the shutdown, so that the drain is short.

use std::net::SocketAddr;
use std::sync::Arc;
use std::time::Duration;

use axum::Router;
use axum::extract::connect_info::IntoMakeServiceWithConnectInfo;
use axum::http::{HeaderName, HeaderValue, StatusCode, header};
use axum::middleware::{from_fn_with_state, map_response};
use axum::response::Response;
use axum::routing::{get, post};
use axum_server::tls_rustls::RustlsConfig;
use tokio::net::TcpListener;
use tokio_util::sync::CancellationToken;
use tower_http::compression::CompressionLayer;
use tower_http::limit::RequestBodyLimitLayer;
use tower_http::timeout::TimeoutLayer;

use super::certificate::{self, CertificateError};
use super::site::{App, Site};
use super::tokens::TokenError;
use super::{
    access, api, assets, dress, health, limiting, live, metrics, openapi, pages, sharing, signin,
};

/// A comment of a few pages fits; nothing we take is larger.
const BODY_LIMIT_BYTES: usize = 64 * 1024;
/// Longer than a command may wait for its answer.
const REQUEST_TIMEOUT: Duration = Duration::from_secs(30);
/// The whole process must end within 5 s; this leaves 2 s to the rooms that end after us.
const DRAIN_WITHIN: Duration = Duration::from_secs(3);

/// Why pages and interface are not served.
#[derive(Debug, thiserror::Error)]
pub enum ServeError {
    /// The tokens cannot be used.
    #[error(transparent)]
    Tokens(#[from] TokenError),
    /// The certificate cannot be used.
    #[error(transparent)]
    Certificate(#[from] CertificateError),
    /// The histograms cannot be made.
    #[error("the duration metrics cannot be made: {0}")]
    Durations(String),
    /// The listener has no address.
    #[error("the listening address cannot be read: {0}")]
    Address(#[source] std::io::Error),
    /// Accepting connections failed.
    #[error("serving pages failed: {0}")]
    Serving(#[source] std::io::Error),
}

/// Serves until `shutdown`, then ends within three seconds; encrypted where the settings name a
/// certificate.
///
/// # Errors
/// [`ServeError`] when the token file or the certificate cannot be used, or the listener fails.
pub async fn serve(
    listener: TcpListener,
    site: Site,
    shutdown: CancellationToken,
) -> Result<(), ServeError> {
    let local = listener.local_addr().map_err(ServeError::Address)?;
    let certificate = certificate::read(&site.settings.web)?;
    let app = App::new(site, local, shutdown.clone())?;
    let service = router(app).into_make_service_with_connect_info::<SocketAddr>();
    let end = shutdown.clone();
    let serving = async move {
        match certificate {
            Some(certificate) => encrypted(listener, certificate, service, end).await,
            None => {
                let plain = axum::serve(listener, service);
                plain.with_graceful_shutdown(end.cancelled_owned()).await
            }
        }
    };
    let bound = async {
        shutdown.cancelled().await;
        tokio::time::sleep(DRAIN_WITHIN).await;
    };
    tokio::select! {
        served = serving => served.map_err(ServeError::Serving),
        () = bound => {
            tracing::info!("some viewers were still connected at the end and were cut off");
            Ok(())
        }
    }
}

/// Serves over TLS until `end`.
async fn encrypted(
    listener: TcpListener,
    certificate: Arc<rustls::ServerConfig>,
    service: IntoMakeServiceWithConnectInfo<Router, SocketAddr>,
    end: CancellationToken,
) -> std::io::Result<()> {
    let config = RustlsConfig::from_config(certificate);
    let handle = axum_server::Handle::new();
    let server = axum_server::from_tcp_rustls(listener.into_std()?, config)?.handle(handle.clone());
    tokio::spawn(async move {
        end.cancelled().await;
        handle.graceful_shutdown(Some(DRAIN_WITHIN));
    });
    server.serve(service).await
}

/// All routes with their layers.
pub fn router(app: App) -> Router {
    let guarded = Router::new()
        .route("/", get(pages::plant::page))
        .route("/banks/{bank}", get(pages::bank::page))
        .route("/banks/{bank}/events", post(pages::line::enter))
        .route("/banks/{bank}/sources/{source}", get(pages::source::page))
        .route("/settings", get(pages::settings::page))
        .route("/about", get(pages::about::page))
        .route("/notices", get(pages::notices::list))
        .route("/notices/{id}", get(pages::notice::page))
        .route("/notices/{id}/{deed}", post(pages::deeds::enter))
        .route("/handover", get(pages::handover::page))
        .route("/api/v1/handover", get(pages::handover::data))
        .route("/live", get(live::stream))
        .route("/metrics", get(metrics::answer))
        .route("/api/v1/openapi.json", get(openapi::answer))
        .nest("/api/v1", api::router())
        .layer(from_fn_with_state(app.clone(), sharing::layer))
        .layer(from_fn_with_state(app.clone(), access::guard));
    let open = Router::new()
        .route("/sign-in", get(signin::form).post(signin::enter))
        .route("/sign-out", post(signin::leave))
        .route("/health/live", get(health::live))
        .route("/health/ready", get(health::ready))
        .route("/assets/{file}", get(assets::answer));
    guarded
        .merge(open)
        .layer(RequestBodyLimitLayer::new(BODY_LIMIT_BYTES))
        .layer(TimeoutLayer::with_status_code(
            StatusCode::REQUEST_TIMEOUT,
            REQUEST_TIMEOUT,
        ))
        .layer(from_fn_with_state(app.clone(), limiting::layer))
        .layer(from_fn_with_state(app.clone(), dress::dress))
        .layer(CompressionLayer::new())
        .layer(map_response(headers))
        .with_state(app)
}

/// Nothing but what we serve ourselves may load, frame or receive anything.
const POLICY: &str = "default-src 'none'; style-src 'self'; script-src 'self'; img-src data:; \
    connect-src 'self'; form-action 'self'; base-uri 'none'; frame-ancestors 'none'";

async fn headers(mut response: Response) -> Response {
    let all = response.headers_mut();
    for (name, text) in [
        (header::CONTENT_SECURITY_POLICY, POLICY),
        (header::X_CONTENT_TYPE_OPTIONS, "nosniff"),
        (header::X_FRAME_OPTIONS, "DENY"),
        (header::REFERRER_POLICY, "same-origin"),
        (
            HeaderName::from_static("cross-origin-opener-policy"),
            "same-origin",
        ),
        (
            HeaderName::from_static("cross-origin-resource-policy"),
            "same-origin",
        ),
        (
            HeaderName::from_static("permissions-policy"),
            "camera=(), microphone=(), geolocation=()",
        ),
    ] {
        all.insert(name, HeaderValue::from_static(text));
    }
    all.entry(header::CACHE_CONTROL)
        .or_insert(HeaderValue::from_static("no-store"));
    response
}
