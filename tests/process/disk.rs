//! A disk that takes no more: said in log, metrics and page, nothing acknowledged meanwhile, and
//! nothing missing when it takes again.

use crate::common::mosquitto::Mosquitto;
use crate::common::running::wait_for;
use crate::daemon::{Plant, SOON, Wanted};
use crate::line::Line;

const WRITABLE: &str = "evenrow_store_writable";

#[test]
fn a_full_disk_is_said_and_nothing_is_lost_when_it_has_room_again() {
    let broker = Mosquitto::start();
    let plant = Plant::new(broker.port(), &Wanted::default());
    let daemon = plant.start_ready();
    let mut line = Line::new();
    line.publish(&broker, 100, &[]);
    let values = "evenrow_window_values{bank=\"filler-2\",source=\"08\"}";
    daemon.wait_metric(values, |v| v == 80.0);
    assert_eq!(daemon.wait_metric(WRITABLE, |_| true), 1.0);

    daemon.limit_files("4096");
    line.publish(&broker, 20, &[]);
    daemon.wait_metric(WRITABLE, |v| v == 0.0);
    daemon.wait_log(&["ERROR", "nothing is taken in"]);
    wait_for(SOON, "the page to say so", || {
        let page = daemon.ask("/").ok()?.text;
        page.contains("disk").then_some(())
    });
    assert_eq!(daemon.ask("/health/live").expect("an answer").status, 200);
    // Not acknowledged, so the broker still has them.
    line.publish(&broker, 20, &[]);

    daemon.limit_files("unlimited");
    daemon.wait_metric(WRITABLE, |v| v == 1.0);
    daemon.nothing_is_missing(line.newest());
    daemon.end(&["nothing is taken in", "tried again"]);
}
