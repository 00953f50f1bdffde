//! The strongest evidence of each part: how much, who, and on which side.

use super::Watch;
use super::contrast::{Judged, Means};
use super::hull::{Rise, Vertex};
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

    fn found_few(&self) -> Option<Found> {
        let (bars, scale) = (self.bars.as_ref()?, self.scale.as_ref()?);
        let mut each: Vec<(f64, Vertex, usize, bool)> = Vec::new();
        for (column, source) in self.columns.iter().enumerate() {
            let strand = &self.strands[usize::from(*source)];
            let margin = scale.margin(column, &self.terms);
            for (rise, above) in [(&strand.level.up, true), (&strand.level.down, false)] {
                if let Some((squared, vertex)) = rise.best(margin) {
                    let statistic = (squared / scale.paid(column)).sqrt();
                    each.push((statistic, vertex, column, above));
                }
            }
        }
        each.sort_by(|a, b| b.0.total_cmp(&a.0));
        let (statistic, vertex, column, above) = *each.first()?;
        let threshold = bars.thresholds.few;
        // All that stand above the threshold by themselves, or the strongest.
        let over = each.iter().filter(|e| e.0 > threshold || e.2 == column);
        let mut leading: Vec<SourceIx> = Vec::new();
        for source in over.map(|e| SourceIx(self.columns[e.2])) {
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
                keep_stronger(&mut split, self.split_found(&means, &by, bars[i]));
            }
            if let Some(bars) = &bars.thresholds.pair {
                keep_stronger(&mut pair, self.pair_found(&means, &by, bars[i]));
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
}

fn keep_stronger(best: &mut Option<Found>, new: Option<Found>) {
    let stronger = |new: &Found| best.as_ref().is_none_or(|b| new.ratio() > b.ratio());
    if let Some(new) = new.filter(stronger) {
        *best = Some(new);
    }
}
