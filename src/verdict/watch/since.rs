//! Since when: the starts that the evidence allows, and whether a change of spread is only a step.

use super::found::Found;
use super::hull::{Rise, Step};
use super::past::{SET_95, Since};
use super::scatter::Scatter;
use super::thresholds::Part;
use super::{Aspect, Crossing, Moment, Watch};
use crate::verdict::steps::without_step;

impl Watch {
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

    /// Starts of a change of spread: of the newest 640 cycles each by itself, of older ones those kept.
    fn spread_since(&self, found: &Found) -> Option<Since> {
        let bars = self.bars.as_ref()?;
        let source = found.leading.first()?.index();
        let column = *found.sides.0.first()?;
        let bar = (found.statistic.powi(2) - SET_95) * bars.score_variance();
        let kept = self.rise_of(found.part, source).statistics(0.0);
        let kept = kept.map(|(squared, vertex)| (squared, vertex.at));
        let (mut n, mut sum) = (0.0, 0.0);
        let series = self.residuals(column, self.rows.held());
        let newest = self.scores_of(found.part, column, &series);
        let newest = newest.into_iter().rev().map(|(at, score)| {
            n += 1.0;
            sum += score;
            (f64::max(sum, 0.0).powi(2) / n, at)
        });
        let within: Vec<Moment> = kept
            .chain(newest)
            .filter(|(squared, _)| *squared >= bar)
            .map(|(_, at)| at)
            .collect();
        Some(Since {
            start: found.vertex?.at,
            earliest: within.iter().copied().min_by_key(|m| m.place)?,
            latest: within.iter().copied().max_by_key(|m| m.place)?,
        })
    }

    /// The residuals of a column in the newest `reach` cycles, in the unit.
    fn residuals(&self, column: usize, reach: usize) -> Vec<(Moment, f64)> {
        let backwards = (1..=reach.min(self.rows.held())).rev();
        let each = backwards.map(|back| (self.rows.moment(back), self.rows.residual(column, back)));
        each.filter_map(|(at, r)| Some((at?, r)).filter(|(_, r)| !r.is_nan()))
            .collect()
    }

    /// What a column's residuals add to the evidence of a spread part, against the others' present variance.
    fn scores_of(&self, part: Part, column: usize, series: &[(Moment, f64)]) -> Vec<(Moment, f64)> {
        let (Some(bars), Some(scale)) = (&self.bars, &self.scale) else {
            return Vec::new();
        };
        let per_sd = 1.0 / (scale.sigma * (1.0 - 1.0 / self.columns.len() as f64).sqrt());
        let others = self.others_present(column).sqrt();
        let mut scatter = Scatter::default();
        let score = |(at, r): &(Moment, f64)| {
            let seen = scatter.deviation(r * per_sd)?.abs() / others;
            let (up, down) = bars.scores(self.learner.learnt.shape(), seen);
            Some((*at, if part == Part::Quiet { down } else { up }))
        };
        series.iter().filter_map(score).collect()
    }

    /// Whether a source's apparent spread is gone once the best single step of level is taken out of its
    /// residuals. A step enters the deviations of ten cycles, and one within the margin calls nobody.
    pub(super) fn is_mere_step(&self, found: &Found) -> bool {
        /// Cycles looked at before the start, so that a step at the start can be seen.
        const RUN_UP: u64 = 40;
        /// Of the threshold: evidence that keeps this much is more than a step.
        const KEPT: f64 = 0.8;
        let (Some(bars), Some(vertex)) = (&self.bars, &found.vertex) else {
            return false;
        };
        let Some(&column) = found.sides.0.first() else {
            return false;
        };
        let reach = self.cycle.saturating_sub(vertex.cycle) + 1 + RUN_UP;
        let mut series = self.residuals(column, reach as usize);
        let values: Vec<f64> = series.iter().map(|(_, r)| *r).collect();
        for ((_, r), flat) in series.iter_mut().zip(without_step(&values)) {
            *r = flat;
        }
        let mut rise = Rise::default();
        for (at, value) in self.scores_of(found.part, column, &series) {
            let step = Step {
                time: 1.0,
                value,
                cycle: vertex.cycle,
                at,
            };
            rise.add(&step, 0.0);
        }
        let left = rise.best(0.0).map_or(0.0, |(squared, _)| squared);
        (left / bars.score_variance()).sqrt() < KEPT * found.threshold
    }

    /// How many times the noise of a source since a start (and shortly before) is the bank's, its best step
    /// taken out: 1 unless it is surely more. Without this a source that turns erratic is called as level
    /// in nine of ten cases: three values of a threefold sd reach any threshold (simulated).
    pub(super) fn unrest(&self, column: usize, cycle: u64) -> f64 {
        /// Cycles before the start: the onset of unrest lies a little before the values that look like a step.
        const RUN_UPS: [u64; 2] = [7, 20];
        let since = self.cycle.saturating_sub(cycle) + 1;
        let each = RUN_UPS.map(|run_up| self.unrest_over(column, (since + run_up) as usize));
        each.into_iter().fold(1.0, f64::max)
    }

    fn unrest_over(&self, column: usize, reach: usize) -> f64 {
        /// Fewer degrees of freedom show nothing.
        const FEWEST: f64 = 5.0;
        /// More unrest than this has a probability of 1 %: z of the cube root (Wilson and Hilferty 1931).
        const SURE: f64 = 2.326;
        let Some(scale) = &self.scale else {
            return 1.0;
        };
        let series = self.residuals(column, reach);
        let values: Vec<f64> = series.iter().map(|(_, r)| *r).collect();
        let df = values.len() as f64 - 2.0;
        if df < FEWEST {
            return 1.0;
        }
        let usual = scale.paid(column) / scale.factor() * (1.0 - 1.0 / self.columns.len() as f64);
        let squares: f64 = without_step(&values).iter().map(|r| r * r).sum();
        let ratio = squares / df / usual;
        let ninth = 2.0 / (9.0 * df);
        if ratio > (1.0 - ninth + SURE * ninth.sqrt()).powi(3) {
            ratio
        } else {
            1.0
        }
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
