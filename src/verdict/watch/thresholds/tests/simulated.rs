//! The parts realise the mean cycles to a false call that they are given: short simulations with a
//! fixed seed. The long ones behind the stated figures are no tests.

use super::*;

/// Splitmix64 (Steele, Lea and Flood 2014) and the polar method (Marsaglia and Bray 1964).
struct Noise {
    state: u64,
    kept: Option<f64>,
}

impl Noise {
    fn uniform(&mut self) -> f64 {
        self.state = self.state.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.state;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        ((z ^ (z >> 31)) >> 11) as f64 / (1_u64 << 53) as f64
    }

    fn normal(&mut self) -> f64 {
        if let Some(kept) = self.kept.take() {
            return kept;
        }
        loop {
            let (u, v) = (2.0 * self.uniform() - 1.0, 2.0 * self.uniform() - 1.0);
            let s = u * u + v * v;
            if s > 0.0 && s < 1.0 {
                let factor = (-2.0 * s.ln() / s).sqrt();
                self.kept = Some(v * factor);
                return u * factor;
            }
        }
    }
}

/// Prefix sums on their lower convex hull.
#[derive(Clone)]
struct Stream(Vec<(f64, f64)>);

impl Stream {
    fn push(&mut self, x: f64) -> f64 {
        let &(t, p) = self.0.last().expect("never empty");
        let (t, p) = (t + 1.0, p + x);
        let rise = |&(s, q): &(f64, f64)| (p - q).max(0.0) / (t - s).sqrt();
        let highest = self.0.iter().map(rise).fold(0.0, f64::max);
        while let [.., (s, q), (u, r)] = self.0[..]
            && (r - q) * (t - s) >= (p - q) * (u - s)
        {
            self.0.pop();
        }
        self.0.push((t, p));
        highest
    }
}

/// A bank with lasting offsets.
struct Bank<'a> {
    margin: f64,
    offsets: &'a [f64],
    thresholds: &'a Thresholds,
}

impl Bank<'_> {
    /// Cycles until the part calls.
    fn run(&self, part: Part, noise: &mut Noise) -> usize {
        let k = self.offsets.len() as f64;
        let scale = (k / (k - 1.0)).sqrt();
        let mut streams = vec![Stream(vec![(0.0, 0.0)]); 2 * self.offsets.len()];
        let mut sums: Vec<Vec<f64>> = vec![vec![0.0; self.offsets.len()]];
        loop {
            let row: Vec<f64> = self.offsets.iter().map(|o| o + noise.normal()).collect();
            let mean = row.iter().sum::<f64>() / k;
            let called = if part == Part::Few {
                let margin = self.margin / scale;
                let mut highest = 0.0_f64;
                for (x, both) in row.iter().zip(streams.chunks_mut(2)) {
                    let z = (x - mean) * scale;
                    highest = highest
                        .max(both[0].push(z - margin))
                        .max(both[1].push(-z - margin));
                }
                highest >= self.thresholds.few
            } else {
                let last = sums.last().expect("never empty");
                sums.push(last.iter().zip(&row).map(|(s, x)| s + x).collect());
                self.windows_call(part, &sums)
            };
            if called {
                return sums
                    .len()
                    .max(streams[0].0.last().expect("never empty").0 as usize);
            }
        }
    }

    fn windows_call(&self, part: Part, sums: &[Vec<f64>]) -> bool {
        let t = sums.len() - 1;
        let due = |s: &Span| t >= s.cycles && t.is_multiple_of(s.every);
        SPANS
            .iter()
            .enumerate()
            .filter(|(_, s)| due(s))
            .any(|(i, s)| {
                let n = s.cycles as f64;
                let pairs = sums[t].iter().zip(&sums[t - s.cycles]);
                let mut means: Vec<f64> = pairs.map(|(a, b)| (a - b) / n).collect();
                means.sort_by(|a, b| b.total_cmp(a));
                let bar = |part: &Option<Vec<f64>>| part.as_ref().expect("the part is on")[i];
                if part == Part::Split {
                    self.split(&means) * n >= bar(&self.thresholds.split)
                } else {
                    let range = means[0] - means[means.len() - 1];
                    (range - self.margin) * n.sqrt() >= bar(&self.thresholds.pair)
                }
            })
    }

    /// The squared contrast of sorted means with one value each.
    fn split(&self, means: &[f64]) -> f64 {
        let k = means.len() as f64;
        let mean = means.iter().sum::<f64>() / k;
        if self.margin == 0.0 {
            return means.iter().map(|x| (x - mean).powi(2)).sum();
        }
        let of = |g: usize| {
            let top = means[..g].iter().sum::<f64>() / g as f64;
            let rest = means[g..].iter().sum::<f64>() / (means.len() - g) as f64;
            let g = g as f64;
            (top - rest - self.margin).max(0.0).powi(2) * g * (k - g) / k
        };
        (1..means.len()).map(of).fold(0.0, f64::max)
    }
}

/// Mean cycles to a call of one part over the given, from `calls` calls.
fn realised(part: Part, margin: f64, offsets: &[f64], calls: usize) -> f64 {
    let basis = Basis {
        cycles_per_false_call: 400.0,
        ..basis(offsets.len(), margin)
    };
    let found = thresholds(&basis);
    let bank = Bank {
        margin,
        offsets,
        thresholds: &found,
    };
    let mut noise = Noise {
        state: 5,
        kept: None,
    };
    let cycles: usize = (0..calls).map(|_| bank.run(part, &mut noise)).sum();
    cycles as f64 / calls as f64 / part.cycles(&basis).expect("the part is on")
}

#[test]
fn each_part_calls_as_rarely_as_it_is_given() {
    let (half, one) = ([0.5, 0.5, 0.0, 0.0], [0.5, 0.0, 0.0, 0.0]);
    // The first cycles of a run cannot call yet, so short runs last a little longer than given.
    let cases: &[(Part, f64, &[f64], f64, f64)] = &[
        (Part::Few, 0.0, &[0.0; 4], 0.9, 1.35),
        (Part::Few, 0.5, &one, 0.85, 1.5),
        (Part::Few, 0.0, &[0.0; 2], 0.9, 1.35),
        (Part::Split, 0.0, &[0.0; 4], 0.9, 1.5),
        (Part::Split, 0.5, &half, 0.9, 1.8),
        (Part::Pair, 0.0, &[0.0; 4], 0.9, 1.5),
        (Part::Pair, 0.5, &half, 0.9, 1.8),
    ];
    for &(part, margin, offsets, least, most) in cases {
        let ratio = realised(part, margin, offsets, 200);
        assert!(
            (least..most).contains(&ratio),
            "{part:?}, margin {margin}: {ratio}"
        );
    }
}
