//! Records of an invented plant for the tests of this room.

use std::sync::Arc;

use crate::engine::{Event, Evidence, Premises, Record, Turn, WindowValue, WindowView};
use crate::model::{
    Bank, BankIx, Budget, Characteristic, Layout, Measurement, Name, Offsets, Pairing, Sources,
    Time, US_PER_S, Value,
};
use crate::notice::{Delivery, Kind, Notice, Priority, Since, State, Way};
use crate::verdict::{Digest, Finding, Look, Method, TestEntry};

/// When the samples' story begins: 2026-03-01T06:00:00Z.
pub(super) const START_US: i64 = 1_772_344_800 * US_PER_S;

/// So many seconds into the story.
pub(super) fn at(s: i64) -> Time {
    Time::from_us(START_US + s * US_PER_S)
}

pub(super) fn banks() -> Vec<Name> {
    ["filler-2", "capper", "tube mill"].map(Name::from).to_vec()
}

pub(super) fn measurement(bank: u16, source: &str, coefficient: i64) -> Measurement {
    Measurement {
        bank: BankIx(bank),
        source: source.into(),
        value: Value::Decimal {
            coefficient,
            exponent: -1,
        },
        taken: Some(at(coefficient)),
        cycle: Some(coefficient),
    }
}

/// Twelve heads in turn, one value each every 2.5 s in milliseconds, as a drained backlog gives them.
pub(super) fn batch_of(count: usize) -> Vec<Measurement> {
    let one = |i: usize| {
        let (cycle, head) = ((i / 12) as i64, i % 12);
        // Spread over about 8 g in steps of 0.1 g, without a random number.
        let wobble = (i as i64 * 7_919) % 83 - 41;
        Measurement {
            bank: BankIx(0),
            source: format!("{:02}", head + 1).into(),
            value: Value::Decimal {
                coefficient: 5_030 + wobble,
                exponent: -1,
            },
            taken: Some(Time::from_us(
                START_US + cycle * 2_500_000 + head as i64 * 208_000 + wobble * 1_000,
            )),
            cycle: Some(40_000 + cycle),
        }
    };
    (0..count).map(one).collect()
}

pub(super) fn turn(number: u64, now: Time) -> Record {
    Record::Turn(Turn {
        number,
        now,
        event: Event::Measurements(vec![measurement(0, "01", number as i64)]),
    })
}

pub(super) fn checkpoint(bank: &str, turn: u64, length: usize) -> Record {
    let state = (0..length).map(|i| (i as u64 ^ turn) as u8).collect();
    Record::Checkpoint {
        bank: bank.into(),
        turn,
        state,
    }
}

pub(super) fn look(bank: &str, at: Time, span: usize) -> Arc<Look> {
    Arc::new(Look {
        bank: bank.into(),
        at,
        span,
        finding: Finding::LevelApart,
        remark: String::new(),
        alpha_level: 1e-6,
        alpha_spread: 2e-6,
        tests: vec![TestEntry {
            method: Method::Welch,
            raw: false,
            statistic: 2.0558,
            df: vec![9.0, 36.5],
            p: 0.0599,
            p_paid: 0.0599,
            decides: true,
        }],
        dependence: None,
        sigma: 2.5,
        sources: Vec::new(),
    })
}

pub(super) fn digest(bank: &str, at: Time, span: usize) -> Record {
    let digest: Digest = look(bank, at, span).digest();
    Record::Digest(bank.into(), digest)
}

pub(super) fn notice(id: &str, raised: Time, state: State) -> Arc<Notice> {
    Arc::new(Notice {
        id: id.into(),
        plant: "Quayside".into(),
        bank: "filler-2".into(),
        kind: Kind::LevelApart,
        state,
        priority: Priority::Medium,
        sources: Vec::new(),
        unit: "g".into(),
        since: Since {
            at: raised,
            earliest: raised,
            latest: raised,
        },
        raised,
        changed: raised,
        returned: None,
        acknowledged: None,
        subject: "head 07 is 1.9 g low".to_owned(),
        text: "Head 07 of filler-2 is 1.9 g below the others.".to_owned(),
        advice: "Check its valve.".to_owned(),
        url: "http://127.0.0.1:7310/banks/filler-2".to_owned(),
        span: 160,
        handling: crate::notice::Handling::default(),
        pattern: None,
        slip: None,
        common_movement: None,
        even_mean: None,
        cost_per_hour: None,
        adjustment: None,
    })
}

pub(super) fn delivery(number: u64, notice: &Arc<Notice>) -> Delivery {
    Delivery {
        number,
        way: Way::Mqtt,
        at: notice.raised,
        notice: Arc::clone(notice),
    }
}

/// The evidence of a notice: 12 sources with `values` values each.
pub(super) fn evidence(notice: &str, values: usize) -> Record {
    let value = |i: usize| WindowValue {
        taken: at(i as i64),
        cycle: Some(i as i64),
        offset: i as f64 * 0.1,
    };
    let window = |source: usize| WindowView {
        source: format!("{source:02}").into(),
        origin: Value::Decimal {
            coefficient: 5_030,
            exponent: -1,
        },
        values: (0..values).map(value).collect(),
    };
    Record::Evidence {
        notice: notice.into(),
        evidence: Box::new(Evidence {
            looks: vec![look("filler-2", at(0), 160)],
            windows: (1..=12).map(window).collect(),
            premises: premises(),
        }),
    }
}

fn premises() -> Premises {
    Premises {
        at: at(0),
        bank: bank(),
        who: Vec::new(),
        fresh_from: Vec::new(),
        closed_to: 640,
        interval_us: Some(US_PER_S),
        crossing: None,
        watch: None,
        product: None,
        line_events: Vec::new(),
    }
}

fn bank() -> Bank {
    Bank {
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
        sources: Sources::Discover { most: 12 },
        pairing: Pairing::Cycle,
        spans: vec![160],
        look_every_us: 30 * US_PER_S,
        margin: 0.8,
        spread_margin: 1.5,
        budget: Budget::new(1.0, 90.0).expect("a budget"),
        wait_cycles: 3,
        silent_after_us: None,
        oldest_us: 30 * 86_400 * US_PER_S,
        layout: Layout::Row,
        groups: Vec::new(),
        cost_per_unit: None,
        reference: None,
        offsets: Offsets::None,
    }
}
