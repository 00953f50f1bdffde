//! Who is called: the names of a look, and the names again on the values since the estimated start,
//! with what explains them.

use crate::model::{Bank, SourceIx};
use crate::stats;

use super::causes::{Causes, causes};
use super::data::{Data, Rows, Values};
use super::examine::{Began, Call, Participant};
use super::level::Level;
use super::look::Dependence;
use super::track::{self, Aspect, Yardstick};

/// Fewest cycles on which sources are named again after the start is known.
const FEWEST_TO_RENAME: usize = 5;

/// A bank and those of its sources that take part.
#[derive(Clone, Copy, Debug)]
pub struct Party<'a> {
    /// The bank.
    pub bank: &'a Bank,
    /// Its sources, in display order.
    pub who: &'a [Participant],
}

impl Party<'_> {
    /// The column of the reference source, where there is one and it delivers.
    pub fn reference(&self, cut: &Data) -> Option<usize> {
        let name = self.bank.reference.as_ref()?;
        let one = self.who.iter().find(|p| p.name == *name)?;
        cut.column_of(one.source)
    }

    /// What is taken off a source's values before they are compared, in the unit; 0 while it is learnt.
    pub fn usual_place(&self, source: SourceIx) -> f64 {
        let one = self.who.iter().find(|p| p.source == source);
        one.and_then(|p| p.usual).map_or(0.0, |u| u.place)
    }

    /// Each column's margin.
    pub fn margins(&self, cut: &Data) -> Vec<f64> {
        let margin = |s: &SourceIx| {
            let own = self.who.iter().find(|p| p.source == *s);
            own.map_or(self.bank.margin, |p| p.margin)
        };
        cut.sources.iter().map(margin).collect()
    }

    /// A look at the level of this cut of the data.
    ///
    /// # Errors
    /// As [`Level::judge`].
    pub fn level(
        &self,
        cut: &Data,
        known: Option<Dependence>,
    ) -> Result<Level, crate::stats::Degenerate> {
        Level::judge(cut, &self.margins(cut), self.reference(cut), known)
    }

    /// The call about level that this cut of the data bears out.
    pub fn level_call(&self, cut: &Data, level: &Level, span: usize) -> Call {
        let reference = self.reference(cut);
        let named = named_level(level, reference);
        call_of(cut, Aspect::Level, &named, span, reference)
    }

    /// Names again on the values since the estimated start, which the calling span mixes with older
    /// ones, and looks for what explains them.
    pub fn name_again(&self, data: &Data, call: Call, known: Option<Dependence>) -> Call {
        if call.aspect == Aspect::Spread {
            return call;
        }
        let Some(start) = self.start(data, &call, known) else {
            return call;
        };
        let call = self.renamed(data, call, &start, known);
        let (bank, who) = (self.bank, self.who);
        Call {
            causes: causes(bank, who, data, &start, &call, known),
            ..call
        }
    }

    /// When it began: as the watch has it, else the earliest start among those named.
    fn start(&self, data: &Data, call: &Call, known: Option<Dependence>) -> Option<Began> {
        if call.began.is_some() {
            return call.began;
        }
        let margins = self.margins(data);
        let yard = Yardstick {
            reference: &call.reference,
            margin: margins.iter().copied().fold(0.0, f64::max),
            factor: known.map_or(1.0, |d| d.variance_factor),
            family: self.who.len(),
        };
        let starts = call.named.iter();
        let starts = starts.filter_map(|s| track::locate(data, *s, call.aspect, &yard));
        starts.min_by_key(|l| l.start.place).map(|l| Began {
            start: l.start,
            earliest: l.earliest,
            latest: l.latest,
        })
    }

    fn renamed(&self, data: &Data, call: Call, start: &Began, known: Option<Dependence>) -> Call {
        let Some(since) = data.since(start.start.place) else {
            return call;
        };
        let enough = since.columns().iter().all(|c| c.len() >= FEWEST_TO_RENAME);
        if !enough || since.sources.len() < call.named.len() + call.reference.len() {
            return call;
        }
        if self.are_opposite(&since, &call) {
            return call;
        }
        match self.level(&since, known) {
            Ok(level) if level.even.contains(&false) => Call {
                began: call.began,
                ..self.level_call(&since, &level, call.span)
            },
            _ => call,
        }
    }
}

impl Party<'_> {
    /// Whether two sources are named that stand on either side of the rest and further apart than the margin,
    /// each surely off and neither much nearer to the rest than the other: then both together are what is
    /// apart, and the largest even set may well hold one of them.
    fn are_opposite(&self, since: &Data, call: &Call) -> bool {
        let (Values::Paired(rows), &[one, other]) = (&since.values, call.named.as_slice()) else {
            return false;
        };
        let (Some(one), Some(other)) = (since.column_of(one), since.column_of(other)) else {
            return false;
        };
        let (a, b) = (off(rows, one, other), off(rows, other, one));
        let (Some(a), Some(b)) = (a, b) else {
            return false;
        };
        let (nearer, farther) = (
            a.mean.abs().min(b.mean.abs()),
            a.mean.abs().max(b.mean.abs()),
        );
        let sure = a.errors().min(b.errors()) > SURELY_OFF;
        sure && a.mean * b.mean < 0.0
            && nearer > 0.5 * farther
            && nearer + farther > self.bank.margin
    }
}

/// Standard errors by which both of two must be off: the farthest of a bank's even sources is seldom (in one
/// of fifty banks of twelve) that far off by chance.
const SURELY_OFF: f64 = 3.0;

/// How far a source is off the mean of the rest.
struct Off {
    mean: f64,
    std_error: f64,
}

impl Off {
    fn errors(&self) -> f64 {
        self.mean.abs() / self.std_error
    }
}

/// A column against the mean of all others but `beside`, row by row. `None` when nothing can be said.
fn off(rows: &Rows, column: usize, beside: usize) -> Option<Off> {
    let contrast = |r: usize| {
        let row = rows.row(r);
        let rest = (0..row.len()).filter(|c| *c != column && *c != beside && !row[*c].is_nan());
        let (n, sum) = rest.fold((0.0, 0.0), |(n, sum), c| (n + 1.0, sum + row[c]));
        let off = row[column] - sum / n;
        (n > 0.0 && !off.is_nan()).then_some(off)
    };
    let series: Vec<f64> = (0..rows.len()).filter_map(contrast).collect();
    let summary = stats::summarize(&series);
    let std_error = (summary.variance()? / summary.n as f64).sqrt();
    (std_error > 0.0).then_some(Off {
        mean: summary.mean,
        std_error,
    })
}

/// Whoever is outside the even set; of two sources without a reference, both. When the pairs single
/// nobody out although the test calls, the one farthest off in standard errors.
pub fn named_level(level: &Level, reference: Option<usize>) -> Vec<bool> {
    let k = level.even.len();
    if k == 2 && reference.is_none() {
        return vec![true; 2];
    }
    let mut named: Vec<bool> = level.even.iter().map(|e| !e).collect();
    if !named.contains(&true) {
        let farness = |i: &usize| {
            level.deviations[*i].map_or(0.0, |d| {
                d.value.abs() / (d.high - d.low).max(f64::MIN_POSITIVE)
            })
        };
        let others = (0..k).filter(|i| Some(*i) != reference);
        if let Some(worst) = others.max_by(|a, b| farness(a).total_cmp(&farness(b))) {
            named[worst] = true;
        }
    }
    named
}

/// The call that names these columns. They were compared with the reference source, where there is one,
/// or with everybody else.
pub fn call_of(
    cut: &Data,
    aspect: Aspect,
    named: &[bool],
    span: usize,
    reference: Option<usize>,
) -> Call {
    let pick = |yes: bool| -> Vec<SourceIx> {
        let those = cut.sources.iter().zip(named).filter(|(_, n)| **n == yes);
        those.map(|(s, _)| *s).collect()
    };
    let mut compared = match reference {
        Some(column) => vec![cut.sources[column]],
        None => pick(false),
    };
    if compared.is_empty() {
        // Two sources: each is compared with the other.
        compared.clone_from(&cut.sources);
    }
    Call {
        aspect,
        named: pick(true),
        reference: compared,
        span,
        began: None,
        causes: Causes::default(),
    }
}
