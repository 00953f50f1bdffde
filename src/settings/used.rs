//! The configuration as used. Every value is checked and complete.

mod outlet;

pub use outlet::{AtMost, Encryption, Mail, Mailbox, Means, Outlet, Program, Webhook};

use std::net::SocketAddr;
use std::path::PathBuf;
use std::sync::Arc;

use crate::model::{Bank, BankIx, Name, Shift};
use crate::notice::Manners;

use super::forms::{Belief, PayloadForm};

use super::list::Origins;

/// Everything the daemon is told.
#[derive(Clone, Debug)]
pub struct Settings {
    /// The plant.
    pub plant: PlantSettings,
    /// The broker.
    pub broker: Broker,
    /// The store.
    pub store: StoreSettings,
    /// Pages and interface.
    pub web: WebSettings,
    /// The plant's manners with notices.
    pub manners: Manners,
    /// The banks; a [`BankIx`] is a place in this list.
    pub banks: Vec<Arc<Bank>>,
    /// Where each bank's measurements come from, in the same order.
    pub feeds: Vec<Feed>,
    /// The ways out of a notice besides the broker.
    pub outlets: Vec<Outlet>,
    /// Where the values that were given stand.
    pub origins: Origins,
}

/// The plant.
#[derive(Clone, Debug)]
pub struct PlantSettings {
    /// Its name.
    pub name: Name,
    /// Its time zone, resolved.
    pub zone: jiff::tz::TimeZone,
    /// Its shifts, in the order written.
    pub shifts: Vec<Shift>,
}

/// The protocol's version.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Protocol {
    /// MQTT 5.
    V5,
    /// MQTT 3.1.1.
    V4,
}

/// How to reach the broker.
#[derive(Clone, Debug, PartialEq)]
pub struct Broker {
    /// Host name or address.
    pub host: String,
    /// Port.
    pub port: u16,
    /// Whether the connection is encrypted (`mqtts://`).
    pub tls: bool,
    /// Client id of the connection that listens; the one that speaks appends `-notices`, the one
    /// for Sparkplug `-sparkplug`.
    pub client_id: String,
    /// Version.
    pub protocol: Protocol,
    /// User name.
    pub user: Option<String>,
    /// File whose first line is the password.
    pub password_file: Option<PathBuf>,
    /// PEM file of the authorities to trust; without it the system's are.
    pub ca_file: Option<PathBuf>,
    /// PEM file of the client's certificate chain.
    pub client_certificate_file: Option<PathBuf>,
    /// PEM file of the client's key.
    pub client_key_file: Option<PathBuf>,
    /// How long the broker keeps the session while we are away, in seconds (MQTT 5).
    pub session_expiry_s: u32,
    /// How many messages may be under way unacknowledged (MQTT 5).
    pub receive_maximum: u16,
    /// Largest message taken, in bytes.
    pub most_bytes: usize,
    /// Keep-alive, in seconds.
    pub keep_alive_s: u16,
}

/// The embedded store.
#[derive(Clone, Debug, PartialEq)]
pub struct StoreSettings {
    /// Its folder; made when missing.
    pub folder: PathBuf,
    /// How many days of measurements and looks to keep; 0 keeps windows, looks' short forms of a day
    /// and the evidence of notices.
    pub keep_days: u32,
}

/// Pages and interface.
#[derive(Clone, Debug, PartialEq)]
pub struct WebSettings {
    /// Address and port.
    pub listen: SocketAddr,
    /// One token per line, optionally preceded by `look ` or `act `.
    pub token_file: Option<PathBuf>,
    /// PEM file of the certificate chain with which we encrypt; without it we do not.
    pub certificate_file: Option<PathBuf>,
    /// PEM file of its key.
    pub key_file: Option<PathBuf>,
    /// Said explicitly: something in front of us encrypts.
    pub tls_in_front: bool,
    /// The address people use, when it is not that of `listen`.
    pub address: Option<String>,
}

/// Where a bank's measurements come from.
#[derive(Clone, Debug, PartialEq)]
pub struct Feed {
    /// The bank.
    pub bank: BankIx,
    /// The topic.
    pub topic: TopicTemplate,
    /// What is in a payload.
    pub payload: PayloadForm,
    /// What of it is believed.
    pub belief: Belief,
    /// Names of the columns of recordings.
    pub recording: RecordingColumns,
    /// What tells the source of a value.
    pub told_by: ToldBy,
}

/// What tells the source of a value.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ToldBy {
    /// Topic or payload.
    Message,
    /// The time at which it was taken: the sources are shifts.
    Time,
}

impl ToldBy {
    /// What stands for the source where no message names one.
    pub const fn stand_in(self) -> Option<&'static str> {
        match self {
            Self::Message => None,
            Self::Time => Some("all shifts"),
        }
    }
}

/// A topic with at most one `{source}` standing for one whole level, `+` for any one level and `#`
/// for the rest.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct TopicTemplate {
    /// The levels as written.
    pub levels: Vec<String>,
    /// Which level names the source.
    pub source_level: Option<usize>,
}

/// Names of the columns of a recording.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct RecordingColumns {
    /// Time taken.
    pub time: String,
    /// Source, in long form.
    pub source: String,
    /// Value, in long form.
    pub value: String,
    /// Cycle.
    pub cycle: String,
    /// Bank.
    pub bank: String,
}

impl Default for RecordingColumns {
    fn default() -> Self {
        let own = str::to_owned;
        Self {
            time: own("time"),
            source: own("source"),
            value: own("value"),
            cycle: own("cycle"),
            bank: own("bank"),
        }
    }
}

impl Settings {
    /// The settings of a bank's feed.
    pub fn feed(&self, bank: BankIx) -> &Feed {
        &self.feeds[bank.index()]
    }

    /// Which notices go to which outlet.
    pub fn routes(&self) -> Vec<crate::notice::Route> {
        self.outlets.iter().map(|o| o.route.clone()).collect()
    }

    /// Where people find the pages, without a slash at the end.
    pub fn pages(&self) -> String {
        match &self.web.address {
            Some(address) => address.trim_end_matches('/').to_owned(),
            None if self.web.certificate_file.is_some() => format!("https://{}", self.web.listen),
            None => format!("http://{}", self.web.listen),
        }
    }
}
