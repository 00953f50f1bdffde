//! One cycle through the watch.

use super::contrast::Means;
use super::first::{self, First};
use super::found::Found;
use super::hull::Step;
use super::residual::Residuals;
use super::scale::Scale;
use super::thresholds::{Part, SPANS};
use super::{Crossing, Cycle, Frozen, Moment, Watch};

/// Memory that is used within a step only; it is no part of the state.
#[derive(Clone, Debug, Default)]
pub struct Work {
    pub residuals: Residuals,
    pub means: Means,
}

impl PartialEq for Work {
    fn eq(&self, _: &Self) -> bool {
        true
    }
}

/// The parts that stand above their threshold in a cycle.
#[derive(Clone, Copy, Debug, Default)]
pub struct Crossed {
    few: bool,
    split: bool,
    pair: bool,
    erratic: bool,
    quiet: bool,
}

impl Crossed {
    fn any(self) -> bool {
        self.few || self.split || self.pair || self.erratic || self.quiet
    }

    /// Whether a part is among them.
    pub fn has(self, part: Part) -> bool {
        match part {
            Part::Few => self.few,
            Part::Split => self.split,
            Part::Pair => self.pair,
            Part::Erratic => self.erratic,
            Part::Quiet => self.quiet,
        }
    }
}

impl Watch {
    /// Takes in the next closed cycle, in the order in which cycles close. Says so in every cycle in which
    /// a part stands above its threshold: whoever acts on it begins afresh, or remembers that it knows.
    pub fn step(&mut self, cycle: &Cycle) -> Option<Crossing> {
        if self.columns.len() < 2 {
            return None;
        }
        let at = Moment {
            place: cycle.place,
            taken: cycle.taken,
        };
        let of = |s: &u16| cycle.values.get(usize::from(*s)).copied();
        let values = self.columns.iter().map(|s| of(s).unwrap_or(f64::NAN));
        if self.scale.is_none() {
            let row = values.collect();
            self.begin(at, row);
            return None;
        }
        let mut work = std::mem::take(&mut self.work);
        work.residuals.values.clear();
        work.residuals.values.extend(values);
        let found = self.advance(at, &mut work);
        self.work = work;
        found
    }

    /// Before anything is known: the first fifty cycles wait for a first idea of sigma, then go the way of
    /// all others.
    fn begin(&mut self, at: Moment, row: Vec<f64>) {
        self.first.cycles.push((at, row));
        if self.first.cycles.len() < first::CYCLES {
            return;
        }
        let first = std::mem::take(&mut self.first);
        self.scale = Scale::of_sigma(first.sigma(), &self.terms);
        if self.scale.is_none() {
            self.first = First::after_still();
            return;
        }
        self.refresh_allowed();
        let mut work = Work::default();
        for (at, row) in first.cycles {
            work.residuals.values = row;
            self.advance(at, &mut work);
        }
    }

    fn advance(&mut self, at: Moment, work: &mut Work) -> Option<Crossing> {
        let scale = self.scale.take()?;
        let present = work
            .residuals
            .work_out(scale.limit(&self.terms), &scale.own);
        if present < 2 {
            self.scale = Some(scale);
            return None;
        }
        if let Some(scores) = self.learner.learnt.scores() {
            scores.apply(&mut work.residuals);
        }
        self.cycle += 1;
        self.rows.push(at, &work.residuals.values);
        self.past.push(self.cycle, at, &work.residuals.values);
        let mut crossed = Crossed {
            few: self.step_level(at, &work.residuals, &scale),
            ..Crossed::default()
        };
        if self.columns.len() > 2 {
            (crossed.erratic, crossed.quiet) = self.step_spread(at, &work.residuals, &scale);
            (crossed.split, crossed.pair) = self.judge_windows(&mut work.means, &scale);
        }
        self.scale = Some(scale);
        let found = if crossed.any() {
            self.crossing(crossed)
        } else {
            None
        };
        self.end_cycle();
        found
    }

    /// Whether a source's mean stands beyond its margin since some start.
    fn step_level(&mut self, at: Moment, residuals: &Residuals, scale: &Scale) -> bool {
        let bar = self.bars.as_ref().map(|b| b.thresholds.few.powi(2));
        let learns = self.frozen == Frozen::No;
        // Two sources mirror each other: the first tells all.
        let told = if self.columns.len() == 2 {
            1
        } else {
            usize::MAX
        };
        let mut crossed = false;
        for (column, source) in self.columns.iter().enumerate() {
            let source = usize::from(*source);
            let (r, time) = (residuals.values[column], 1.0 - residuals.shares[column]);
            if learns {
                self.learner.add(source, r, time);
            }
            if r.is_nan() || column >= told {
                continue;
            }
            let strand = &mut self.strands[source];
            let margin = self.terms.margin.max(strand.margin);
            let mut step = Step {
                time,
                value: r,
                cycle: self.cycle,
                at,
            };
            strand.level.up.add(&step, margin);
            step.value = -r;
            strand.level.down.add(&step, margin);
            if let Some(bar) = bar {
                let bar = bar * scale.paid(column);
                crossed |= strand.level.up.exceeds(margin, bar);
                crossed |= strand.level.down.exceeds(margin, bar);
            }
        }
        crossed
    }

    /// Whether a source's spread stands beyond the spread margin since some start, above and below.
    fn step_spread(&mut self, at: Moment, residuals: &Residuals, scale: &Scale) -> (bool, bool) {
        let k = self.columns.len();
        let learns = self.frozen == Frozen::No && self.learner.counts_sizes();
        let present = |s: &u16| self.strands[usize::from(*s)].scatter.present;
        let all: f64 = self.columns.iter().map(present).sum();
        let (mut erratic, mut quiet) = (false, false);
        // Nearly always all sources have the same share.
        let mut per_sd = (f64::NAN, 0.0);
        for (column, source) in self.columns.iter().enumerate() {
            let r = residuals.values[column];
            if r.is_nan() {
                continue;
            }
            let scatter = &mut self.strands[usize::from(*source)].scatter;
            let time = 1.0 - residuals.shares[column];
            if time != per_sd.0 {
                per_sd = (time, 1.0 / (scale.sigma * time.sqrt()));
            }
            let Some(e) = scatter.deviation(r * per_sd.1) else {
                continue;
            };
            let others = ((all - scatter.present) / (k - 1) as f64).max(f64::MIN_POSITIVE);
            scatter.enter(e, k);
            if learns {
                self.learner.count(e + residuals.excess[column] * per_sd.1);
            }
            if let Some(bars) = &self.bars {
                let seen = e.abs() / others.sqrt();
                let step = Step {
                    time: 1.0,
                    value: 0.0,
                    cycle: self.cycle,
                    at,
                };
                let (up, down) = bars.scores(self.learner.learnt.shape(), seen);
                scatter.up.add(&Step { value: up, ..step }, 0.0);
                scatter.down.add(
                    &Step {
                        value: down,
                        ..step
                    },
                    0.0,
                );
                let (above, below) = bars.score_bars();
                erratic |= above.is_some_and(|bar| scatter.up.exceeds(0.0, bar));
                quiet |= below.is_some_and(|bar| scatter.down.exceeds(0.0, bar));
            }
        }
        (erratic, quiet)
    }

    /// Whether two groups, or two sources, stand further apart than the margin over one of the windows that
    /// are due.
    fn judge_windows(&self, means: &mut Means, scale: &Scale) -> (bool, bool) {
        let Some(bars) = &self.bars else {
            return (false, false);
        };
        let by = scale.judged(&self.terms);
        let (mut split, mut pair) = (false, false);
        for (i, span) in SPANS.iter().enumerate() {
            if !self.cycle.is_multiple_of(span.every as u64) || self.rows.held() < span.cycles {
                continue;
            }
            means.fill(&self.rows, span.cycles, &by);
            let bar = |bars: &Option<Vec<f64>>| bars.as_ref().map_or(f64::INFINITY, |b| b[i]);
            let (split_bar, pair_bar) = (bar(&bars.thresholds.split), bar(&bars.thresholds.pair));
            let (squares, range) = means.bounds(&by);
            if squares <= split_bar && range <= pair_bar {
                continue;
            }
            means.sort();
            split |= means.split_statistic(&by) > split_bar;
            pair |= means.pair(&by).is_some_and(|p| p.statistic > pair_bar);
        }
        (split, pair)
    }

    fn crossing(&mut self, crossed: Crossed) -> Option<Crossing> {
        let mut found: Vec<Found> = self.found();
        found.retain(|f| crossed.has(f.part) && f.ratio() > 1.0);
        let best = |found: &[Found], level: bool| {
            let of_aspect = |f: &&Found| (f.part.aspect() == super::Aspect::Level) == level;
            let by_ratio = |a: &&Found, b: &&Found| a.ratio().total_cmp(&b.ratio());
            found.iter().filter(of_aspect).max_by(by_ratio).cloned()
        };
        // A step of level comes first: it enters the deviations of ten cycles.
        if let Some(level) = best(&found, true) {
            return if self.is_young() {
                None
            } else {
                self.tell_crossing(&level)
            };
        }
        let spread = best(&found, false)?;
        if spread.part == Part::Erratic && self.is_mere_step(&spread) {
            let source = spread.leading.first().map(|s| s.index())?;
            self.strands[source].scatter.up = super::Rise::default();
            return None;
        }
        self.tell_crossing(&spread)
    }
}
