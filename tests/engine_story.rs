//! The engine on simulated lines: what is called, who is named, and how it ends.

#[path = "common/line.rs"]
mod line;

use evenrow::notice::{Kind, State};
use line::{Line, bank, even};

#[test]
fn a_drifting_head_is_named_and_clears_when_put_right() {
    let mut line = Line::new(bank(12), 1);
    line.run(1800, even);
    assert_eq!(line.raised().len(), 0);
    line.run(240, |s, c| {
        (
            if s == 7 {
                -3.0 * (c as f64 / 20.0).min(1.0)
            } else {
                0.0
            },
            1.0,
        )
    });
    let notices = line.notices();
    let first = notices.first().expect("a notice within four minutes");
    assert_eq!(first.kind, Kind::LevelApart);
    assert_eq!(first.state, State::Unacknowledged);
    let named: Vec<&str> = first.sources.iter().map(|s| &*s.source).collect();
    assert_eq!(named, ["07"]);
    line.run(240, even);
    let last = line.notices().last().cloned().expect("still there");
    assert_eq!(last.state, State::ReturnedUnacknowledged);
    line.run(1800, even);
    assert_eq!(line.raised().len(), 1, "nothing is raised again");
}

#[test]
fn an_erratic_head_is_named_and_clears_when_put_right() {
    let mut line = Line::new(bank(12), 2);
    line.run(1800, even);
    line.run(400, |s, _| (0.0, if s == 3 { 3.0 } else { 1.0 }));
    let notices = line.notices();
    let first = notices.first().expect("a notice");
    assert_eq!(first.kind, Kind::SpreadApart);
    let named: Vec<&str> = first.sources.iter().map(|s| &*s.source).collect();
    assert_eq!(named, ["03"]);
    line.run(600, even);
    let last = line.notices().last().cloned().expect("still there");
    assert_eq!(last.state, State::ReturnedUnacknowledged);
    line.run(1800, even);
    assert_eq!(line.raised().len(), 1, "nothing is raised again");
}
