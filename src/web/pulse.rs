//! The beat in which viewers hear of changes: the present, passed on no more often than people read.
//!
//! What must hold: all viewers hear of a change at the same beat, so that one rendering serves them
//! all (see `kept`); the first change after a quiet time goes out at once.

use std::sync::Arc;
use std::time::Duration;

use tokio::sync::watch;
use tokio_util::sync::CancellationToken;

use crate::engine::Snapshot;

/// People read slower than measurements arrive.
const BEAT: Duration = Duration::from_secs(2);
/// A page of many banks is heavy for the browser too: for each so many banks a beat is a second longer.
const BANKS_PER_SECOND: usize = 250;

/// Passes the present on until the engine ends or the shutdown comes.
pub fn start(
    mut snapshot: watch::Receiver<Arc<Snapshot>>,
    shutdown: CancellationToken,
) -> watch::Receiver<Arc<Snapshot>> {
    let (tell, told) = watch::channel(snapshot.borrow_and_update().clone());
    tokio::spawn(async move {
        loop {
            tokio::select! {
                () = shutdown.cancelled() => return,
                changed = snapshot.changed() => if changed.is_err() { return },
            }
            let now = snapshot.borrow_and_update().clone();
            let longer = now.banks.len() / BANKS_PER_SECOND;
            tell.send_replace(now);
            let pause = BEAT + Duration::from_secs(u64::try_from(longer).unwrap_or(0));
            tokio::select! {
                () = shutdown.cancelled() => return,
                () = tokio::time::sleep(pause) => {}
            }
        }
    });
    told
}
