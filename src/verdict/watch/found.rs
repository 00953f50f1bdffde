//! The strongest evidence of each part: how much, who, and on which side.

use super::Watch;
use super::contrast::{Judged, Means};
use super::hull::{Rise, Vertex};
use super::scale::Scale;
use super::thresholds::{Part, SPANS};
use crate::model::SourceIx;

/// The strongest evidence of one part.
#[derive(Clone, Debug)]
pub struct Found {
    /// The part.
    pub part: Part,
    /// Root of the statistic.
    pub statistic: f64,
    /// On the same scale.
    pub threshold: f64,
    /// Who is above (level) or apart (spread), the strongest first, then who is below.
    pub leading: Vec<SourceIx>,
    /// Columns above and below.
    pub sides: (Vec<usize>, Vec<usize>),
    /// Margin, in the unit.
    pub margin: f64,
    /// The maximising start, where the part goes over all starts.
    pub vertex: Option<Vertex>,
}

/// A step is called after this many cycles. Two or three values far to one side are what a source that turns
/// erratic gives now and then, and a step so large that they alone would prove it can wait for two more.
const SHORTEST_RUN: u64 = 5;

impl Found {
    /// Statistic over threshold.
    pub fn ratio(&self) -> f64 {
        self.statistic / self.threshold
    }
}

impl Watch {
    /// The strongest evidence of every part, whatever is due.
    pub(super) fn found(&self) -> Vec<Found> {
        let mut all: Vec<Found> = Vec::new();
        all.extend(self.found_few());
        all.extend(self.found_in_windows());
        all.extend(self.found_spread(Part::Erratic));
        all.extend(self.found_spread(Part::Quiet));
        all
    }

    /// The evidence of every source and direction, the strongest first.
    fn each_few(&self, scale: &Scale, threshold: f64) -> Vec<OfSource> {
        let mut each: Vec<OfSource> = Vec::new();
        for (column, source) in self.columns.iter().enumerate() {
            let strand = &self.strands[usize::from(*source)];
            let margin = scale.margin(column, &self.terms);
            for (rise, above) in [(&strand.level.up, true), (&strand.level.down, false)] {
                let Some((squared, vertex)) = rise.best(margin) else {
                    continue;
                };
                let mut statistic = (squared / scale.paid(column)).sqrt();
                if statistic > threshold && self.columns.len() > 2 {
                    statistic /= self.unrest(column, vertex.cycle).sqrt();
                }
                let run = self.cycle.saturating_sub(vertex.cycle) + 1;
                let young = statistic > threshold && self.columns.len() > 2 && run < SHORTEST_RUN;
                each.push(OfSource {
                    young,
                    statistic: if young { threshold } else { statistic },
                    vertex,
                    column,
                    above,
                });
            }
        }
        each.sort_by(|a, b| b.statistic.total_cmp(&a.statistic));
        each
    }

    /// Whether a single source stands above the threshold by too few cycles: the windows see it too, and would
    /// name somebody beside it.
    pub(super) fn is_young(&self) -> bool {
        let (Some(bars), Some(scale)) = (&self.bars, &self.scale) else {
            return false;
        };
        let each = self.each_few(scale, bars.thresholds.few);
        each.iter().any(|e| e.young)
    }

    fn found_few(&self) -> Option<Found> {
        let (bars, scale) = (self.bars.as_ref()?, self.scale.as_ref()?);
        let threshold = bars.thresholds.few;
        let each = self.each_few(scale, threshold);
        let &OfSource {
            statistic,
            vertex,
            column,
            above,
            ..
        } = each.first()?;
        // All that stand above the threshold by themselves, or the strongest.
        let over = each
            .iter()
            .filter(|e| e.statistic > threshold || e.column == column);
        let mut leading: Vec<SourceIx> = Vec::new();
        for source in over.map(|e| SourceIx(self.columns[e.column])) {
            if !leading.contains(&source) {
                leading.push(source);
            }
        }
        if self.columns.len() == 2 {
            leading = self.columns.iter().map(|s| SourceIx(*s)).collect();
        }
        let rest = (0..self.columns.len()).filter(|c| *c != column).collect();
        let sides = if above {
            (vec![column], rest)
        } else {
            (rest, vec![column])
        };
        Some(Found {
            part: Part::Few,
            statistic,
            threshold,
            leading,
            sides,
            margin: scale.margin(column, &self.terms),
            vertex: Some(vertex),
        })
    }

    fn found_in_windows(&self) -> Vec<Found> {
        let (Some(bars), Some(scale)) = (&self.bars, &self.scale) else {
            return Vec::new();
        };
        let by = scale.judged(&self.terms);
        let mut means = Means::default();
        let (mut split, mut pair): (Option<Found>, Option<Found>) = (None, None);
        for (i, span) in SPANS.iter().enumerate() {
            if self.rows.held() < span.cycles {
                continue;
            }
            means.fill(&self.rows, span.cycles, &by);
            means.sort();
            if let Some(bars) = &bars.thresholds.split {
                self.keep_stronger(
                    &mut split,
                    self.split_found(&means, &by, bars[i]),
                    span.cycles,
                );
            }
            if let Some(bars) = &bars.thresholds.pair {
                self.keep_stronger(
                    &mut pair,
                    self.pair_found(&means, &by, bars[i]),
                    span.cycles,
                );
            }
        }
        split.into_iter().chain(pair).collect()
    }

    fn split_found(&self, means: &Means, by: &Judged, bar: f64) -> Option<Found> {
        let best = means.split(by)?;
        let columns: Vec<usize> = means.sources.iter().map(|m| m.column).collect();
        let (above, below) = columns.split_at(best.top);
        let fewer = if above.len() <= below.len() {
            above
        } else {
            below
        };
        Some(Found {
            part: Part::Split,
            statistic: means.split_statistic(by).sqrt(),
            threshold: bar.sqrt(),
            leading: fewer.iter().map(|c| SourceIx(self.columns[*c])).collect(),
            sides: (above.to_vec(), below.to_vec()),
            margin: by.margin,
            vertex: None,
        })
    }

    fn pair_found(&self, means: &Means, by: &Judged, bar: f64) -> Option<Found> {
        let best = means.pair(by)?;
        let (above, below) = best.columns;
        Some(Found {
            part: Part::Pair,
            statistic: best.statistic,
            threshold: bar,
            leading: [above, below].map(|c| SourceIx(self.columns[c])).to_vec(),
            sides: (vec![above], vec![below]),
            margin: by.margin,
            vertex: None,
        })
    }

    fn found_spread(&self, part: Part) -> Option<Found> {
        let bars = self.bars.as_ref()?;
        let threshold = match part {
            Part::Erratic => bars.thresholds.erratic,
            _ => bars.thresholds.quiet,
        }?;
        let best = |(column, source): (usize, &u16)| {
            let rise = self.rise_of(part, usize::from(*source));
            rise.best(0.0)
                .map(|(squared, vertex)| (squared, vertex, column))
        };
        let each = self.columns.iter().enumerate().filter_map(best);
        let (squared, vertex, column) = each.max_by(|a, b| a.0.total_cmp(&b.0))?;
        Some(Found {
            part,
            statistic: (squared / bars.score_variance()).sqrt(),
            threshold,
            leading: vec![SourceIx(self.columns[column])],
            sides: (vec![column], Vec::new()),
            margin: 0.0,
            vertex: Some(vertex),
        })
    }

    pub(super) fn rise_of(&self, part: Part, source: usize) -> &Rise {
        let scatter = &self.strands[source].scatter;
        match part {
            Part::Quiet => &scatter.down,
            _ => &scatter.up,
        }
    }

    /// Keeps the stronger of two contrasts; one that crosses has the noise of its sources taken into account.
    fn keep_stronger(&self, best: &mut Option<Found>, new: Option<Found>, cycles: usize) {
        let Some(mut new) = new else {
            return;
        };
        if new.ratio() > 1.0 {
            let from = self.cycle + 1 - (cycles as u64).min(self.cycle);
            let of_side = |side: &[usize]| {
                let unrest = side.iter().map(|c| self.unrest(*c, from)).sum::<f64>();
                (
                    unrest / (side.len() * side.len()) as f64,
                    1.0 / side.len() as f64,
                )
            };
            let (above, below) = (of_side(&new.sides.0), of_side(&new.sides.1));
            new.statistic /= ((above.0 + below.0) / (above.1 + below.1)).sqrt();
        }
        if best.as_ref().is_none_or(|b| new.ratio() > b.ratio()) {
            *best = Some(new);
        }
    }
}

/// The evidence of one source in one direction.
#[derive(Clone, Copy, Debug)]
struct OfSource {
    /// Above the threshold by fewer than [`SHORTEST_RUN`] cycles; the statistic then stands at the threshold.
    young: bool,
    statistic: f64,
    vertex: Vertex,
    column: usize,
    above: bool,
}
