//! From figures to places, and the round figures that an axis shows.

/// How figures are spaced.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Spacing {
    /// Equal differences look equal.
    Linear,
    /// Equal ratios look equal.
    Ratio,
}

/// A vertical scale.
#[derive(Clone, Copy, Debug)]
pub struct Scale {
    spacing: Spacing,
    low: f64,
    high: f64,
    /// Place of `high`, in pixels from the top.
    pub top: f64,
    /// Place of `low`.
    pub bottom: f64,
}

impl Scale {
    /// A scale from `low` to `high`, drawn from `bottom` to `top`.
    pub fn new(spacing: Spacing, (low, high): (f64, f64), (top, bottom): (f64, f64)) -> Self {
        Self {
            spacing,
            low,
            high,
            top,
            bottom,
        }
    }

    /// The same figures between other places.
    pub fn between(self, top: f64, bottom: f64) -> Self {
        Self {
            top,
            bottom,
            ..self
        }
    }

    /// Where a figure stands; figures beyond the ends stand at the ends.
    pub fn place(&self, x: f64) -> f64 {
        let (x, low, high) = match self.spacing {
            Spacing::Linear => (x, self.low, self.high),
            Spacing::Ratio => (x.max(1e-9).ln(), self.low.ln(), self.high.ln()),
        };
        let share = if high > low {
            (x - low) / (high - low)
        } else {
            0.5
        };
        let share = if share.is_nan() {
            0.5
        } else {
            share.clamp(0.0, 1.0)
        };
        self.bottom + share * (self.top - self.bottom)
    }

    /// Round figures inside the scale, about `count` of them.
    pub fn ticks(&self, count: usize) -> Vec<f64> {
        match self.spacing {
            Spacing::Linear => linear_ticks(self.low, self.high, count),
            Spacing::Ratio => RATIOS
                .into_iter()
                .filter(|r| (self.low..=self.high).contains(r))
                .collect(),
        }
    }
}

/// Ratios that people read.
const RATIOS: [f64; 13] = [
    0.1, 0.2, 0.33, 0.5, 0.67, 1.0, 1.5, 2.0, 3.0, 5.0, 10.0, 20.0, 50.0,
];

fn linear_ticks(low: f64, high: f64, count: usize) -> Vec<f64> {
    let extent = high - low;
    if !extent.is_finite() || extent <= 0.0 || count == 0 {
        return Vec::new();
    }
    let rough = extent / count as f64;
    let power = 10_f64.powf(rough.log10().floor());
    let steps = [1.0, 2.0, 5.0, 10.0].into_iter().map(|m| m * power);
    let step = steps
        .into_iter()
        .find(|s| *s >= rough * 0.999)
        .unwrap_or(rough);
    let first = (low / step).ceil() as i64;
    let last = (high / step).floor() as i64;
    (first..=last).take(50).map(|i| i as f64 * step).collect()
}

/// Digits after the point that tell neighbouring ticks apart.
pub fn tick_places(ticks: &[f64]) -> usize {
    let step = match ticks {
        [a, b, ..] => b - a,
        _ => return 1,
    };
    (-step.log10().floor()).clamp(0.0, 9.0) as usize
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ticks_are_round() {
        for (range, ticks) in [
            ((-2.0, 1.0), vec![-2.0, -1.0, 0.0, 1.0]),
            ((-0.9, 0.9), vec![-0.5, 0.0, 0.5]),
        ] {
            assert_eq!(linear_ticks(range.0, range.1, 4), ticks);
        }
        assert!(linear_ticks(1.0, 1.0, 4).is_empty());
        assert!(linear_ticks(f64::NAN, 1.0, 4).is_empty());
        assert_eq!(tick_places(&[-0.5, 0.0]), 1);
        assert_eq!(tick_places(&[0.0, 20.0]), 0);
    }

    #[test]
    fn places_stay_in_the_picture() {
        let scale = Scale::new(Spacing::Linear, (-1.0, 1.0), (10.0, 110.0));
        for (x, y) in [
            (0.0, 60.0),
            (1.0, 10.0),
            (-1.0, 110.0),
            (9.0, 10.0),
            (f64::NAN, 60.0),
        ] {
            assert_eq!(scale.place(x), y, "{x}");
        }
        let ratio = Scale::new(Spacing::Ratio, (0.5, 2.0), (0.0, 100.0));
        assert!((ratio.place(1.0) - 50.0).abs() < 1e-9);
        assert_eq!(ratio.place(0.0), 100.0);
    }
}
