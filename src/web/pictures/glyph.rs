//! The shapes of states, drawn with four short bars, a row of sources: level when even, one displaced
//! when apart, one longer when its spread is apart, one missing when silent, broken when not known.
//!
//! They stand beside the word that says the same, so readers of the page's text lose nothing.

use maud::{Markup, html};

/// A shape.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Glyph {
    /// All level.
    Even,
    /// One displaced.
    Apart,
    /// One longer.
    Spread,
    /// One missing.
    Silent,
    /// Dotted: not known yet.
    Unknown,
    /// Crossed: something of the house or the network does not work.
    Trouble,
}

impl Glyph {
    fn bars(self) -> &'static str {
        match self {
            Self::Even => "M4 8v8M9.3 8v8M14.7 8v8M20 8v8",
            Self::Apart => "M4 6v8M9.3 6v8M20 6v8",
            Self::Spread => "M4 8v8M9.3 8v8M20 8v8",
            Self::Silent => "M4 8v8M9.3 8v8M20 8v8",
            Self::Unknown => {
                "M4 8v.01M4 12v.01M4 16v.01M9.3 8v.01M9.3 12v.01M9.3 16v.01\
                M14.7 8v.01M14.7 12v.01M14.7 16v.01M20 8v.01M20 12v.01M20 16v.01"
            }
            Self::Trouble => "M4 8v8M20 8v8",
        }
    }

    fn odd(self) -> Option<&'static str> {
        match self {
            Self::Even | Self::Unknown => None,
            Self::Apart => Some("M14.7 12v8"),
            Self::Spread => Some("M14.7 3v18"),
            Self::Silent => Some("M14.7 16v.01"),
            Self::Trouble => Some("M8.5 8.5l7 7M15.5 8.5l-7 7"),
        }
    }
}

/// The shape as a picture that readers of text skip.
pub fn draw(glyph: Glyph) -> Markup {
    html! {
        svg class="glyph" viewBox="2 2 20 20" aria-hidden="true" focusable="false" {
            path d=(glyph.bars()) {}
            @if let Some(odd) = glyph.odd() { path class="odd" d=(odd) {} }
        }
    }
}
