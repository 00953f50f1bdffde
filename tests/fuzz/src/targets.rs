//! The targets: a bank's topic and payload each, and what must hold of whatever is decoded.

use evenrow::intake::arrival::{Arrival, Decoder, Receipt};
use evenrow::intake::nodes::Nodes;
use evenrow::intake::payload::{MOST_EXCERPT, MOST_ITEMS, MOST_SOURCE_BYTES};
use evenrow::intake::topics::Topics;
use evenrow::model::Time;
use evenrow::settings::Settings;

/// One decoder and its inputs.
pub struct Target {
    /// Its name.
    pub name: &'static str,
    /// What to begin with.
    pub seeds: Vec<Vec<u8>>,
    kind: Kind,
}

enum Kind {
    Payload(Box<Decoder>),
    /// Messages of a node: each a kind, a length and the bytes.
    Node(Box<Settings>),
    /// Two halves: a filter and a topic.
    Topic,
}

const RECEIPT: Receipt = Receipt {
    epoch: 1,
    packet: None,
    hash: 0,
};
const NODE_KINDS: [&str; 6] = [
    "NBIRTH/n",
    "DBIRTH/n/d",
    "NDATA/n",
    "DDATA/n/d",
    "NDEATH/n",
    "DDEATH/n/d",
];

/// A target's name, its payload, and a word by which fixtures of that form are known.
const FORMS: &[(&str, &str, &str)] = &[
    ("number", "\"number\"", "-"),
    (
        "json",
        r#"{ form = "json", value = "/v", source = "/s", time = "/t", cycle = "/n", unit = "/u" }"#,
        "json",
    ),
    (
        "json-list",
        r#"{ form = "json", list = "/list", unit = "/unit", item = { source = "/id", value = "/v", time = "/t", cycle = "/n" } }"#,
        "json",
    ),
    (
        "json-by-source",
        r#"{ form = "json", by_source = "/heads", time = "/meta/at", cycle = "/meta/cycle" }"#,
        "json",
    ),
    (
        "json-counter",
        r#"{ form = "json", value = "/v", source = { counter = "/n", at_zero = "03" } }"#,
        "json",
    ),
    (
        "csv",
        r#"{ form = "csv", header = ["time", "head", "net"], time = "time", source = "head", value = "net" }"#,
        "csv",
    ),
    (
        "csv-comma",
        r#"{ form = "csv", decimal = "comma", source = 1, value = 2, cycle = 3 }"#,
        "csv",
    ),
    (
        "senml",
        r#"{ form = "senml", value = "urn:quayside:filler2:head{source}", cycle = "urn:quayside:filler2:turn" }"#,
        "senml",
    ),
    (
        "opc-ua",
        r#"{ form = "opc_ua_json", value = "Head{source}", cycle = "Cycle" }"#,
        "opc_ua_json",
    ),
];

/// Every target.
pub fn targets() -> Vec<Target> {
    let fixtures = fixtures();
    let of_form = |word: &str| {
        let fitting = fixtures
            .iter()
            .filter(|(payload, _)| payload.contains(&format!("form = \"{word}\"")));
        fitting
            .flat_map(|(_, messages)| messages.iter().map(|(_, bytes)| bytes.clone()))
            .collect::<Vec<_>>()
    };
    let mut all: Vec<Target> = FORMS
        .iter()
        .map(|(name, payload, word)| {
            let topic = if *name == "number" { "q/{source}" } else { "q" };
            let settings = settings(topic, payload);
            let mut seeds = of_form(word);
            seeds.extend(own_seeds(name));
            let kind = Kind::Payload(Box::new(Decoder::new(settings.feeds, 1 << 20)));
            Target { name, seeds, kind }
        })
        .collect();
    let node = settings(
        "spBv1.0/Q/+/n/d",
        r#"{ form = "sparkplug", value = "Head {source}", cycle = "Cycle", rebirth = true }"#,
    );
    let lives = fixtures
        .iter()
        .filter(|(payload, _)| payload.contains("sparkplug"));
    let seeds = lives.map(|(_, messages)| life(messages)).collect();
    all.push(Target {
        name: "sparkplug",
        seeds,
        kind: Kind::Node(Box::new(node)),
    });
    let seeds = [
        "a/+/b|a/1/b",
        "#|a/b",
        "+/+|/x",
        "$SYS/#|$SYS/broker",
        "a/{source}|a/7",
    ];
    let seeds = seeds.map(|text| text.as_bytes().to_vec()).to_vec();
    all.push(Target {
        name: "topics",
        seeds,
        kind: Kind::Topic,
    });
    all
}

fn settings(topic: &str, payload: &str) -> Settings {
    let text = format!(
        "[plant]\nname = \"Quayside\"\ntime_zone = \"Europe/Lisbon\"\n[broker]\nurl = \"mqtt://127.0.0.1\"\n\
         [store]\nfolder = \"x\"\n[[bank]]\nname = \"f\"\nunit = \"g\"\ntopic = \"{topic}\"\npayload = {payload}\n\
         sources = [\"01\", \"02\", \"03\"]\npairing = \"none\"\nmargin = 1\nsentinels = [-127]\n\
         plausible = {{ lower = -1000, upper = 1000 }}\nfalse_calls = \"1 per 90 days\"\n"
    );
    match Settings::parse(&text, "fuzz.toml", []) {
        Ok(settings) => settings,
        Err(faults) => panic!("{faults}"),
    }
}

type Messages = Vec<(String, Vec<u8>)>;

/// What other libraries wrote: the payload of the bank, and the messages.
fn fixtures() -> Vec<(String, Messages)> {
    let files = [
        include_str!("../../fixtures/payloads/python.json"),
        include_str!("../../fixtures/payloads/node.json"),
    ];
    let mut all = Vec::new();
    for file in files {
        let cases: serde_json::Value = serde_json::from_str(file).expect("JSON");
        for case in cases.as_array().into_iter().flatten() {
            let messages = case["messages"]
                .as_array()
                .into_iter()
                .flatten()
                .map(|message| {
                    let (topic, hex) = (message["topic"].as_str(), message["hex"].as_str());
                    (
                        topic.unwrap_or_default().to_owned(),
                        bytes(hex.unwrap_or_default()),
                    )
                });
            all.push((
                case["payload"].as_str().unwrap_or_default().to_owned(),
                messages.collect(),
            ));
        }
    }
    all
}

fn bytes(hex: &str) -> Vec<u8> {
    let pair = |at| u8::from_str_radix(&hex[at..at + 2], 16).expect("hexadecimal");
    (0..hex.len()).step_by(2).map(pair).collect()
}

fn own_seeds(name: &str) -> Vec<Vec<u8>> {
    let folder = format!("{}/seeds", env!("CARGO_MANIFEST_DIR"));
    let files = std::fs::read_dir(&folder).expect("the folder of seeds");
    let named = files.filter_map(|file| file.ok().map(|file| file.path()));
    let own = named.filter(|path| path.file_stem().is_some_and(|stem| *stem == *name));
    let text = own.map(|path| std::fs::read(path).expect("a seed can be read"));
    // One seed a line, but for lines themselves.
    text.flat_map(|text| match name.starts_with("csv") {
        true => vec![text],
        false => text
            .split(|byte| *byte == b'\n')
            .map(<[u8]>::to_vec)
            .collect(),
    })
    .collect()
}

/// The messages of a node in the form that the target takes apart again.
fn life(messages: &Messages) -> Vec<u8> {
    let mut all = Vec::new();
    for (topic, payload) in messages {
        let word = topic.split('/').nth(2).unwrap_or_default();
        let kind = NODE_KINDS
            .iter()
            .position(|kind| kind.starts_with(word))
            .unwrap_or(3);
        let length = u16::try_from(payload.len()).unwrap_or(u16::MAX);
        all.push(kind as u8);
        all.extend(length.to_be_bytes());
        all.extend(payload);
    }
    all
}

impl Target {
    /// Decodes an input, checks what must hold, and says in short what came of it.
    pub fn judge(&mut self, input: &[u8]) -> String {
        let now = Time::from_us(1_772_344_800_000_000);
        match &mut self.kind {
            Kind::Payload(decoder) => {
                let arrival = decoder.decode("q/7", input, RECEIPT, now);
                let arrival = match arrival
                    .refusals
                    .first()
                    .map(|refusal| refusal.reason.word())
                {
                    Some("no_bank") => decoder.decode("q", input, RECEIPT, now),
                    _ => arrival,
                };
                checked(&arrival, input.len())
            }
            Kind::Node(settings) => {
                let mut nodes = Nodes::new(&settings.feeds, 1 << 20).expect("a feed of Sparkplug");
                let mut said = String::new();
                let mut rest = input;
                let mut ms = 0_i64;
                while let [kind, high, low, after @ ..] = rest {
                    let length = usize::from(u16::from_be_bytes([*high, *low])).min(after.len());
                    let (payload, next) = after.split_at(length);
                    rest = next;
                    let topic = format!("spBv1.0/Q/{}", NODE_KINDS[usize::from(*kind) % 6]);
                    ms += i64::from(*low) * 10;
                    let now = now.plus_us(ms * 1000);
                    for outcome in [nodes.take(&topic, payload, now), nodes.tick(now)] {
                        let more = checked(&outcome.arrival, input.len());
                        if said.len() < 60 {
                            said.push_str(&more);
                        }
                        assert!(outcome.publish.len() < 2);
                    }
                }
                said
            }
            Kind::Topic => {
                let text = String::from_utf8_lossy(input);
                let (filter, topic) = text.split_once('|').unwrap_or((&text, "a/b"));
                let escaped = filter.escape_default().to_string();
                let config = Settings::parse(&good(&escaped), "fuzz.toml", []);
                let Ok(config) = config else {
                    return "refused".to_owned();
                };
                let topics = Topics::new(&config.feeds);
                let routed = topics.route(topic).count();
                assert!(routed <= 1 && topics.filters().len() == 1);
                format!(
                    "{} {}",
                    if routed == 1 { "matches" } else { "not" },
                    topic.len().min(30)
                )
            }
        }
    }
}

fn good(topic: &str) -> String {
    format!(
        "[plant]\nname = \"Q\"\ntime_zone = \"UTC\"\n[broker]\nurl = \"mqtt://127.0.0.1\"\n[store]\nfolder = \"x\"\n\
         [[bank]]\nname = \"f\"\nunit = \"g\"\ntopic = \"{topic}\"\npayload = \"number\"\nsources = \"discover\"\n\
         pairing = \"none\"\nmargin = 1\nfalse_calls = \"1 per 90 days\"\n"
    )
}

fn checked(arrival: &Arrival, bytes: usize) -> String {
    let (good, bad) = (arrival.measurements.len(), arrival.refusals.len());
    assert!(
        good + bad <= (bytes + 2).min(MOST_ITEMS),
        "{good} and {bad} of {bytes} bytes"
    );
    for m in &arrival.measurements {
        assert!(
            !m.source.trim().is_empty() && m.source.len() <= MOST_SOURCE_BYTES,
            "{m:?}"
        );
        assert!(!m.source.chars().any(char::is_control), "{m:?}");
        assert!(m.value.to_f64().abs() <= 1000.0, "{m:?}");
    }
    for refusal in &arrival.refusals {
        assert!(
            refusal.excerpt.chars().count() <= MOST_EXCERPT,
            "{refusal:?}"
        );
        assert!(
            !refusal.detail.is_empty() && !refusal.detail.ends_with('.'),
            "{refusal:?}"
        );
        assert!(!refusal.detail.chars().any(char::is_control), "{refusal:?}");
    }
    let reasons: std::collections::BTreeSet<&str> =
        arrival.refusals.iter().map(|r| r.reason.word()).collect();
    let reasons: Vec<&str> = reasons.into_iter().collect();
    let word = match (good, bad) {
        (0, 0) => "nothing",
        (_, 0) => "measured",
        (0, _) => "refused",
        _ => "both",
    };
    format!(
        "{word} {}x{} {}",
        good.min(4),
        bad.min(4),
        reasons.join("+")
    )
}
