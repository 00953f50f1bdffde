//! Damaged files: found at the start, set aside, said, and never deleted.

use std::fs;
use std::path::Path;

use tempfile::TempDir;

use crate::engine::Record;
use crate::notice::State;
use crate::settings::StoreSettings;
use crate::store::samples::{at, banks, checkpoint, notice, turn};
use crate::store::{Batch, OpenError, Opened, Store, open};

/// The last turn of [`filled`].
const LAST: u64 = 300;

fn open_in(folder: &Path) -> Result<Opened, OpenError> {
    let settings = StoreSettings {
        folder: folder.to_owned(),
        keep_days: 90,
    };
    open(&settings, &banks(), at(0))
}

/// A store with a few hundred commits and long records, closed.
fn filled() -> TempDir {
    let folder = tempfile::tempdir().unwrap();
    let mut opened = open_in(folder.path()).unwrap();
    for n in 1..=LAST {
        let mut records = vec![turn(n, at(n as i64))];
        if n % 50 == 0 {
            records.push(checkpoint("filler-2", n, 40_000));
            let id = format!("n-{n}");
            records.push(Record::Notice(notice(&id, at(n as i64), State::Normal)));
        }
        let unacknowledged = vec![(n as u16, n)];
        let batch = Batch {
            records,
            unacknowledged,
        };
        opened.store.commit(&batch).unwrap();
    }
    folder
}

/// The same files in another place.
fn copy_of(folder: &TempDir) -> TempDir {
    let copy = tempfile::tempdir().unwrap();
    let (from, to) = (folder.path().join("database"), copy.path().join("database"));
    fs::create_dir_all(to.join("blobs")).unwrap();
    for entry in fs::read_dir(from).unwrap() {
        let entry = entry.unwrap();
        if entry.file_type().unwrap().is_file() {
            fs::copy(entry.path(), to.join(entry.file_name())).unwrap();
        }
    }
    copy
}

/// Damages the file and opens: either everything is as it was (the damage hit nothing that counts),
/// or the whole database is set aside and a fresh one is usable. sled itself may write over what lies
/// behind the damage when it opens, so the files set aside are not compared byte for byte.
fn check(filled: &TempDir, what: &str, damage: impl FnOnce(&Path)) -> bool {
    let folder = copy_of(filled);
    let db = folder.path().join("database").join("db");
    damage(&db);
    let mut opened = open_in(folder.path()).unwrap_or_else(|e| panic!("{what}: {e}"));
    let Some(aside) = opened.set_aside.take() else {
        let recovered = opened.recovered;
        let turns: Vec<u64> = recovered.turns.map(|t| t.unwrap().number).collect();
        let expected: Vec<u64> = (1..=LAST).collect();
        assert_eq!(turns, expected, "{what}: turns are missing");
        return false;
    };
    assert!(!aside.why.is_empty(), "{what}");
    assert!(aside.path.join("db").is_file(), "{what}: nothing was kept");
    assert_eq!(opened.recovered.last_turn, 0, "{what}");
    let fresh = Batch {
        records: vec![turn(1, at(1))],
        unacknowledged: Vec::new(),
    };
    opened.store.commit(&fresh).unwrap();
    drop(opened);
    let again = open_in(folder.path()).unwrap();
    assert_eq!(
        (again.recovered.last_turn, again.set_aside),
        (1, None),
        "{what}"
    );
    true
}

#[test]
fn overwritten_files_are_set_aside() {
    let filled = filled();
    for (what, from, length) in [
        ("the first kilobyte", 0.0, 1_024),
        ("a stretch in the middle", 0.4, 60_000),
        ("everything", 0.0, usize::MAX),
    ] {
        let aside = check(&filled, what, |db| {
            let mut bytes = fs::read(db).unwrap();
            let start = (bytes.len() as f64 * from) as usize;
            let end = start.saturating_add(length).min(bytes.len());
            bytes[start..end].fill(0xa5);
            fs::write(db, bytes).unwrap();
        });
        assert!(aside, "{what} was overwritten and nothing was said");
    }
}

#[test]
fn flipped_bits_are_set_aside_or_harmless() {
    let filled = filled();
    let mut found = 0;
    for place in 0..24_usize {
        let what = format!("a bit flipped at {place}/24");
        found += usize::from(check(&filled, &what, |db| {
            let mut bytes = fs::read(db).unwrap();
            let at = bytes.len() * place / 24 + 97;
            bytes[at] ^= 0x10;
            fs::write(db, bytes).unwrap();
        }));
    }
    assert!(found > 0, "no flipped bit was ever found");
}

#[test]
fn cut_files_are_set_aside_or_shorter_by_their_tail() {
    let filled = filled();
    for tenth in [0_u64, 1, 3, 5, 7, 9] {
        let what = format!("cut to {tenth}/10");
        check(&filled, &what, |db| {
            let length = fs::metadata(db).unwrap().len();
            let file = fs::File::options().write(true).open(db).unwrap();
            file.set_len(length * tenth / 10).unwrap();
        });
    }
}

#[test]
fn a_snapshot_half_written_at_a_crash_does_not_matter() {
    let folder = filled();
    let snapshot = "database/snap.0000000000000ABC.generating";
    fs::write(folder.path().join(snapshot), b"half").unwrap();
    let opened = open_in(folder.path()).unwrap();
    assert_eq!((opened.set_aside, opened.recovered.last_turn), (None, LAST));
}
