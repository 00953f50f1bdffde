//! The ways out of a notice besides the broker, as used.

use std::path::PathBuf;
use std::time::Duration;

use crate::model::Name;
use crate::notice::Route;

/// A way out of a notice.
#[derive(Clone, Debug, PartialEq)]
pub struct Outlet {
    /// Its name; never that of the broker.
    pub name: Name,
    /// How notices leave.
    pub means: Means,
    /// Which notices go there.
    pub route: Route,
    /// How much is sent at most; `None` without a limit.
    pub at_most: Option<AtMost>,
    /// How long one attempt may take.
    pub time_limit: Duration,
}

/// How notices leave.
#[derive(Clone, Debug, PartialEq)]
pub enum Means {
    /// To a web server, as signed events.
    Webhook(Webhook),
    /// By mail.
    Mail(Mail),
    /// By starting a program.
    Command(Program),
}

impl Means {
    /// The word in the configuration and for people.
    pub const fn word(&self) -> &'static str {
        match self {
            Self::Webhook(_) => "webhook",
            Self::Mail(_) => "mail",
            Self::Command(_) => "command",
        }
    }
}

/// The receiver of a webhook.
#[derive(Clone, Debug, PartialEq)]
pub struct Webhook {
    /// Its address, `http://` or `https://`.
    pub url: String,
    /// File with one secret a line, the newest first; each of them signs.
    pub secret_file: PathBuf,
    /// PEM file of the authorities to trust; without it the system's are.
    pub ca_file: Option<PathBuf>,
}

/// A mail server, and who writes to whom.
#[derive(Clone, Debug, PartialEq)]
pub struct Mail {
    /// Host name or address of the server.
    pub host: String,
    /// Port.
    pub port: u16,
    /// When the connection is encrypted.
    pub encryption: Encryption,
    /// User name at the server.
    pub user: Option<String>,
    /// File whose first line is the password.
    pub password_file: Option<PathBuf>,
    /// PEM file of the authorities to trust; without it the system's are.
    pub ca_file: Option<PathBuf>,
    /// The sender.
    pub from: Mailbox,
    /// The receivers, at least one.
    pub to: Vec<Mailbox>,
}

/// When a connection to a mail server is encrypted.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Encryption {
    /// From its start (`smtps://`).
    Always,
    /// Once the server has been asked, and never without (`smtp://`, RFC 3207).
    StartTls,
    /// Not at all, said explicitly.
    InClear,
}

/// A person or program with an address of mail.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Mailbox {
    /// The name people see.
    pub name: Option<String>,
    /// The address, `somebody@somewhere`.
    pub address: String,
}

/// A program that is started for each notice.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Program {
    /// Its path.
    pub path: PathBuf,
    /// Its arguments.
    pub arguments: Vec<String>,
}

/// At most so many in any stretch of time this long.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct AtMost {
    /// How many, at least one.
    pub count: u32,
    /// The stretch.
    pub per: Duration,
}
