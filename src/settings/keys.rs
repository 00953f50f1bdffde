//! Every key there is, with an example and what it is for: hints are made from it, unknown keys are
//! compared with it, and a test holds the shipped sample against it.

/// A key of a section.
#[derive(Clone, Copy, Debug)]
pub(super) struct Key {
    /// The section as it is written in [`title`]; empty for the sections themselves.
    pub(super) section: &'static str,
    /// The key.
    pub(super) name: &'static str,
    /// A value as it is written in the file.
    pub(super) example: &'static str,
    /// What it is, after "it is".
    pub(super) about: &'static str,
}

impl Key {
    /// Whether it is written as a heading, `[plant]`, and not as `key = value`.
    pub(super) fn is_heading(&self) -> bool {
        self.section.is_empty() || self.name == "shift"
    }
}

const fn key(
    section: &'static str,
    name: &'static str,
    example: &'static str,
    about: &'static str,
) -> Key {
    Key {
        section,
        name,
        example,
        about,
    }
}

/// Every key of this version.
#[rustfmt::skip]
pub(super) const KEYS: &[Key] = &[
    key("", "plant", "[plant]", "the section about the plant"),
    key("", "broker", "[broker]", "the section about the MQTT broker"),
    key("", "store", "[store]", "the section about the embedded store"),
    key("", "web", "[web]", "the section about pages and interface"),
    key("", "notices", "[notices]", "the section about the manners with notices"),
    key("", "bank", "[[bank]]", "one section for each bank"),
    key("", "outlet", "[[outlet]]", "one section for each way out of a notice besides the broker"),
    key("plant", "name", "\"Quayside\"", "the plant's name, in notices, pages and topics"),
    key("plant", "time_zone", "\"Europe/Lisbon\"", "the zone in which people read times, by its IANA name"),
    key("plant", "shift", "[[plant.shift]]", "one section for each shift"),
    key("plant.shift", "name", "\"early\"", "the shift's name"),
    key("plant.shift", "from", "\"06:00\"", "when the shift starts, by the clock on the wall"),
    key("plant.shift", "to", "\"14:00\"", "when the shift ends, by the clock on the wall"),
    key("broker", "url", "\"mqtt://127.0.0.1:1883\"", "where the broker is; mqtts:// encrypts"),
    key("broker", "client_id", "\"evenrow-quayside\"", "the client id; the connection that sends notices appends -notices"),
    key("broker", "protocol", "5", "the version of MQTT: 5, or 4 for 3.1.1"),
    key("broker", "user", "\"evenrow\"", "the user name at the broker"),
    key("broker", "password_file", "\"/etc/evenrow/broker.password\"", "the file whose first line is the password"),
    key("broker", "ca_file", "\"/etc/evenrow/ca.pem\"", "the authorities that may vouch for the broker (PEM)"),
    key("broker", "client_certificate_file", "\"/etc/evenrow/client.pem\"", "our certificate (PEM)"),
    key("broker", "client_key_file", "\"/etc/evenrow/client.key\"", "the key of our certificate (PEM)"),
    key("broker", "session_expiry", "\"7 d\"", "how long the broker keeps what we miss while away (protocol 5)"),
    key("broker", "receive_maximum", "1000", "how many messages may be under way unacknowledged (protocol 5)"),
    key("broker", "most_bytes", "262144", "the largest payload taken, in bytes"),
    key("broker", "keep_alive", "\"30s\"", "how long the connection may be quiet before it is tried"),
    key("store", "folder", "\"/var/lib/evenrow\"", "the folder of the embedded store; made when missing"),
    key("store", "keep_days", "90", "how many days of measurements and looks to keep; 0 keeps windows and evidence only"),
    key("web", "listen", "\"127.0.0.1:7310\"", "the address and port of pages, interface and metrics"),
    key("web", "token_file", "\"/etc/evenrow/tokens\"", "the file of tokens, one a line, each optionally preceded by `look ` or `act `"),
    key("web", "certificate_file", "\"/etc/evenrow/web.pem\"", "our certificate for pages and interface, with its chain (PEM)"),
    key("web", "key_file", "\"/etc/evenrow/web.key\"", "the key of that certificate (PEM)"),
    key("web", "address", "\"https://evenrow.example\"", "the address that notices link to, where it is not that of `listen`"),
    key("web", "tls_in_front", "true", "the word that something in front of evenrow encrypts; without a certificate needed beyond loopback"),
    key("notices", "longest_shelving", "\"8h\"", "how long a notice may be shelved at most"),
    key("notices", "latching", "false", "whether a notice that returned wants to be acknowledged even where it was before"),
    key("notices", "repeat_after", "\"4h\"", "after how long an unacknowledged notice is sent again; without it never"),
    key("notices", "on_delay", "\"30s\"", "how long a source must be silent, stuck or wrong in time before people are told"),
    key("notices", "off_delay", "\"30s\"", "how long it must be well again before its notice returns"),
    key("notices", "settling", "\"2min\"", "how long notices are held back after a start or a changeover"),
    key("outlet", "name", "\"maintenance\"", "the outlet's name, in pages, metrics and logs"),
    key("outlet", "way", "\"webhook\"", "how notices leave: \"webhook\", \"mail\" or \"command\""),
    key("outlet", "url", "\"https://desk.quayside.example/notices\"", "where to: the receiver of a webhook, or the mail server (smtp:// with STARTTLS, or smtps://)"),
    key("outlet", "secret_file", "\"/etc/evenrow/desk.secrets\"", "the file of secrets that sign a webhook, one a line, the newest first"),
    key("outlet", "ca_file", "\"/etc/evenrow/ca.pem\"", "the authorities that may vouch for the receiver (PEM)"),
    key("outlet", "user", "\"evenrow\"", "the user name at the mail server"),
    key("outlet", "password_file", "\"/etc/evenrow/mail.password\"", "the file whose first line is the password"),
    key("outlet", "in_clear", "true", "the word that mail may travel unencrypted, for a mail server that cannot encrypt"),
    key("outlet", "from", "\"evenrow <evenrow@quayside.example>\"", "the sender of mail"),
    key("outlet", "to", "[\"Night shift <night@quayside.example>\"]", "the receivers of mail"),
    key("outlet", "program", "\"/usr/local/bin/ring-bell\"", "the program that is started for each notice"),
    key("outlet", "arguments", "[\"--hall\", \"2\"]", "the program's arguments, always the same"),
    key("outlet", "time_limit", "\"20s\"", "how long sending one notice may take"),
    key("outlet", "banks", "[\"filler-2\"]", "the banks whose notices go there; without it all"),
    key("outlet", "kinds", "[\"level_apart\"]", "the kinds of notices that go there; without it all"),
    key("outlet", "priorities", "[\"medium\", \"high\"]", "the priorities that go there; without it all"),
    key("outlet", "shifts", "[\"night\"]", "the shifts in which notices begin to go there; without it at any time"),
    key("outlet", "escalate_after", "\"10min\"", "how long a notice must stand unacknowledged before it goes there"),
    key("outlet", "updates", "\"states\"", "what is sent again: \"states\", or \"all\" for moved figures too"),
    key("outlet", "at_most", "\"12 per 1h\"", "how much is sent; what is more is sent together, a little later"),
    key("bank", "name", "\"filler-2\"", "the bank's name, unique in the plant"),
    key("bank", "equipment", "\"filler 2\"", "the machine that the bank belongs to"),
    key("bank", "characteristic", "\"net content\"", "what is measured"),
    key("bank", "unit", "\"g\"", "the unit of every value, margin and limit of the bank"),
    key("bank", "resolution", "0.1", "the step of the instrument, in the unit"),
    key("bank", "target", "503.0", "what every source should give, in the unit"),
    key("bank", "declared", "500.0", "the declared (label) quantity, in the unit"),
    key("bank", "limits", "{ lower = 485.0, upper = 515.0 }", "the limits of a single value, in the unit"),
    key("bank", "topic", "\"quayside/filler2/head/{source}/net\"", "the topic; {source} is the level that names the source"),
    key("bank", "payload", "{ form = \"json\", value = \"/v\" }", "what a message holds, and where things stand in it"),
    key("bank", "sentinels", "[-127, 9999]", "the values by which the instrument says that it has none; they are refused"),
    key("bank", "plausible", "{ lower = 0.0, upper = 1000.0 }", "beyond these no value of the characteristic can lie; it is refused"),
    key("bank", "sources", "[\"01\", \"02\", \"03\", \"04\"]", "the sources in their physical order, \"discover\", or \"shifts\" to compare the shifts of the plant"),
    key("bank", "most_sources", "120", "how many sources \"discover\" may find"),
    key("bank", "pairing", "\"cycle\"", "how values of different sources belong together: \"cycle\", { slot = \"10s\" }, \"none\", or \"day\" for shifts"),
    key("bank", "spans", "[10, 40, 160, 640]", "the lengths of the looks' windows, in values per source"),
    key("bank", "look_every", "\"30s\"", "the time between looks"),
    key("bank", "margin", "0.8", "the largest difference between any two sources that does not matter, in the unit"),
    key("bank", "spread_margin", "1.5", "the largest ratio of two standard deviations that does not matter"),
    key("bank", "false_calls", "\"1 per 90 days\"", "how many false calls the bank may cause"),
    key("bank", "wait_cycles", "3", "a cycle closes when a source has delivered this many newer ones"),
    key("bank", "silent_after", "\"10min\"", "how long a source may deliver nothing before it is called silent"),
    key("bank", "oldest_days", "30", "a value taken longer ago than this many days is refused"),
    key("bank", "layout", "\"ring\"", "how the sources stand in the machine: \"row\" or \"ring\""),
    key("bank", "groups", "{ \"supply a\" = [\"01\", \"03\"] }", "the sources that share a part, by its name"),
    key("bank", "cost_per_unit", "0.002", "what one unit given away costs, in the plant's currency"),
    key("bank", "reference", "\"01\"", "the source that all others are compared with"),
    key("bank", "offsets", "{ \"01\" = 0.3 }", "what is known of lasting differences: \"none\", \"learn\", or the offsets in the unit"),
    key("bank", "recording", "{ time = \"time\", value = \"net\" }", "the names of the columns of recordings"),
    key("bank.limits", "lower", "485.0", "the lower limit of a single value, in the unit"),
    key("bank.limits", "upper", "515.0", "the upper limit of a single value, in the unit"),
    key("bank.plausible", "lower", "0.0", "the lowest value that can be true, in the unit"),
    key("bank.plausible", "upper", "1000.0", "the highest value that can be true, in the unit"),
    key("bank.payload", "form", "\"json\"", "the form of the payload: \"number\", \"json\", \"csv\", \"sparkplug\", \"opc_ua_json\" or \"senml\""),
    key("bank.payload", "list", "\"/heads\"", "the pointer to a list that holds several measurements; \"\" when the payload is that list"),
    key("bank.payload", "by_source", "\"/heads\"", "the pointer to an object whose members are named by their sources; \"\" for the payload"),
    key("bank.payload", "item", "{ source = \"/id\", value = \"/v\" }", "the pointers that lead from an item of `list` or `by_source`"),
    key("bank.payload", "value", "\"/v\"", "where the value stands: a pointer (RFC 6901), a column, or a name in which {source} may stand"),
    key("bank.payload", "source", "\"/head\"", "where the source stands, when it is not in the topic"),
    key("bank.payload", "time", "\"/ts\"", "where the time stands at which the value was taken"),
    key("bank.payload", "time_form", "\"rfc3339\"", "how the time is written: \"auto\", \"rfc3339\", \"epoch_seconds\", \"epoch_milliseconds\" or \"local\""),
    key("bank.payload", "cycle", "\"/n\"", "where the cycle's number stands"),
    key("bank.payload", "unit", "\"/u\"", "where the unit stands; a value of another unit is refused"),
    key("bank.payload", "unit_written", "\"GRM\"", "how the unit is written in the payload, where that is not as in `unit` of the bank"),
    key("bank.payload", "header", "[\"time\", \"head\", \"net\"]", "the words of the columns; a first line of these words is passed over"),
    key("bank.payload", "separator", "\";\"", "the mark between two columns"),
    key("bank.payload", "decimal", "\"comma\"", "the decimal mark: \"point\" or \"comma\""),
    key("bank.payload", "reorder", "\"5s\"", "how long a message waits for one that was sent before it"),
    key("bank.payload", "rebirth", "true", "whether an edge node is asked for its birth when something is missing"),
    key("bank.payload", "writer", "\"filler 2\"", "the name of the data set writer that is meant; without it every one is"),
    key("bank.payload.source", "counter", "\"/n\"", "where the number stands that counts the pieces; source and cycle follow from it"),
    key("bank.payload.source", "at_zero", "\"01\"", "the source that piece 0 comes from; without it the first of `sources`"),
    key("bank.payload.item", "value", "\"/v\"", "where the value stands in an item; without it a member is the value"),
    key("bank.payload.item", "source", "\"/id\"", "where the source stands in an item"),
    key("bank.payload.item", "time", "\"/ts\"", "where the time stands, when each item has its own"),
    key("bank.payload.item", "cycle", "\"/n\"", "where the cycle stands, when each item has its own"),
    key("bank.payload.item", "unit", "\"/u\"", "where the unit stands, when each item has its own"),
    key("bank.pairing", "slot", "\"10s\"", "the length of a time slot"),
    key("bank.recording", "time", "\"time\"", "the column with the time taken"),
    key("bank.recording", "source", "\"source\"", "the column with the source, in long form"),
    key("bank.recording", "value", "\"value\"", "the column with the value, in long form"),
    key("bank.recording", "cycle", "\"cycle\"", "the column with the cycle"),
    key("bank.recording", "bank", "\"bank\"", "the column with the bank"),
];

/// Keys that a later version brings, and what holds until then. Taking one in silence would promise
/// something that is not done.
pub(super) const LATER: &[(&str, &str, &str)] = &[(
    "bank.pairing",
    "near",
    "without a shared cycle, { slot = \"10s\" } pairs by time",
)];

/// Keys that people look for and that stand in another form, with that form.
pub(super) const OTHERWISE: &[(&str, &str, &str)] = &[
    (
        "broker",
        "host",
        "the host is a part of `url`: mqtt://HOST:PORT",
    ),
    (
        "broker",
        "port",
        "the port is a part of `url`: mqtt://HOST:PORT",
    ),
    ("broker", "tls", "write mqtts:// in `url` to encrypt"),
    (
        "broker",
        "password",
        "write it into a file and name that in `password_file`",
    ),
    (
        "web",
        "port",
        "the port is a part of `listen`: 127.0.0.1:7310",
    ),
    (
        "web",
        "token",
        "write it into a file and name that in `token_file`",
    ),
    (
        "outlet",
        "secret",
        "write it into a file and name that in `secret_file`",
    ),
    (
        "outlet",
        "password",
        "write it into a file and name that in `password_file`",
    ),
    (
        "bank",
        "alpha",
        "the probability of a false call follows from `false_calls`",
    ),
];

/// The entry of a key.
pub(super) fn find(section: &str, name: &str) -> Option<&'static Key> {
    KEYS.iter().find(|k| k.section == section && k.name == name)
}

/// How a section's heading is written.
pub(super) fn title(section: &str) -> String {
    match section {
        "" => "the file".to_owned(),
        "bank" | "outlet" | "plant.shift" => format!("[[{section}]]"),
        "plant" | "broker" | "store" | "web" | "notices" => format!("[{section}]"),
        inner => format!("`{}`", inner.trim_start_matches("bank.")),
    }
}

/// "for example `margin = 0.8`: the largest …".
pub(super) fn example(section: &str, name: &str) -> String {
    find(section, name).map_or_else(String::new, |key| {
        let Key { example, about, .. } = key;
        if key.is_heading() {
            format!("for example {example}: {about}")
        } else {
            format!("for example `{name} = {example}`: {about}")
        }
    })
}

/// The word among `known` that `word` was most likely meant to be.
pub(super) fn nearest<'k>(word: &str, known: impl Iterator<Item = &'k str>) -> Option<&'k str> {
    let lower = word.to_lowercase();
    known
        .map(|candidate| (likeness(&lower, &candidate.to_lowercase()), candidate))
        // Below this, suggestions are guesses: "colour" and "client_id" reach 0.6.
        .filter(|(likeness, _)| *likeness >= 0.8)
        .max_by(|a, b| a.0.total_cmp(&b.0))
        .map(|(_, candidate)| candidate)
}

/// 1 for equal words. The common measure misjudges one slip in a short word, so that counts by itself.
fn likeness(a: &str, b: &str) -> f64 {
    let alike = strsim::jaro_winkler(a, b);
    let one_slip = a.len() >= 3 && strsim::osa_distance(a, b) == 1;
    if one_slip { alike.max(0.85) } else { alike }
}
