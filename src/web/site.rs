//! What the daemon hands over, and what every handler shares.
//!
//! Owns the way of a command: out through a bounded channel, back within a bounded time. What must
//! hold: a request never waits for ever, and never blocks the runtime on the store.

use std::collections::BTreeMap;
use std::net::SocketAddr;
use std::sync::Arc;
use std::time::Duration;

use tokio::sync::{mpsc, oneshot, watch};
use tokio_util::sync::CancellationToken;

use crate::clock::Clock;
use crate::engine::{BankView, Command, History, HistoryError, Outcome, Snapshot};
use crate::model::{BankIx, Name};
use crate::notice::Notice;
use crate::settings::Settings;

use super::days::{Day, Days};
use super::durations::Durations;
use super::format::Times;
use super::kept::Kept;
use super::limits::Limits;
use super::problem::Problem;
use super::pulse;
use super::sessions::Sessions;
use super::tokens::{TokenError, Tokens};

/// A command waits this long for its answer: the engine answers within a turn, and a turn waits for
/// a disk at worst.
const ANSWER_WITHIN: Duration = Duration::from_secs(10);

/// Everything that pages and interfaces are made from.
#[derive(Clone)]
pub struct Site {
    /// The settings as used.
    pub settings: Arc<Settings>,
    /// The present.
    pub snapshot: watch::Receiver<Arc<Snapshot>>,
    /// The past.
    pub history: Arc<dyn History>,
    /// The way to the engine.
    pub asks: mpsc::Sender<Ask>,
    /// Durations for the metrics.
    pub durations: Durations,
    /// The time.
    pub clock: Clock,
}

/// A command on its way to the engine.
#[derive(Debug)]
pub struct Ask {
    /// The person's name as given.
    pub who: Name,
    /// What is asked.
    pub what: Command,
    /// Where the answer goes.
    pub reply: oneshot::Sender<Outcome>,
}

/// Whether only this machine can reach us.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Reach {
    /// Listening on a loopback address.
    Loopback,
    /// Other machines can connect.
    Beyond,
}

/// What every handler shares; cheap to clone.
#[derive(Clone)]
pub struct App {
    /// From the daemon.
    pub site: Site,
    /// The tokens, when there is a token file.
    pub tokens: Option<Arc<Tokens>>,
    /// Who is signed in.
    pub sessions: Arc<Sessions>,
    /// Who can reach us.
    pub reach: Reach,
    /// Name of the session cookie; the port keeps two daemons on one host apart.
    pub cookie: Arc<str>,
    /// Ends live streams.
    pub shutdown: CancellationToken,
    /// The present, at the beat in which viewers hear of it.
    pub pulse: watch::Receiver<Arc<Snapshot>>,
    /// Pages that are made once for many.
    pub kept: Arc<Kept>,
    /// The last day of every bank.
    pub days: Arc<Days>,
    /// How much one address may ask.
    pub limits: Arc<Limits>,
}

impl App {
    /// For a listener at `local`; starts the beat in which viewers hear of changes.
    ///
    /// # Errors
    /// When the token file cannot be used.
    pub fn new(
        site: Site,
        local: SocketAddr,
        shutdown: CancellationToken,
    ) -> Result<Self, TokenError> {
        let file = site.settings.web.token_file.as_deref();
        let tokens = file.map(Tokens::read).transpose()?.map(Arc::new);
        Ok(Self {
            tokens,
            sessions: Arc::default(),
            reach: if local.ip().is_loopback() {
                Reach::Loopback
            } else {
                Reach::Beyond
            },
            cookie: format!("evenrow_{}", local.port()).into(),
            pulse: pulse::start(site.snapshot.clone(), shutdown.clone()),
            kept: Arc::default(),
            days: Arc::default(),
            limits: Arc::default(),
            shutdown,
            site,
        })
    }

    /// The present.
    pub fn now(&self) -> Arc<Snapshot> {
        self.site.snapshot.borrow().clone()
    }

    /// Times in the plant's zone, seen from now.
    pub fn times(&self, snapshot: &Snapshot) -> Times {
        Times {
            zone: snapshot.plant.zone.clone(),
            now: self.site.clock.now(),
        }
    }

    /// Sends a command and waits for its answer.
    ///
    /// # Errors
    /// 503 when the engine takes no command or gives no answer in time.
    pub async fn ask(&self, who: Name, what: Command) -> Result<Outcome, Problem> {
        let (reply, answer) = oneshot::channel();
        let ask = Ask { who, what, reply };
        let way = async {
            self.site.asks.send(ask).await.ok()?;
            answer.await.ok()
        };
        match tokio::time::timeout(ANSWER_WITHIN, way).await {
            Ok(Some(outcome)) => Ok(outcome),
            Ok(None) => Err(Problem::unavailable(
                "evenrow is stopping and takes no commands",
            )),
            Err(_) => Err(Problem::unavailable(
                "no answer within 10 seconds; the store may be in trouble, see /health/ready, \
                 then try again",
            )),
        }
    }

    /// Reads the past off the runtime's threads.
    ///
    /// # Errors
    /// 503 when the store cannot be read.
    pub async fn history<T: Send + 'static>(
        &self,
        read: impl FnOnce(&dyn History) -> Result<T, HistoryError> + Send + 'static,
    ) -> Result<T, Problem> {
        let history = self.site.history.clone();
        let done = tokio::task::spawn_blocking(move || read(history.as_ref())).await;
        match done {
            Ok(Ok(read)) => Ok(read),
            Ok(Err(error)) => Err(Problem::unavailable(&error.to_string())),
            Err(error) => {
                tracing::error!(%error, "reading the history ended early");
                Err(Problem::unavailable("reading the history ended early"))
            }
        }
    }

    /// The last day of every bank.
    ///
    /// # Errors
    /// 503 when the store cannot be read.
    pub async fn last_day(
        &self,
        snapshot: &Arc<Snapshot>,
    ) -> Result<Arc<BTreeMap<Name, Day>>, Problem> {
        let now = self.site.clock.now();
        let read = self.days.of(&self.site.history, snapshot, now).await;
        read.map_err(|error| Problem::unavailable(&error.to_string()))
    }

    /// A notice as it stands now: from the snapshot while it is open, else from the past.
    ///
    /// # Errors
    /// 404 when there is none, 503 when the store cannot be read.
    pub async fn notice(&self, snapshot: &Snapshot, id: &str) -> Result<Arc<Notice>, Problem> {
        let mut open = snapshot.banks.iter().flat_map(|b| &b.open);
        if let Some(notice) = open.find(|n| &*n.id == id) {
            return Ok(notice.clone());
        }
        let wanted = id.to_owned();
        let kept = self.history(move |h| h.notice(&wanted)).await?;
        kept.map(Arc::new)
            .ok_or_else(|| Problem::not_found(&format!("there is no notice \"{id}\"")))
    }
}

/// A bank of the snapshot by its name.
///
/// # Errors
/// 404 when there is none.
pub fn bank<'a>(
    snapshot: &'a Snapshot,
    name: &str,
) -> Result<(BankIx, &'a Arc<BankView>), Problem> {
    let found = snapshot
        .banks
        .iter()
        .zip(0_u16..)
        .find(|(b, _)| &*b.bank.name == name);
    found
        .map(|(bank, at)| (BankIx(at), bank))
        .ok_or_else(|| Problem::not_found(&format!("there is no bank \"{name}\"")))
}
