//! The closed forms against printed values, sums, limits and each other.

use super::nu::nu;
use super::starts::{self, Streams};
use super::*;
use crate::stats::dist::normal;

/// k, mean cycles to a false call, z. Source: methods §4, the form of Siegmund and Venkatraman 1995 at
/// a margin of 0, few part alone, printed to 0.01.
const PRINTED: &[(usize, f64, f64)] = &[
    (4, 5e3, 4.51),
    (12, 5e3, 4.76),
    (60, 5e3, 5.11),
    (4, 5e4, 5.02),
    (12, 5e4, 5.25),
    (60, 5e4, 5.56),
    (4, 1e6, 5.61),
    (12, 1e6, 5.81),
    (60, 1e6, 6.09),
    (4, 1e7, 6.02),
    (12, 1e7, 6.21),
    (60, 1e7, 6.47),
];

#[test]
fn few_alone_meets_the_printed_table() {
    for &(k, cycles, z) in PRINTED {
        let found = starts::threshold(1.0 / cycles, |s| starts::worst_rate(s, k, 0.0));
        assert!(
            (found - z).abs() <= 0.01,
            "k {k}, {cycles} cycles: {found}, printed {z}"
        );
    }
}
