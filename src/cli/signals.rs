//! Ctrl-C and the service manager's wish to end.

use tokio::signal::unix::{SignalKind, signal};
use tokio_util::sync::CancellationToken;
use tracing::{info, warn};

use super::exit::Exit;

/// The first SIGINT or SIGTERM ends cleanly, the second at once. Needs a runtime.
///
/// # Errors
/// When the system does not let us listen.
pub fn end_on_signal(shutdown: &CancellationToken) -> std::io::Result<()> {
    let mut interrupt = signal(SignalKind::interrupt())?;
    let mut terminate = signal(SignalKind::terminate())?;
    let shutdown = shutdown.clone();
    tokio::spawn(async move {
        loop {
            let name = tokio::select! {
                _ = interrupt.recv() => "SIGINT",
                _ = terminate.recv() => "SIGTERM",
            };
            if shutdown.is_cancelled() {
                warn!("{name} again: ending at once");
                std::process::exit(i32::from(Exit::Failed.code()));
            }
            info!("{name}: ending");
            shutdown.cancel();
        }
    });
    Ok(())
}
