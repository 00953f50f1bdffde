//! After a cycle: what was learnt becomes scale and thresholds.

use super::bars::Bars;
use super::learning::Ended;
use super::residual::Residuals;
use super::scale::Scale;
use super::scatter::Scatter;
use super::scores::Scores;
use super::shape::Shape;
use super::{Frozen, Watch};

/// A single value reaches at most this share of the threshold of few: it never decides alone.
const SINGLE_VALUE: f64 = 0.9;
/// The threshold of few before there is one.
const FIRST_FEW: f64 = 5.0;

impl Watch {
    /// Ends a cycle; every fiftieth brings scale and thresholds up to date.
    pub(super) fn end_cycle(&mut self) {
        if self.frozen == Frozen::Yes {
            return;
        }
        let (scale, columns) = (&self.scale, &self.columns);
        let relative = |source: usize| {
            let own = scale.as_ref().and_then(|scale| {
                let column = columns.iter().position(|c| usize::from(*c) == source)?;
                Some(scale.sigma * scale.sigma / scale.own.get(column)?.variance)
            });
            own.unwrap_or(1.0)
        };
        if self.learner.end_cycle(&relative) == Ended::Block {
            self.learn_scores();
            self.refresh();
        }
    }

    /// When learning ends on noise that is not normal, residuals become normal scores, and evidence begins
    /// afresh with them.
    fn learn_scores(&mut self) {
        let (Some(scale), None) = (&self.scale, &self.bars) else {
            return;
        };
        let k = self.columns.len();
        if !self.learner.is_done() || self.learner.learnt.scores().is_some() || k < 3 {
            return;
        }
        let Some(scores) = Scores::for_noise(&self.rows, k, scale, self.terms.margin) else {
            return;
        };
        let (variance, shape) = self.under(&scores);
        self.learner.learnt.adopt(scores, variance, shape);
        self.begin_afresh();
    }

    /// Variance of a single value and sizes of deviations in the cycles held, as scores.
    fn under(&self, scores: &Scores) -> (f64, Shape) {
        let k = self.columns.len();
        let mut residuals = Residuals::default();
        let mut series: Vec<Vec<f64>> = vec![Vec::new(); k];
        for back in (1..=self.rows.held()).rev() {
            residuals.values.clear();
            let row = (0..k).map(|c| self.rows.residual(c, back));
            residuals.values.extend(row);
            residuals.share_alike();
            scores.apply(&mut residuals);
            for (own, r) in series.iter_mut().zip(&residuals.values) {
                own.extend((!r.is_nan()).then_some(*r));
            }
        }
        let per_value = 1.0 - 1.0 / k as f64;
        let (mut squares, mut df) = (0.0, 0.0);
        for own in &series {
            let n = own.len() as f64;
            let mean = own.iter().sum::<f64>() / n;
            squares += own.iter().map(|r| (r - mean).powi(2)).sum::<f64>();
            df += (n - 1.0) * per_value;
        }
        let variance = squares / df;
        let mut shape = Shape::default();
        for own in &series {
            let mut scatter = Scatter::default();
            let deviations = own.iter().filter_map(|r| scatter.deviation(*r));
            deviations.for_each(|e| shape.count(e / (variance * per_value).sqrt()));
        }
        shape.refresh();
        (variance, shape)
    }

    /// Brings scale and thresholds up to what was learnt.
    pub(super) fn refresh(&mut self) {
        let few = self.bars.as_ref().map_or(FIRST_FEW, |b| b.thresholds.few);
        let learnt = &mut self.learner.learnt;
        let scale = Scale::of_learnt(learnt, &self.columns, &self.terms, SINGLE_VALUE * few);
        if let Some(scale) = scale {
            self.scale = Some(scale);
        }
        self.refresh_allowed();
        let Some(scale) = self.scale.as_ref().filter(|_| self.learner.is_done()) else {
            self.bars = None;
            return;
        };
        let df = self.learner.learnt.df();
        let wanted = Bars::basis(&self.terms, scale, self.columns.len(), df);
        if self.bars.as_ref().is_none_or(|held| held.is_stale(&wanted)) {
            self.bars = Some(Bars::new(wanted, &self.terms, scale));
        }
    }

    /// Brings the margins of single sources to their columns.
    pub(super) fn refresh_allowed(&mut self) {
        let more = |s: &u16| (self.strands[usize::from(*s)].margin - self.terms.margin).max(0.0);
        let allowed: Vec<f64> = self.columns.iter().map(more).collect();
        if let Some(scale) = &mut self.scale {
            let some = allowed.iter().any(|more| *more > 0.0);
            scale.allowed = if some { allowed } else { Vec::new() };
        }
    }
}
