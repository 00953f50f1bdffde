//! Turns packed and unpacked: nothing is lost, nothing hostile panics, and it is small.

use proptest::prelude::*;

use super::*;
use crate::engine::{Command, Condition, Judged, Onward, Part, Ticket};
use crate::model::SourceIx;
use crate::notice::{CallOutcome, Deed, Detail, Kind, Trouble};
use crate::store::samples::{banks, batch_of, measurement};

fn same(turn: &Turn, banks: &[Name]) {
    let payload = pack(turn, banks).unwrap();
    assert_eq!(unpack(turn.number, &payload, banks).as_ref(), Ok(turn));
    assert_eq!(time_of(&payload), Ok(turn.now));
}

fn turn(now: i64, event: Event) -> Turn {
    Turn {
        number: 7,
        now: Time::from_us(now),
        event,
    }
}

fn values() -> impl Strategy<Value = Value> {
    let decimal = (any::<i64>(), any::<i8>()).prop_map(|(coefficient, exponent)| Value::Decimal {
        coefficient,
        exponent,
    });
    let usual = (4_000..6_000_i64).prop_map(|coefficient| Value::Decimal {
        coefficient,
        exponent: -1,
    });
    let float = any::<f64>()
        .prop_filter("values are finite", |x| x.is_finite())
        .prop_map(Value::Float);
    prop_oneof![decimal, usual, float]
}

fn measurements() -> impl Strategy<Value = Measurement> {
    let taken = prop_oneof![
        any::<i64>(),
        (0..4_000_000_000_i64).prop_map(|s| s * 1_000),
        (0..4_000_000_000_i64).prop_map(|s| s * 1_000_000),
    ];
    (
        0..3_u16,
        "[a-zé0-9]{0,6}",
        values(),
        proptest::option::of(taken.prop_map(Time::from_us)),
        proptest::option::of(any::<i64>()),
    )
        .prop_map(|(bank, source, value, taken, cycle)| Measurement {
            bank: BankIx(bank),
            source: source.into(),
            value,
            taken,
            cycle,
        })
}

proptest! {
    #[test]
    fn measurements_come_back_as_they_were(
        now in any::<i64>(),
        all in proptest::collection::vec(measurements(), 0..40),
    ) {
        same(&turn(now, Event::Measurements(all)), &banks());
    }

    #[test]
    fn rubbish_is_refused_and_never_panics(bytes in proptest::collection::vec(any::<u8>(), 0..200)) {
        // What it says does not matter; that it says something does.
        if let Ok(turn) = unpack(1, &bytes, &banks()) {
            prop_assert_eq!(turn.number, 1);
        }
    }

    #[test]
    fn a_cut_payload_is_refused(cut in 0_usize..100) {
        let turn = turn(5, Event::Measurements(batch_of(40)));
        let payload = pack(&turn, &banks()).unwrap();
        let cut = cut.min(payload.len() - 1);
        prop_assert!(unpack(1, &payload[..cut], &banks()).is_err());
    }
}

#[test]
fn other_events_come_back_as_they_were() {
    let events = [
        Event::Deadline,
        Event::Due(Due::default()),
        Event::Due(Due {
            silent: vec![(BankIx(2), SourceIx(7)), (BankIx(0), SourceIx(0))],
            looks: vec![BankIx(1), BankIx(2)],
            onward: vec![Onward {
                bank: BankIx(1),
                notice: "capper-2026-0003".into(),
                outlet: "night phone".into(),
            }],
            upkeep: vec![BankIx(2)],
            conditions: vec![Judged {
                bank: BankIx(1),
                kind: Kind::SourceSilent,
                troubles: vec![Trouble {
                    source: Some("03".into()),
                    since: Time::from_us(-4),
                    detail: Detail::Silent,
                }],
            }],
        }),
        Event::Delivered { number: 9 },
        Event::NotDelivered {
            number: 9,
            why: "the broker is away".to_owned(),
        },
        Event::Condition {
            part: Part::Broker,
            condition: Condition::Trouble("no route".to_owned()),
        },
        Event::Command {
            ticket: Ticket(3),
            who: "Ana".into(),
            what: Command::Notice {
                notice: "filler-2-2026-1".into(),
                deed: Deed::Acknowledge(Some(CallOutcome::NothingFound)),
                comment: "on it".to_owned(),
            },
        },
    ];
    for event in events {
        same(&turn(-12, event), &banks());
    }
}

#[test]
fn banks_keep_their_measurements_when_the_configuration_changes_its_order() {
    let before = banks();
    let all = vec![
        measurement(0, "01", 1),
        measurement(1, "01", 2),
        measurement(2, "01", 3),
    ];
    let payload = pack(&turn(0, Event::Measurements(all)), &before).unwrap();
    // The first bank is gone, the others have changed places.
    let after = [before[2].clone(), before[1].clone()];
    let kept = unpack(7, &payload, &after).unwrap();
    let expected = vec![measurement(1, "01", 2), measurement(0, "01", 3)];
    assert_eq!(kept.event, Event::Measurements(expected));

    let due = |silent: &[u16], looks: &[u16]| {
        Event::Due(Due {
            silent: silent.iter().map(|&b| (BankIx(b), SourceIx(5))).collect(),
            looks: looks.iter().copied().map(BankIx).collect(),
            upkeep: looks.iter().copied().map(BankIx).collect(),
            ..Due::default()
        })
    };
    let payload = pack(&turn(0, due(&[2, 0], &[1, 2])), &before).unwrap();
    let kept = unpack(7, &payload, &after).unwrap();
    assert_eq!(kept.event, due(&[0], &[1, 0]));
}

#[test]
fn a_measurement_of_no_bank_is_not_written() {
    let all = vec![measurement(9, "01", 1)];
    assert!(pack(&turn(0, Event::Measurements(all)), &banks()).is_err());
    let looks = vec![BankIx(9)];
    let due = Event::Due(Due {
        looks,
        ..Due::default()
    });
    assert!(pack(&turn(0, due), &banks()).is_err());
}

#[test]
fn a_batch_needs_few_bytes_for_each_measurement() {
    for (count, most) in [(1_000, 8.0), (120, 9.0), (12, 16.0)] {
        let payload = pack(
            &turn(1_760_000_000_123_456, Event::Measurements(batch_of(count))),
            &banks(),
        );
        let each = payload.unwrap().len() as f64 / count as f64;
        assert!(
            each <= most,
            "{count} measurements: {each:.2} bytes each, more than {most}"
        );
        println!("{count} measurements: {each:.2} bytes each");
    }
}
