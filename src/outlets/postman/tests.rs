//! The postman with a carrier that does as it is told, in paused time.

use std::sync::{Arc, Mutex};

use tokio::sync::mpsc;
use tokio::task::JoinHandle;
use tokio_util::sync::CancellationToken;

use super::*;
use crate::notice::{Delivery, State};
use crate::outlets::queue::tests::delivery;
use crate::outlets::retry::WEBHOOK;

/// What becomes of each attempt; when the list is empty everything arrives.
type Script = Vec<Result<(), Failure>>;

/// Seconds since the start, and the numbers of the letter.
type Log = Arc<Mutex<Vec<(u64, Vec<u64>)>>>;

#[derive(Clone)]
struct Told {
    script: Arc<Mutex<Script>>,
    log: Log,
    watch: Stopwatch,
    takes: Duration,
}

impl Carrier for Told {
    async fn carry(&self, letter: &Letter) -> Result<(), Failure> {
        let numbers = letter.all().map(|d| d.number).collect();
        let at = self.watch.elapsed().as_secs();
        self.log.lock().expect("whole").push((at, numbers));
        tokio::time::sleep(self.takes).await;
        let mut script = self.script.lock().expect("whole");
        if script.is_empty() {
            return Ok(());
        }
        script.remove(0)
    }
}

struct Bench {
    deliveries: mpsc::Sender<Delivery>,
    reports: mpsc::Receiver<Report>,
    end: CancellationToken,
    log: Log,
    task: JoinHandle<Result<(), OutletError>>,
}

fn bench(script: Script, at_most: Option<AtMost>, takes: Duration) -> Bench {
    let (deliveries, taken) = mpsc::channel(8);
    let (reports_in, reports) = mpsc::channel(64);
    let end = CancellationToken::new();
    let carrier = Told {
        script: Arc::new(Mutex::new(script)),
        log: Log::default(),
        watch: Stopwatch::start(),
        takes,
    };
    let log = Arc::clone(&carrier.log);
    let door = Door::new(taken, reports_in, end.clone());
    let postman = Postman::new("desk".into(), at_most, WEBHOOK, door);
    let task = tokio::spawn(async move { postman.walk(&carrier).await });
    Bench {
        deliveries,
        reports,
        end,
        log,
        task,
    }
}

impl Bench {
    async fn send(&self, number: u64, id: &str) {
        let one = delivery(number, id, State::Unacknowledged);
        self.deliveries.send(one).await.expect("it runs");
    }

    async fn delivered(&mut self) -> Vec<u64> {
        let mut done = Vec::new();
        loop {
            let report = self.reports.recv().await.expect("it runs");
            if let Report::Delivered(number) = report {
                done.push(number);
            }
            if self.reports.is_empty() && !done.is_empty() {
                return done;
            }
        }
    }

    fn log(&self) -> Vec<(u64, Vec<u64>)> {
        self.log.lock().expect("whole").clone()
    }
}

fn fails(times: usize) -> Script {
    vec![Err(Failure::new("no route")); times]
}

fn then(then: Then) -> Result<(), Failure> {
    Err(Failure {
        why: "not now".to_owned(),
        then,
    })
}

#[tokio::test(start_paused = true)]
async fn a_failure_is_tried_again_at_the_published_times() {
    let mut bench = bench(fails(11), None, Duration::ZERO);
    bench.send(1, "a").await;
    assert_eq!(bench.delivered().await, [1]);
    let times: Vec<u64> = bench.log().iter().map(|(at, _)| *at).collect();
    let waits = times.windows(2).map(|two| (two[1] - two[0]) as f64);
    let hours = 3600.0;
    let wanted = [
        5.0,
        300.0,
        1800.0,
        2.0 * hours,
        5.0 * hours,
        10.0 * hours,
        14.0 * hours,
        20.0 * hours,
        24.0 * hours,
        24.0 * hours,
        24.0 * hours,
    ];
    assert_eq!(waits.len(), wanted.len());
    for (wait, wanted) in waits.zip(wanted) {
        // Whole seconds were noted.
        let fits = wanted - 1.0..=wanted * 1.1 + 1.0;
        assert!(fits.contains(&wait), "{wait} and not {wanted}");
    }
}

#[tokio::test(start_paused = true)]
async fn each_failure_is_told_and_the_house_never_waits() {
    let mut bench = bench(fails(2), None, Duration::from_secs(20));
    for number in 1..=40 {
        // More than the channel holds, while the first attempt is under way.
        bench.send(number, &format!("n{number}")).await;
    }
    assert_eq!(bench.log().len(), 1);
    let first = bench.reports.recv().await;
    let told = |number| Report::NotDelivered {
        number,
        why: "no route".to_owned(),
    };
    assert_eq!(first, Some(told(1)));
    assert_eq!(bench.reports.recv().await, Some(told(2)));
}

#[tokio::test(start_paused = true)]
async fn a_wish_for_quiet_is_kept_for_everything() {
    let script = vec![then(Then::Quiet(Duration::from_secs(120)))];
    let mut bench = bench(script, None, Duration::ZERO);
    bench.send(1, "a").await;
    tokio::time::sleep(Duration::from_secs(1)).await;
    bench.send(2, "b").await;
    assert!(!bench.delivered().await.is_empty());
    let times: Vec<u64> = bench.log().iter().map(|(at, _)| *at).collect();
    assert_eq!(times[0], 0);
    assert!(times[1] >= 120, "{times:?}");
}

#[tokio::test(start_paused = true)]
async fn a_closed_receiver_is_left_alone_and_what_waits_is_kept() {
    let mut bench = bench(vec![then(Then::Close)], None, Duration::ZERO);
    bench.send(1, "a").await;
    assert!(matches!(
        bench.reports.recv().await,
        Some(Report::NotDelivered { number: 1, .. })
    ));
    bench.send(2, "b").await;
    tokio::time::sleep(Duration::from_secs(30 * 24 * 3600)).await;
    assert_eq!(bench.log().len(), 1);
    assert!(bench.reports.try_recv().is_err());
    bench.end.cancel();
    assert_eq!(bench.task.await.expect("no panic"), Ok(()));
}

#[tokio::test(start_paused = true)]
async fn what_is_held_back_comes_together_and_nothing_is_lost() {
    let cap = AtMost {
        count: 4,
        per: Duration::from_secs(3600),
    };
    let mut bench = bench(Vec::new(), Some(cap), Duration::ZERO);
    for number in 1..=9 {
        bench.send(number, &format!("n{number}")).await;
    }
    let mut done = Vec::new();
    while done.len() < 9 {
        done.extend(bench.delivered().await);
    }
    done.sort_unstable();
    assert_eq!(done, (1..=9).collect::<Vec<_>>());
    let log = bench.log();
    let letters: Vec<&Vec<u64>> = log.iter().map(|(_, numbers)| numbers).collect();
    assert_eq!(letters, [&vec![1], &vec![2], &(3..=9).collect::<Vec<_>>()]);
    assert!((1200..=1201).contains(&log[2].0), "{log:?}");
}

#[tokio::test(start_paused = true)]
async fn the_end_waits_two_seconds_for_an_attempt_and_then_goes() {
    let mut bench = bench(Vec::new(), None, Duration::from_secs(3600));
    bench.send(1, "a").await;
    tokio::time::sleep(Duration::from_secs(1)).await;
    let took = Stopwatch::start();
    bench.end.cancel();
    assert_eq!(bench.task.await.expect("no panic"), Ok(()));
    assert_eq!(took.elapsed().as_secs(), 2);
    assert!(bench.reports.recv().await.is_none());
}

#[tokio::test(start_paused = true)]
async fn what_came_before_the_end_is_still_sent() {
    let mut bench = bench(Vec::new(), None, Duration::from_millis(100));
    for number in 1..=3 {
        bench.send(number, &format!("n{number}")).await;
    }
    bench.end.cancel();
    let mut done = Vec::new();
    while let Some(report) = bench.reports.recv().await {
        done.push(report);
    }
    assert_eq!(done, [1, 2, 3].map(Report::Delivered));
}

#[tokio::test(start_paused = true)]
async fn an_outlet_whose_reports_nobody_takes_says_so() {
    let bench = bench(Vec::new(), None, Duration::ZERO);
    drop(bench.reports);
    let one = delivery(1, "a", State::Unacknowledged);
    bench.deliveries.send(one).await.expect("it runs");
    let ended = bench.task.await.expect("no panic");
    assert_eq!(ended, Err(OutletError::ReportsClosed));
}
