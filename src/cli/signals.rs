//! Ctrl-C and the service manager's wish to end.

use tokio::signal::unix::{SignalKind, signal};
use tokio_util::sync::CancellationToken;
use tracing::info;

/// SIGINT or SIGTERM ends cleanly. Further ones change nothing: the end takes at most five seconds, and
/// some senders signal both the process and its group. Needs a runtime.
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
            if !shutdown.is_cancelled() {
                info!("{name}: ending");
                shutdown.cancel();
            }
        }
    });
    Ok(())
}
