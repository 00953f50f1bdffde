//! The look itself: every span examined, and what is called.

use serde::{Deserialize, Serialize};

use crate::model::{Bank, Name, Pairing, SourceIx, Time};
use crate::stats;
use crate::window::Windows;

use super::causes::Causes;
use super::data::{Data, Need};
use super::level::Level;
use super::look::{Dependence, Finding, Look, SourceLook};
use super::naming::{Party, call_of, named_level};
use super::shares::Shares;
use super::spread::{Spread, Within};
use super::track::{Aspect, Moment};
use super::usual::Usual;
use super::watch::Crossing;

/// With fewer independent values per source than this, dependence has eaten the window.
const FEWEST_INDEPENDENT: f64 = 4.0;

/// One source as an examination sees it.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Participant {
    /// Which.
    pub source: SourceIx,
    /// Its name.
    pub name: Name,
    /// The margin with which it is watched: the bank's, or more after it cleared.
    pub margin: f64,
    /// Whether it delivers nothing now; a cycle then counts without it.
    pub silent: bool,
    /// Where it usually stands; `None` while that is being learnt, and it is not compared until then.
    pub usual: Option<Usual>,
}

/// A call: sources left the even set.
#[derive(Clone, Debug, PartialEq)]
pub struct Call {
    /// In which respect.
    pub aspect: Aspect,
    /// Who, in display order.
    pub named: Vec<SourceIx>,
    /// Everybody they were compared with.
    pub reference: Vec<SourceIx>,
    /// The span of the look that called, or that of the look which says most plainly what the watch called
    /// on.
    pub span: usize,
    /// Since when, as the watch has it; `None` when a look called.
    pub began: Option<Began>,
    /// What explains it besides names.
    pub causes: Causes,
}

/// Since when sources are apart, with the set of starts that the values allow at 95 %.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Began {
    /// The most likely start.
    pub start: Moment,
    /// The earliest.
    pub earliest: Moment,
    /// The latest.
    pub latest: Moment,
}

/// What an examination is for.
#[derive(Clone, Copy, Debug)]
pub struct Asked<'a> {
    /// When.
    pub at: Time,
    /// How much a span must hold.
    pub need: Need,
    /// Time between values of the slowest source, where it is known.
    pub interval_us: Option<i64>,
    /// What the watch found, when that is the reason.
    pub crossing: Option<&'a Crossing>,
    /// What was called on level and is to be named again on what came since.
    pub open: Option<&'a Call>,
}

/// What a look at all spans says.
#[derive(Debug)]
pub struct Examination {
    /// One look per span, shortest first.
    pub looks: Vec<Look>,
    /// What is called, at most one for each aspect; spread first.
    pub calls: Vec<Call>,
    /// What the watch's crossing calls, with its names.
    pub crossed: Option<Call>,
    /// [`Asked::open`] with its names as the values have them now.
    pub renamed: Option<Call>,
    /// The values it rests on.
    pub data: Data,
    /// How much dependence enlarges variances.
    pub factor: f64,
    /// What each look may spend.
    pub shares: Shares,
}

/// Looks at a bank over all its spans. `who` are the sources that take part, in display order.
pub fn examine(bank: &Bank, windows: &Windows, who: &[Participant], asked: Asked) -> Examination {
    let Asked {
        at,
        need,
        interval_us,
        crossing,
        open,
    } = asked;
    let placed = who.iter().filter_map(|p| Some((p.source, p.usual?)));
    let placed: Vec<(SourceIx, Usual)> = placed.collect();
    let look = Looking {
        bank,
        who,
        at,
        shares: match interval_us.filter(|_| !bank.is_watched()) {
            Some(us) => Shares::overlapping(bank, who.len(), us),
            None => Shares::of(bank),
        },
        origin: windows.origin().to_f64(),
    };
    let delivering = who.iter().filter(|p| !p.silent).count();
    let least = delivering.div_ceil(2).max(2);
    let data = Data::gather(windows, &placed, least, bank.window_length());
    let mut known: Option<Dependence> = None;
    let mut spans = Vec::new();
    // Longest first: it knows best how much successive values resemble each other.
    for &span in bank.spans.iter().rev() {
        let seen = look.over(&data, span, need, known);
        known = known.or(seen.look.dependence);
        spans.push(seen);
    }
    spans.reverse();
    let calls = [Aspect::Spread, Aspect::Level]
        .into_iter()
        .filter_map(|aspect| strongest(&spans, aspect))
        .map(|call| look.party().name_again(&data, call, known))
        .collect();
    let crossed = crossing.map(|c| {
        let call = look.call_of_crossing(&spans, c);
        look.party().name_again(&data, call, known)
    });
    let renamed = open.map(|call| look.party().name_again(&data, call.clone(), known));
    Examination {
        renamed,
        shares: look.shares,
        crossed,
        looks: spans.into_iter().map(|s| s.look).collect(),
        calls,
        data,
        factor: known.map_or(1.0, |d| d.variance_factor),
    }
}

/// One span's look and what it calls.
struct Seen {
    look: Look,
    level: Option<(f64, Call)>,
    spread: Option<(f64, Call)>,
}

fn strongest(spans: &[Seen], aspect: Aspect) -> Option<Call> {
    let of = |s: &Seen| match aspect {
        Aspect::Level => s.level.clone(),
        Aspect::Spread => s.spread.clone(),
    };
    let best = spans
        .iter()
        .filter_map(of)
        .min_by(|a, b| a.0.total_cmp(&b.0))?;
    Some(best.1)
}

struct Looking<'a> {
    bank: &'a Bank,
    who: &'a [Participant],
    at: Time,
    shares: Shares,
    origin: f64,
}

impl Looking<'_> {
    fn over(&self, data: &Data, span: usize, need: Need, known: Option<Dependence>) -> Seen {
        if data.sources.len() < 2 && self.who.iter().any(|p| p.usual.is_none()) {
            return self.nothing(span, "usual places are still being learnt".to_owned());
        }
        let Some(cut) = data.cut(span, need) else {
            return self.nothing(span, "the window is not filled yet".to_owned());
        };
        match self.party().level(&cut, known) {
            Ok(level) => self.seen(&cut, span, level),
            Err(why) => self.nothing(span, why.to_string()),
        }
    }

    fn party(&self) -> Party<'_> {
        Party {
            bank: self.bank,
            who: self.who,
        }
    }

    fn nothing(&self, span: usize, remark: String) -> Seen {
        Seen {
            look: self.blank(span, Finding::NotEnoughData, remark),
            level: None,
            spread: None,
        }
    }

    fn blank(&self, span: usize, finding: Finding, remark: String) -> Look {
        Look {
            bank: self.bank.name.clone(),
            at: self.at,
            span,
            finding,
            remark,
            alpha_level: self.shares.level,
            alpha_spread: self.shares.spread,
            tests: Vec::new(),
            dependence: None,
            sigma: 0.0,
            sources: Vec::new(),
        }
    }

    fn seen(&self, cut: &Data, span: usize, level: Level) -> Seen {
        let factor = level.dependence.map_or(1.0, |d| d.variance_factor);
        let within = if self.bank.pairing == Pairing::None {
            Within::Raw
        } else {
            Within::Residuals
        };
        let spread = Spread::judge(&level.within, within, self.bank.spread_margin, factor);
        let spread_call = spread.as_ref().filter(|s| s.calls(self.shares.spread));
        let reference = self.party().reference(cut);
        let level_named = level
            .calls(self.shares.level)
            .then(|| named_level(&level, reference));
        let finding = match (spread_call, &level_named) {
            (Some(_), _) => Finding::SpreadApart,
            (None, Some(_)) => Finding::LevelApart,
            (None, None) if (span as f64) < FEWEST_INDEPENDENT * factor => Finding::DependentData,
            (None, None) => Finding::Even,
        };
        let mut look = self.blank(span, finding, self.remark(cut, spread.as_ref()));
        look.sigma = level.sigma;
        look.dependence = level.dependence;
        look.sources = self.sources(
            cut,
            &level,
            spread.as_ref(),
            level_named.as_deref(),
            spread_call.is_some(),
        );
        look.tests.clone_from(&level.tests);
        look.tests
            .extend(spread.iter().flat_map(|s| s.tests.clone()));
        if self.bank.pairing != Pairing::None {
            look.tests.extend(raw_spread(cut));
        }
        let call = |aspect, named: &[bool], reference| call_of(cut, aspect, named, span, reference);
        Seen {
            level: level_named.map(|n| (level.deciding_p(), call(Aspect::Level, &n, reference))),
            spread: spread_call.map(|s| (s.p, call(Aspect::Spread, &s.named, None))),
            look,
        }
    }

    fn remark(&self, cut: &Data, spread: Option<&Spread>) -> String {
        if cut.sources.len() < self.who.len() {
            let missing = self.who.len() - cut.sources.len();
            return format!(
                "{missing} of {} sources have too few values for this span",
                self.who.len()
            );
        }
        if self.bank.reference.is_some() && self.party().reference(cut).is_none() {
            return "the reference source delivers nothing: sources are compared with each other"
                .to_owned();
        }
        if spread.is_none() && self.bank.pairing != Pairing::None && cut.sources.len() == 2 {
            return "two sources that share cycles mirror each other: spread is not judged"
                .to_owned();
        }
        String::new()
    }

    fn sources(
        &self,
        cut: &Data,
        level: &Level,
        spread: Option<&Spread>,
        level_named: Option<&[bool]>,
        spread_called: bool,
    ) -> Vec<SourceLook> {
        let columns = cut.columns();
        let one = |c: usize| {
            let summary = stats::summarize(&columns[c]);
            let own_sd = || stats::summarize(&level.within[c]).sd().unwrap_or(0.0);
            let name = self.who.iter().find(|p| p.source == cut.sources[c]);
            SourceLook {
                source: cut.sources[c],
                name: name.map_or_else(|| "".into(), |p| p.name.clone()),
                n: summary.n,
                mean: self.origin + cut.usual[c].place + summary.mean,
                sd: spread.map_or_else(own_sd, |s| s.sds[c]),
                deviation: level.deviations[c],
                sd_ratio: spread.and_then(|s| s.ratios[c]),
                named_level: level_named.is_some_and(|n| n[c]),
                named_spread: spread_called && spread.is_some_and(|s| s.named[c]),
            }
        };
        (0..cut.sources.len()).map(one).collect()
    }

    /// The span whose look says most plainly what the watch called on.
    fn most_telling(&self, spans: &[Seen], aspect: Aspect) -> usize {
        let p_of = |look: &Look| match aspect {
            Aspect::Level => look.level_test().map(|t| t.p_paid),
            Aspect::Spread => look.spread_test().map(|t| t.p_paid),
        };
        let judged = spans
            .iter()
            .filter_map(|s| Some((p_of(&s.look)?, s.look.span)));
        let plainest = judged.min_by(|a, b| a.0.total_cmp(&b.0));
        plainest.map_or_else(|| self.bank.window_length(), |(_, span)| span)
    }

    /// What a crossing of the watch calls before the values since its start are asked for the names.
    fn call_of_crossing(&self, spans: &[Seen], crossing: &Crossing) -> Call {
        let leads = |s: &SourceIx| crossing.leading.contains(s);
        let all = self.who.iter().map(|p| p.source);
        let (named, rest): (Vec<SourceIx>, Vec<SourceIx>) = all.partition(leads);
        Call {
            aspect: crossing.aspect,
            reference: if rest.is_empty() { named.clone() } else { rest },
            named,
            span: self.most_telling(spans, crossing.aspect),
            began: Some(Began {
                start: crossing.start,
                earliest: crossing.earliest,
                latest: crossing.latest,
            }),
            causes: Causes::default(),
        }
    }
}

/// The spread tests of the textbook on raw values, which common movement blinds.
fn raw_spread(cut: &Data) -> Vec<super::look::TestEntry> {
    let columns = cut.columns();
    let raw = |t: super::look::TestEntry| super::look::TestEntry { raw: true, ..t };
    super::spread::reported(&columns)
        .into_iter()
        .map(raw)
        .collect()
}
