//! `evenrow watch`: the daemon, until SIGINT or SIGTERM.
//!
//! Messages go to stderr. How much is told is set as usual with `RUST_LOG`.

use std::sync::Arc;
use std::time::Duration;

use tokio::net::TcpListener;
use tokio_util::sync::CancellationToken;
use tracing::{error, info};

use crate::clock::Clock;
use crate::daemon;
use crate::settings::Settings;

use super::args::WatchArgs;
use super::configuration;
use super::exit::Exit;
use super::{log, signals};

/// Threads that read the history or the disk may be in the middle of something at the end.
const STRAGGLERS: Duration = Duration::from_millis(200);

/// Runs the command.
pub fn run(args: WatchArgs) -> Exit {
    let WatchArgs { config, log } = args;
    let settings = match configuration::read(&config) {
        Ok(settings) => settings,
        Err(exit) => return exit,
    };
    log::start(log);
    let runtime = match tokio::runtime::Runtime::new() {
        Ok(runtime) => runtime,
        Err(e) => {
            error!("the runtime cannot be started: {e}");
            return Exit::Failed;
        }
    };
    let exit = runtime.block_on(watch(Arc::new(settings)));
    runtime.shutdown_timeout(STRAGGLERS);
    exit
}

async fn watch(settings: Arc<Settings>) -> Exit {
    let listen = settings.web.listen;
    let listener = match TcpListener::bind(listen).await {
        Ok(listener) => listener,
        Err(e) => {
            error!("pages cannot be served on {listen} (web.listen): {e}");
            return Exit::Failed;
        }
    };
    let shutdown = CancellationToken::new();
    if let Err(e) = signals::end_on_signal(&shutdown) {
        error!("the signals to end cannot be received: {e}");
        return Exit::Failed;
    }
    let (plant, pages) = (&settings.plant.name, settings.pages());
    info!("watching plant {plant}, pages on {pages}");
    match daemon::run(settings, Clock::System, listener, shutdown).await {
        Ok(()) => Exit::Done,
        Err(e) => {
            error!("{e}");
            Exit::Failed
        }
    }
}
