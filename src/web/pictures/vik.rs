//! Deviations as colours: 21 steps of the diverging scale vik.
//!
//! Source: Crameri, F. (2018), Scientific colour maps, Zenodo, doi:10.5281/zenodo.1243862 (MIT
//! licence): every 12.75th of its 256 colours. It keeps its order for colour-blind readers and in
//! print, and its middle is light: white is even.

/// Steps from far below to far above; the middle one is zero.
pub const STEPS: [&str; 21] = [
    "#001261", "#02276e", "#023a7b", "#044d87", "#116496", "#307da6", "#5496b7", "#7db0c9",
    "#a7c9da", "#cfe0e8", "#ece5e0", "#ecd1c3", "#e1b8a0", "#d69f7e", "#cd8961", "#c37243",
    "#b75a26", "#a13c0b", "#852206", "#6f1107", "#590008",
];

/// The step of a deviation on a scale that is full at ±`full`.
pub fn step(deviation: f64, full: f64) -> usize {
    let middle = (STEPS.len() / 2) as f64;
    if !deviation.is_finite() || full <= 0.0 {
        return STEPS.len() / 2;
    }
    let place = (deviation / full * middle).round().clamp(-middle, middle);
    (place + middle) as usize
}

/// The colour of a deviation.
pub fn colour(deviation: f64, full: f64) -> &'static str {
    STEPS
        .get(step(deviation, full))
        .copied()
        .unwrap_or("#ece5e0")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_scale_is_symmetric_and_holds_its_ends() {
        for (deviation, at) in [
            (0.0, 10),
            (-1.6, 0),
            (1.6, 20),
            (99.0, 20),
            (-99.0, 0),
            (0.16, 11),
            (f64::NAN, 10),
        ] {
            assert_eq!(step(deviation, 1.6), at, "{deviation}");
        }
        assert_eq!(step(1.0, 0.0), 10);
    }
}
