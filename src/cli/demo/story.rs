//! What happens in the demo, in cycles from its start, and the timetable that people read.
//!
//! What must hold: the whole story fits five minutes at the default speed, and between two troubles
//! the bank has time to be seen even again. Deliberately absent: clocks; a start is given.

use jiff::tz::TimeZone;

use crate::model::{Time, US_PER_S};

use super::filler::{Spell, Trouble};

/// Length of a cycle at the default speed. A real filler of this size takes ten times as long; the
/// line is run fast so that the story fits five minutes.
pub const CYCLE_US: i64 = US_PER_S / 2;
/// Cycles delivered before the story: half an hour at the default speed.
pub const BACKLOG_CYCLES: u64 = 3_600;
/// Length of the story.
pub const STORY_CYCLES: u64 = 600;

/// The head that drifts low: 07.
const LOW_HEAD: usize = 6;
/// By how much, in grams: about three standard deviations, four times the margin.
const LOW_G: f64 = -3.5;
const LOW_FROM: u64 = 40;
const LOW_RAMP: u64 = 40;
const LOW_UNTIL: u64 = 170;

/// The head that turns erratic: 03.
const ERRATIC_HEAD: usize = 2;
const ERRATIC_TIMES: f64 = 3.0;
const ERRATIC_FROM: u64 = 290;
const ERRATIC_UNTIL: u64 = 440;

/// The troubles of a story that starts at a cycle.
pub fn spells(start: u64) -> Vec<Spell> {
    vec![
        Spell {
            head: LOW_HEAD,
            trouble: Trouble::Level { offset_g: LOW_G },
            from: start + LOW_FROM,
            ramp: LOW_RAMP,
            until: start + LOW_UNTIL,
        },
        Spell {
            head: ERRATIC_HEAD,
            trouble: Trouble::Erratic {
                times: ERRATIC_TIMES,
            },
            from: start + ERRATIC_FROM,
            ramp: 1,
            until: start + ERRATIC_UNTIL,
        },
    ]
}

/// What the demo's fitter enters when head 07 is put right, and the cycles from the story's start until then.
pub fn adjustment() -> (u64, String) {
    let entry = serde_json::json!({
        "by": "the demo's fitter",
        "kind": "adjustment",
        "source": head_name(LOW_HEAD),
        "amount": -LOW_G,
        "reason": "dosing valve opened by a quarter turn",
    });
    (LOW_UNTIL, entry.to_string())
}

/// The same in words.
pub fn entered_words() -> String {
    format!("head {} adjusted by +{} g", head_name(LOW_HEAD), -LOW_G)
}

/// A head's name, as on the machine.
pub fn head_name(head: usize) -> String {
    format!("{:02}", head + 1)
}

/// The timetable of a story that starts at `start`, times in the plant's zone.
pub fn timetable(start: Time, cycle_us: i64, zone: &TimeZone) -> Vec<String> {
    let (low, erratic) = (head_name(LOW_HEAD), head_name(ERRATIC_HEAD));
    let depth = LOW_G.abs();
    let acts: [(u64, String); 6] = [
        (
            0,
            "all heads are even; all move together by more than a head may be apart".to_owned(),
        ),
        (
            LOW_FROM,
            format!(
                "head {low} starts to give less and is soon {depth} g below the others; its notice follows"
            ),
        ),
        (
            LOW_UNTIL,
            format!(
                "head {low} is adjusted by +{depth} g, and that is entered; the notice says whether it worked, and clears"
            ),
        ),
        (
            ERRATIC_FROM,
            format!(
                "head {erratic} turns erratic: right on average, scattering {ERRATIC_TIMES} times as much; its notice follows"
            ),
        ),
        (
            ERRATIC_UNTIL,
            format!(
                "head {erratic} is put right by itself; the notice clears when the data show it"
            ),
        ),
        (
            STORY_CYCLES,
            "the story is over; the line goes on evenly".to_owned(),
        ),
    ];
    let line = |(cycle, what): (u64, String)| {
        let at = start.plus_us(cycle_us.saturating_mul(cycle as i64));
        format!("{}  {what}", clock_time(at, zone))
    };
    acts.into_iter().map(line).collect()
}

/// A time of day as people of the plant read it.
pub fn clock_time(at: Time, zone: &TimeZone) -> String {
    match at.to_jiff() {
        Some(stamp) => stamp
            .to_zoned_datetime(zone.clone())
            .strftime("%H:%M:%S")
            .to_string(),
        None => at.to_string(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_story_fits_five_minutes_and_troubles_do_not_overlap() {
        assert!(STORY_CYCLES as i64 * CYCLE_US <= 300 * US_PER_S);
        let spells = spells(1_000);
        let first_minute = 1_000 + (60 * US_PER_S / CYCLE_US) as u64;
        assert!(spells[0].from + spells[0].ramp <= first_minute);
        for pair in spells.windows(2) {
            assert!(pair[0].until < pair[1].from);
        }
        assert!(spells.iter().all(|s| s.until < 1_000 + STORY_CYCLES));
    }

    #[test]
    fn the_timetable_reads_in_the_plants_time() {
        let start = Time::parse_rfc3339("2026-07-01T12:00:00Z").expect("a time");
        let zone = TimeZone::get("Europe/Lisbon").expect("a zone");
        let lines = timetable(start, CYCLE_US, &zone);
        assert!(lines[0].starts_with("13:00:00  all heads are even"));
        assert!(lines[1].starts_with("13:00:20  head 07 starts to give less"));
        assert!(lines[3].contains("head 03 turns erratic"));
        assert!(lines[5].starts_with("13:05:00  "));
    }
}
