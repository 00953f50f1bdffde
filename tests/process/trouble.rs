//! A broker that is absent, goes away, comes back, or knows us not: said in log, metrics and page,
//! and tried again until it works.

use std::fs;
use std::process::Command;

use crate::common::mosquitto::Mosquitto;
use crate::common::running::wait_for;
use crate::daemon::{Daemon, Plant, SOON, Wanted};
use crate::line::Line;

const CONNECTED: &str = "evenrow_broker_connected";

/// The words of the page, without its marks.
fn page(daemon: &Daemon) -> String {
    daemon.ask("/").expect("the page").text
}

#[test]
fn a_broker_that_is_absent_goes_and_comes_is_told_about_and_tried_again() {
    let mut broker = Mosquitto::absent();
    let plant = Plant::new(broker.port(), &Wanted::default());
    let daemon = plant.start();
    daemon.wait_metric(CONNECTED, |v| v == 0.0);
    daemon.wait_log(&["WARN", "broker"]);
    assert_eq!(daemon.ask("/health/ready").expect("an answer").status, 503);
    wait_for(SOON, "the page to say so", || {
        page(&daemon).contains("broker").then_some(())
    });

    broker.come_back();
    daemon.wait_metric(CONNECTED, |v| v == 1.0);
    daemon.wait_ready();
    let mut line = Line::new();
    line.publish(&broker, 20, &[]);
    let values = "evenrow_window_values{bank=\"filler-2\",source=\"08\"}";
    daemon.wait_metric(values, |v| v == 20.0);

    broker.go_away();
    daemon.wait_metric(CONNECTED, |v| v == 0.0);
    assert_eq!(daemon.ask("/health/ready").expect("an answer").status, 503);
    broker.come_back();
    daemon.wait_ready();
    line.publish(&broker, 20, &[]);
    daemon.wait_metric(values, |v| v == 40.0);
    daemon.end(&["broker", "notices cannot be sent"]);
}

#[test]
fn a_wrong_password_is_named_and_the_right_one_is_taken_without_a_restart() {
    let settings = "allow_anonymous false\npassword_file {folder}/passwords\n";
    let mut broker = Mosquitto::start_with(settings, |folder| {
        let file = folder.join("passwords");
        let made = Command::new("mosquitto_passwd")
            .args(["-b", "-c"])
            .arg(&file)
            .args(["line", "open water"])
            .status();
        assert!(
            made.is_ok_and(|s| s.success()),
            "mosquitto_passwd makes the file"
        );
    });
    broker.clients_say(&["-u", "line", "-P", "open water"]);
    let password = broker.path("our-password");
    fs::write(&password, "wrong\n").expect("the password is written");
    let wanted = Wanted {
        broker: format!(
            "user = \"line\"\npassword_file = \"{}\"",
            password.display()
        ),
        ..Wanted::default()
    };
    let plant = Plant::new(broker.port(), &wanted);
    let daemon = plant.start();
    daemon.wait_log(&["WARN", "password"]);
    daemon.wait_metric(CONNECTED, |v| v == 0.0);
    wait_for(SOON, "the page to say so", || {
        page(&daemon).contains("password").then_some(())
    });

    fs::write(&password, "open water\n").expect("the password is written");
    wait_for(SOON * 2, "the connection", || {
        daemon.metric(CONNECTED).filter(|v| *v == 1.0)
    });
    daemon.wait_ready();
    let mut line = Line::new();
    line.publish(&broker, 20, &[]);
    daemon.wait_metric(
        "evenrow_window_values{bank=\"filler-2\",source=\"01\"}",
        |v| v == 20.0,
    );
    daemon.end(&["password", "notices cannot be sent"]);
}
