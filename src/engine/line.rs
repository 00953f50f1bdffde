//! Line events: what a bank does when its line is changed over, adjusted, stopped or started, or a source
//! leaves use.
//!
//! What must hold: values from before a changeover or an adjustment no longer count; what was learnt for a
//! product is there when the product returns; a stopped line is not judged, and its silence neither.

use std::collections::{BTreeMap, VecDeque};
use std::sync::Arc;

use serde::{Deserialize, Serialize};

use crate::model::{LineChange, LineEvent, Name, SourceIx, Time, Value};
use crate::verdict::watch::Learnt;

use super::bank::Watched;

/// Newest line events shown with the bank; the store keeps them all.
const SHOWN: usize = 30;

/// Products whose noise is remembered: far more than a line makes in a year.
const MOST_PRODUCTS: usize = 200;

/// The line as its events left it.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Line {
    /// The stop, while the line stands.
    pub stopped: Option<LineEvent>,
    /// When it last started.
    pub started: Option<Time>,
    /// When it was last changed over.
    pub changed_over: Option<Time>,
    /// What it makes, since the first changeover.
    pub product: Option<Name>,
    /// Target and declared quantity of that product, where a changeover gave them.
    pub target: Option<Value>,
    /// See `target`.
    pub declared: Option<Value>,
    /// What the watch learnt, by product.
    learnt: BTreeMap<Name, Learnt>,
    /// The newest line events, oldest first.
    pub newest: VecDeque<LineEvent>,
}

impl Line {
    fn remember(&mut self, event: &LineEvent) {
        if self.newest.len() == SHOWN {
            self.newest.pop_front();
        }
        self.newest.push_back(event.clone());
    }

    fn store(&mut self, product: Name, learnt: Learnt) {
        if self.learnt.len() < MOST_PRODUCTS || self.learnt.contains_key(&product) {
            self.learnt.insert(product, learnt);
        }
    }
}

impl Watched {
    /// Takes in a line event.
    ///
    /// # Errors
    /// What is wrong with it, for the person who entered it.
    pub fn line_event(&mut self, event: &LineEvent) -> Result<(), String> {
        let source = match event.change.source() {
            Some(name) => Some(self.known_source(name)?),
            None => None,
        };
        match (&event.change, source) {
            (LineChange::Adjustment { by, .. }, Some(source)) => {
                self.adjusted(source, *by, event.at);
            }
            (LineChange::OutOfUse { .. }, Some(source)) => self.out_of_use(source)?,
            (LineChange::BackInUse { .. }, Some(source)) => self.back_in_use(source, event.at)?,
            (
                LineChange::Changeover {
                    product,
                    target,
                    declared,
                },
                _,
            ) => {
                self.changeover(product, *target, *declared);
                self.state.line.changed_over = Some(event.at);
            }
            (LineChange::Stop, _) => self.stop(event)?,
            (LineChange::Start, _) => self.start(event.at)?,
            _ => {}
        }
        self.state.line.remember(event);
        self.plan_look(event.at);
        Ok(())
    }

    fn known_source(&self, name: &Name) -> Result<SourceIx, String> {
        let known = self.source_named(name);
        known.ok_or_else(|| format!("bank \"{}\" has no source \"{name}\"", self.bank.name))
    }

    fn adjusted(&mut self, source: SourceIx, by: Option<f64>, at: Time) {
        let from = self.next_place();
        self.state.windows.start_fresh(source, from);
        self.state.shifts.forget(Some(source));
        self.state.sources[source.index()].cleared_margin = 0.0;
        self.forget_usual();
        for incident in &mut self.state.incidents {
            incident.adjusted(source, by, at, from);
        }
        if let Some(watch) = &mut self.state.watch {
            watch.set_margin(source, 0.0);
            watch.begin_afresh();
        }
    }

    fn out_of_use(&mut self, source: SourceIx) -> Result<(), String> {
        let known = &mut self.state.sources[source.index()];
        if known.out_of_use {
            return Err(format!("source \"{}\" is out of use already", known.name));
        }
        known.out_of_use = true;
        known.silent = false;
        self.state.windows.expect(source, false);
        for incident in &mut self.state.incidents {
            incident.forget(&|s| s == source);
        }
        Ok(())
    }

    fn back_in_use(&mut self, source: SourceIx, at: Time) -> Result<(), String> {
        let from = self.next_place();
        let known = &mut self.state.sources[source.index()];
        if !known.out_of_use {
            return Err(format!("source \"{}\" is in use", known.name));
        }
        known.out_of_use = false;
        known.in_use_since = Some(at);
        known.cleared_margin = 0.0;
        self.state.windows.expect(source, true);
        self.state.windows.start_fresh(source, from);
        Ok(())
    }

    fn changeover(&mut self, product: &Name, target: Option<Value>, declared: Option<Value>) {
        let from = self.next_place();
        self.state.shifts.forget(None);
        for s in 0..self.state.sources.len() {
            self.state.windows.start_fresh(SourceIx(s as u16), from);
            self.state.sources[s].cleared_margin = 0.0;
        }
        self.forget_usual();
        let line = &mut self.state.line;
        if let Some(watch) = &mut self.state.watch {
            if let (Some(before), Some(learnt)) = (line.product.take(), watch.learnt()) {
                line.store(before, learnt);
            }
            match line.learnt.get(product) {
                Some(learnt) => watch.take_up(learnt.clone()),
                None => watch.forget_learnt(),
            }
            watch.begin_afresh();
            (0..self.state.sources.len()).for_each(|s| watch.set_margin(SourceIx(s as u16), 0.0));
        }
        line.product = Some(product.clone());
        line.target = target.or(line.target);
        line.declared = declared.or(line.declared);
        if let Some(target) = target {
            self.state.windows.rebase(target);
        }
        for incident in &mut self.state.incidents {
            incident.changed_over(from);
        }
        self.follow_product();
    }

    /// The bank's target and declared quantity are those of the product.
    pub fn follow_product(&mut self) {
        let line = &self.state.line;
        let what = &self.bank.characteristic;
        let target = line.target.or(what.target);
        let declared = line.declared.or(what.declared);
        if (target, declared) != (what.target, what.declared) {
            let bank = Arc::make_mut(&mut self.bank);
            bank.characteristic.target = target;
            bank.characteristic.declared = declared;
        }
    }

    fn stop(&mut self, event: &LineEvent) -> Result<(), String> {
        if self.state.line.stopped.is_some() {
            return Err("the line stands already".to_owned());
        }
        self.state.line.stopped = Some(event.clone());
        Ok(())
    }

    fn start(&mut self, at: Time) -> Result<(), String> {
        if self.state.line.stopped.take().is_none() {
            return Err("the line runs already".to_owned());
        }
        self.state.line.started = Some(at);
        Ok(())
    }

    /// The first place that nothing has been delivered into yet.
    pub fn next_place(&self) -> i64 {
        let rings = self.state.windows.rings().iter();
        let newest = rings.filter_map(|r| r.newest()).map(|e| e.place).max();
        newest.map_or(i64::MIN, |place| place.saturating_add(1))
    }
}
