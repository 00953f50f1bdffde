//! Pictures: our own SVG, drawn on the server.
//!
//! Each answers one question, which is its title, and carries a description; whoever places one puts
//! the same figures beside it as a table. Across, places are per cent of the picture's width and down
//! they are pixels, so that a picture fits every screen while its text keeps one size. What must hold:
//! uncertainty is drawn; colour is never the only sign. Deliberately absent: reading anything but
//! what is passed in.

pub mod band;
pub mod course;
pub mod day;
pub mod deviations;
pub mod enclosed;
pub mod evidence;
pub mod glyph;
pub mod lags;
pub mod mini;
pub mod ring;
pub mod row;
pub mod scale;
pub mod shares;
pub mod spread;
pub mod time_axis;
pub mod time_band;
pub mod values;
pub mod vik;

/// A per cent place with enough what for a wall screen and no more.
pub fn percent(share: f64) -> String {
    let mut text = format!("{:.2}", share * 100.0);
    trim(&mut text);
    text.push('%');
    text
}

/// A pixel place, to a tenth.
pub fn px(y: f64) -> String {
    let mut text = format!("{y:.1}");
    trim(&mut text);
    text
}

fn trim(text: &mut String) {
    while text.ends_with('0') && text.contains('.') {
        text.pop();
    }
    if text.ends_with('.') {
        text.pop();
    }
}

#[cfg(test)]
mod tests {
    #[test]
    fn places_are_short() {
        assert_eq!(super::percent(0.5), "50%");
        assert_eq!(super::percent(0.33333), "33.33%");
        assert_eq!(super::px(12.04), "12");
        assert_eq!(super::px(12.25), "12.2");
    }
}
