//! What the watch says of itself: how far each part is from its threshold, since when, what it learnt.

use serde::{Deserialize, Serialize};

use super::contrast::Means;
use super::hull::{Rise, Step, Vertex};
use super::past::{ContrastBlocks, SET_95, Since};
use super::scatter::Scatter;
use super::thresholds::{Account, Part, SPANS, account};
use super::{Aspect, Crossing, Moment, Watch};
use crate::model::SourceIx;
use crate::verdict::steps::without_step;

/// Whether the watch decides yet.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Progress {
    /// Fewer than two sources are compared.
    Alone,
    /// No source scatters at all and the resolution is unknown: there is no sigma. The look decides.
    Still,
    /// Not yet; the look decides.
    Learning {
        /// Cycles learnt from.
        cycles: u32,
        /// Cycles that it takes.
        needed: u32,
    },
    /// Yes.
    Watching,
}

/// How far a part is from its threshold.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Reading {
    /// The part.
    pub part: Part,
    /// Its statistic, on the scale of sds (for pair of a studentized range).
    pub statistic: f64,
    /// Its threshold, on the same scale.
    pub threshold: f64,
    /// Statistic over threshold: above 1 it calls.
    pub ratio: f64,
    /// The source that it points to most.
    pub leading: Option<SourceIx>,
}

/// What was learnt, for people.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Figures {
    /// Sd of a single value within its source, in the unit, of clipped values.
    pub sigma: Option<f64>,
    /// Whether sigma is what rounding alone makes of still values.
    pub from_resolution: bool,
    /// The sds of single sources where they differ.
    pub own_sigma: Vec<(SourceIx, f64)>,
    /// Correlation of neighbours.
    pub phi: f64,
    /// What of it is paid for.
    pub phi_paid: f64,
    /// Degrees of freedom of sigma.
    pub df: f64,
    /// How the budget becomes thresholds; none while learning.
    pub account: Option<Account>,
}

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
    sides: (Vec<usize>, Vec<usize>),
    /// Margin, in the unit.
    margin: f64,
    /// The maximising start, where the part goes over all starts.
    vertex: Option<Vertex>,
}

impl Found {
    /// Statistic over threshold.
    pub fn ratio(&self) -> f64 {
        self.statistic / self.threshold
    }
}

impl Watch {
    /// How far it is.
    pub fn progress(&self) -> Progress {
        let (cycles, needed) = self.learning_cycles();
        if self.columns.len() < 2 {
            Progress::Alone
        } else if self.bars.is_some() {
            Progress::Watching
        } else if self.scale.is_none() && self.first.still {
            Progress::Still
        } else {
            Progress::Learning { cycles, needed }
        }
    }

    /// How far each part is from its threshold; empty while learning.
    pub fn readings(&self) -> Vec<Reading> {
        let reading = |f: Found| Reading {
            part: f.part,
            statistic: f.statistic,
            threshold: f.threshold,
            ratio: f.ratio(),
            leading: f.leading.first().copied(),
        };
        self.found().into_iter().map(reading).collect()
    }

    /// What was learnt.
    pub fn figures(&self) -> Figures {
        let learnt = &self.learner.learnt;
        let own = self.scale.iter().flat_map(|scale| &scale.own);
        let own = self.columns.iter().zip(own);
        Figures {
            sigma: self.scale.as_ref().map(|s| s.sigma),
            from_resolution: self.scale.as_ref().is_some_and(|s| s.floored),
            own_sigma: own
                .map(|(s, o)| (SourceIx(*s), o.variance.sqrt()))
                .collect(),
            phi: learnt.phi(),
            phi_paid: learnt.phi_paid(),
            df: learnt.df(),
            account: self.bars.as_ref().map(|b| account(&b.basis, &b.thresholds)),
        }
    }

    /// Sums and counts of the cycles that the evidence reaches back to.
    pub fn contrast_blocks(&self) -> ContrastBlocks {
        let sources = self.columns.iter().map(|s| SourceIx(*s)).collect();
        self.past.tell(sources, &self.rows, self.cycle)
    }

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

    fn split_found(&self, means: &Means, by: &super::contrast::Judged, bar: f64) -> Option<Found> {
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

    fn pair_found(&self, means: &Means, by: &super::contrast::Judged, bar: f64) -> Option<Found> {
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

    fn rise_of(&self, part: Part, source: usize) -> &Rise {
        let scatter = &self.strands[source].scatter;
        match part {
            Part::Quiet => &scatter.down,
            _ => &scatter.up,
        }
    }

    /// The crossing that evidence amounts to, with its starts.
    pub(super) fn tell_crossing(&self, found: &Found) -> Option<Crossing> {
        let since = match found.part.aspect() {
            Aspect::Level => self.level_since(found)?,
            Aspect::Spread => self.spread_since(found)?,
        };
        Some(Crossing {
            part: found.part,
            aspect: found.part.aspect(),
            leading: found.leading.clone(),
            ratio: found.ratio(),
            start: since.start,
            earliest: since.earliest,
            latest: since.latest,
        })
    }

    /// Starts of the difference between both sides; beyond the newest 640 cycles to within a block, except
    /// that the maximising start is exact.
    fn level_since(&self, found: &Found) -> Option<Since> {
        let scale = self.scale.as_ref()?;
        let of_side = |side: &[usize]| {
            let n = side.len() as f64;
            side.iter().map(|c| scale.paid(*c)).sum::<f64>() / (n * n)
        };
        let (above, below) = (&found.sides.0, &found.sides.1);
        let variance = of_side(above) + of_side(below);
        let mut since = self
            .contrast_blocks()
            .since(above, below, found.margin, variance)?;
        if let Some(vertex) = &found.vertex {
            since.start = vertex.at;
            let by_place = |m: &Moment| m.place;
            since.earliest = std::cmp::min_by_key(since.earliest, vertex.at, by_place);
            since.latest = std::cmp::max_by_key(since.latest, vertex.at, by_place);
        }
        Some(since)
    }

    fn spread_since(&self, found: &Found) -> Option<Since> {
        let bars = self.bars.as_ref()?;
        let source = found.leading.first()?.index();
        let rise = self.rise_of(found.part, source);
        let bar = found.statistic.powi(2) - SET_95;
        let within: Vec<Vertex> = rise
            .statistics(0.0)
            .filter(|(squared, _)| squared / bars.score_variance() >= bar)
            .map(|(_, vertex)| vertex)
            .collect();
        Some(Since {
            start: found.vertex?.at,
            earliest: within.first()?.at,
            latest: within.last()?.at,
        })
    }

    /// Whether a source's apparent spread is gone once the best single step of level is taken out of its
    /// residuals. A step enters the deviations of ten cycles, and one within the margin calls nobody.
    pub(super) fn is_mere_step(&self, found: &Found) -> bool {
        /// Cycles looked at before the start, so that a step at the start can be seen.
        const RUN_UP: u64 = 40;
        /// Of the threshold: evidence that keeps this much is more than a step.
        const KEPT: f64 = 0.8;
        let (Some(bars), Some(scale), Some(vertex)) = (&self.bars, &self.scale, &found.vertex)
        else {
            return false;
        };
        let Some(&column) = found.sides.0.first() else {
            return false;
        };
        let reach = self.cycle.saturating_sub(vertex.cycle) + 1 + RUN_UP;
        let reach = (reach as usize).min(self.rows.held());
        let residuals = (1..=reach)
            .rev()
            .map(|back| self.rows.residual(column, back));
        let series: Vec<f64> = residuals.filter(|r| !r.is_nan()).collect();
        let mut scatter = Scatter::default();
        let mut rise = Rise::default();
        let per_sd = 1.0 / (scale.sigma * (1.0 - 1.0 / self.columns.len() as f64).sqrt());
        let others = self.others_present(column).sqrt();
        for r in without_step(&series) {
            if let Some(e) = scatter.deviation(r * per_sd) {
                let (up, _) = bars.scores(self.learner.learnt.shape(), e.abs() / others);
                let step = Step {
                    time: 1.0,
                    value: up,
                    cycle: vertex.cycle,
                    at: vertex.at,
                };
                rise.add(&step, 0.0);
            }
        }
        let left = rise.best(0.0).map_or(0.0, |(squared, _)| squared);
        (left / bars.score_variance()).sqrt() < KEPT * found.threshold
    }

    /// The present variance of all sources but one, in the bank's.
    fn others_present(&self, column: usize) -> f64 {
        let columns = self
            .columns
            .iter()
            .enumerate()
            .filter(|(c, _)| *c != column);
        let present = columns.map(|(_, s)| self.strands[usize::from(*s)].scatter.present);
        let n = (self.columns.len() - 1) as f64;
        (present.sum::<f64>() / n).max(f64::MIN_POSITIVE)
    }
}

fn keep_stronger(best: &mut Option<Found>, new: Option<Found>) {
    let stronger = |new: &Found| best.as_ref().is_none_or(|b| new.ratio() > b.ratio());
    if let Some(new) = new.filter(stronger) {
        *best = Some(new);
    }
}
