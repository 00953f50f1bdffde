//! How quick pages are, and what many viewers cost.
//!
//!   cargo bench --bench pages
//!
//! First the page of a bank of 120 sources with a day of looks in a real store, asked for over HTTP on the
//! loopback address, as it is and as a stretch of a day. Then a plant of 1 000 banks whose looks come every
//! 30 s, watched live by 200 viewers from another process: the processor time of ours, beyond what it
//! takes without viewers.

use std::collections::BTreeMap;
use std::net::SocketAddr;
use std::process::Command;
use std::sync::Arc;
use std::time::{Duration, Instant};

use evenrow::clock::Clock;
use evenrow::engine::{BankView, Condition, Plant, Record, Snapshot, SourceState, SourceView};
use evenrow::model::{Bank, Name, SourceIx, Time, US_PER_S};
use evenrow::settings::Settings;
use evenrow::store::{Batch, Store as _};
use evenrow::verdict::{Estimate, Finding, Look, SourceLook};
use evenrow::web::{Ask, Durations, Site, serve};
use tokio::io::{AsyncReadExt as _, AsyncWriteExt as _};
use tokio::net::{TcpListener, TcpStream};
use tokio::sync::{mpsc, watch};
use tokio_util::sync::CancellationToken;

const SOURCES: usize = 120;
const BANKS: usize = 1000;
const VIEWERS: usize = 200;
const WATCHED: Duration = Duration::from_secs(20);
const EVERY_US: i64 = 30 * US_PER_S;

fn main() {
    let runtime = tokio::runtime::Runtime::new().expect("a runtime");
    let arguments: Vec<String> = std::env::args().collect();
    if let Some(at) = arguments.iter().position(|a| a == "viewers") {
        let address = arguments[at + 1].parse().expect("an address");
        runtime.block_on(viewers(address));
        return;
    }
    runtime.block_on(async {
        large_bank().await;
        many_viewers().await;
    });
}

/// A bank of `count` sources, as the configuration makes it.
fn bank(name: &str, count: usize) -> Arc<Bank> {
    let names: Vec<String> = (1..=count).map(|n| format!("\"{n:03}\"")).collect();
    let text = format!(
        "[plant]\nname = \"Quayside\"\ntime_zone = \"Europe/Lisbon\"\n[broker]\nurl = \"mqtt://127.0.0.1:1883\"\n\
         [store]\nfolder = \"unused\"\n[[bank]]\nname = \"{name}\"\nunit = \"g\"\nresolution = 0.1\ntarget = 503.0\n\
         topic = \"a/{{source}}\"\npayload = {{ form = \"json\", value = \"/v\", cycle = \"/n\" }}\n\
         sources = [{}]\npairing = \"cycle\"\nmargin = 0.8\nfalse_calls = \"1 per 90 days\"\n",
        names.join(", ")
    );
    let settings = Settings::parse(&text, "bench", []).expect("a good configuration");
    settings.banks[0].clone()
}

fn settings() -> Settings {
    let text = "[plant]\nname = \"Quayside\"\ntime_zone = \"Europe/Lisbon\"\n[broker]\nurl = \"mqtt://127.0.0.1:1883\"\n\
        [store]\nfolder = \"unused\"\n[[bank]]\nname = \"any\"\nunit = \"g\"\ntopic = \"a/{source}\"\npayload = \"number\"\n\
        sources = [\"1\", \"2\"]\npairing = \"none\"\nmargin = 0.8\nfalse_calls = \"1 per 90 days\"\n";
    Settings::parse(text, "bench", []).expect("a good configuration")
}

fn names(bank: &Bank) -> Vec<Name> {
    match &bank.sources {
        evenrow::model::Sources::Listed(names) => names.clone(),
        evenrow::model::Sources::Discover { .. } => Vec::new(),
    }
}

/// A figure that differs from source to source and from look to look.
fn wobble(source: usize, at: Time) -> f64 {
    let seed = (source as i64 * 7919 + at.us() / US_PER_S * 104_729) % 1009;
    seed as f64 / 1009.0 - 0.5
}

fn look(bank: &Bank, names: &[Name], span: usize, at: Time) -> Look {
    let source = |(i, name): (usize, &Name)| {
        let value = wobble(i, at);
        let estimate = Estimate {
            value,
            low: value - 0.3,
            high: value + 0.3,
        };
        SourceLook {
            source: SourceIx(u16::try_from(i).expect("few")),
            name: name.clone(),
            n: span,
            mean: 503.0 + value,
            sd: 1.2,
            deviation: Some(estimate),
            sd_ratio: Some(Estimate {
                value: 1.0 + 0.2 * value,
                low: 0.8,
                high: 1.3,
            }),
            named_level: false,
            named_spread: false,
        }
    };
    Look {
        bank: bank.name.clone(),
        at,
        span,
        finding: Finding::Even,
        remark: String::new(),
        alpha_level: 7.7e-7,
        alpha_spread: 1.9e-7,
        tests: Vec::new(),
        dependence: None,
        sigma: 1.2,
        sources: names.iter().enumerate().map(source).collect(),
    }
}

fn view(bank: &Arc<Bank>, at: Time) -> Arc<BankView> {
    let names = names(bank);
    let looks: Vec<Arc<Look>> = bank
        .spans
        .iter()
        .map(|span| Arc::new(look(bank, &names, *span, at)))
        .collect();
    let newest = looks[1].clone();
    let source = |(i, name): (usize, &Name)| SourceView {
        source: SourceIx(u16::try_from(i).expect("few")),
        name: name.clone(),
        state: SourceState::Present,
        values: 640,
        last_value: Some(503.1),
        last_taken: Some(at),
        last_received: Some(at),
        deviation: newest.sources[i].deviation,
        deviation_sigmas: Some(0.1),
        sd_ratio: newest.sources[i].sd_ratio,
        named: Vec::new(),
    };
    Arc::new(BankView {
        sources: names.iter().enumerate().map(source).collect(),
        shown_span: Some(newest.span),
        looks,
        open: Vec::new(),
        raised: BTreeMap::new(),
        outcomes: BTreeMap::from([("accepted", 1_000_000)]),
        refusals: Vec::new(),
        cycles: None,
        interval_us: Some(720_000),
        next_look: Some(at.plus_us(EVERY_US)),
        newest_taken: Some(at),
        mean: Some(503.0),
        bank: bank.clone(),
    })
}

fn snapshot(version: u64, banks: Vec<Arc<BankView>>) -> Snapshot {
    Snapshot {
        version,
        plant: Arc::new(Plant {
            name: "Quayside".into(),
            zone: jiff::tz::TimeZone::get("Europe/Lisbon").expect("bundled"),
            pages: "http://127.0.0.1".to_owned(),
        }),
        broker: Condition::Well,
        store: Condition::Well,
        banks,
        refusals: Vec::new(),
        outbox: 0,
        outbox_trouble: None,
    }
}

/// A running server.
struct Served {
    address: SocketAddr,
    publish: watch::Sender<Arc<Snapshot>>,
    shutdown: CancellationToken,
    _folder: tempfile::TempDir,
}

/// Serves a plant whose store holds a day of looks of its first bank when `days` says so.
async fn served(banks: Vec<Arc<BankView>>, with_a_day: bool) -> Served {
    let folder = tempfile::tempdir().expect("a folder");
    let now = Clock::System.now();
    let all: Vec<Name> = banks.iter().map(|b| b.bank.name.clone()).collect();
    let place = evenrow::settings::StoreSettings {
        folder: folder.path().to_owned(),
        keep_days: 90,
    };
    let mut opened = evenrow::store::open(&place, &all, now).expect("a store");
    if with_a_day {
        let bank = banks[0].bank.clone();
        let names = names(&bank);
        for step in 0..2880_i64 {
            let at = now.plus_us((step - 2880) * EVERY_US);
            let digests = bank.spans.iter().map(|span| {
                let digest = look(&bank, &names, *span, at).digest();
                Record::Digest(bank.name.clone(), digest)
            });
            let batch = Batch {
                records: digests.collect(),
                unacknowledged: Vec::new(),
            };
            opened.store.commit(&batch).expect("kept");
        }
    }
    let (publish, published) = watch::channel(Arc::new(snapshot(1, banks)));
    let (asks, mut asked) = mpsc::channel::<Ask>(8);
    tokio::spawn(async move { while asked.recv().await.is_some() {} });
    let site = Site {
        settings: Arc::new(settings()),
        snapshot: published,
        history: opened.history,
        asks,
        durations: Durations::new().expect("histograms"),
        clock: Clock::System,
    };
    let listener = TcpListener::bind("127.0.0.1:0").await.expect("a port");
    let address = listener.local_addr().expect("an address");
    let shutdown = CancellationToken::new();
    let end = shutdown.clone();
    // The store stays open as long as its history is read.
    tokio::spawn(async move {
        let _store = opened.store;
        serve(listener, site, end).await.expect("served");
    });
    Served {
        address,
        publish,
        shutdown,
        _folder: folder,
    }
}

async fn large_bank() {
    let bank = bank("filler", SOURCES);
    let served = served(vec![view(&bank, Clock::System.now())], true).await;
    let day_ago = Clock::System.now().plus_us(-2880 * EVERY_US);
    let day = format!("/banks/filler?from={day_ago}");
    for (what, path) in [("as it is", "/banks/filler"), ("a day", &day)] {
        let mut times = Vec::new();
        let mut length = 0;
        let before = processor_s();
        for turn in 0..21 {
            // Another address each time, so that no kept page is given.
            let glue = if path.contains('?') { '&' } else { '?' };
            let path = format!("{path}{glue}turn={turn}");
            let started = Instant::now();
            length = get(served.address, &path, &[]).await.len();
            times.push(started.elapsed());
        }
        let processor_ms = (processor_s() - before) * 1000.0 / times.len() as f64;
        times.sort();
        let middle = times[times.len() / 2];
        let squeezed = get(served.address, path, &[("Accept-Encoding", "gzip")]).await;
        println!(
            "bank of {SOURCES} sources, {what}: {length} bytes, {} squeezed, {middle:?} (middle of {}), \
             {processor_ms:.1} ms of a core each",
            squeezed.len(),
            times.len()
        );
    }
    served.shutdown.cancel();
}

async fn many_viewers() {
    let now = Clock::System.now();
    let banks: Vec<Arc<Bank>> = (0..BANKS).map(|n| bank(&format!("bank-{n}"), 12)).collect();
    let mut views: Vec<Arc<BankView>> = banks.iter().map(|b| view(b, now)).collect();
    let served = served(views.clone(), false).await;
    get(served.address, "/", &[]).await;
    let publish = served.publish.clone();
    let publishing = tokio::spawn(async move {
        let mut version = 1;
        loop {
            tokio::time::sleep(Duration::from_millis(100)).await;
            version += 1;
            let now = Clock::System.now();
            // Each bank is looked at every 30 s: a three-hundredth of them in each tenth of a second.
            for (at, bank) in banks.iter().enumerate() {
                if at % 300 == usize::try_from(version % 300).unwrap_or(0) {
                    views[at] = view(bank, now);
                }
            }
            publish.send_replace(Arc::new(snapshot(version, views.clone())));
        }
    });
    let before = processor_s();
    tokio::time::sleep(WATCHED).await;
    let idle = processor_s() - before;
    let mut child = Command::new(std::env::current_exe().expect("a name"))
        .args(["viewers", &served.address.to_string()])
        .spawn()
        .expect("another process");
    // The first pages of all, which are no live updates.
    tokio::time::sleep(Duration::from_secs(5)).await;
    let before = processor_s();
    tokio::time::sleep(WATCHED).await;
    let busy = processor_s() - before;
    let share = |s: f64| 100.0 * s / WATCHED.as_secs_f64();
    println!(
        "{BANKS} banks, {VIEWERS} live viewers: {:.1} % of a core, {:.1} % without viewers",
        share(busy),
        share(idle)
    );
    let ended = tokio::task::spawn_blocking(move || child.wait()).await;
    assert!(
        ended.is_ok_and(|e| e.is_ok_and(|s| s.success())),
        "the viewers failed"
    );
    publishing.abort();
    served.shutdown.cancel();
}

/// User and system time of this process, in seconds.
fn processor_s() -> f64 {
    let stat = std::fs::read_to_string("/proc/self/stat").expect("Linux");
    let (_, fields) = stat.rsplit_once(')').expect("a name in parentheses");
    let fields: Vec<&str> = fields.split_whitespace().collect();
    let ticks: f64 = [11, 12]
        .iter()
        .filter_map(|i| fields[*i].parse::<f64>().ok())
        .sum();
    // The kernel's unit for this file is a hundredth of a second on every usual system.
    ticks / 100.0
}

/// One request, read to its end.
async fn get(address: SocketAddr, path: &str, headers: &[(&str, &str)]) -> Vec<u8> {
    let mut stream = TcpStream::connect(address).await.expect("connected");
    let headers: String = headers
        .iter()
        .map(|(k, v)| format!("{k}: {v}\r\n"))
        .collect();
    let ask = format!(
        "GET {path} HTTP/1.1\r\nHost: x\r\nAccept: text/html\r\n{headers}Connection: close\r\n\r\n"
    );
    stream.write_all(ask.as_bytes()).await.expect("sent");
    let mut answer = Vec::new();
    stream.read_to_end(&mut answer).await.expect("read");
    assert!(
        answer.starts_with(b"HTTP/1.1 200"),
        "{}",
        String::from_utf8_lossy(&answer)
    );
    answer
}

/// The other process: viewers that load the page and load it again whenever they are told.
async fn viewers(address: SocketAddr) {
    let viewing = (0..VIEWERS).map(|_| tokio::spawn(viewer(address)));
    let mut loads = 0;
    for one in viewing.collect::<Vec<_>>() {
        loads += one.await.expect("a viewer");
    }
    println!("{loads} pages were loaded by {VIEWERS} viewers");
    assert!(loads > 2 * VIEWERS, "the viewers were told too rarely");
}

async fn viewer(address: SocketAddr) -> usize {
    let until = tokio::time::Instant::now() + WATCHED + Duration::from_secs(8);
    get(address, "/", &[("Accept-Encoding", "gzip")]).await;
    let mut stream = TcpStream::connect(address).await.expect("connected");
    let ask = "GET /live HTTP/1.1\r\nHost: x\r\n\r\n";
    stream.write_all(ask.as_bytes()).await.expect("sent");
    let (mut loads, mut buffer) = (1, [0_u8; 4096]);
    while let Ok(Ok(n)) = tokio::time::timeout_at(until, stream.read(&mut buffer)).await {
        let told = String::from_utf8_lossy(&buffer[..n]).into_owned();
        let Some(version) = told.lines().find_map(|l| l.strip_prefix("data: ")) else {
            continue;
        };
        let headers = [("Accept-Encoding", "gzip"), ("Evenrow-At-Least", version)];
        get(address, "/", &headers).await;
        loads += 1;
    }
    loads
}
