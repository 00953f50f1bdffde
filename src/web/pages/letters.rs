//! "Which sources are not shown to differ?": the shared-letter table of a look.
//!
//! Computed for the page from the look's own means, standard deviations and dependence; decides nothing.

use maud::{Markup, html};

use crate::engine::BankView;
use crate::stats::dist::studentized_range;
use crate::stats::{letters_text, shared_letters};
use crate::verdict::{Look, SourceLook};

/// The letters hold together for all pairs with this probability of any false difference.
const ALPHA: f64 = 0.05;

/// A source with its letters, by mean from the highest.
#[derive(Clone, Debug, PartialEq)]
struct Lettered<'a> {
    source: &'a SourceLook,
    letters: String,
}

/// The section; nothing when pairs cannot be compared.
pub fn section(view: &BankView, look: &Look) -> Markup {
    let paired = view.bank.pairing.is_paired();
    let what = &view.bank.characteristic;
    let Some(list) = lettered(look, paired) else {
        return html! {};
    };
    let method = if paired {
        "Tukey’s intervals from the residual mean square within the cycle"
    } else {
        "Games and Howell’s intervals with the smallest of the pairs’ degrees of freedom"
    };
    html! {
        section id="letters" {
            h2 { "Which sources are not shown to differ?" }
            p class="caption" { "Sources that share a letter are not shown to differ in level over the newest "
                (look.span) " values; those that share none surely differ, all pairs together at 5 % (" (method)
                ", dependence paid for; letters after Piepho 2004). Whether a difference matters is for the margin, "
                (view.bank.margin) " " (what.unit) "." }
            details class="data" open[list.len() <= 24] {
                summary { "The table" }
                div class="wide" tabindex="0" role="region" aria-label="Shared letters" {
                    table class="letters" {
                        thead { tr { th scope="col" { "Source" } th scope="col" class="n" { "Mean, " (what.unit) }
                            th scope="col" { "Letters" } } }
                        tbody { @for one in &list { tr class=[one.source.named_level.then_some("apart")] {
                            th scope="row" { (one.source.name) } td class="n" { (what.mean(one.source.mean)) }
                            td class="letter" { (one.letters) } } } }
                    }
                }
            }
        }
    }
}

fn lettered(look: &Look, paired: bool) -> Option<Vec<Lettered<'_>>> {
    let good = |s: &&SourceLook| s.n >= 2 && s.mean.is_finite();
    let mut sources: Vec<&SourceLook> = look.sources.iter().filter(good).collect();
    sources.sort_by(|a, b| b.mean.total_cmp(&a.mean));
    let k = sources.len();
    if k < 2 {
        return None;
    }
    let factor = look.dependence.map_or(1.0, |d| d.variance_factor).max(1.0);
    let variance = |s: &SourceLook| {
        let sd = if paired { look.sigma } else { s.sd };
        sd * sd * factor / s.n as f64
    };
    if sources
        .iter()
        .any(|s| variance(s) <= 0.0 || !variance(s).is_finite())
    {
        return None;
    }
    let shortest = sources.iter().map(|s| s.n).min()? as f64;
    let df = if paired {
        (k as f64 - 1.0) * (shortest - 1.0)
    } else {
        // No pair of Welch's has fewer than the smaller source has.
        shortest - 1.0
    };
    let q = studentized_range::isf(ALPHA, k, (df / factor).max(1.0)).ok()?;
    let apart = |a: &SourceLook, b: &SourceLook| {
        let error = (variance(a) + variance(b)).sqrt();
        (a.mean - b.mean).abs() > q / std::f64::consts::SQRT_2 * error
    };
    let order: Vec<usize> = (0..k).collect();
    let differ = |a: usize, b: usize| match (sources.get(a), sources.get(b)) {
        (Some(a), Some(b)) => apart(a, b),
        _ => false,
    };
    let letters = shared_letters(&order, differ);
    let named = sources.iter().zip(&letters).map(|(source, own)| Lettered {
        source,
        letters: letters_text(own),
    });
    Some(named.collect())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::web::sample;

    #[test]
    fn a_source_far_off_has_a_letter_of_its_own() {
        let snapshot = sample::snapshot();
        let view = snapshot.banks.first().expect("banks");
        let look = view.looks.last().expect("a look");
        for paired in [true, false] {
            let list = lettered(look, paired).expect("twelve sources");
            assert_eq!(list.len(), 12);
            let last = list.last().expect("twelve");
            assert_eq!(&*last.source.name, "07");
            let shared = |c: char| list.iter().filter(|l| l.letters.contains(c)).count();
            let alone = last.letters.chars().all(|c| shared(c) == 1);
            assert!(alone && !last.letters.is_empty(), "{list:?}");
        }
    }
}
