//! The store in a process of its own: killed in the middle of commits, and without room on the disk.
//!
//! The test starts itself again with a task in the environment; the child says on stdout what was
//! confirmed, and the parent looks for exactly that.

use std::io::{BufRead, BufReader, Write};
use std::path::Path;
use std::process::{Child, Command, Stdio};

use evenrow::engine::{Event, Record, Turn};
use evenrow::model::{BankIx, Measurement, Name, Time, Value};
use evenrow::settings::StoreSettings;
use evenrow::store::{Batch, Opened, Store, open};

const TASK: &str = "EVENROW_TEST_STORE_TASK";
const FOLDER: &str = "EVENROW_TEST_STORE_FOLDER";

fn open_in(folder: &Path) -> Opened {
    let settings = StoreSettings {
        folder: folder.to_owned(),
        keep_days: 90,
    };
    let banks: Vec<Name> = vec!["filler-2".into()];
    open(&settings, &banks, Time::from_us(0)).expect("the store opens")
}

/// A turn of 200 measurements and, now and then, a checkpoint of 200 kB.
fn batch(number: u64) -> Batch {
    let one = |i: i64| Measurement {
        bank: BankIx(0),
        source: format!("{:02}", i % 12).into(),
        value: Value::Decimal {
            coefficient: number as i64 * 31 % 977 + i,
            exponent: -1,
        },
        taken: Some(Time::from_us(number as i64 * 1_000_000 + i)),
        cycle: Some(number as i64),
    };
    let turn = Turn {
        number,
        now: Time::from_us(number as i64 * 1_000_000),
        event: Event::Measurements((0..200).map(one).collect()),
    };
    let mut records = vec![Record::Turn(turn)];
    if number.is_multiple_of(40) {
        records.push(Record::Checkpoint {
            bank: "filler-2".into(),
            turn: number,
            state: vec![number as u8; 200_000],
        });
    }
    Batch {
        records,
        unacknowledged: vec![(number as u16, number)],
    }
}

/// What the child does: commits until it is killed or a commit fails, and says each number that was
/// confirmed. After a failure it tries again a few times, as the daemon does.
#[test]
fn the_task_of_the_child() {
    let Some(folder) = std::env::var_os(FOLDER) else {
        return;
    };
    assert_eq!(std::env::var(TASK).as_deref(), Ok("commit"));
    let mut opened = open_in(Path::new(&folder));
    let mut out = std::io::stdout();
    for number in opened.recovered.last_turn + 1..2_000 {
        let batch = batch(number);
        // A retry may find room in a part of the file that has become free; then it has to hold.
        let mut tried = opened.store.commit(&batch);
        for _ in 0..3 {
            if tried.is_err() {
                tried = opened.store.commit(&batch);
            }
        }
        if let Err(e) = tried {
            writeln!(out, "\nfailed {e}").expect("the parent listens");
            return;
        }
        writeln!(out, "\nkept {number}").expect("the parent listens");
    }
}

fn child(folder: &Path, limited: bool) -> Child {
    let exe = std::env::current_exe().expect("the test's own file");
    let limit = if limited {
        // Half a mebibyte at most; the signal is ignored so that the write fails instead.
        "trap '' XFSZ; ulimit -f 1024; "
    } else {
        ""
    };
    let run = format!("{limit}exec \"$0\" the_task_of_the_child --exact --nocapture");
    Command::new("sh")
        .args(["-c", &run])
        .arg(exe)
        .env(TASK, "commit")
        .env(FOLDER, folder)
        .stdout(Stdio::piped())
        .stderr(Stdio::inherit())
        .spawn()
        .expect("the child starts")
}

/// Everything up to `kept` is there, whole and in order; at most one more, which was under way.
fn check(folder: &Path, kept: u64) {
    let opened = open_in(folder);
    assert_eq!(opened.set_aside, None, "nothing is damaged");
    let recovered = opened.recovered;
    let last = recovered.last_turn;
    assert!(
        (kept..=kept + 1).contains(&last),
        "kept {kept}, found {last}"
    );
    let checkpoint = last / 40 * 40;
    let found: Vec<(u64, usize)> = recovered
        .checkpoints
        .iter()
        .map(|(_, t, s)| (*t, s.len()))
        .collect();
    let expected = if checkpoint == 0 {
        vec![]
    } else {
        vec![(checkpoint, 200_000)]
    };
    assert_eq!(found, expected);
    let turns: Vec<Record> = recovered
        .turns
        .map(|t| Record::Turn(t.expect("readable")))
        .collect();
    let expected: Vec<Record> = (checkpoint + 1..=last)
        .map(|n| batch(n).records.swap_remove(0))
        .collect();
    assert!(
        turns == expected,
        "turns {} to {last} differ",
        checkpoint + 1
    );
    assert_eq!(recovered.unacknowledged, batch(last).unacknowledged);
}

#[test]
fn what_was_confirmed_survives_being_killed() {
    let folder = tempfile::tempdir().expect("a folder");
    let mut kept = 0;
    for stop_after in [3, 50, 41, 1, 97] {
        let mut child = child(folder.path(), false);
        let lines = BufReader::new(child.stdout.take().expect("a pipe")).lines();
        let numbers = lines
            .map_while(Result::ok)
            .filter_map(|l| l.strip_prefix("kept ")?.parse().ok());
        kept = numbers.take(stop_after).last().unwrap_or(kept);
        child.kill().expect("it is killed");
        child.wait().expect("it is gone");
        // More may have been confirmed than was read before the kill.
        let opened = open_in(folder.path());
        assert!(opened.recovered.last_turn >= kept);
        kept = opened.recovered.last_turn;
        drop(opened);
        check(folder.path(), kept);
    }
    assert!(kept >= 192, "five children kept {kept} turns");
}

#[test]
fn a_disk_without_room_is_an_error_and_loses_nothing() {
    let folder = tempfile::tempdir().expect("a folder");
    let output = child(folder.path(), true)
        .wait_with_output()
        .expect("it ends");
    let said = String::from_utf8_lossy(&output.stdout);
    assert!(output.status.success(), "the child broke off: {said}");
    assert!(said.contains("failed the "), "no commit failed: {said}");
    let mut numbers = said
        .lines()
        .filter_map(|l| l.strip_prefix("kept ")?.parse().ok());
    let kept = numbers
        .next_back()
        .expect("some were kept before the disk was full");
    check(folder.path(), kept);
}
