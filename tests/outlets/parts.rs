//! What the tests of all outlets share: invented deliveries, a running outlet.

use std::future::Future;
use std::sync::Arc;
use std::time::Duration;

use evenrow::model::{Time, US_PER_S};
use evenrow::notice::{
    Delivery, Kind, NamedSource, Notice, Priority, Route, Since, State, Updates, Way,
};
use evenrow::outlets::{self, OutletError, Report};
use evenrow::settings::{self, Means};
use tokio::sync::mpsc;
use tokio::task::JoinHandle;
use tokio_util::sync::CancellationToken;

/// How long anything that should happen at once may take on a busy machine.
pub const SOON: Duration = Duration::from_secs(30);

/// A delivery of an invented notice.
pub fn delivery(number: u64, id: &str, state: State) -> Delivery {
    let at = Time::from_us(i64::try_from(number).expect("small") * US_PER_S);
    let notice = Notice {
        id: id.into(),
        plant: "Quay side".into(),
        bank: "filler 2".into(),
        kind: Kind::LevelApart,
        state,
        priority: Priority::Medium,
        sources: vec![NamedSource {
            source: "07".into(),
            deviation: -1.25,
            low: -1.5,
            high: -1.0,
        }],
        unit: "g".into(),
        since: Since {
            at,
            earliest: at,
            latest: at,
        },
        raised: at,
        changed: at,
        returned: None,
        acknowledged: None,
        subject: "filler 2: 07 low by 1.3 g".to_owned(),
        text: "Source 07 is low.".to_owned(),
        advice: "Check valve 07.".to_owned(),
        url: "http://127.0.0.1:7310/banks/filler%202".to_owned(),
        span: 40,
        pattern: None,
        slip: None,
        common_movement: None,
        even_mean: None,
        cost_per_hour: None,
        adjustment: None,
        handling: evenrow::notice::Handling::default(),
    };
    Delivery {
        number,
        way: Way::Mqtt,
        at,
        notice: Arc::new(notice),
    }
}

/// An outlet of the configuration by these means.
pub fn by(means: Means) -> settings::Outlet {
    settings::Outlet {
        name: "desk".into(),
        means,
        route: Route {
            outlet: "desk".into(),
            banks: Vec::new(),
            kinds: Vec::new(),
            priorities: Vec::new(),
            shifts: Vec::new(),
            escalate_after_us: 0,
            updates: Updates::All,
        },
        at_most: None,
        time_limit: Duration::from_secs(10),
    }
}

/// A running outlet and the ends of its channels.
pub struct Outlet {
    pub deliveries: mpsc::Sender<Delivery>,
    pub reports: mpsc::Receiver<Report>,
    pub shutdown: CancellationToken,
    pub task: JoinHandle<Result<(), OutletError>>,
}

impl Outlet {
    /// Starts what `run` makes of an outlet's ends.
    pub fn start<F>(
        run: impl FnOnce(mpsc::Receiver<Delivery>, mpsc::Sender<Report>, CancellationToken) -> F,
    ) -> Self
    where
        F: Future<Output = Result<(), OutletError>> + Send + 'static,
    {
        let (deliveries, taken) = mpsc::channel(4);
        let (reports, received) = mpsc::channel(1);
        let shutdown = CancellationToken::new();
        let run = run(taken, reports, shutdown.clone());
        Self {
            deliveries,
            reports: received,
            shutdown,
            task: tokio::spawn(run),
        }
    }

    /// Starts an outlet of the configuration; mail shows this picture.
    pub fn by(outlet: settings::Outlet, picture: Option<&'static str>) -> Self {
        let picture: outlets::Picture = Arc::new(move |_| picture.map(str::to_owned));
        Self::start(|taken, reports, end| outlets::run(outlet, picture, taken, reports, end))
    }

    pub async fn send(&self, number: u64, id: &str, state: State) {
        let sent = tokio::time::timeout(SOON, self.deliveries.send(delivery(number, id, state)));
        assert!(
            sent.await.is_ok_and(|s| s.is_ok()),
            "the outlet keeps the house waiting"
        );
    }

    pub async fn report(&mut self) -> Report {
        let report = tokio::time::timeout(SOON, self.reports.recv()).await;
        report
            .expect("a report comes in time")
            .expect("the outlet runs")
    }

    /// The reason of the next report, which must be one of trouble with this delivery.
    pub async fn trouble(&mut self, wanted: u64) -> String {
        match self.report().await {
            Report::NotDelivered { number, why } if number == wanted => why,
            other => panic!("{other:?} and not trouble with {wanted}"),
        }
    }

    pub async fn end(self) {
        self.shutdown.cancel();
        let ended = tokio::time::timeout(Duration::from_secs(5), self.task).await;
        assert_eq!(
            ended.expect("it ends in time").expect("it does not panic"),
            Ok(())
        );
    }
}
