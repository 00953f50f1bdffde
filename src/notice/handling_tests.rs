//! What people may do with a notice.

use crate::notice::{Kind, Priority, Since};

use super::*;

const HOUR_US: i64 = 3600 * US_PER_S;

fn at(minute: i64) -> Time {
    Time::from_us(minute * 60 * US_PER_S)
}

fn notice() -> Notice {
    let mut notice = Notice {
        id: "filler-2-2026-0001".into(),
        plant: "Quayside".into(),
        bank: "filler-2".into(),
        kind: Kind::LevelApart,
        state: State::Normal,
        priority: Priority::Medium,
        sources: Vec::new(),
        unit: "g".into(),
        since: Since {
            at: at(0),
            earliest: at(0),
            latest: at(0),
        },
        raised: at(0),
        changed: at(0),
        returned: None,
        acknowledged: None,
        subject: String::new(),
        text: String::new(),
        advice: String::new(),
        url: String::new(),
        span: 40,
        pattern: None,
        slip: None,
        common_movement: None,
        even_mean: None,
        cost_per_hour: None,
        adjustment: None,
        handling: Handling::default(),
    };
    notice.happen(Happening::Occurs, at(0));
    notice
}

fn said(minute: i64, comment: &str) -> Said {
    Said {
        by: "Ana".into(),
        at: at(minute),
        comment: comment.to_owned(),
    }
}

/// Does these one minute apart; the states after each, and the entries' words at the end.
#[track_caller]
fn check(deeds: &[(Deed, &str)], states: &[Result<State, &str>], entries: &[&str]) {
    let mut notice = notice();
    for (minute, ((deed, comment), wanted)) in (1..).zip(deeds.iter().zip(states)) {
        let done = notice.act(*deed, said(minute, comment), &Manners::default());
        match (done, wanted) {
            (Ok(_), Ok(state)) => assert_eq!(notice.state, *state, "{deed:?}"),
            (Err(why), Err(part)) => assert!(why.contains(part), "{why}"),
            (done, wanted) => panic!("{deed:?}: {done:?} instead of {wanted:?}"),
        }
    }
    let words: Vec<&str> = notice
        .handling
        .entries
        .iter()
        .map(|e| e.act.word())
        .collect();
    assert_eq!(words, entries);
    assert!(notice.handling.entries.iter().all(|e| &*e.by == "Ana"));
}

#[test]
fn what_may_be_done_and_what_is_remembered() {
    use Deed::{Acknowledge, Comment, PutBack, Shelve, TakeOut, Unshelve};
    let hour = Shelve(HOUR_US, Shelving::Timed);
    check(
        &[(Acknowledge(None), "on my way"), (Acknowledge(None), "")],
        &[Ok(State::Acknowledged), Ok(State::Acknowledged)],
        &["acknowledged"],
    );
    check(
        &[
            (hour, ""),
            (Acknowledge(Some(CallOutcome::RealButLeft)), ""),
            (Unshelve, ""),
        ],
        &[
            Ok(State::Shelved),
            Ok(State::Shelved),
            Ok(State::Unacknowledged),
        ],
        &["shelved", "acknowledged", "outcome", "unshelved"],
    );
    check(
        &[
            (TakeOut, "valve on order"),
            (hour, ""),
            (PutBack, ""),
            (PutBack, ""),
        ],
        &[
            Ok(State::OutOfService),
            Err("out of service"),
            Ok(State::Unacknowledged),
            Ok(State::Unacknowledged),
        ],
        &["out_of_service", "in_service"],
    );
    let too_long = Shelve(9 * HOUR_US, Shelving::Once);
    check(
        &[
            (too_long, ""),
            (Shelve(0, Shelving::Once), ""),
            (Comment(None), ""),
            (Comment(None), "seal worn"),
            (Comment(Some(CallOutcome::NothingFound)), ""),
            (Comment(Some(CallOutcome::NothingFound)), ""),
        ],
        &[
            Err("at most 480 minutes"),
            Err("at least a minute"),
            Err("needs words"),
            Ok(State::Unacknowledged),
            Ok(State::Unacknowledged),
            Ok(State::Unacknowledged),
        ],
        &["comment", "outcome"],
    );
}

#[test]
fn a_shelving_ends_by_its_time_and_a_shelving_once_by_the_return() {
    let mut notice = notice();
    let hour = Deed::Shelve(HOUR_US, Shelving::Timed);
    assert_eq!(notice.act(hour, said(1, ""), &Manners::default()), Ok(true));
    assert!(!notice.end_shelving(at(60)));
    notice.happen(Happening::Returns, at(30));
    assert_eq!(notice.state, State::Shelved, "it keeps evaluating");
    notice.happen(Happening::Occurs, at(40));
    assert!(notice.end_shelving(at(61)));
    assert_eq!(notice.state, State::Unacknowledged);
    assert_eq!(notice.handling.shelved_until, None);
    assert_eq!(notice.returned, None, "it holds again");
    let once = Deed::Shelve(HOUR_US, Shelving::Once);
    assert_eq!(
        notice.act(once, said(62, ""), &Manners::default()),
        Ok(true)
    );
    notice.happen(Happening::Returns, at(63));
    assert_eq!(notice.state, State::Normal);
    assert_eq!(notice.returned, Some(at(63)));
}

#[test]
fn latching_asks_to_be_seen_again() {
    let latching = Manners {
        latching: Latching::On,
        ..Manners::default()
    };
    for (manners, wanted) in [
        (Manners::default(), State::Normal),
        (latching, State::ReturnedUnacknowledged),
    ] {
        let mut notice = notice();
        let seen = notice.act(Deed::Acknowledge(None), said(1, ""), &manners);
        assert_eq!(seen, Ok(true));
        notice.happen(manners.returns(), at(2));
        assert_eq!(notice.state, wanted);
    }
}
