//! The house on the twin of the store: what is acknowledged is durable, and trouble is told.

use std::sync::Arc;
use std::time::Duration;

use tokio::sync::{mpsc, oneshot, watch};
use tokio_util::sync::CancellationToken;

use super::house::{House, Pending, Ways};
use super::recovery::Recovery;
use super::waiting::{Inputs, turns};
use super::*;
use crate::engine::{Command, Condition, Engine, Event, Outcome, Plant, Snapshot};
use crate::intake::mqtt::{Arrival, FromBroker, Receipt};
use crate::model::{
    Bank, BankIx, Characteristic, Layout, Measurement, Name, Offsets, Pairing, Sources, Time, Value,
};
use crate::notice::{Delivery, Way};
use crate::outlets::Report;
use crate::store::Script;
use crate::web::Ask;

fn now() -> Time {
    Time::parse_rfc3339("2026-03-01T06:00:00Z").unwrap()
}

fn bank() -> Arc<Bank> {
    Arc::new(Bank {
        name: "filler-2".into(),
        equipment: None,
        characteristic: Characteristic {
            name: "net content".into(),
            unit: "g".into(),
            resolution: Some(0.1),
            target: None,
            declared: None,
            lower: None,
            upper: None,
        },
        sources: Sources::Listed(["01", "02"].map(Name::from).to_vec()),
        pairing: Pairing::None,
        spans: vec![10],
        look_every_us: 1_000_000,
        margin: 0.8,
        spread_margin: 1.5,
        budget: "1 per 90 days".parse().unwrap(),
        wait_cycles: 3,
        silent_after_us: None,
        oldest_us: 30 * crate::model::US_PER_DAY,
        layout: Layout::Row,
        groups: Vec::new(),
        cost_per_unit: None,
        reference: None,
        offsets: Offsets::None,
    })
}

fn recovery(script: &Script) -> Recovery {
    let bank = bank();
    let (store, history, recovered) = script.open(std::slice::from_ref(&bank.name), 90).unwrap();
    let plant = Plant {
        name: "Quayside".into(),
        zone: jiff::tz::TimeZone::UTC,
        pages: "http://127.0.0.1:7310".to_owned(),
        routes: Vec::new(),
        manners: crate::notice::Manners::default(),
    };
    let mut engine = Engine::new(plant, vec![bank]);
    for (bank, _, state) in &recovered.checkpoints {
        engine.restore(bank, state).unwrap();
    }
    let mut replayed = 0;
    for turn in recovered.turns {
        engine.replay(turn.unwrap());
        replayed += 1;
    }
    engine.resume(recovered.last_turn, &recovered.outbox);
    Recovery {
        engine,
        store: Box::new(store),
        history,
        outbox: recovered.outbox,
        orphans: Vec::new(),
        unacknowledged: recovered.unacknowledged,
        replayed,
        set_aside: None,
    }
}

/// A house and the other ends of its ways.
struct Bench {
    house: House,
    receipts: mpsc::Receiver<Vec<Receipt>>,
    _deliveries: mpsc::Receiver<Delivery>,
    present: watch::Receiver<Arc<Snapshot>>,
}

fn bench(script: &Script) -> Bench {
    let mut recovery = recovery(script);
    let (receipts, receipts_out) = mpsc::channel(100);
    let (mqtt, deliveries_out) = mpsc::channel(100);
    let deliveries = BTreeMap::from([(Way::Mqtt, mqtt)]);
    let (present, snapshot) = watch::channel(recovery.engine.snapshot());
    let ways = Ways {
        receipts,
        deliveries,
        present,
    };
    let durations = Durations::new().unwrap();
    Bench {
        house: House::new(recovery, Clock::manual(now()), durations, 100, ways),
        receipts: receipts_out,
        _deliveries: deliveries_out,
        present: snapshot,
    }
}

fn receipt(packet: u16) -> Receipt {
    Receipt {
        epoch: 1,
        packet: Some(packet),
        hash: u64::from(packet) * 7,
    }
}

fn measurement(number: u16) -> Measurement {
    Measurement {
        bank: BankIx(0),
        source: "01".into(),
        value: Value::parse("503.1").unwrap(),
        taken: Some(now().plus_us(i64::from(number))),
        cycle: None,
    }
}

fn pending(number: u16) -> Pending {
    Pending {
        events: vec![Event::Measurements(vec![measurement(number)])],
        receipts: vec![receipt(number)],
    }
}

fn values(script: &Script) -> usize {
    recovery(script).engine.snapshot().banks[0].sources[0].values
}

#[tokio::test]
async fn a_turn_is_durable_when_its_messages_are_acknowledged() {
    let script = Script::new();
    let mut bench = bench(&script);
    let end = CancellationToken::new();
    for number in 1..=3 {
        bench.house.turn(pending(number), &end).await.unwrap();
        assert_eq!(bench.receipts.try_recv().unwrap(), [receipt(number)]);
        script.crash();
        assert_eq!(values(&script), usize::from(number));
        let kept = recovery(&script).unacknowledged;
        assert_eq!(kept.last(), receipt(number).pair().as_ref());
    }
}

#[tokio::test]
async fn while_nothing_can_be_kept_nothing_is_acknowledged_and_the_present_says_so() {
    let script = Script::new();
    let mut bench = bench(&script);
    let end = CancellationToken::new();
    script.make_unwritable();
    let turn = bench.house.turn(pending(1), &end);
    tokio::pin!(turn);
    let waited = tokio::time::timeout(Duration::from_millis(600), &mut turn).await;
    assert!(waited.is_err(), "the turn ended although nothing was kept");
    assert!(bench.receipts.try_recv().is_err());
    let Condition::Trouble(why) = bench.present.borrow().store.clone() else {
        panic!("the store's trouble is not told");
    };
    assert!(why.contains("the disk is full"), "{why}");

    script.make_writable();
    turn.await.unwrap();
    assert_eq!(bench.receipts.try_recv().unwrap(), [receipt(1)]);
    script.crash();
    assert_eq!(values(&script), 1);
}

#[tokio::test]
async fn at_the_end_a_store_that_cannot_keep_is_tried_once_more_and_named() {
    let script = Script::new();
    let mut bench = bench(&script);
    let end = CancellationToken::new();
    script.make_unwritable();
    let turn = bench.house.turn(pending(1), &end);
    let ender = async {
        tokio::time::sleep(Duration::from_millis(100)).await;
        end.cancel();
    };
    let (ended, ()) = tokio::join!(turn, ender);
    assert!(matches!(ended, Err(RunError::Unkept(_))), "{ended:?}");
    assert!(bench.receipts.try_recv().is_err());
}

#[tokio::test]
async fn the_loop_takes_arrivals_answers_people_and_keeps_everything_at_its_end() {
    let script = Script::new();
    let Bench {
        house,
        mut receipts,
        _deliveries,
        mut present,
    } = bench(&script);
    let (feed_in, feed) = mpsc::channel(10);
    let (asks_in, asks) = mpsc::channel(10);
    let (reports_in, reports) = mpsc::channel::<Report>(10);
    let end = CancellationToken::new();
    let inputs = Inputs {
        feed,
        asks,
        reports,
    };
    let looped = tokio::spawn(turns(house, inputs, end.clone()));

    let arrival = |number| {
        FromBroker::Arrival(Arrival {
            measurements: vec![measurement(number)],
            refusals: Vec::new(),
            receipt: receipt(number),
        })
    };
    feed_in.send(arrival(1)).await.unwrap();
    let well = FromBroker::Condition(Condition::Well);
    feed_in.send(well).await.unwrap();
    feed_in.send(arrival(2)).await.unwrap();
    let mut acknowledged = Vec::new();
    while acknowledged.len() < 2 {
        acknowledged.extend(receipts.recv().await.unwrap());
    }
    assert_eq!(acknowledged, [receipt(1), receipt(2)]);
    let both = |s: &Arc<Snapshot>| s.broker == Condition::Well && s.banks[0].sources[0].values == 2;
    present.wait_for(both).await.unwrap();

    let (reply, answer) = oneshot::channel();
    let what = Command::Windows { bank: BankIx(0) };
    let who: Name = "Ana".into();
    asks_in.send(Ask { who, what, reply }).await.unwrap();
    let Outcome::Windows(windows) = answer.await.unwrap() else {
        panic!("another answer was given");
    };
    assert_eq!(windows[0].values.len(), 2);

    drop(reports_in);
    end.cancel();
    looped.await.unwrap().unwrap();
    script.crash();
    let after = recovery(&script);
    assert_eq!(after.replayed, 0, "the last checkpoint holds everything");
    assert_eq!(values(&script), 2);
}
