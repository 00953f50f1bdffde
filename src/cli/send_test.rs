//! `evenrow vet --send-test`: a notice that is marked as a test, by each way, and what became of it.

use std::fmt::Write as _;
use std::sync::Arc;

use crate::clock::Clock;
use crate::model::{Name, Time, US_PER_S};
use crate::notice::{Delivery, Handling, Kind, Notice, Priority, Since, State, Way};
use crate::outlets;
use crate::settings::Settings;

/// Sends the notices, all at once. `Ok` when each has arrived; both tell what happened, a line for
/// each way.
///
/// # Errors
/// When one has not.
pub fn send(settings: &Settings) -> Result<String, String> {
    let runtime = match tokio::runtime::Runtime::new() {
        Ok(runtime) => runtime,
        Err(e) => return Err(format!("the runtime cannot be started: {e}\n")),
    };
    let told = runtime.block_on(by_each_way(settings, Clock::System.now()));
    let mut text = String::from("test notices\n");
    for (name, sent) in &told {
        let what = match sent {
            Ok(()) => "sent, and the other side has confirmed it".to_owned(),
            Err(why) => format!("not sent: {why}"),
        };
        // Writing into a String cannot fail.
        let _always = writeln!(text, "  {name:<11} {what}");
    }
    if told.iter().all(|(_, sent)| sent.is_ok()) {
        Ok(text)
    } else {
        Err(text)
    }
}

async fn by_each_way(settings: &Settings, now: Time) -> Vec<(Name, Result<(), String>)> {
    let mut all = tokio::task::JoinSet::new();
    let (broker, delivery) = (settings.broker.clone(), test_of(settings, Way::Mqtt, now));
    all.spawn(async move { (0, outlets::mqtt::send_test(&broker, &delivery).await) });
    for (at, outlet) in settings.outlets.iter().cloned().enumerate() {
        let delivery = test_of(settings, Way::Outlet(outlet.name.clone()), now);
        all.spawn(async move { (at + 1, outlets::send_test(&outlet, delivery).await) });
    }
    let names = settings.outlets.iter().map(|o| o.name.clone());
    let names = std::iter::once(Name::from(Way::MQTT)).chain(names);
    let broken_off = || Err("it broke off".to_owned());
    let mut told: Vec<_> = names.map(|name| (name, broken_off())).collect();
    while let Some(done) = all.join_next().await {
        if let Ok((at, sent)) = done
            && let Some(one) = told.get_mut(at)
        {
            one.1 = sent;
        }
    }
    told
}

/// A notice that nobody should act on. Its number is the time, so no test is a repeat of another.
fn test_of(settings: &Settings, way: Way, now: Time) -> Delivery {
    let plant = &settings.plant.name;
    let bank = settings.banks.first().map_or("", |b| &*b.name);
    let seconds = now.us().div_euclid(US_PER_S);
    let name = way.name().to_owned();
    let notice = Notice {
        id: format!("test-{seconds}").into(),
        plant: plant.clone(),
        bank: bank.into(),
        kind: Kind::IntakeTrouble,
        state: State::Unacknowledged,
        priority: Priority::Low,
        sources: Vec::new(),
        unit: "".into(),
        since: Since {
            at: now,
            earliest: now,
            latest: now,
        },
        raised: now,
        changed: now,
        returned: None,
        acknowledged: None,
        subject: "TEST from evenrow: nothing is wrong".to_owned(),
        text: format!(
            "This is a test of the outlet \"{name}\" of plant {plant}. Nothing is wrong, and there \
             is nothing to do.\nPage: {}",
            settings.pages()
        ),
        advice: "Nothing: this is a test.".to_owned(),
        url: settings.pages(),
        span: 0,
        pattern: None,
        slip: None,
        common_movement: None,
        even_mean: None,
        cost_per_hour: None,
        adjustment: None,
        handling: Handling::default(),
    };
    Delivery {
        number: u64::try_from(seconds).unwrap_or(0),
        way,
        at: now,
        notice: Arc::new(notice),
    }
}
