//! Every sentence that people are woken by, in one file.
//!
//! Short, calm, with the numbers that decide what to do. The subject fits a lock screen.

use jiff::tz::TimeZone;

use crate::model::{Bank, Name, Offsets, Time, Value, fixed};
use crate::verdict::{Pattern, PatternKind, Slip};

use super::{Adjustment, Kind, NamedSource, Since};

/// Characters a lock screen shows.
pub const MOST_SUBJECT: usize = 70;

/// More names than this are counted instead of listed.
const MOST_NAMES: usize = 6;

/// The unit in which spread is told.
pub const SPREAD_UNIT: &str = "times the sd of the others";

const CAUTION: &str = "evenrow advises; it is no safety function. Follow lock-out and the plant's \
procedures before touching a machine; a qualified person decides.";

/// What the words are made from.
pub struct Facts<'a> {
    /// The bank.
    pub bank: &'a Bank,
    /// The zone people live in.
    pub zone: &'a TimeZone,
    /// What it is about.
    pub kind: Kind,
    /// Who is named, largest deviation first.
    pub sources: &'a [NamedSource],
    /// Since when.
    pub since: Since,
    /// How many sources the named ones were compared with.
    pub others: usize,
    /// Whether they were compared with those, or only with each other.
    pub compared: Compared,
    /// Mean of those, in the unit.
    pub even_mean: Option<f64>,
    /// What in the machine's geometry explains it.
    pub pattern: Option<&'a Pattern>,
    /// Whether all sources read as others.
    pub slip: Option<Slip>,
    /// How far those that stayed moved together since the start, in the unit.
    pub common_movement: Option<f64>,
    /// What the bank gives away in an hour.
    pub cost_per_hour: Option<f64>,
    /// Time in which the notice clears if the fault is mended now, in microseconds.
    pub clears_in_us: Option<i64>,
    /// When the condition was seen to be gone.
    pub returned: Option<Time>,
    /// The last adjustment, and what became of it.
    pub adjustment: Option<&'a Adjustment>,
    /// The page.
    pub url: &'a str,
}

/// What the named sources were compared with.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Compared {
    /// The even set.
    WithEven,
    /// The even set, everybody's own usual place taken off.
    WithUsual,
    /// Each other: the bank has two sources.
    Mutually,
    /// The configured reference source.
    WithReference(Name),
}

impl Compared {
    /// How a bank's sources are compared in level (`kind` says whether it is about that), unless they
    /// are two.
    pub fn of(bank: &Bank, kind: Kind) -> Self {
        match (&bank.reference, &bank.offsets) {
            _ if kind == Kind::SpreadApart => Self::WithEven,
            (Some(name), _) => Self::WithReference(name.clone()),
            (None, Offsets::Learn) => Self::WithUsual,
            (None, _) => Self::WithEven,
        }
    }
}

/// The words of a notice.
#[derive(Clone, Debug, PartialEq)]
pub struct Words {
    /// At most [`MOST_SUBJECT`] characters.
    pub subject: String,
    /// What to check or adjust.
    pub advice: String,
    /// Everything.
    pub text: String,
}

impl Facts<'_> {
    /// Puts it into words.
    pub fn words(&self) -> Words {
        let advice = self.advice();
        let mut lines = match self.returned {
            Some(at) => vec![self.what_was(at)],
            None => {
                let first = self.slipped().into_iter().chain(self.patterned());
                first.chain([self.what()]).collect()
            }
        };
        lines.extend(self.details());
        lines.push(self.since_when());
        lines.extend(self.moved_together());
        lines.extend(self.bank_level());
        lines.extend(self.given_away());
        lines.extend(self.adjusted());
        if self.returned.is_none() {
            lines.push(advice.clone());
            lines.extend(self.clears_in());
        }
        lines.push(format!("Page: {}", self.url));
        lines.push(CAUTION.to_owned());
        Words {
            subject: self.subject(),
            advice,
            text: lines.join("\n"),
        }
    }

    fn adjusted(&self) -> Option<String> {
        let Adjustment {
            source,
            at,
            amount,
            values,
            deviation,
            effect,
        } = self.adjustment?;
        let c = &self.bank.characteristic;
        let by = amount.map_or_else(String::new, |a| {
            format!(" by {} {}", c.deviation(a), c.unit)
        });
        let told = deviation.map_or_else(String::new, |d| {
            format!(
                " It stands at {} {} (95 %: {} to {}) over {values} values since.",
                c.deviation(d.value),
                c.unit,
                c.deviation(d.low),
                c.deviation(d.high)
            )
        });
        let at = self.clock(*at);
        Some(format!(
            "{source} was adjusted{by} at {at}: {}.{told}",
            effect.words()
        ))
    }

    fn subject(&self) -> String {
        let bank = &self.bank.name;
        let (long, short) = match self.returned {
            Some(_) => (
                format!("{bank}: {} even again", self.names()),
                format!("{bank}: {} sources even again", self.sources.len()),
            ),
            None => (
                format!("{bank}: {}{}", self.in_short(), self.how_much()),
                format!(
                    "{bank}: {} sources, {}",
                    self.sources.len(),
                    self.kind.words()
                ),
            ),
        };
        let whole = if long.chars().count() <= MOST_SUBJECT {
            long
        } else {
            short
        };
        whole.chars().take(MOST_SUBJECT).collect()
    }

    /// One cause before the names.
    fn in_short(&self) -> String {
        match (self.slip, self.pattern) {
            (Some(slip), _) => slip_words(slip),
            (None, Some(pattern)) => pattern.words.clone(),
            (None, None) => self.who_and_how(),
        }
    }

    fn slipped(&self) -> Option<String> {
        let slip = self.slip?;
        Some(format!(
            "{} ({}): {}. Nobody need have moved: the position signal may have.",
            self.bank.name,
            self.bank.characteristic.name,
            slip_words(slip)
        ))
    }

    fn patterned(&self) -> Option<String> {
        let Pattern {
            kind,
            effect,
            words,
            ..
        } = self.pattern?;
        let c = &self.bank.characteristic;
        let told = |v: f64| match kind {
            // What stands above and what below is in the words.
            PatternKind::Wave { .. } => fixed(v, c.places() + 1),
            _ => c.deviation(v),
        };
        let size = match kind {
            PatternKind::Wave { .. } => "amplitude",
            PatternKind::Slope { .. } => "from end to end",
            _ => "apart by",
        };
        Some(format!(
            "{} ({}): {words}, {size} {} {} (95 %: {} to {} {}). It explains what is named below.",
            self.bank.name,
            c.name,
            told(effect.value),
            c.unit,
            told(effect.low),
            told(effect.high),
            c.unit
        ))
    }

    /// The size without its sign, where one source (or a pair) has one.
    fn how_much(&self) -> String {
        if self.slip.is_some() || self.pattern.is_some() {
            return String::new();
        }
        let single = match (self.sources, self.is_pair()) {
            ([one], _) | ([one, _], true) => one,
            _ => return String::new(),
        };
        let c = &self.bank.characteristic;
        match self.kind {
            Kind::SpreadApart => format!(", {} {SPREAD_UNIT}", fixed(single.deviation, 1)),
            _ => format!(
                " by {} {}",
                fixed(single.deviation.abs(), c.places() + 1),
                c.unit
            ),
        }
    }

    pub(super) fn is_pair(&self) -> bool {
        self.compared == Compared::Mutually && self.sources.len() == 2
    }

    fn who_and_how(&self) -> String {
        let names = self.names();
        if self.is_pair() {
            return match self.kind {
                Kind::SpreadApart => format!("{names} differ in spread"),
                _ => format!("{names} differ"),
            };
        }
        let plural = self.sources.len() > 1;
        let (is, has) = if plural {
            ("are", "have")
        } else {
            ("is", "has")
        };
        match self.kind {
            Kind::SpreadApart if self.all(|s| s.deviation < 1.0) => {
                format!("{names} {is} suspiciously steady")
            }
            Kind::SpreadApart => format!("{names} {has} turned erratic"),
            Kind::BankSplit => format!("split in two, {names} against the rest"),
            _ if self.all(|s| s.deviation < 0.0) => format!("{names} {is} low"),
            _ if self.all(|s| s.deviation > 0.0) => format!("{names} {is} high"),
            _ => format!("{names} are apart, some high, some low"),
        }
    }

    pub(super) fn all(&self, holds: impl Fn(&NamedSource) -> bool) -> bool {
        self.sources.iter().all(holds)
    }

    fn names(&self) -> String {
        let listed: Vec<&str> = self
            .sources
            .iter()
            .take(MOST_NAMES)
            .map(|s| &*s.source)
            .collect();
        match self.sources.len() - listed.len() {
            0 => listed.join(", "),
            more => format!("{} and {more} more", listed.join(", ")),
        }
    }

    fn what(&self) -> String {
        let what = &self.bank.characteristic.name;
        format!("{} ({what}): {}.", self.bank.name, self.who_and_how())
    }

    fn what_was(&self, returned: Time) -> String {
        let what = &self.bank.characteristic.name;
        let (bank, names) = (&self.bank.name, self.names());
        format!(
            "{bank} ({what}): {names} even again, shown at {}. At worst:",
            self.clock(returned)
        )
    }

    fn details(&self) -> Vec<String> {
        let told = if self.is_pair() {
            &self.sources[..1]
        } else {
            self.sources
        };
        told.iter().map(|s| self.detail(s)).collect()
    }

    fn detail(&self, s: &NamedSource) -> String {
        let against = match &self.compared {
            Compared::Mutually if self.is_pair() => {
                format!("against {}", self.sources[1].source)
            }
            Compared::WithReference(name) => format!("against {name}, the reference"),
            Compared::WithUsual => "against its own usual place".to_owned(),
            _ => format!("against the {} even ones", self.others),
        };
        let c = &self.bank.characteristic;
        let interval = match self.kind {
            Kind::SpreadApart => format!("{} to {}", fixed(s.low, 1), fixed(s.high, 1)),
            _ => format!(
                "{} to {} {}",
                c.deviation(s.low),
                c.deviation(s.high),
                c.unit
            ),
        };
        format!(
            "{}: {} {against} (95 %: {interval}).",
            s.source,
            self.size(s)
        )
    }

    fn size(&self, s: &NamedSource) -> String {
        let c = &self.bank.characteristic;
        match self.kind {
            Kind::SpreadApart => format!("{} times the sd", fixed(s.deviation, 1)),
            _ => format!("{} {}", c.deviation(s.deviation), c.unit),
        }
    }

    fn since_when(&self) -> String {
        let Since {
            at,
            earliest,
            latest,
        } = self.since;
        let range = format!(
            "{} to {}",
            self.beside(at, earliest),
            self.beside(at, latest)
        );
        format!("Since {} (95 %: {range}).", self.clock(at))
    }

    /// A time in the plant's zone, with its offset.
    fn clock(&self, at: Time) -> String {
        self.written(at, "%Y-%m-%d %H:%M:%S %:z")
    }

    /// A time beside another: without the date where it is the same day.
    fn beside(&self, other: Time, at: Time) -> String {
        let day = |t| self.written(t, "%Y-%m-%d");
        if day(other) == day(at) {
            self.written(at, "%H:%M:%S")
        } else {
            self.clock(at)
        }
    }

    fn written(&self, at: Time, form: &str) -> String {
        match at.to_jiff() {
            Some(stamp) => stamp
                .to_zoned_datetime(self.zone.clone())
                .strftime(form)
                .to_string(),
            None => at.to_string(),
        }
    }

    fn bank_level(&self) -> Option<String> {
        let c = &self.bank.characteristic;
        let mean = self.even_mean?;
        let beside = |label: &str, v: Option<Value>| v.map(|v| format!("{label} {v} {}", c.unit));
        let known: Vec<String> = [beside("target", c.target), beside("declared", c.declared)]
            .into_iter()
            .flatten()
            .collect();
        let known = if known.is_empty() {
            String::new()
        } else {
            format!(" ({})", known.join(", "))
        };
        let who = match &self.compared {
            Compared::WithReference(name) => format!("{name} stands"),
            _ => "The even ones stand".to_owned(),
        };
        Some(format!("{who} at {} {}{known}.", c.mean(mean), c.unit))
    }

    /// What the others did since the start: no divergence, and no excuse for one.
    fn moved_together(&self) -> Option<String> {
        let c = &self.bank.characteristic;
        let by = self.common_movement.filter(|_| self.is_about_level())?;
        let who = match &self.compared {
            Compared::WithReference(name) => format!("{name} itself"),
            _ => "the others together".to_owned(),
        };
        Some(format!(
            "Since then {who} moved by {} {}, which is apart from this.",
            c.deviation(by),
            c.unit
        ))
    }

    fn given_away(&self) -> Option<String> {
        let cost = self
            .cost_per_hour
            .filter(|c| *c > 0.0 && self.returned.is_none())?;
        Some(format!(
            "At this level the bank gives away {} an hour (mean less declared, times rate and cost).",
            fixed(cost, 2)
        ))
    }

    fn is_about_level(&self) -> bool {
        matches!(self.kind, Kind::LevelApart | Kind::BankSplit)
    }

    fn clears_in(&self) -> Option<String> {
        let minutes = self.clears_in_us?.max(0) as f64 / 60e6;
        let about = if minutes < 1.5 {
            "a minute".to_owned()
        } else {
            format!("{minutes:.0} minutes")
        };
        Some(format!(
            "If that mends it, this notice clears in about {about}."
        ))
    }
}

fn slip_words(slip: Slip) -> String {
    match slip.places {
        1 => "every source reads as the one before it".to_owned(),
        n => format!("every source reads as the one {n} places before it"),
    }
}
