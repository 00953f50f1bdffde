//! How a command ends: the exit codes, in one place.
//!
//! Machine output goes to stdout, messages to stderr; a command prints its own message before it
//! returns one of these.

use std::process::ExitCode;

/// How a command ended.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Exit {
    /// Done.
    Done,
    /// Failed while running.
    Failed,
    /// Wrong usage.
    Usage,
    /// `rehearse --fail-on-notice`, and a notice was raised.
    NoticeRaised,
    /// Faulty configuration.
    Configuration,
}

impl Exit {
    /// The code that the shell sees. 78 is `EX_CONFIG` of BSD's `sysexits.h`.
    pub const fn code(self) -> u8 {
        match self {
            Self::Done => 0,
            Self::Failed => 1,
            Self::Usage => 2,
            Self::NoticeRaised => 3,
            Self::Configuration => 78,
        }
    }
}

impl From<Exit> for ExitCode {
    fn from(exit: Exit) -> Self {
        Self::from(exit.code())
    }
}
