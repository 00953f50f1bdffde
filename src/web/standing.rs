//! How a bank stands, in a word: what the plant's page says first.
//!
//! Notices rule: they are the calls. Without one the looks speak, and without looks what is missing
//! does. The order is that in which a person would want to know.

use crate::engine::{BankView, SourceState};
use crate::model::{Characteristic, Name, Time};
use crate::notice::{Kind, Notice, State};
use crate::verdict::Finding;
use crate::web::format;
use crate::web::pictures::glyph::Glyph;

/// How a bank stands.
#[derive(Clone, Debug, PartialEq)]
pub enum Standing {
    /// An active notice says that sources are apart.
    Apart {
        /// Level, spread or split.
        kind: Kind,
        /// The named sources with their figures.
        named: Vec<String>,
        /// Since when.
        since: Time,
    },
    /// Sources deliver nothing.
    Silent {
        /// Which.
        sources: Vec<Name>,
        /// Since when the first of them is.
        since: Option<Time>,
    },
    /// The looks find the sources alike.
    Even {
        /// A notice that is over and waits for somebody to acknowledge it.
        unseen: Option<Name>,
    },
    /// Successive values depend too much on each other.
    Dependent,
    /// Too few values yet.
    Gathering {
        /// Values of the source that has fewest.
        have: usize,
        /// Values that the shortest span needs.
        need: usize,
    },
    /// Looks are made and can say nothing.
    NotEnough {
        /// Why.
        why: String,
    },
    /// Nothing has arrived.
    Waiting,
}

impl Standing {
    /// Of this bank.
    pub fn of(view: &BankView) -> Self {
        apart(view)
            .or_else(|| silent(view))
            .unwrap_or_else(|| looked(view))
    }

    /// The word in the interface.
    pub fn key(&self) -> &'static str {
        match self {
            Self::Apart { kind, .. } => kind.word(),
            Self::Silent { .. } => "source_silent",
            Self::Even { .. } => "even",
            Self::Dependent => "dependent_data",
            Self::Gathering { .. } | Self::NotEnough { .. } => "not_enough_data",
            Self::Waiting => "waiting",
        }
    }

    /// The words people read.
    pub fn words(&self) -> &'static str {
        match self {
            Self::Apart { kind, .. } => kind.words(),
            Self::Silent { sources, .. } if sources.len() == 1 => "source silent",
            Self::Silent { .. } => "sources silent",
            Self::Even { .. } => "even",
            Self::Dependent => "dependent data",
            Self::Gathering { .. } | Self::NotEnough { .. } => "not enough data",
            Self::Waiting => "waiting",
        }
    }

    /// The shape.
    pub fn glyph(&self) -> Glyph {
        match self {
            Self::Apart {
                kind: Kind::SpreadApart,
                ..
            } => Glyph::Spread,
            Self::Apart { .. } => Glyph::Apart,
            Self::Silent { .. } => Glyph::Silent,
            Self::Even { .. } => Glyph::Even,
            Self::Dependent | Self::Gathering { .. } | Self::NotEnough { .. } | Self::Waiting => {
                Glyph::Unknown
            }
        }
    }

    /// Whether somebody should look here.
    pub fn asks(&self) -> bool {
        matches!(self, Self::Apart { .. } | Self::Silent { .. })
    }

    /// What is behind the word, in few words.
    pub fn detail(&self) -> String {
        match self {
            Self::Apart { named, .. } => few(named),
            Self::Silent { sources, .. } => {
                few(&sources.iter().map(ToString::to_string).collect::<Vec<_>>())
            }
            Self::Even { unseen: Some(_) } => "a past notice is not acknowledged".to_owned(),
            Self::Even { unseen: None } => String::new(),
            Self::Dependent => "successive values repeat each other too much to judge".to_owned(),
            Self::Gathering { have, need } => format!("{have} of {need} values per source so far"),
            Self::NotEnough { why } => why.clone(),
            Self::Waiting => "no measurement has arrived yet".to_owned(),
        }
    }
}

/// At most four, then how many more.
fn few(list: &[String]) -> String {
    const MOST: usize = 4;
    let shown = list
        .iter()
        .take(MOST)
        .cloned()
        .collect::<Vec<_>>()
        .join(", ");
    match list.len().saturating_sub(MOST) {
        0 => shown,
        more => format!("{shown} and {more} more"),
    }
}

fn is_apart(kind: Kind) -> bool {
    matches!(
        kind,
        Kind::LevelApart | Kind::SpreadApart | Kind::BankSplit | Kind::LevelBelowDeclared
    )
}

fn apart(view: &BankView) -> Option<Standing> {
    let active: Vec<_> = view
        .open
        .iter()
        .filter(|n| n.state.is_active() && is_apart(n.kind))
        .collect();
    let first = active.iter().min_by_key(|n| n.since.at)?;
    let what = &view.bank.characteristic;
    Some(Standing::Apart {
        kind: first.kind,
        named: active.iter().flat_map(|n| named(n, what)).collect(),
        since: first.since.at,
    })
}

/// The sources of a notice with their figures.
pub fn named(notice: &Notice, what: &Characteristic) -> Vec<String> {
    let one = |source: &crate::notice::NamedSource| match notice.kind {
        Kind::SpreadApart => {
            format!(
                "{} spread {}×",
                source.source,
                format::plain(source.deviation, 1)
            )
        }
        Kind::LevelApart | Kind::BankSplit => {
            format!(
                "{} {} {}",
                source.source,
                what.deviation(source.deviation),
                notice.unit
            )
        }
        _ => source.source.to_string(),
    };
    notice.sources.iter().map(one).collect()
}

fn silent(view: &BankView) -> Option<Standing> {
    let silent = || {
        view.sources
            .iter()
            .filter(|s| s.state == SourceState::Silent)
    };
    silent().next()?;
    Some(Standing::Silent {
        sources: silent().map(|s| s.name.clone()).collect(),
        since: silent().filter_map(|s| s.last_received).min(),
    })
}

fn looked(view: &BankView) -> Standing {
    let found = |wanted: Finding| view.looks.iter().any(|l| l.finding == wanted);
    let has_values = view.sources.iter().any(|s| s.values > 0);
    let can_say = |f: &Finding| *f != Finding::NotEnoughData && *f != Finding::DependentData;
    if view.looks.iter().any(|l| can_say(&l.finding)) {
        let over = |n: &&std::sync::Arc<Notice>| n.state == State::ReturnedUnacknowledged;
        let unseen = view.open.iter().find(over).map(|n| n.id.clone());
        return Standing::Even { unseen };
    }
    if found(Finding::DependentData) {
        return Standing::Dependent;
    }
    if !has_values {
        return Standing::Waiting;
    }
    let need = view.bank.spans.first().copied().unwrap_or(2);
    let have = view.sources.iter().map(|s| s.values).min().unwrap_or(0);
    match view.looks.iter().find(|l| !l.remark.is_empty()) {
        Some(look) if have >= need => Standing::NotEnough {
            why: look.remark.clone(),
        },
        _ => Standing::Gathering { have, need },
    }
}
