//! The pages in a real browser: they load, name the source, complain of nothing, work without
//! scripts, stay fresh, and let a person acknowledge.

use crate::browser::{Browser, Scripts};
use crate::common::mosquitto::Mosquitto;
use crate::common::running::wait_for;
use crate::daemon::{Daemon, Plant, SOON, TOKEN, Wanted};
use crate::line::{Line, Off};

/// A line whose head 05 is low, and its notice's id.
#[track_caller]
pub fn drifted(broker: &Mosquitto, daemon: &Daemon, line: &mut Line) -> String {
    line.publish(broker, 100, &[Off { head: 5, by: -2.5 }]);
    wait_for(SOON, "the notice", || {
        let list = daemon.json("/api/v1/notices");
        list["items"][0]["id"].as_str().map(str::to_owned)
    })
}

/// Whether the words stand somewhere in a text.
fn says(text: &str, words: &[&str]) -> bool {
    words.iter().all(|word| text.contains(word))
}

#[test]
fn the_pages_name_the_source_without_complaint_and_stay_fresh() {
    let broker = Mosquitto::start();
    let plant = Plant::new(broker.port(), &Wanted::default());
    let daemon = plant.start_ready();
    let mut line = Line::new();
    let browser = Browser::start(Scripts::On);
    browser.open(&daemon.address("/"));
    assert!(
        says(&browser.text(), &["Quayside", "filler-2"]),
        "{}",
        browser.text()
    );
    browser.open(&daemon.address("/banks/filler-2"));

    // The page that is open shows what happens without being loaded again.
    drifted(&broker, &daemon, &mut line);
    wait_for(SOON, "the open page to name the source", || {
        says(&browser.text(), &["05", "level apart"]).then_some(())
    });
    assert!(!browser.texts("svg title").is_empty() || !browser.texts("svg").is_empty());
    for path in ["/", "/banks/filler-2", "/notices"] {
        browser.open(&daemon.address(path));
        let text = browser.text();
        assert!(says(&text, &["05", "filler-2"]), "{path}: {text}");
    }
    let complaints = browser.complaints();
    assert!(complaints.is_empty(), "{complaints:#?}");
    drop(browser);
    daemon.end(&[]);
}

#[test]
fn without_scripts_a_person_reads_signs_in_and_acknowledges() {
    let broker = Mosquitto::start();
    let plant = Plant::new(broker.port(), &Wanted::default());
    let daemon = plant.start_ready();
    let mut line = Line::new();
    let id = drifted(&broker, &daemon, &mut line);
    let browser = Browser::start(Scripts::Off);
    browser.open(&daemon.address("/banks/filler-2"));
    let text = browser.text();
    assert!(says(&text, &["05", "level apart"]), "{text}");

    browser.open(&daemon.address("/sign-in?next=/banks/filler-2"));
    browser.type_into("input[name=token]", TOKEN);
    browser.press("form button");
    wait_for(SOON, "the way back", || {
        browser.address().ends_with("/banks/filler-2").then_some(())
    });
    browser.press("details.act summary");
    browser.type_into("input[name=by]", "Ana");
    browser.press("form[action*=acknowledge] button");
    wait_for(SOON, "the notice to be acknowledged", || {
        let notice = daemon.json(&format!("/api/v1/notices/{id}"));
        (notice["state"] == "acknowledged").then_some(())
    });
    browser.open(&daemon.address("/banks/filler-2"));
    assert!(
        says(&browser.text(), &["acknowledged", "Ana"]),
        "{}",
        browser.text()
    );
    let complaints = browser.complaints();
    assert!(complaints.is_empty(), "{complaints:#?}");
    drop(browser);
    daemon.end(&[]);
}
