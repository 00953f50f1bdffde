//! Two connections as one for whoever takes the measurements.
//!
//! What must hold: the condition told is the worse of both, so that the one that works does not hide the
//! one that does not.

use tokio::sync::mpsc::{Receiver, Sender};

use crate::engine::Condition;
use crate::intake::arrival::Receipt;

use super::FromBroker;

/// Hands on what both bring until both have ended or nobody takes it.
pub(super) async fn merge(
    mut one: Receiver<FromBroker>,
    mut other: Receiver<FromBroker>,
    out: Sender<FromBroker>,
) {
    let mut conditions = [Condition::Starting, Condition::Starting];
    let mut told = None;
    let mut open = [true, true];
    while open != [false, false] {
        let (from, next) = tokio::select! {
            next = one.recv(), if open[0] => (0, next),
            next = other.recv(), if open[1] => (1, next),
            () = out.closed() => return,
        };
        let next = match next {
            Some(FromBroker::Condition(condition)) => {
                conditions[from] = condition;
                let [a, b] = conditions.clone();
                let both = worse(a, b);
                if told.as_ref() == Some(&both) {
                    continue;
                }
                told = Some(both.clone());
                FromBroker::Condition(both)
            }
            Some(arrival) => arrival,
            None => {
                open[from] = false;
                continue;
            }
        };
        if out.send(next).await.is_err() {
            return;
        }
    }
}

/// The condition of two connections together.
fn worse(a: Condition, b: Condition) -> Condition {
    match (a, b) {
        (Condition::Trouble(a), Condition::Trouble(b)) if a == b => Condition::Trouble(a),
        (Condition::Trouble(a), Condition::Trouble(b)) => Condition::Trouble(format!("{a}; {b}")),
        (trouble @ Condition::Trouble(_), _) | (_, trouble @ Condition::Trouble(_)) => trouble,
        (Condition::Starting, _) | (_, Condition::Starting) => Condition::Starting,
        (noted @ Condition::Noted(_), _) | (_, noted) => noted,
    }
}

/// Takes receipts where nothing is to be acknowledged.
pub(super) async fn let_go(mut receipts: Receiver<Vec<Receipt>>) {
    while receipts.recv().await.is_some() {}
}

#[cfg(test)]
mod tests {
    use super::*;

    #[tokio::test]
    async fn the_worse_condition_is_told_once() {
        let (to_one, one) = tokio::sync::mpsc::channel(8);
        let (to_other, other) = tokio::sync::mpsc::channel(8);
        let (out, mut taken) = tokio::sync::mpsc::channel(8);
        let task = tokio::spawn(merge(one, other, out));
        let trouble = |words: &str| Condition::Trouble(words.to_owned());
        for (sender, said, expected) in [
            (&to_one, Condition::Well, Condition::Starting),
            (&to_other, Condition::Well, Condition::Well),
            (&to_other, trouble("b"), trouble("b")),
            (&to_one, trouble("a"), trouble("a; b")),
            (&to_other, Condition::Well, trouble("a")),
            (&to_one, Condition::Well, Condition::Well),
        ] {
            sender
                .send(FromBroker::Condition(said.clone()))
                .await
                .expect("taken");
            let got = taken.recv().await;
            assert_eq!(got, Some(FromBroker::Condition(expected)), "{said:?}");
        }
        drop((to_one, to_other));
        assert_eq!(taken.recv().await, None);
        task.await.expect("no panic");
    }

    #[tokio::test]
    async fn it_ends_when_nobody_takes() {
        let (to_one, one) = tokio::sync::mpsc::channel(1);
        let (_to_other, other) = tokio::sync::mpsc::channel(1);
        let (out, taken) = tokio::sync::mpsc::channel(1);
        drop(taken);
        merge(one, other, out).await;
        assert!(to_one.is_closed());
    }
}
