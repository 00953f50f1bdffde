//! The room through its own door: requests to the router, answers checked.

mod access;
mod figures;
mod forms;
mod interface;
mod order;
mod pages;
mod server;

use std::net::SocketAddr;
use std::path::PathBuf;
use std::sync::Arc;

use axum::Router;
use axum::body::Body;
use axum::http::{HeaderMap, Request, StatusCode, header};
use tokio::sync::{mpsc, watch};
use tokio_util::sync::CancellationToken;
use tower::ServiceExt as _;

use crate::clock::Clock;
use crate::engine::{Command, Outcome, Snapshot, WindowView};
use crate::model::{LineChange, LineEvent, Value};
use crate::notice::{Manners, Notice, Said};
use crate::settings::{
    Broker, Origins, PlantSettings, Protocol, Settings, StoreSettings, WebSettings,
};

use super::durations::Durations;
use super::sample::{self, SampleHistory};
use super::server::router;
use super::site::{App, Ask, Site};

/// Where the bench pretends to listen.
#[derive(Clone, Copy)]
enum Listening {
    Loopback,
    Beyond,
}

/// A router over the sample plant, with an engine that acknowledges what there is.
struct Bench {
    router: Router,
    snapshot: watch::Sender<Arc<Snapshot>>,
    _folder: Option<tempfile::TempDir>,
}

/// An answer, read whole.
struct Answer {
    status: StatusCode,
    headers: HeaderMap,
    body: String,
}

impl Answer {
    fn json(&self) -> serde_json::Value {
        serde_json::from_str(&self.body).unwrap_or_else(|e| panic!("{e}: {}", self.body))
    }

    fn header(&self, name: &str) -> &str {
        self.headers
            .get(name)
            .and_then(|h| h.to_str().ok())
            .unwrap_or_default()
    }

    /// The cookie that a browser would send back.
    fn cookie(&self) -> String {
        self.header("set-cookie")
            .split(';')
            .next()
            .unwrap_or_default()
            .to_owned()
    }

    /// The hidden field of the first form on the page.
    fn field(&self) -> String {
        let (_, rest) = self
            .body
            .split_once("name=\"field\" value=\"")
            .expect("a form");
        rest.split('"').next().unwrap_or_default().to_owned()
    }
}

fn settings(token_file: Option<PathBuf>) -> Settings {
    Settings {
        plant: PlantSettings {
            name: "Quayside".into(),
            zone: jiff::tz::TimeZone::get("Europe/Lisbon").expect("bundled"),
            shifts: Vec::new(),
        },
        broker: Broker {
            host: "127.0.0.1".to_owned(),
            port: 1883,
            tls: false,
            client_id: "evenrow".to_owned(),
            protocol: Protocol::V5,
            user: None,
            password_file: None,
            ca_file: None,
            client_certificate_file: None,
            client_key_file: None,
            session_expiry_s: 600,
            receive_maximum: 100,
            most_bytes: 65_536,
            keep_alive_s: 30,
        },
        store: StoreSettings {
            folder: "nowhere".into(),
            keep_days: 90,
        },
        web: WebSettings {
            listen: SocketAddr::from(([127, 0, 0, 1], 0)),
            token_file,
            tls_in_front: false,
            certificate_file: None,
            key_file: None,
            address: None,
        },
        manners: Manners::default(),
        banks: Vec::new(),
        feeds: Vec::new(),
        outlets: Vec::new(),
        origins: Origins::default(),
    }
}

/// Answers like an engine: acknowledges open notices, gives some values per source.
async fn engine(mut asks: mpsc::Receiver<Ask>, snapshot: watch::Receiver<Arc<Snapshot>>) {
    while let Some(Ask { who, what, reply }) = asks.recv().await {
        let now = snapshot.borrow().clone();
        let outcome = match what {
            Command::Notice {
                notice,
                deed,
                comment,
            } => {
                let open = now
                    .banks
                    .iter()
                    .flat_map(|b| &b.open)
                    .find(|n| n.id == notice);
                match open {
                    None => Outcome::NotFound(format!("there is no notice \"{notice}\"")),
                    Some(found) => {
                        let mut notice = Notice::clone(found);
                        let at = sample::moment();
                        let said = Said {
                            by: who,
                            at,
                            comment,
                        };
                        match notice.act(deed, said, &now.plant.manners) {
                            Ok(_) => Outcome::Notice(Arc::new(notice)),
                            Err(why) => Outcome::Refused(why),
                        }
                    }
                }
            }
            Command::Line { change, reason, .. } => match change.source() {
                Some(source) if &**source == "none" => {
                    Outcome::NotFound("bank \"filler-2\" has no source \"none\"".to_owned())
                }
                _ if change == LineChange::Start => {
                    Outcome::Refused("the line runs already".to_owned())
                }
                _ => Outcome::Line(LineEvent {
                    at: sample::moment(),
                    by: who,
                    change,
                    reason,
                }),
            },
            Command::Evidence { .. } => Outcome::Refused("the sample keeps no values".to_owned()),
            Command::Windows { bank } => {
                let sources = now.banks.get(bank.index()).map(|b| b.sources.clone());
                let window = |name: crate::model::Name| WindowView {
                    values: sample::values(&name),
                    source: name,
                    origin: Value::parse("503.0").expect("a value"),
                };
                let sources = sources.unwrap_or_default().into_iter();
                Outcome::Windows(sources.map(|s| window(s.name)).collect())
            }
        };
        // The one who asked may have gone.
        let _ = reply.send(outcome);
    }
}

fn site(settings: Settings) -> (Site, watch::Sender<Arc<Snapshot>>) {
    let snapshot = sample::snapshot();
    let history = Arc::new(SampleHistory::new(snapshot.clone()));
    let (publish, published) = watch::channel(Arc::new(snapshot));
    let (asks, asked) = mpsc::channel(8);
    tokio::spawn(engine(asked, published.clone()));
    let site = Site {
        settings: Arc::new(settings),
        snapshot: published,
        history,
        asks,
        durations: Durations::new().expect("histograms"),
        clock: Clock::manual(sample::moment()),
    };
    (site, publish)
}

impl Bench {
    fn new(tokens: Option<&str>, listening: Listening) -> Self {
        let folder = tokens.map(|text| {
            let folder = tempfile::tempdir().expect("a folder");
            std::fs::write(folder.path().join("tokens"), text).expect("written");
            folder
        });
        let file = folder.as_ref().map(|f| f.path().join("tokens"));
        let (site, snapshot) = site(settings(file));
        let local = match listening {
            Listening::Loopback => SocketAddr::from(([127, 0, 0, 1], 7310)),
            Listening::Beyond => SocketAddr::from(([192, 0, 2, 7], 7310)),
        };
        let app = App::new(site, local, CancellationToken::new()).expect("good tokens");
        Self {
            router: router(app),
            snapshot,
            _folder: folder,
        }
    }

    async fn send(&self, request: Request<Body>) -> Answer {
        let answer = self
            .router
            .clone()
            .oneshot(request)
            .await
            .expect("infallible");
        let (parts, body) = answer.into_parts();
        let bytes = axum::body::to_bytes(body, usize::MAX)
            .await
            .expect("a body");
        Answer {
            status: parts.status,
            headers: parts.headers,
            body: String::from_utf8(bytes.to_vec()).expect("text"),
        }
    }

    async fn get(&self, path: &str) -> Answer {
        self.send(request("GET", path, &[], "")).await
    }

    /// As a browser asks.
    async fn page(&self, path: &str) -> Answer {
        self.send(request("GET", path, &[("accept", "text/html")], ""))
            .await
    }

    /// Signs in and gives the session's cookie.
    async fn sign_in(&self, token: &str) -> String {
        let form = self.page("/sign-in").await;
        let body = format!("token={token}&next=%2F&field={}", form.field());
        let cookie = form.cookie();
        let entered = self
            .send(request(
                "POST",
                "/sign-in",
                &[("cookie", &cookie), FORM],
                &body,
            ))
            .await;
        assert_eq!(entered.status, StatusCode::SEE_OTHER, "{}", entered.body);
        entered.cookie()
    }
}

const FORM: (&str, &str) = ("content-type", "application/x-www-form-urlencoded");
const JSON: (&str, &str) = ("content-type", "application/json");

fn request(method: &str, path: &str, headers: &[(&str, &str)], body: &str) -> Request<Body> {
    let mut builder = Request::builder()
        .method(method)
        .uri(path)
        .header(header::HOST, "127.0.0.1:7310");
    for (name, text) in headers {
        builder = builder.header(*name, *text);
    }
    builder
        .body(Body::from(body.to_owned()))
        .expect("a good request")
}
