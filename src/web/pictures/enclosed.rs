//! A notice's picture by itself, as a file that goes along with mail: the row picture with its own ink,
//! since no style sheet travels with it.

use maud::{PreEscaped, html};

use crate::engine::BankView;
use crate::notice::{Kind, Notice};
use crate::verdict::Look;

use super::row::BOTTOM;
use super::{deviations, px, spread};

/// Width of the file and room for ticks, names and title, in pixels.
const WIDTH: f64 = 820.0;
const LEFT: f64 = 72.0;
const RIGHT: f64 = 24.0;
const TOP: f64 = 62.0;
const BELOW: f64 = 90.0;

/// The light look of the pages, in plain colours: programs that show mail know no variables.
const INK: &str = "text{fill:#5a5c60;font:13px sans-serif}.title{fill:#1b1c1e;font-size:15px;font-weight:600}\
.grid{stroke:#d8d5cc}.zero{stroke:#1b1c1e;stroke-width:1.25}.margin{fill:#1b1c1e;fill-opacity:.07}\
.interval{stroke:#1b1c1e;stroke-width:1.75;stroke-linecap:round;stroke-opacity:.62}\
.point{stroke:#1b1c1e;stroke-width:1.4}.catch{stroke:none}\
.apart .interval{stroke:#b3124f;stroke-opacity:1;stroke-width:2.5}\
.plot,.held{overflow:visible}.held .point{fill:#b3124f;stroke:#b3124f}\
.tag,.apart .name{fill:#b3124f;font-weight:700}\
.crowd .name:not(.r10):not(.r5),.many .beside,.crowd .beside{display:none}.apart .name.name{display:inline}";

/// How the sources of the notice's bank stand now; `None` for kinds without such a picture, and before
/// a look could judge.
pub fn picture_of(view: &BankView, notice: &Notice) -> Option<String> {
    let look = look_of(view, notice)?;
    let (title, row) = match notice.kind {
        Kind::LevelApart | Kind::BankSplit => {
            (deviations::TITLE, deviations::draw(&view.bank, look)?)
        }
        Kind::SpreadApart => (spread::TITLE, spread::draw(&view.bank, look)?),
        _ => return None,
    };
    let height = TOP + BOTTOM + BELOW;
    let drawn = html! {
        svg xmlns="http://www.w3.org/2000/svg" width=(px(WIDTH)) height=(px(height))
            viewBox={ "0 0 " (px(WIDTH)) " " (px(height)) } {
            style { (PreEscaped(INK)) }
            rect width="100%" height="100%" fill="#fffefa" {}
            text class="title" x="16" y="24" { (view.bank.name) ": " (title) }
            // The look mixes in values from before; the notice tells the size since it began.
            text x="16" y="44" { "Over the newest " (look.span) " values of each source." }
            svg overflow="visible" x=(px(LEFT)) y=(px(TOP)) width=(px(WIDTH - LEFT - RIGHT))
                height=(px(BOTTOM + BELOW)) { (row) }
        }
    };
    Some(format!(
        "<?xml version=\"1.0\" encoding=\"UTF-8\"?>\n{}",
        drawn.into_string()
    ))
}

/// The newest look over the span that called, else the one that stands for now.
fn look_of<'v>(view: &'v BankView, notice: &Notice) -> Option<&'v Look> {
    let of_span = |span| {
        view.looks
            .iter()
            .find(|l| l.span == span && !l.sources.is_empty())
    };
    let look = of_span(notice.span).or_else(|| view.shown_span.and_then(of_span));
    look.map(|l| &**l)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::web::sample;

    #[test]
    fn a_notice_has_its_picture_as_a_file_of_its_own() {
        let snapshot = sample::snapshot();
        let open = |view: &&std::sync::Arc<BankView>| !view.open.is_empty();
        let view = snapshot.banks.iter().find(open).expect("an open notice");
        let mut notice = Notice::clone(&view.open[0]);
        let svg = picture_of(view, &notice).expect("a picture");
        for part in [
            "<?xml",
            "xmlns=\"http://www.w3.org/2000/svg\"",
            "07 low</text>",
        ] {
            assert!(svg.contains(part), "{part:?} is not in {svg}");
        }
        assert!(!svg.contains("var("), "no style sheet comes along");
        let named = svg.matches("M0-8L8 0L0 8L-8 0Z").count();
        assert_eq!(named, 1, "one diamond, for the one that is named");
        notice.kind = Kind::SourceSilent;
        assert_eq!(picture_of(view, &notice), None);
    }
}
