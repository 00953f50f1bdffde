//! `[notices]`: the plant's manners with notices.

use crate::notice::{Latching, Manners};
use crate::settings::check::{Check, D, S};
use crate::settings::fault::FaultList;
use crate::settings::section::Field;
use crate::settings::written::WrittenNotices;

/// The manners; what is not said is as usual.
pub(super) fn manners(written: WrittenNotices, faults: &mut FaultList) -> Manners {
    let WrittenNotices {
        place,
        longest_shelving,
        latching,
        repeat_after,
        on_delay,
        off_delay,
        settling,
    } = written;
    let usual = Manners::default();
    let mut check = Check::new("notices", &place, faults);
    let mut within =
        |field: Field<String>, name: &str, bounds_us| check.duration_us(field, name, bounds_us);
    // Longer than a month nobody remembers what was shelved.
    let longest = within(longest_shelving, "longest_shelving", 60 * S..=31 * D);
    // Sooner than a minute a repeat is noise.
    let repeat_after_us = within(repeat_after, "repeat_after", 60 * S..=31 * D);
    let on_delay = within(on_delay, "on_delay", 0..=D);
    let off_delay = within(off_delay, "off_delay", 0..=D);
    let settling = within(settling, "settling", 0..=D);
    Manners {
        longest_shelving_us: longest.unwrap_or(usual.longest_shelving_us),
        latching: match latching.given().map(|spot| spot.value) {
            Some(true) => Latching::On,
            Some(false) => Latching::Off,
            None => usual.latching,
        },
        repeat_after_us: repeat_after_us.or(usual.repeat_after_us),
        on_delay_us: on_delay.unwrap_or(usual.on_delay_us),
        off_delay_us: off_delay.unwrap_or(usual.off_delay_us),
        settling_us: settling.unwrap_or(usual.settling_us),
    }
}
