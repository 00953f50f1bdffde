//! What a crash or a bad disk leaves behind: swept up, or set aside under another name.
//!
//! Nothing that holds data is deleted. Only the database's own half-written snapshots go: one that
//! was being written at a crash makes the next opening fail.
//! Known limit: sled takes damage in its log for the log's end and may write over what lies behind it
//! as it opens; the note of confirmed commits outside the database is what tells that some are gone.

use std::fs;
use std::io;
use std::path::{Path, PathBuf};

use crate::model::Time;

/// Takes away half-written snapshots (`snap.*.generating`), and says how many there were.
///
/// # Errors
/// When the folder cannot be listed or a file not be removed.
pub(super) fn sweep(database: &Path) -> io::Result<usize> {
    let mut swept = 0;
    for entry in fs::read_dir(database)? {
        let entry = entry?;
        let name = entry.file_name();
        let name = name.to_string_lossy();
        if name.starts_with("snap.") && name.ends_with(".generating") {
            fs::remove_file(entry.path())?;
            swept += 1;
        }
    }
    Ok(swept)
}

/// Gives a damaged database another name beside it: `database-damaged-20260301T060000Z`.
///
/// # Errors
/// When it cannot be renamed.
pub(super) fn set_aside(database: &Path, now: Time) -> io::Result<PathBuf> {
    let stamp = match now.to_jiff() {
        Some(at) => at.strftime("%Y%m%dT%H%M%SZ").to_string(),
        None => now.us().to_string(),
    };
    let name = database.file_name().unwrap_or_default().to_string_lossy();
    let mut to = database.with_file_name(format!("{name}-damaged-{stamp}"));
    let mut again = 1;
    while to.try_exists()? {
        again += 1;
        to = database.with_file_name(format!("{name}-damaged-{stamp}-{again}"));
    }
    fs::rename(database, &to)?;
    Ok(to)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn only_half_written_snapshots_are_swept() {
        let folder = tempfile::tempdir().unwrap();
        for name in [
            "db",
            "conf",
            "snap.00A",
            "snap.00B.generating",
            "x.generating",
        ] {
            fs::write(folder.path().join(name), b"x").unwrap();
        }
        assert_eq!(sweep(folder.path()).unwrap(), 1);
        assert!(!folder.path().join("snap.00B.generating").exists());
        assert_eq!(fs::read_dir(folder.path()).unwrap().count(), 4);
    }

    #[test]
    fn a_second_one_of_the_same_second_gets_its_own_name() {
        let folder = tempfile::tempdir().unwrap();
        let database = folder.path().join("database");
        let now = Time::parse_rfc3339("2026-03-01T06:00:00Z").unwrap();
        let mut names = Vec::new();
        for content in ["one", "two"] {
            fs::create_dir(&database).unwrap();
            fs::write(database.join("db"), content).unwrap();
            let aside = set_aside(&database, now).unwrap();
            assert_eq!(fs::read_to_string(aside.join("db")).unwrap(), content);
            names.push(aside.file_name().unwrap().to_string_lossy().into_owned());
        }
        assert_eq!(
            names,
            [
                "database-damaged-20260301T060000Z",
                "database-damaged-20260301T060000Z-2"
            ]
        );
    }
}

#[cfg(test)]
#[path = "damage_tests.rs"]
mod whole;
