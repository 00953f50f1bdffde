//! Bad conditions of a plant: each is borne without a false call, and a drift is found all the same.

use evenrow::engine::Event;
use evenrow::model::{Pairing, Sources, US_PER_S};
use evenrow::notice::Kind;

use super::crew::Runs;
use super::feed::{Feed, Noise, Setup};
use super::line::head;
use super::rig::{Rig, Start, Starts, bank};
use super::table::Figure;

/// What happens, and how the plant is set up for it.
#[derive(Clone, Copy)]
pub struct Story {
    pub setup: fn() -> Setup,
    pub play: fn(Scene) -> Result<(), String>,
}

/// A bank that has learnt, and its plant.
pub struct Scene {
    rig: Rig,
    feed: Feed,
    setup: Setup,
    values: Vec<f64>,
}

/// Share of runs in which a story goes as it must; what went wrong is told on standard error.
pub fn share(story: Story, runs: &Runs) -> Figure {
    let setup = (story.setup)();
    let starts: Starts = Start::Learnt(2).prepare(&setup);
    let all = runs.each(|run, seed| {
        let (rig, feed) = starts.begin(run, seed);
        let scene = Scene {
            rig,
            feed,
            setup: setup.clone(),
            values: Vec::new(),
        };
        let end = (story.play)(scene);
        end.inspect_err(|why| eprintln!("run {run}: {why}")).is_ok()
    });
    Figure::share(&all)
}

/// Twelve heads with the budget that plants use.
pub fn plant() -> Setup {
    Setup {
        margin: 0.5,
        arl0: 90.0 * 86_400.0,
        look_every: 30,
        ..Setup::even(12)
    }
}

pub fn rounded() -> Setup {
    Setup {
        resolution: 0.5,
        ..plant()
    }
}

pub fn with_outliers() -> Setup {
    Setup {
        noise: Noise::Outliers(0.01),
        ..plant()
    }
}

pub fn by_slot() -> Setup {
    Setup {
        pairing: Pairing::Slot {
            length_us: US_PER_S,
        },
        ..plant()
    }
}

impl Scene {
    fn cycles(&mut self, cycles: i64, present: impl Fn(usize) -> bool) {
        for _ in 0..cycles {
            self.feed.cycle(&mut self.values);
            self.rig.step_some(&self.values, &present);
        }
    }

    /// Cycles in which nothing may be called.
    fn quiet(&mut self, cycles: i64, present: impl Fn(usize) -> bool) -> Result<(), String> {
        self.cycles(cycles, present);
        match self.rig.notices.last() {
            Some(notice) => Err(format!("called for nothing: {}", notice.subject)),
            None => Ok(()),
        }
    }

    /// These sources (from 0) move by so much; they and nobody else must be named soon.
    fn found(&mut self, moved: &[(usize, f64)], absent: &[usize]) -> Result<(), String> {
        let present = |s: usize| !absent.contains(&s);
        for &(s, by) in moved {
            self.feed.offsets[s] += by;
        }
        self.cycles(400, present);
        let mut wanted: Vec<usize> = moved.iter().map(|m| m.0).collect();
        wanted.sort_unstable();
        let named = self.rig.named();
        if named == wanted {
            Ok(())
        } else {
            Err(format!("{named:?} are named, {wanted:?} moved"))
        }
    }
}

pub fn one_stops(mut s: Scene) -> Result<(), String> {
    s.quiet(1500, |source| source != 4)?;
    s.found(&[(1, -2.5)], &[4])
}

pub fn all_stop(mut s: Scene) -> Result<(), String> {
    for _ in 0..360 {
        s.rig.cycle += 10;
        s.rig.handle(Event::Deadline);
    }
    s.quiet(1000, |_| true)?;
    s.found(&[(1, -2.5)], &[])
}

/// Every cycle the fourth source sends a second value under the same number.
pub fn twice_as_often(mut s: Scene) -> Result<(), String> {
    for _ in 0..1500 {
        s.quiet(1, |_| true)?;
        let mut second = s.rig.measurement(3, s.values[3] + 0.5);
        second.taken = second.taken.map(|t| t.plus_us(US_PER_S / 2));
        s.rig.handle(Event::Measurements(vec![second]));
    }
    s.found(&[(1, -2.5)], &[])
}

pub fn numbers_jump(mut s: Scene) -> Result<(), String> {
    for by in [1, 7, 1000, 1_000_000] {
        s.rig.counter += by;
        s.quiet(300, |_| true)?;
    }
    s.found(&[(1, -2.5)], &[])
}

pub fn numbers_restart(mut s: Scene) -> Result<(), String> {
    for _ in 0..3 {
        s.rig.counter = -s.rig.cycle;
        s.quiet(400, |_| true)?;
    }
    s.found(&[(1, -2.5)], &[])
}

/// The counter stands for five cycles, again and again.
pub fn numbers_repeat(mut s: Scene) -> Result<(), String> {
    for _ in 0..40 {
        s.quiet(25, |_| true)?;
        for _ in 0..5 {
            s.rig.counter -= 1;
            s.quiet(1, |_| true)?;
        }
    }
    s.found(&[(1, -2.5)], &[])
}

pub fn nothing_else(mut s: Scene) -> Result<(), String> {
    s.quiet(2000, |_| true)?;
    s.found(&[(1, -2.5)], &[])
}

/// A week at two cycles a minute.
pub fn a_week(mut s: Scene) -> Result<(), String> {
    s.quiet(20_160, |_| true)?;
    s.found(&[(1, -2.5)], &[])
}

pub fn common_step(mut s: Scene) -> Result<(), String> {
    for by in [20.0, -20.0] {
        s.feed.shift_common(by);
        s.quiet(500, |_| true)?;
    }
    s.found(&[(1, -2.5)], &[])
}

/// A thirteenth source is listed while the daemon runs.
pub fn one_is_added(mut s: Scene) -> Result<(), String> {
    let more = Setup {
        k: 13,
        ..s.setup.clone()
    };
    s.quiet(100, |_| true)?;
    s.rig = s.rig.changed(bank(&more));
    s.feed.add_source();
    s.quiet(1500, |_| true)?;
    s.found(&[(12, -2.5)], &[])
}

/// The last source is no longer listed, and goes on sending.
pub fn one_is_retired(mut s: Scene) -> Result<(), String> {
    let mut fewer = bank(&s.setup);
    fewer.sources = Sources::Listed((1..=11).map(head).collect());
    s.quiet(100, |_| true)?;
    s.rig = s.rig.changed(fewer);
    s.feed.offsets[11] += 5.0;
    s.quiet(1500, |_| true)?;
    s.found(&[(1, -2.5)], &[])
}

pub fn two_opposite(mut s: Scene) -> Result<(), String> {
    s.quiet(100, |_| true)?;
    s.found(&[(1, -2.5), (7, 2.5)], &[])
}

pub fn half_moves(mut s: Scene) -> Result<(), String> {
    s.quiet(100, |_| true)?;
    let moved: Vec<(usize, f64)> = (0..6).map(|s| (s, 2.0)).collect();
    for &(source, by) in &moved {
        s.feed.offsets[source] += by;
    }
    s.cycles(400, |_| true);
    let split = |n: &std::sync::Arc<evenrow::notice::Notice>| {
        n.kind == Kind::BankSplit && n.state.is_active() && n.sources.len() == 6
    };
    if s.rig.notices.iter().any(split) {
        Ok(())
    } else {
        let kinds: Vec<&str> = s.rig.notices.iter().map(|n| n.kind.words()).collect();
        Err(format!(
            "half the bank moved, and the notices are {kinds:?}"
        ))
    }
}
