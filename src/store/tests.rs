//! The store as its users see it, on sled and on the twin; then what only a disk can do.

use std::fs;
use std::path::Path;
use std::sync::Arc;

use proptest::prelude::*;
use tempfile::TempDir;

use super::samples::{at, banks, checkpoint, delivery, digest, evidence, look, notice, turn};
use super::shelf::{Op, Order, Shelf};
use super::*;
use crate::engine::{History, Record, Turn};
use crate::model::{Time, US_PER_DAY};
use crate::notice::State;
use crate::settings::StoreSettings;

type Any = (Box<dyn Store>, Arc<dyn History>, Recovered);

/// Opens the same place again and again.
enum Place {
    Disk(TempDir, u32),
    Memory(Script, u32),
}

impl Place {
    fn both(keep_days: u32) -> [Self; 2] {
        [
            Self::Disk(tempfile::tempdir().unwrap(), keep_days),
            Self::Memory(Script::new(), keep_days),
        ]
    }

    fn open(&self) -> Any {
        match self {
            Self::Disk(folder, keep_days) => {
                let opened = open_in(folder.path(), *keep_days).unwrap();
                assert_eq!(opened.set_aside, None);
                (Box::new(opened.store), opened.history, opened.recovered)
            }
            Self::Memory(script, keep_days) => {
                let (store, history, recovered) = script.open(&banks(), *keep_days).unwrap();
                (Box::new(store), history, recovered)
            }
        }
    }
}

fn open_in(folder: &Path, keep_days: u32) -> Result<Opened, OpenError> {
    let settings = StoreSettings {
        folder: folder.to_owned(),
        keep_days,
    };
    open(&settings, &banks(), at(0))
}

fn batch(records: Vec<Record>) -> Batch {
    Batch {
        records,
        unacknowledged: Vec::new(),
    }
}

fn numbers(turns: Turns) -> Vec<u64> {
    turns.map(|t| t.unwrap().number).collect()
}

#[test]
fn what_was_committed_is_there_after_the_next_start() {
    for place in Place::both(90) {
        let (mut store, _, recovered) = place.open();
        assert_eq!(recovered.last_turn, 0);
        assert_eq!(numbers(recovered.turns), [0_u64; 0]);

        let raised = notice("filler-2-2026-1", at(60), State::Unacknowledged);
        let (first, second) = (delivery(1, &raised), delivery(2, &raised));
        store
            .commit(&Batch {
                records: vec![
                    turn(1, at(1)),
                    turn(2, at(2)),
                    Record::Notice(Arc::clone(&raised)),
                    Record::Delivery(first),
                    Record::Delivery(second.clone()),
                    evidence(&raised.id, 640),
                    checkpoint("filler-2", 2, 3_000_000),
                    checkpoint("capper", 1, 10),
                    checkpoint("tube mill", 2, 0),
                ],
                unacknowledged: (0..2_000).map(|i| (i, u64::from(i) << 40)).collect(),
            })
            .unwrap();
        let later = Batch {
            records: vec![Record::Delivered { number: 1 }, turn(3, at(3))],
            unacknowledged: (7..9).map(|i| (i, u64::MAX)).collect(),
        };
        store.commit(&later).unwrap();
        drop(store);

        let (_, history, recovered) = place.open();
        assert_eq!(recovered.last_turn, 3);
        assert_eq!(recovered.outbox, [second]);
        assert_eq!(recovered.unacknowledged, later.unacknowledged);
        let expected = [
            checkpoint("capper", 1, 10),
            checkpoint("filler-2", 2, 3_000_000),
            checkpoint("tube mill", 2, 0),
        ];
        let found = recovered.checkpoints.into_iter();
        let found = found.map(|(bank, turn, state)| Record::Checkpoint { bank, turn, state });
        assert!(found.eq(expected), "checkpoints differ");
        let turns: Vec<Turn> = recovered.turns.map(Result::unwrap).collect();
        let turns: Vec<Record> = turns.into_iter().map(Record::Turn).collect();
        assert_eq!(turns, [turn(2, at(2)), turn(3, at(3))]);
        assert_eq!(history.notice(&raised.id).unwrap().as_ref(), Some(&*raised));
    }
}

#[test]
fn a_newer_checkpoint_takes_the_place_of_the_older_and_leaves_no_parts() {
    for place in Place::both(90) {
        let (mut store, _, _) = place.open();
        for turn in 1..5 {
            let length = 20_000 * (5 - turn as usize);
            let records = vec![checkpoint("filler-2", turn, length)];
            store.commit(&batch(records)).unwrap();
        }
        drop(store);
        let (_, _, recovered) = place.open();
        assert_eq!(recovered.scanned.orphans, 0);
        // The form, the count, three banks that joined, one head and its four parts.
        assert_eq!(recovered.scanned.records, 2 + 3 + 1 + 4);
        let found: Vec<_> = recovered
            .checkpoints
            .iter()
            .map(|(_, t, s)| (*t, s.len()))
            .collect();
        assert_eq!(found, [(4, 20_000)]);
    }
}

#[test]
fn a_bank_without_checkpoint_asks_only_for_turns_since_it_joined() {
    for place in Place::both(90) {
        let (mut store, _, _) = place.open();
        let mut records: Vec<Record> = (1..=9).map(|n| turn(n, at(n as i64))).collect();
        records.push(checkpoint("filler-2", 9, 10));
        records.push(checkpoint("capper", 8, 10));
        store.commit(&batch(records)).unwrap();
        drop(store);
        // "tube mill" joined at turn 0.
        assert_eq!(numbers(place.open().2.turns), (1..=9).collect::<Vec<u64>>());
    }
}

#[test]
fn long_journals_are_read_page_by_page_in_order() {
    for place in Place::both(90) {
        let (mut store, _, _) = place.open();
        let records = (1..=700).map(|n| turn(n, at(n as i64))).collect();
        store.commit(&batch(records)).unwrap();
        drop(store);
        let (_, _, recovered) = place.open();
        assert_eq!(recovered.last_turn, 700);
        assert_eq!(numbers(recovered.turns), (1..=700).collect::<Vec<u64>>());
    }
}

#[test]
fn history_gives_the_same_answers_on_both() {
    for place in Place::both(90) {
        let (mut store, history, _) = place.open();
        let mut records = Vec::new();
        for s in 0..10 {
            records.push(digest("filler-2", at(s), 40));
            records.push(digest("capper", at(s), 40));
            records.push(digest("filler-2", at(s), 160));
            records.push(Record::Look(look("filler-2", at(s), 40)));
            let state = State::Unacknowledged;
            records.push(Record::Notice(notice(&format!("n-{s}"), at(s), state)));
        }
        records.push(Record::Look(look("filler-2", at(3), 160)));
        records.push(Record::Notice(notice("n-4", at(4), State::Acknowledged)));
        store.commit(&batch(records)).unwrap();

        let times = |from, to, most| -> Vec<Time> {
            let some = history.digests("filler-2", at(from), at(to), most).unwrap();
            some.iter().map(|d| d.at).collect()
        };
        assert_eq!(times(2, 4, 100), [at(2), at(2), at(3), at(3)]);
        assert_eq!(times(0, 100, 2), [at(9), at(9)]);
        assert_eq!(times(5, 2, 100), []);

        let thinned = |span, from, to, parts| -> Vec<(usize, Time)> {
            let range = (at(from), at(to));
            let some = history.digests_thinned("filler-2", span, range, parts);
            some.unwrap().iter().map(|d| (d.span, d.at)).collect()
        };
        // Two parts of four seconds, then one that nothing lies in.
        assert_eq!(thinned(40, 0, 8, 2), [(40, at(3)), (40, at(7))]);
        assert_eq!(thinned(160, 0, 40, 2), [(160, at(9))]);
        assert_eq!(thinned(80, 0, 8, 2), []);
        assert_eq!(thinned(40, 8, 0, 2), []);
        assert_eq!(thinned(40, 0, 8, 0), []);

        let looks = |s| -> Vec<(usize, Time)> {
            let some = history.looks_at("filler-2", at(s)).unwrap();
            some.iter().map(|l| (l.span, l.at)).collect()
        };
        assert_eq!(looks(2), [(40, at(2))]);
        assert_eq!(looks(5), [(40, at(5)), (160, at(3))]);
        assert_eq!(looks(-1), []);
        assert_eq!(history.looks_at("capper", at(9)).unwrap(), []);

        let mut seen = Vec::new();
        let mut after = None;
        loop {
            let page = history.notices(after.as_deref(), 4).unwrap();
            seen.extend(page.items.iter().map(|n| n.id.to_string()));
            after = page.next;
            if after.is_none() {
                break;
            }
        }
        let expected: Vec<String> = (0..10).rev().map(|s| format!("n-{s}")).collect();
        assert_eq!(seen, expected);
        assert_eq!(history.notices(Some("no such"), 4).unwrap().items, []);
        let changed = history.notice("n-4").unwrap().unwrap();
        assert_eq!(changed.state, State::Acknowledged);
        assert_eq!(history.notice("no such").unwrap(), None);
    }
}

/// Turns 1 to 6 a day apart, checkpoints at `held`, then everything that may go is dropped at day 6.
fn kept_turns(place: &Place, held: u64) -> Vec<u64> {
    let day = |d: u64| at(0).plus_us(d as i64 * US_PER_DAY);
    let (mut store, _, _) = place.open();
    let mut records: Vec<Record> = (1..=6).map(|n| turn(n, day(n))).collect();
    records.extend(banks().iter().map(|b| checkpoint(b, held, 10)));
    records.extend((1..=6).map(|n| digest("capper", day(n), 40)));
    records.extend((1..=6).map(|n| Record::Look(look("capper", day(n), 40))));
    store.commit(&batch(records)).unwrap();
    while let Retained::More(_) = store.retain(day(6)).unwrap() {}
    assert_eq!(store.retain(day(6)), Ok(Retained::Done(0)));
    // Everything the checkpoints do not hold is still there.
    let earlier = match place {
        Place::Disk(..) => None,
        Place::Memory(script, _) => Some(script.clone()),
    };
    drop(store);
    let (_, history, recovered) = place.open();
    assert_eq!(
        numbers(recovered.turns),
        (held + 1..=6).collect::<Vec<u64>>()
    );
    let digests = history.digests("capper", day(0), day(9), 100).unwrap();
    let looks = history.looks_at("capper", day(6)).unwrap();
    assert_eq!(looks.len(), 1);
    let oldest = digests.first().unwrap().at.us_since(at(0)) / US_PER_DAY;
    let mut all = vec![oldest as u64];
    if let Some(script) = earlier {
        all.extend(numbers(script.all_turns(&banks())));
    }
    all
}

#[test]
fn old_turns_go_when_every_checkpoint_holds_them() {
    for (keep_days, held, oldest_digest, expected) in [
        // Days 4 to 6 are young enough.
        (2, 6, 4, vec![4, 5, 6]),
        // Turn 3 is old, and only turns up to 2 are held.
        (2, 2, 4, vec![3, 4, 5, 6]),
        (90, 6, 1, vec![1, 2, 3, 4, 5, 6]),
        // Nothing is kept but what the checkpoints do not hold, and a day of looks.
        (0, 4, 5, vec![5, 6]),
    ] {
        for place in Place::both(keep_days) {
            let found = kept_turns(&place, held);
            assert_eq!(found[0], oldest_digest, "keep {keep_days}, held {held}");
            if found.len() > 1 {
                assert_eq!(found[1..], expected, "keep {keep_days}, held {held}");
            }
        }
    }
}

#[test]
fn a_failed_commit_can_be_done_again() {
    let script = Script::new();
    let (mut store, _, _) = script.open(&banks(), 90).unwrap();
    let records = vec![turn(1, at(1)), checkpoint("capper", 1, 30_000)];
    let wanted = Batch {
        records,
        unacknowledged: vec![(1, 1)],
    };
    script.fail_sync(1);
    assert!(matches!(store.commit(&wanted), Err(CommitError::Sync(_))));
    script.make_unwritable();
    for _ in 0..3 {
        assert!(matches!(store.commit(&wanted), Err(CommitError::Write(_))));
        assert!(store.retain(at(1)).is_err());
    }
    script.make_writable();
    store.commit(&wanted).unwrap();
    script.crash();
    let (_, _, recovered) = script.open(&banks(), 90).unwrap();
    assert_eq!(
        (recovered.last_turn, recovered.unacknowledged),
        (1, vec![(1, 1)])
    );
    assert_eq!(recovered.checkpoints[0].2.len(), 30_000);
}

#[test]
fn a_crash_takes_nothing_that_was_committed_and_everything_else_whole() {
    let script = Script::new();
    let (mut store, _, _) = script.open(&banks(), 90).unwrap();
    store.commit(&batch(vec![turn(1, at(1))])).unwrap();
    script.fail_sync(1);
    store
        .commit(&batch(vec![
            turn(2, at(2)),
            checkpoint("capper", 2, 30_000),
        ]))
        .unwrap_err();
    script.crash();
    let (_, _, recovered) = script.open(&banks(), 90).unwrap();
    assert_eq!(recovered.last_turn, 1);
    assert_eq!(recovered.checkpoints, []);
}

#[test]
fn parts_that_nobody_names_are_taken_away() {
    let folder = tempfile::tempdir().unwrap();
    let opened = open_in(folder.path(), 90).unwrap();
    let part = keys::part(77, 0);
    let value = codec::part(&part, b"left over");
    opened
        .store
        .shelf
        .apply(vec![Op::Put(part, value)])
        .unwrap();
    opened.store.shelf.sync().unwrap();
    drop(opened);
    let opened = open_in(folder.path(), 90).unwrap();
    assert_eq!(opened.recovered.scanned.orphans, 1);
    assert_eq!(opened.store.shelf.get(&keys::part(77, 0)), Ok(None));
}

#[test]
fn a_store_of_a_later_version_is_left_alone_and_said() {
    let folder = tempfile::tempdir().unwrap();
    let opened = open_in(folder.path(), 90).unwrap();
    let key = keys::format();
    let value = codec::whole(&key, &codec::to_payload(&2_u32).unwrap());
    opened.store.shelf.apply(vec![Op::Put(key, value)]).unwrap();
    opened.store.shelf.sync().unwrap();
    drop(opened);
    let said = open_in(folder.path(), 90)
        .err()
        .map(|e| e.to_string())
        .unwrap();
    assert!(said.contains("later version"), "{said}");
    assert_eq!(
        fs::read_dir(folder.path()).unwrap().count(),
        2,
        "the database and its lock"
    );
}

#[test]
fn a_second_process_is_told_who_holds_the_store() {
    let folder = tempfile::tempdir().unwrap();
    let opened = open_in(folder.path(), 90).unwrap();
    let said = open_in(folder.path(), 90)
        .err()
        .map(|e| e.to_string())
        .unwrap();
    let own = format!("in use by process {}", std::process::id());
    assert!(said.contains(&own), "{said}");
    drop(opened);
    assert!(open_in(folder.path(), 90).is_ok());
}

#[test]
fn files_opened_anew_after_an_error_serve_commits_and_readers() {
    let folder = tempfile::tempdir().unwrap();
    let mut opened = open_in(folder.path(), 90).unwrap();
    let raised = notice("n-1", at(1), State::Unacknowledged);
    let first = vec![turn(1, at(1)), Record::Notice(Arc::clone(&raised))];
    opened.store.commit(&batch(first)).unwrap();
    for number in 2..5 {
        opened.store.shelf.mend().unwrap();
        let records = vec![turn(number, at(1))];
        opened.store.commit(&batch(records)).unwrap();
        assert_eq!(
            opened.history.notice("n-1").unwrap().as_ref(),
            Some(&*raised)
        );
    }
    drop(opened);
    let opened = open_in(folder.path(), 90).unwrap();
    assert_eq!((opened.set_aside, opened.recovered.last_turn), (None, 4));
}

/// One record of any sort, small numbers so that later ones meet earlier ones.
fn records() -> impl Strategy<Value = Record> {
    let second = 0_i64..5;
    prop_oneof![
        (1_u64..9).prop_map(|n| turn(n, at(n as i64))),
        (0..3_usize, 1_u64..9, 0..30_000_usize).prop_map(|(bank, turn, length)| checkpoint(
            &banks()[bank],
            turn,
            length
        )),
        (0..3_usize, second.clone()).prop_map(|(bank, s)| digest(&banks()[bank], at(s), 40)),
        second
            .clone()
            .prop_map(|s| Record::Look(look("capper", at(s), 40))),
        (second.clone(), any::<bool>()).prop_map(|(s, open)| {
            let state = if open {
                State::Acknowledged
            } else {
                State::Normal
            };
            Record::Notice(notice(&format!("n-{s}"), at(s), state))
        }),
        (second.clone(), 1..400_usize).prop_map(|(s, n)| evidence(&format!("n-{s}"), n)),
        second.prop_map(|s| {
            let about = notice(&format!("n-{s}"), at(s), State::Normal);
            Record::Delivery(delivery(s as u64, &about))
        }),
        (0_u64..5).prop_map(|number| Record::Delivered { number }),
    ]
}

fn batches() -> impl Strategy<Value = Vec<Batch>> {
    let some = proptest::collection::vec(records(), 0..6);
    let listed = proptest::collection::vec(any::<(u16, u64)>(), 0..900);
    let batch = (some, listed).prop_map(|(records, unacknowledged)| Batch {
        records,
        unacknowledged,
    });
    proptest::collection::vec(batch, 1..8)
}

fn everything(shelf: &dyn Shelf) -> Vec<shelf::Entry> {
    let (from, to) = keys::EVERYTHING;
    shelf.page(from, to, Order::Rising, usize::MAX).unwrap()
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(24))]
    #[test]
    fn the_twin_and_sled_hold_the_same_whatever_is_committed(batches in batches()) {
        let folder = tempfile::tempdir().unwrap();
        let mut disk = open_in(folder.path(), 90).unwrap();
        let script = Script::new();
        let (mut twin, _, _) = script.open(&banks(), 90).unwrap();
        for (n, batch) in batches.iter().enumerate() {
            if n % 3 == 1 {
                // A failed attempt in between changes nothing in the end.
                script.fail_sync(1);
                let failed = twin.commit(batch);
                prop_assert!(failed.is_err() || batch.records.is_empty());
            }
            disk.store.commit(batch).unwrap();
            twin.commit(batch).unwrap();
        }
        script.crash();
        drop(disk);
        let disk = open_in(folder.path(), 90).unwrap();
        let (twin, _, recovered) = script.open(&banks(), 90).unwrap();
        let strip = |entries: Vec<shelf::Entry>| -> Vec<Vec<u8>> {
            // The failed attempts have used up serials, which heads and parts show.
            let parts = keys::part(0, 0);
            entries.into_iter().map(|(key, _)| key).filter(|key| key[0] != parts[0]).collect()
        };
        prop_assert_eq!(strip(everything(&*disk.store.shelf)), strip(everything(&*twin.shelf)));
        prop_assert_eq!(&disk.recovered.checkpoints, &recovered.checkpoints);
        prop_assert_eq!(&disk.recovered.outbox, &recovered.outbox);
        prop_assert_eq!(&disk.recovered.unacknowledged, &recovered.unacknowledged);
        let turns = |turns: Turns| -> Vec<Turn> { turns.map(Result::unwrap).collect() };
        prop_assert_eq!(turns(disk.recovered.turns), turns(recovered.turns));
        let all = |h: &dyn History| h.notices(None, 99).unwrap().items;
        let (_, past, _) = script.open(&banks(), 90).unwrap();
        prop_assert_eq!(all(&*disk.history), all(&*past));
    }
}
