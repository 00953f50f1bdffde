//! Who runs, by name. The first task that ends although nobody asked for it stops all the others and
//! is named; after that, and after the end was asked for, everything has a grace period.

use std::collections::HashMap;
use std::fmt::Display;
use std::future::Future;
use std::time::Duration;

use tokio::task::{Id, JoinError, JoinSet};
use tokio_util::sync::CancellationToken;
use tracing::{error, warn};

use crate::model::Name;

use super::RunError;

/// The whole end takes less than five seconds; the rest is for the process itself.
const GRACE: Duration = Duration::from_millis(4_500);

/// The running tasks.
pub(super) struct Tasks {
    set: JoinSet<Result<(), RunError>>,
    names: HashMap<Id, Name>,
    end: CancellationToken,
    grace: Duration,
}

impl Tasks {
    /// No task yet; `end` is the wish to end, which the tasks are given too.
    pub(super) fn new(end: CancellationToken) -> Self {
        Self {
            set: JoinSet::new(),
            names: HashMap::new(),
            end,
            grace: GRACE,
        }
    }

    /// The wish to end.
    pub(super) fn end(&self) -> CancellationToken {
        self.end.clone()
    }

    /// Starts a task.
    pub(super) fn start<E: Display + Send + 'static>(
        &mut self,
        name: impl Into<Name>,
        task: impl Future<Output = Result<(), E>> + Send + 'static,
    ) {
        let name: Name = name.into();
        let own = name.clone();
        let named = async move {
            task.await.map_err(|e| RunError::Task {
                name: own,
                why: e.to_string(),
            })
        };
        let handle = self.set.spawn(named);
        self.names.insert(handle.id(), name);
    }

    /// Starts a task on a thread of its own.
    pub(super) fn start_blocking(
        &mut self,
        name: &'static str,
        task: impl FnOnce() -> Result<(), RunError> + Send + 'static,
    ) {
        let handle = self.set.spawn_blocking(task);
        self.names.insert(handle.id(), name.into());
    }

    /// Waits until all have ended, and says why when they were not asked to.
    ///
    /// # Errors
    /// The first unexpected end, or the first failure during the end.
    pub(super) async fn see_to_the_end(mut self) -> Result<(), RunError> {
        let mut first = Ok(());
        let end = self.end.clone();
        tokio::select! {
            () = end.cancelled() => {}
            Some(ended) = self.set.join_next_with_id() => {
                first = self.unexpected(ended);
                self.end.cancel();
            }
        }
        let all = tokio::time::timeout(self.grace, async {
            while let Some(ended) = self.set.join_next_with_id().await {
                let after = self.judge(ended);
                if first.is_ok() {
                    first = after;
                }
            }
        });
        if all.await.is_err() {
            let late: Vec<&str> = self.names.values().map(|n| &**n).collect();
            warn!(
                "cut off at the end, since they took too long: {}",
                late.join(", ")
            );
            self.set.abort_all();
        }
        first
    }

    /// A task that ended before the end was asked for.
    fn unexpected(
        &mut self,
        ended: Result<(Id, Result<(), RunError>), JoinError>,
    ) -> Result<(), RunError> {
        let asked_for = self.end.is_cancelled();
        let name = self.name(&ended);
        match self.judge(ended) {
            Ok(()) if asked_for => Ok(()),
            Ok(()) => {
                let why = "it was done although nobody asked for the end".to_owned();
                Err(RunError::Task { name, why })
            }
            failed => failed,
        }
    }

    fn name(&self, ended: &Result<(Id, Result<(), RunError>), JoinError>) -> Name {
        let id = match ended {
            Ok((id, _)) => *id,
            Err(e) => e.id(),
        };
        let known = self.names.get(&id).cloned();
        known.unwrap_or_else(|| "without a name".into())
    }

    /// How a task ended; a panic is a failure.
    fn judge(
        &mut self,
        ended: Result<(Id, Result<(), RunError>), JoinError>,
    ) -> Result<(), RunError> {
        let name = self.name(&ended);
        match ended {
            Ok((id, how)) => {
                self.names.remove(&id);
                how
            }
            Err(e) => {
                self.names.remove(&e.id());
                error!("task \"{name}\" broke off: {e}");
                let why = e.to_string();
                Err(RunError::Task { name, why })
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    async fn until(end: CancellationToken) -> Result<(), String> {
        end.cancelled().await;
        Ok(())
    }

    #[tokio::test]
    async fn an_end_that_was_asked_for_is_none_to_speak_of() {
        let mut tasks = Tasks::new(CancellationToken::new());
        let end = tasks.end();
        tasks.start("one", until(end.clone()));
        tasks.start("two", until(end.clone()));
        end.cancel();
        assert!(tasks.see_to_the_end().await.is_ok());
    }

    #[tokio::test]
    async fn the_first_unexpected_end_stops_all_and_is_named() {
        for (how, said) in [
            (Ok(()), "nobody asked"),
            (Err("the moon is full".to_owned()), "the moon is full"),
        ] {
            let mut tasks = Tasks::new(CancellationToken::new());
            let end = tasks.end();
            tasks.start("steady", until(end.clone()));
            tasks.start("fickle", std::future::ready(how));
            let ended = tasks.see_to_the_end().await.unwrap_err().to_string();
            assert!(ended.contains("fickle") && ended.contains(said), "{ended}");
            assert!(end.is_cancelled());
        }
    }

    #[tokio::test]
    async fn a_panic_is_a_failure_with_a_name() {
        let mut tasks = Tasks::new(CancellationToken::new());
        tasks.start_blocking("engine", || std::panic::resume_unwind(Box::new("gone")));
        let ended = tasks.see_to_the_end().await.unwrap_err().to_string();
        assert!(ended.contains("engine"), "{ended}");
    }

    #[tokio::test]
    async fn a_task_that_hangs_is_cut_off() {
        let mut tasks = Tasks::new(CancellationToken::new());
        tasks.grace = Duration::from_millis(50);
        tasks.start("deaf", std::future::pending::<Result<(), String>>());
        tasks.end().cancel();
        assert!(tasks.see_to_the_end().await.is_ok());
    }
}
