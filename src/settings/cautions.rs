//! What is allowed and may still surprise. A caution never stops anything.

use crate::model::{Bank, Pairing, Sources};
use crate::stats::dist::chi_square;
use crate::verdict::Shares;

use super::check::words;
use super::{Encryption, Means, Outlet, Settings};

/// Below this a spread is judged from too few values to say much.
const SHORT_SPAN: usize = 5;
/// From here on a window is a matter of memory and of days.
const LONG_SPAN: usize = 10_000;
/// A value in a window with its time and cycle.
const BYTES_PER_VALUE: usize = 24;
/// Down to here p-values are checked against independent references.
const LEAST_ALPHA: f64 = 1e-12;
/// A look that may be wrong this often is no longer a rare event.
const LARGE_ALPHA: f64 = 0.01;

impl Settings {
    /// What holds for the plant as a whole.
    pub fn cautions(&self) -> Vec<String> {
        let mut all = Vec::new();
        let broker = &self.broker;
        if broker.password_file.is_some() && !broker.tls && !is_here(&broker.host) {
            let host = &broker.host;
            all.push(format!(
                "the password travels to {host} in clear; mqtts:// would encrypt it"
            ));
        }
        all.extend(self.outlets.iter().filter_map(in_clear));
        if self.web.token_file.is_none() {
            all.push("without a token file nobody can acknowledge a notice".to_owned());
        }
        all
    }
}

fn is_here(host: &str) -> bool {
    matches!(host, "localhost" | "127.0.0.1" | "::1" | "[::1]")
}

/// Says when an outlet sends unencrypted to another machine.
fn in_clear(outlet: &Outlet) -> Option<String> {
    let host = match &outlet.means {
        Means::Webhook(w) => {
            let uri: http::Uri = w.url.parse().ok()?;
            let plain = uri.scheme_str() == Some("http");
            plain.then(|| uri.host().unwrap_or_default().to_owned())?
        }
        Means::Mail(m) if m.encryption == Encryption::InClear => m.host.clone(),
        Means::Mail(_) | Means::Command(_) => return None,
    };
    let name = &outlet.name;
    let caution = format!("notices of outlet \"{name}\" travel to {host} in clear");
    (!is_here(&host)).then_some(caution)
}

/// What holds for one bank.
pub fn bank_cautions(bank: &Bank) -> Vec<String> {
    let mut all = Vec::new();
    all.extend(no_margin(bank));
    all.extend(long_spans(bank));
    if let Some(short) = bank.spans.iter().find(|span| **span < SHORT_SPAN) {
        all.push(format!(
            "a span of {short} values says little about spread; spans of {SHORT_SPAN} and more do better"
        ));
    }
    let alpha = Shares::of(bank).level;
    if alpha < LEAST_ALPHA {
        all.push(format!(
            "the call budget leaves {alpha:.1e} for a look; p-values are exact down to {LEAST_ALPHA:e}"
        ));
    }
    if alpha > LARGE_ALPHA {
        all.push(format!(
            "the call budget lets {:.0} of 100 looks be wrong",
            alpha * 100.0
        ));
    }
    all
}

/// What a margin of 0 costs.
fn no_margin(bank: &Bank) -> Option<String> {
    if bank.margin > 0.0 {
        return None;
    }
    let general = "a margin of 0 calls every difference, however small, once enough values show it";
    let n = bank.window_length();
    Some(match (&bank.sources, size_called(bank)) {
        (Sources::Listed(_) | Sources::Shifts(_), Some(size)) => format!(
            "{general}: over {n} values a source that is off by {size:.2} standard deviations is \
             called at about every second look, whether that matters or not"
        ),
        (Sources::Listed(_) | Sources::Shifts(_) | Sources::Discover { .. }, _) => {
            general.to_owned()
        }
    })
}

/// How far off one source must be for its look over the longest span to be significant as often as
/// not: the mean of a noncentral chi-square with k−1 degrees of freedom, k−1 + n d² (k−1)/k, set equal
/// to the quantile at the look's alpha.
fn size_called(bank: &Bank) -> Option<f64> {
    let names = bank.sources.names()?;
    let (k, n) = (names.len() as f64, bank.window_length() as f64);
    let df = k - 1.0;
    let quantile = chi_square::isf(Shares::of(bank).level, df).ok()?;
    let excess = (quantile - df).max(0.0);
    Some((excess * k / (df * n)).sqrt())
}

fn long_spans(bank: &Bank) -> Option<String> {
    let n = bank.window_length();
    if let Pairing::Slot { length_us } = bank.pairing {
        let took_us = length_us.saturating_mul(i64::try_from(n).unwrap_or(i64::MAX));
        if took_us > bank.oldest_us {
            return Some(format!(
                "the longest span, {n} slots of {}, takes {:.0} days to fill",
                words(length_us),
                took_us as f64 / crate::model::US_PER_DAY as f64
            ));
        }
    }
    (n > LONG_SPAN).then(|| {
        let megabytes = n * BYTES_PER_VALUE / 1_000_000 + 1;
        format!("a span of {n} values takes about {megabytes} MB of memory for every source")
    })
}

#[cfg(test)]
mod tests {
    use super::super::tests::{good_with, settings};
    use super::*;

    #[test]
    fn every_caution_is_raised_by_what_it_warns_of() {
        for (change, words) in [
            (("margin = 0.8", "margin = 0"), "margin of 0"),
            (("spans = [10, 40]", "spans = [3, 40]"), "span of 3"),
            (("spans = [10, 40]", "spans = [10, 20000]"), "20000 values"),
            (("1 per 90 days", "200 per day"), "budget lets"),
            (("1 per 90 days", "1 per 9e12 days"), "exact down to"),
            (
                ("pairing = \"cycle\"", "pairing = { slot = \"1 d\" }"),
                "takes 40 days",
            ),
        ] {
            let settings = settings(&good_with(change.0, change.1)).expect(change.1);
            let found = bank_cautions(&settings.banks[0]);
            let hit = found.iter().any(|caution| caution.contains(words));
            assert!(hit, "{}: {found:?}", change.1);
        }
    }

    #[test]
    fn a_careful_configuration_has_none() {
        let settings = settings(&good_with("", "")).expect("good");
        assert_eq!(bank_cautions(&settings.banks[0]), Vec::<String>::new());
        assert_eq!(settings.cautions(), Vec::<String>::new());
    }

    #[test]
    fn the_size_that_is_called_shrinks_with_the_root_of_the_span() {
        let at = |spans: &str| {
            let text = good_with("spans = [10, 40]", spans);
            size_called(&settings(&text).expect(spans).banks[0]).expect("listed")
        };
        let (short, long) = (at("spans = [100]"), at("spans = [400]"));
        assert!((short / long - 2.0).abs() < 1e-9, "{short} {long}");
    }
}
