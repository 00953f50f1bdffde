//! The margin's band: one band of the margin's width, placed to hold the most sources.
//!
//! Whoever stands outside it is more than the margin from somebody inside. Among places that hold
//! equally many it takes the one whose sources lie closest together, and centres the band on them.

/// The band's ends, or `None` without figures or without a width.
pub fn place(figures: &[f64], width: f64) -> Option<(f64, f64)> {
    let mut sorted: Vec<f64> = figures.iter().copied().filter(|x| x.is_finite()).collect();
    sorted.sort_by(f64::total_cmp);
    if sorted.is_empty() || width <= 0.0 || !width.is_finite() {
        return None;
    }
    let (mut best, mut end) = ((0, f64::INFINITY, 0.0), 0);
    for (start, &low) in sorted.iter().enumerate() {
        while sorted.get(end).is_some_and(|x| x - low <= width) {
            end += 1;
        }
        let high = sorted.get(end.saturating_sub(1)).copied().unwrap_or(low);
        let (held, extent) = (end - start, high - low);
        if held > best.0 || (held == best.0 && extent < best.1) {
            best = (held, extent, f64::midpoint(low, high));
        }
    }
    Some((best.2 - width / 2.0, best.2 + width / 2.0))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_band_holds_the_most() {
        for (figures, width, want) in [
            (&[0.0, 0.1, 0.2, -2.0][..], 0.8, Some((-0.3, 0.5))),
            (&[1.0], 2.0, Some((0.0, 2.0))),
            (&[0.0, 0.5, 3.0, 3.1], 1.0, Some((2.55, 3.55))),
            (&[], 1.0, None),
            (&[f64::NAN], 1.0, None),
            (&[1.0], 0.0, None),
        ] {
            let got = place(figures, width);
            let near = |a: f64, b: f64| (a - b).abs() < 1e-12;
            let close = match (got, want) {
                (Some(g), Some(w)) => near(g.0, w.0) && near(g.1, w.1),
                (None, None) => true,
                _ => false,
            };
            assert!(close, "{figures:?} {got:?}");
        }
    }

    proptest::proptest! {
        #[test]
        fn nobody_outside_is_within_the_margin_of_everybody_inside(
            figures in proptest::collection::vec(-5.0_f64..5.0, 1..20), width in 0.01_f64..5.0,
        ) {
            let (low, high) = place(&figures, width).expect("figures");
            let slack = 1e-9;
            let (inside, outside): (Vec<f64>, Vec<f64>) =
                figures.iter().partition(|x| **x >= low - slack && **x <= high + slack);
            for out in outside {
                let farthest = inside.iter().map(|x| (x - out).abs()).fold(0.0, f64::max);
                proptest::prop_assert!(farthest > width - slack);
            }
        }
    }
}
