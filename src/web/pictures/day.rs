//! A bank's last day on the plant's page: a level line where it was even, a displaced block where
//! sources were apart, dots where nothing could be said, nothing where nobody looked.

use std::fmt::Write as _;

use maud::{Markup, html};

use crate::web::days::{COLUMNS, Half};

/// Height of the picture, in pixels.
const HEIGHT: u32 = 40;

/// Draws it; `words` say the same.
pub fn draw(halves: &[Half], words: &str) -> Markup {
    html! {
        svg class="day" width="100%" height=(HEIGHT) viewBox={ "0 0 " (COLUMNS) " " (HEIGHT) }
            preserveAspectRatio="none" role="img" aria-label=(words) {
            path class="hours" d="M0 38v-4M12 38v-4M24 38v-4M36 38v-4M48 38v-4" {}
            path class="blind" d=(runs(halves, Half::Blind, 16)) {}
            path class="even" d=(runs(halves, Half::Even, 16)) {}
            path class="apart" d=(runs(halves, Half::Apart, 22)) {}
        }
    }
}

/// One stroke per run of equal halves, at a height.
fn runs(halves: &[Half], wanted: Half, y: u32) -> String {
    let mut path = String::new();
    let mut column = 0;
    while let Some(here) = halves.get(column) {
        let run = halves
            .iter()
            .skip(column)
            .take_while(|half| *half == here)
            .count();
        if *here == wanted {
            // Writing to a String cannot fail.
            let _ = write!(path, "M{column} {y}h{run}");
        }
        column += run;
    }
    path
}

/// The day in words.
pub fn words(halves: &[Half]) -> String {
    let hours = |wanted: Half| {
        let count = halves.iter().filter(|half| **half == wanted).count();
        count as f64 / 2.0
    };
    let parts = [
        (Half::Even, "even"),
        (Half::Apart, "apart"),
        (Half::Blind, "not enough to say"),
        (Half::Nothing, "not looked at"),
    ];
    let said: Vec<String> = parts
        .into_iter()
        .map(|(half, word)| (hours(half), word))
        .filter(|(hours, _)| *hours > 0.0)
        .map(|(hours, word)| format!("{word} {hours} h"))
        .collect();
    format!("The last day: {}", said.join(", "))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_day_is_strokes_and_words() {
        let mut halves = vec![Half::Nothing; 44];
        halves.extend([Half::Even, Half::Even, Half::Apart, Half::Even]);
        assert_eq!(runs(&halves, Half::Even, 16), "M44 16h2M47 16h1");
        assert_eq!(runs(&halves, Half::Apart, 22), "M46 22h1");
        assert_eq!(
            words(&halves),
            "The last day: even 1.5 h, apart 0.5 h, not looked at 22 h"
        );
    }
}
