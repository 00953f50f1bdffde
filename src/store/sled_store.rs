//! The store on sled 0.34: opening it with care, and a shelf that syncs for real.
//!
//! What sled needs from us, and why it is done here: its `flush` does not reach the platter on Linux,
//! so the data file is opened a second time and synced; a successful open proves nothing, so every
//! record is checked first; an error during a write stays for good, so the database is opened anew
//! before the next attempt; damaged files can make it panic, so it is opened in a thread of its own.

use std::fs::{self, File, TryLockError};
use std::io::{self, ErrorKind, Read, Seek, Write};
use std::os::unix::fs::FileExt;
use std::path::{Path, PathBuf};
use std::sync::{Arc, PoisonError, RwLock};
use std::time::Duration;

use crate::engine::History;
use crate::model::{Name, Time};
use crate::settings::StoreSettings;

use super::damage;
use super::history::Past;
use super::journal::Journal;
use super::recover::{ReadError, Recovered, Scanned, recover, scan};
use super::shelf::{Entry, Op, Order, Shelf, ShelfError};

/// Memory for pages, in bytes. sled's own default of 1 GiB is beyond a small machine.
const CACHE_BYTES: u64 = 64 * 1024 * 1024;

/// The store on disk.
pub type SledStore = Journal<SledShelf>;

/// A store that is open, and what it remembered.
pub struct Opened {
    /// Takes commits.
    pub store: SledStore,
    /// Reads the past.
    pub history: Arc<dyn History>,
    /// What the daemon goes on from.
    pub recovered: Recovered,
    /// Where a damaged database was put, and what was wrong with it.
    pub set_aside: Option<SetAside>,
}

/// A damaged database that was given another name.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct SetAside {
    /// Where it is now.
    pub path: PathBuf,
    /// What was wrong with it.
    pub why: String,
}

/// Why the store could not be opened.
#[derive(Debug, thiserror::Error)]
pub enum OpenError {
    /// The folder cannot be made, listed or written.
    #[error("the store's folder {} cannot be used: {why}", .folder.display())]
    Folder {
        /// The configured folder.
        folder: PathBuf,
        /// What went wrong.
        why: io::Error,
    },
    /// Another process has it open.
    #[error(
        "the store in {} is in use by {holder}; stop that process, or give this one another store.folder",
        .folder.display()
    )]
    Held {
        /// The configured folder.
        folder: PathBuf,
        /// Who holds it, as far as is known.
        holder: String,
    },
    /// The database does not open although nothing says that it is damaged.
    #[error("the store in {} cannot be opened: {why}", .folder.display())]
    Database {
        /// The configured folder.
        folder: PathBuf,
        /// What went wrong.
        why: String,
    },
    /// It is damaged and cannot be given another name.
    #[error("the damaged store in {} cannot be set aside: {why}", .folder.display())]
    SetAside {
        /// The configured folder.
        folder: PathBuf,
        /// What went wrong.
        why: io::Error,
    },
    /// What it holds cannot be used, and it is no damage.
    #[error("the store in {}: {why}", .folder.display())]
    Content {
        /// The configured folder.
        folder: PathBuf,
        /// What went wrong.
        why: ReadError,
    },
}

/// Opens the store, checks every record, and reads what the daemon goes on from. Blocks for as long
/// as the files take to read. `banks` are the configured ones in their order.
///
/// # Errors
/// When the folder is unusable, held by another process, or written by a later version. Damage is no
/// error: the database is set aside and a fresh one begun.
pub fn open(settings: &StoreSettings, banks: &[Name], now: Time) -> Result<Opened, OpenError> {
    let folder = settings.folder.as_path();
    let unusable = |why| OpenError::Folder {
        folder: folder.to_owned(),
        why,
    };
    fs::create_dir_all(folder).map_err(unusable)?;
    let lock = Arc::new(lock(folder)?);
    let database = folder.join("database");

    let (shelf, scanned, set_aside) = match open_checked(&database, &lock) {
        Ok((shelf, scanned)) => (shelf, scanned, None),
        Err(Trouble::Damaged(why)) => {
            let (shelf, scanned, path) = start_fresh(folder, &database, &lock, now)?;
            (shelf, scanned, Some(SetAside { path, why }))
        }
        Err(other) => return Err(other.into_open(folder)),
    };
    let shelf = Arc::new(shelf);
    let banks: Arc<[Name]> = banks.into();
    let dynamic: Arc<dyn Shelf> = Arc::clone(&shelf) as _;
    let recovered = recover(&dynamic, &banks, scanned).map_err(|why| OpenError::Content {
        folder: folder.to_owned(),
        why,
    })?;
    Ok(Opened {
        store: Journal::new(shelf, banks, settings.keep_days, &recovered),
        history: Arc::new(Past(dynamic)),
        recovered,
        set_aside,
    })
}

/// Takes the folder for this process; the lock goes with the file, also when the process is killed.
fn lock(folder: &Path) -> Result<File, OpenError> {
    let path = folder.join("lock");
    let unusable = |why| OpenError::Folder {
        folder: folder.to_owned(),
        why,
    };
    let mut options = File::options();
    let mut file = options
        .read(true)
        .write(true)
        .create(true)
        .truncate(false)
        .open(&path)
        .map_err(unusable)?;
    match file.try_lock() {
        Ok(()) => {}
        Err(TryLockError::WouldBlock) => {
            let mut holder = String::new();
            // Whoever holds it wrote its number there; without it the message is still right.
            let number = file.read_to_string(&mut holder).map(|_| holder.trim());
            let holder = match number {
                Ok(pid) if !pid.is_empty() => format!("process {pid}"),
                _ => "another process".to_owned(),
            };
            return Err(OpenError::Held {
                folder: folder.to_owned(),
                holder,
            });
        }
        Err(TryLockError::Error(why)) => return Err(unusable(why)),
    }
    let note = format!("{}\n", std::process::id());
    file.set_len(0)
        .and_then(|()| file.rewind())
        .and_then(|()| file.write_all(note.as_bytes()))
        .map_err(unusable)?;
    Ok(file)
}

/// Sets the damaged database aside and begins a new one. When that fails too, the disk is at fault
/// and not the database, which gets its name back.
fn start_fresh(
    folder: &Path,
    database: &Path,
    lock: &Arc<File>,
    now: Time,
) -> Result<(SledShelf, Scanned, PathBuf), OpenError> {
    let failed = |why| OpenError::SetAside {
        folder: folder.to_owned(),
        why,
    };
    let aside = damage::set_aside(database, now).map_err(failed)?;
    match open_checked(database, lock) {
        Ok((shelf, scanned)) => Ok((shelf, scanned, aside)),
        Err(trouble) => {
            fs::remove_dir_all(database)
                .or_else(|e| {
                    if e.kind() == ErrorKind::NotFound {
                        Ok(())
                    } else {
                        Err(e)
                    }
                })
                .and_then(|()| fs::rename(&aside, database))
                .map_err(failed)?;
            Err(trouble.into_open(folder))
        }
    }
}

/// Why a database did not open.
enum Trouble {
    /// Its files are not what was written.
    Damaged(String),
    /// The machine does not give what is needed.
    Machine(String),
    /// A later version wrote it.
    Newer(ReadError),
}

impl Trouble {
    fn into_open(self, folder: &Path) -> OpenError {
        let folder = folder.to_owned();
        match self {
            Self::Damaged(why) | Self::Machine(why) => OpenError::Database { folder, why },
            Self::Newer(why) => OpenError::Content { folder, why },
        }
    }
}

impl From<sled::Error> for Trouble {
    fn from(e: sled::Error) -> Self {
        let why = e.to_string();
        match e {
            sled::Error::Io(e) => e.into(),
            sled::Error::Corruption { .. } => {
                Self::Damaged("the checksums of its files do not fit".to_owned())
            }
            _ => Self::Damaged(why),
        }
    }
}

impl From<io::Error> for Trouble {
    fn from(e: io::Error) -> Self {
        match e.kind() {
            // What a file of the wrong length or content gives; the rest is the machine's.
            ErrorKind::UnexpectedEof
            | ErrorKind::InvalidData
            | ErrorKind::InvalidInput
            | ErrorKind::NotFound => Self::Damaged(e.to_string()),
            _ => Self::Machine(e.to_string()),
        }
    }
}

fn open_checked(database: &Path, lock: &Arc<File>) -> Result<(SledShelf, Scanned), Trouble> {
    let path = database.to_owned();
    let lock = Arc::clone(lock);
    let work = move || {
        fs::create_dir_all(&path).map_err(|e| Trouble::Machine(e.to_string()))?;
        damage::sweep(&path).map_err(|e| Trouble::Machine(e.to_string()))?;
        let shelf = SledShelf::open(path, lock)?;
        match scan(&shelf) {
            Ok(scanned) => Ok((shelf, scanned)),
            Err(ReadError::Shelf(why)) => Err(shelf.judge(why)),
            Err(e @ (ReadError::Record { .. } | ReadError::Behind { .. })) => {
                Err(Trouble::Damaged(e.to_string()))
            }
            Err(e @ ReadError::Newer { .. }) => Err(Trouble::Newer(e)),
        }
    };
    let thread = std::thread::Builder::new().name("store-open".to_owned());
    let handle = thread
        .spawn(work)
        .map_err(|e| Trouble::Machine(e.to_string()))?;
    let panicked = "the database gave up on its files".to_owned();
    handle.join().unwrap_or(Err(Trouble::Damaged(panicked)))
}

/// A sled database, opened again after an error.
pub struct SledShelf {
    path: PathBuf,
    files: RwLock<Result<Files, ShelfError>>,
    /// Held for as long as the database is open.
    _lock: Arc<File>,
}

struct Files {
    db: sled::Db,
    /// The data file once more, because only `sync_data` on it reaches the platter.
    data: File,
    /// Holds the number of commits, see [`Shelf::note`].
    note: File,
}

impl SledShelf {
    fn open(path: PathBuf, lock: Arc<File>) -> Result<Self, Trouble> {
        let files = open_files(&path)?;
        Ok(Self {
            path,
            files: RwLock::new(Ok(files)),
            _lock: lock,
        })
    }

    /// Whether an error while scanning was damage: a machine that refuses to read at all is not.
    fn judge(&self, why: String) -> Trouble {
        match File::open(self.path.join("db")) {
            Ok(_) => Trouble::Damaged(why),
            Err(e) => Trouble::Machine(format!("{why}; {e}")),
        }
    }

    fn with<T>(&self, work: impl FnOnce(&Files) -> Result<T, ShelfError>) -> Result<T, ShelfError> {
        let files = self.files.read().unwrap_or_else(PoisonError::into_inner);
        match &*files {
            Ok(files) => work(files),
            Err(why) => Err(why.clone()),
        }
    }
}

/// Opens sled's files. A database that was just closed in this process lets go of its lock a moment
/// later; another process cannot hold it, because the folder is ours.
fn open_files(path: &Path) -> Result<Files, sled::Error> {
    const ATTEMPTS: u32 = 40;
    let mut attempt = 1;
    loop {
        match try_open(path) {
            Err(sled::Error::Io(e)) if attempt < ATTEMPTS && e.to_string().contains("lock") => {
                attempt += 1;
                std::thread::sleep(Duration::from_millis(50));
            }
            other => return other,
        }
    }
}

fn try_open(path: &Path) -> Result<Files, sled::Error> {
    let config = sled::Config::new()
        .path(path)
        .cache_capacity(CACHE_BYTES)
        .flush_every_ms(None)
        .mode(sled::Mode::LowSpace);
    let db = config.open()?;
    let data = File::options().write(true).open(path.join("db"))?;
    let mut options = File::options();
    let options = options.read(true).write(true).create(true).truncate(false);
    let note = options.open(path.join("commits"))?;
    // The names of new files must survive a power cut as well.
    File::open(path)?.sync_all()?;
    Ok(Files { db, data, note })
}

fn wrong(e: impl std::fmt::Display) -> ShelfError {
    ShelfError(e.to_string())
}

impl Shelf for SledShelf {
    fn get(&self, key: &[u8]) -> Result<Option<Vec<u8>>, ShelfError> {
        self.with(|files| Ok(files.db.get(key).map_err(wrong)?.map(|v| v.to_vec())))
    }

    fn page(
        &self,
        from: &[u8],
        to: &[u8],
        order: Order,
        most: usize,
    ) -> Result<Vec<Entry>, ShelfError> {
        if from >= to {
            return Ok(Vec::new());
        }
        self.with(|files| {
            let range = files.db.range(from..to);
            let entry = |e: sled::Result<(sled::IVec, sled::IVec)>| {
                e.map(|(k, v)| (k.to_vec(), v.to_vec())).map_err(wrong)
            };
            match order {
                Order::Rising => range.take(most).map(entry).collect(),
                Order::Falling => range.rev().take(most).map(entry).collect(),
            }
        })
    }

    fn apply(&self, ops: Vec<Op>) -> Result<(), ShelfError> {
        let mut batch = sled::Batch::default();
        for op in ops {
            match op {
                Op::Put(key, value) => batch.insert(key, value),
                Op::Remove(key) => batch.remove(key),
            }
        }
        self.with(|files| files.db.apply_batch(batch).map_err(wrong))
    }

    fn sync(&self) -> Result<(), ShelfError> {
        self.with(|files| {
            files.db.flush().map_err(wrong)?;
            files.data.sync_data().map_err(wrong)
        })
    }

    fn note(&self, commits: u64) -> Result<(), ShelfError> {
        let number = commits.to_le_bytes();
        let sum = crc32fast::hash(&number).to_le_bytes();
        let note = [&number[..], &sum].concat();
        self.with(|files| files.note.write_all_at(&note, 0).map_err(wrong))
    }

    fn noted(&self) -> Option<u64> {
        let mut note = [0; 12];
        self.with(|files| files.note.read_exact_at(&mut note, 0).map_err(wrong))
            .ok()?;
        let (number, sum) = note.split_first_chunk::<8>()?;
        let right = *sum == crc32fast::hash(number).to_le_bytes();
        right.then(|| u64::from_le_bytes(*number))
    }

    fn mend(&self) -> Result<(), ShelfError> {
        let mut files = self.files.write().unwrap_or_else(PoisonError::into_inner);
        // The old database must be gone, and its lock with it, before the files are opened again.
        *files = Err(ShelfError("the database is being opened again".to_owned()));
        damage::sweep(&self.path).map_err(wrong)?;
        match open_files(&self.path) {
            Ok(opened) => {
                *files = Ok(opened);
                Ok(())
            }
            Err(e) => {
                let why = wrong(e);
                *files = Err(why.clone());
                Err(why)
            }
        }
    }
}
