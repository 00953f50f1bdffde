//! The arithmetic of the thresholds for people: pages and `explain`.

use super::shares::Part;
use super::spans::SPANS;
use super::{Basis, Thresholds};
use serde::{Deserialize, Serialize};

/// One part's entry.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Entry {
    /// The part.
    pub part: Part,
    /// Its share of the call budget, 0 to 1; level's parts overlap and add up to a little over 0.8.
    pub share: f64,
    /// Mean cycles to a false call of the part alone, after dependence.
    pub cycles_per_false_call: f64,
    /// Its thresholds: with the window's cycles for a part over spans, else one without.
    pub thresholds: Vec<(Option<usize>, f64)>,
    /// The formula in words.
    pub formula: &'static str,
}

/// All parts that are on, in order.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Account {
    /// The basis as used: clamped where the one given means nothing.
    pub basis: Basis,
    /// One entry per part.
    pub parts: Vec<Entry>,
}

/// How the budget became thresholds, part by part; working these out anew would take milliseconds.
pub fn account(basis: &Basis, found: &Thresholds) -> Account {
    let basis = basis.clamped();
    let entry = |part: Part| {
        Some(Entry {
            part,
            share: part.share(basis.sources)?,
            cycles_per_false_call: part.cycles(&basis)?,
            thresholds: of_part(found, part)?,
            formula: formula(part, &basis),
        })
    };
    Account {
        parts: Part::ALL.into_iter().filter_map(entry).collect(),
        basis,
    }
}

fn of_part(found: &Thresholds, part: Part) -> Option<Vec<(Option<usize>, f64)>> {
    let one = |z: f64| vec![(None, z)];
    let spans = |values: &Vec<f64>| {
        let with_span = SPANS.iter().zip(values);
        with_span.map(|(s, &v)| (Some(s.cycles), v)).collect()
    };
    match part {
        Part::Few => Some(one(found.few)),
        Part::Split => found.split.as_ref().map(spans),
        Part::Pair => found.pair.as_ref().map(spans),
        Part::Erratic => found.erratic.map(one),
        Part::Quiet => found.quiet.map(one),
    }
}

fn formula(part: Part, basis: &Basis) -> &'static str {
    match part {
        Part::Few if basis.margin_sd > 0.0 => {
            "likelihood ratio over every start; rate summed over all sources at the worst offsets \
             within the margin, after Siegmund and Venkatraman 1995"
        }
        Part::Few => "likelihood ratio over every start, Siegmund and Venkatraman 1995",
        Part::Split if basis.margin_sd > 0.0 => {
            "split contrast, one probability for all spans; the smaller of the chi-square quantile \
             and the union bound at the worst offsets within the margin"
        }
        Part::Split => "sum of squares, one probability for all spans, chi-square quantile",
        Part::Pair => "range beyond the margin, one probability for all spans, studentized range",
        Part::Erratic => "normal scores of spread over every start, upward, beyond the margin",
        Part::Quiet => "normal scores of spread over every start, downward, beyond the margin",
    }
}
