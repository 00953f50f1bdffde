//! Where a source usually stands: a known offset, or a place learnt from its own past. It is taken off
//! before sources are compared, and what is learnt is paid for by its own chance.

use serde::{Deserialize, Serialize};

use crate::model::{Offsets, SourceIx};
use crate::stats::Degenerate;

use super::data::Data;
use super::level::Level;
use super::look::Dependence;

/// A source's usual place.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Usual {
    /// What is taken off its values, in the unit.
    pub place: f64,
    /// One over the number of values it was learnt from; 0 when it is known.
    pub share: f64,
}

impl Usual {
    /// What the configuration knows; `None` where it has to be learnt.
    pub fn known(offsets: &Offsets, source: &str) -> Option<Self> {
        match offsets {
            Offsets::Learn => None,
            Offsets::None | Offsets::Table(_) => Some(Self {
                place: offsets.of(source),
                share: 0.0,
            }),
        }
    }
}

/// The usual places of sources as these values show them, about a centre of their own. All of a bank's
/// sources have to be learnt from the same values; treating them as exact afterwards would break the
/// call budget (realised over nominal 0.25 to 0.8), so each comes with its share of chance.
///
/// # Errors
/// [`Degenerate`] when nothing can be said.
pub fn learn_usual(
    data: &Data,
    known: Option<Dependence>,
) -> Result<Vec<(SourceIx, Usual)>, Degenerate> {
    let margins = vec![0.0; data.sources.len()];
    let level = Level::judge(data, &margins, None, known)?;
    let centre = level.means.iter().sum::<f64>() / level.means.len() as f64;
    let columns = data.columns();
    let each = data.sources.iter().enumerate();
    let usual = each.map(|(c, source)| {
        let place = level.means[c] - centre + data.usual[c].place;
        let share = 1.0 / columns[c].len().max(1) as f64;
        (*source, Usual { place, share })
    });
    Ok(usual.collect())
}
