//! Puts the demo together: broker, daemon, line, bulletin; prints where to look and what will
//! happen; ends all of it.
//!
//! What must hold: whatever the way out, the parts are told to stop, the daemon is given its grace
//! period, and a temporary folder is removed. Deliberately absent: what any part does.

use std::io::{self, Write};
use std::net::SocketAddr;
use std::path::Path;
use std::sync::Arc;
use std::time::Duration;

use jiff::tz::TimeZone;
use rumqttc::{ClientError, ConnectionError, Event, EventLoop, Packet, QoS};
use tokio::net::TcpListener;
use tokio::sync::watch;
use tokio::task::JoinHandle;
use tokio::time::{sleep, timeout};
use tokio_util::sync::CancellationToken;

use crate::cli::args::DemoArgs;
use crate::cli::exit::Exit;
use crate::cli::log;
use crate::cli::signals::end_on_signal;
use crate::clock::Clock;
use crate::daemon;
use crate::settings::{self, Faults, Ink, Settings};

use super::broker::{self, BrokerError};
use super::bulletin::Bulletin;
use super::filler::{Filler, HEADS};
use super::line::{self, LineError, Schedule};
use super::page;
use super::scene::{self, Scene, SceneError};
use super::story::{self, BACKLOG_CYCLES, CYCLE_US};

/// The filler that everybody sees; any number will do.
const SEED: u64 = 2_026;
/// How long the daemon may take to be ready.
const READY_WITHIN: Duration = Duration::from_secs(30);
/// How long the backlog may take; it is a few seconds on a small machine.
const BACKLOG_WITHIN: Duration = Duration::from_secs(180);
/// How long the daemon may take to end.
const GRACE: Duration = Duration::from_secs(4);
/// Cycles between the page's address and the story's start.
const LEAD_IN_CYCLES: u64 = 4;

/// Why the demo ended early.
#[derive(Debug, thiserror::Error)]
enum DemoError {
    #[error("the speed is too high: {0} and less can be shown")]
    TooFast(f64),
    #[error("no runtime: {0}")]
    Runtime(io::Error),
    #[error("the address {address} cannot be listened on: {source}")]
    Listen {
        address: SocketAddr,
        source: io::Error,
    },
    #[error(transparent)]
    Scene(#[from] SceneError),
    #[error(transparent)]
    Broker(#[from] BrokerError),
    #[error("the demo's own configuration is faulty:\n{0}")]
    Configuration(String),
    #[error("the connection to the demo's broker failed: {0}")]
    Connection(Box<ConnectionError>),
    #[error(transparent)]
    Line(#[from] LineError),
    #[error("the notices could not be subscribed to: {0}")]
    Subscribe(Box<ClientError>),
    #[error("the daemon ended early: {0}")]
    Daemon(String),
    #[error("{0} ended unexpectedly")]
    Ended(&'static str),
    #[error("the daemon was not ready within {} s", READY_WITHIN.as_secs())]
    NotReady,
    #[error("the signals to end cannot be received: {0}")]
    Signal(io::Error),
}

/// Runs the demo until ctrl-c.
pub fn run(args: DemoArgs) -> Exit {
    log::start_demo();
    let ended = tokio::runtime::Builder::new_multi_thread()
        .enable_all()
        .build()
        .map_err(DemoError::Runtime)
        .and_then(|runtime| {
            let result = runtime.block_on(perform(&args));
            // The embedded broker's tasks never end by themselves.
            runtime.shutdown_timeout(Duration::from_millis(200));
            result
        });
    match ended {
        Ok(()) => Exit::Done,
        Err(error) => {
            complain(&error.to_string());
            match error {
                DemoError::TooFast(_) => Exit::Usage,
                _ => Exit::Failed,
            }
        }
    }
}

/// Sets up, plays, clears away.
async fn perform(args: &DemoArgs) -> Result<(), DemoError> {
    let cycle_us = cycle_us(args.speed)?;
    let scene = Scene::set_up(args.folder.as_deref())?;
    let address = args.listen;
    let listen = |source| DemoError::Listen { address, source };
    let listener = TcpListener::bind(address).await.map_err(listen)?;
    let page = listener.local_addr().map_err(listen)?;
    let broker = broker::start().await?;
    let file = scene.configure(broker, page, args.speed)?;
    let settings = Arc::new(load(&file)?);

    let shutdown = CancellationToken::new();
    end_on_signal(&shutdown).map_err(DemoError::Signal)?;
    let mut daemon = Daemon::start(Arc::clone(&settings), listener, shutdown.clone());
    let stage = Stage {
        settings,
        scene: &scene,
        broker,
        page,
        cycle_us,
        shutdown: shutdown.clone(),
    };
    let played = tokio::select! {
        biased;
        () = shutdown.cancelled() => Ok(()),
        result = stage.play() => result,
        error = daemon.early_end() => return Err(error),
    };
    shutdown.cancel();
    played.and(daemon.end().await)
}

/// How long a cycle is at a speed.
fn cycle_us(speed: f64) -> Result<i64, DemoError> {
    let cycle_us = (CYCLE_US as f64 / speed).round();
    if cycle_us < Schedule::SHORTEST_CYCLE_US as f64 {
        let most = CYCLE_US as f64 / Schedule::SHORTEST_CYCLE_US as f64;
        return Err(DemoError::TooFast(most));
    }
    Ok(cycle_us as i64)
}

/// The process's environment is left out: what it says of a plant has no place in the demo.
fn load(file: &Path) -> Result<Settings, DemoError> {
    let faulty = |faults: Faults| DemoError::Configuration(faults.report(Ink::Plain));
    settings::load(file, []).map_err(faulty)
}

/// The daemon's task.
struct Daemon(JoinHandle<Result<(), String>>);

impl Daemon {
    fn start(settings: Arc<Settings>, listener: TcpListener, shutdown: CancellationToken) -> Self {
        let work = async move {
            let ended = daemon::run(settings, Clock::System, listener, shutdown).await;
            ended.map_err(|error| error.to_string())
        };
        Self(tokio::spawn(work))
    }

    /// Comes only when the daemon ends without being told to.
    async fn early_end(&mut self) -> DemoError {
        match (&mut self.0).await {
            Ok(Ok(())) => DemoError::Ended("the daemon"),
            Ok(Err(why)) => DemoError::Daemon(why),
            Err(join) => DemoError::Daemon(join.to_string()),
        }
    }

    /// Waits for the end that it has been told to make.
    async fn end(self) -> Result<(), DemoError> {
        match timeout(GRACE, self.0).await {
            Ok(Ok(Ok(()))) => Ok(()),
            Ok(Ok(Err(why))) => Err(DemoError::Daemon(why)),
            Ok(Err(join)) => Err(DemoError::Daemon(join.to_string())),
            Err(_) => Err(DemoError::Daemon(format!(
                "still busy {} s after it was told to end",
                GRACE.as_secs()
            ))),
        }
    }
}

/// Everything the story needs.
struct Stage<'a> {
    settings: Arc<Settings>,
    scene: &'a Scene,
    broker: SocketAddr,
    page: SocketAddr,
    cycle_us: i64,
    shutdown: CancellationToken,
}

impl Stage<'_> {
    /// Runs line and bulletin, and tells the story once the backlog is in.
    async fn play(&self) -> Result<(), DemoError> {
        self.wait_until_ready().await?;
        let clock = Clock::System;
        let schedule = Schedule::running_for(BACKLOG_CYCLES, self.cycle_us, clock.now());
        let (filler, seen) = watch::channel(Arc::new(Filler::new(SEED)));
        let (client, line_loop) = line::connect("quayside-filler-2", self.broker);
        let line = line::run(client, schedule, seen, clock.clone(), self.shutdown.clone());
        tokio::select! {
            result = self.tell(schedule, &clock, &filler) => result,
            result = line => result.map_err(DemoError::from),
            result = keep_going(line_loop) => result,
            result = self.bulletin(&clock) => result,
        }
    }

    async fn wait_until_ready(&self) -> Result<(), DemoError> {
        let ready = async {
            while !page::is_ready(self.page).await {
                sleep(Duration::from_millis(50)).await;
            }
        };
        let waited = timeout(READY_WITHIN, ready).await;
        waited.map_err(|_| DemoError::NotReady)
    }

    /// Waits for the backlog, prints address and timetable, lets the troubles begin, and then has
    /// nothing more to do.
    async fn tell(
        &self,
        schedule: Schedule,
        clock: &Clock,
        filler: &watch::Sender<Arc<Filler>>,
    ) -> Result<(), DemoError> {
        complain("The line's last half hour is being taken in …");
        self.wait_for_backlog().await;
        let start = schedule.next_cycle(clock.now()) + LEAD_IN_CYCLES;
        let troubled = Filler::new(SEED).with_spells(story::spells(start));
        filler.send_replace(Arc::new(troubled));
        let zone = &self.settings.plant.zone;
        self.introduce();
        for act in story::timetable(schedule.due(start), self.cycle_us, zone) {
            say(&format!("  {act}"));
        }
        say("\nCtrl-C ends the demo.\n");
        self.adjust(schedule, start, clock).await;
        std::future::pending().await
    }

    /// What a fitter would do after the notice: adjusts the head (the line's troubles end then), and
    /// enters it on the bank's page.
    async fn adjust(&self, schedule: Schedule, start: u64, clock: &Clock) {
        let (cycles, entry) = story::adjustment();
        let at = schedule.due(start + cycles);
        let left = at.us_since(clock.now()).max(0).unsigned_abs();
        sleep(Duration::from_micros(left)).await;
        let path = format!("/api/v1/banks/{}/events", scene::BANK);
        let entered = page::enter(self.page, &path, &self.scene.token, &entry).await;
        let zone = &self.settings.plant.zone;
        let now = story::clock_time(clock.now(), zone);
        if entered {
            say(&format!("{now}  entered: {}", story::entered_words()));
        } else {
            complain("The adjustment could not be entered; enter it on the bank's page.");
        }
    }

    async fn wait_for_backlog(&self) {
        let wanted = BACKLOG_CYCLES * HEADS as u64;
        let taken_in = async {
            while page::taken_in(self.page).await.is_none_or(|n| n < wanted) {
                sleep(Duration::from_millis(200)).await;
            }
        };
        if timeout(BACKLOG_WITHIN, taken_in).await.is_err() {
            complain("The backlog is still being taken in; the story starts nevertheless.");
        }
    }

    fn introduce(&self) {
        say(&format!(
            "The page:   {}\n\
             The token:  {}  (asked for when you acknowledge a notice)\n\
             The broker: mqtt://{}  (topics quayside/# and evenrow/#)\n\n\
             Filler 2 of Quayside, an invented plant: {HEADS} heads, run fast. What will happen:",
            self.settings.pages(),
            self.scene.token,
            self.broker
        ));
    }

    /// Listens to the notices like any receiver and prints what happens to them.
    async fn bulletin(&self, clock: &Clock) -> Result<(), DemoError> {
        let (client, mut events) = line::connect("quayside-bulletin", self.broker);
        let zone: &TimeZone = &self.settings.plant.zone;
        let mut bulletin = Bulletin::default();
        loop {
            match events.poll().await.map_err(lost)? {
                Event::Incoming(Packet::ConnAck(_)) => {
                    // Never awaited where the connection is polled: the channel is empty now.
                    let asked = client.try_subscribe("evenrow/+/notices/#", QoS::AtLeastOnce);
                    asked.map_err(|e| DemoError::Subscribe(Box::new(e)))?;
                }
                Event::Incoming(Packet::Publish(message)) => {
                    if let Some(line) = bulletin.line(&message.payload) {
                        say(&format!("{}  {line}", story::clock_time(clock.now(), zone)));
                    }
                }
                _ => {}
            }
        }
    }
}

/// Keeps a connection going.
async fn keep_going(mut events: EventLoop) -> Result<(), DemoError> {
    loop {
        events.poll().await.map_err(lost)?;
    }
}

fn lost(error: ConnectionError) -> DemoError {
    DemoError::Connection(Box::new(error))
}

/// To the person at the terminal; a closed terminal is no reason to stop the line.
fn say(text: &str) {
    let _ = writeln!(io::stdout(), "{text}");
}

/// Messages and progress.
fn complain(text: &str) {
    let _ = writeln!(io::stderr(), "{text}");
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_speed_shortens_the_cycle_down_to_a_limit() {
        assert_eq!(cycle_us(1.0).ok(), Some(500_000));
        assert_eq!(cycle_us(0.5).ok(), Some(1_000_000));
        assert_eq!(cycle_us(20.0).ok(), Some(25_000));
        let error = cycle_us(21.0).expect_err("too fast");
        assert_eq!(
            error.to_string(),
            "the speed is too high: 20 and less can be shown"
        );
    }
}
