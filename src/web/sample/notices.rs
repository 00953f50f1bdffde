//! Notices that fit a story.

use std::sync::Arc;

use crate::engine::BankView;
use crate::model::{Bank, Name, US_PER_S};
use crate::notice::{
    Acknowledgement, Handling, Happening, Kind, NamedSource, Notice, Priority, Since, State,
};
use crate::verdict::{Finding, Look};

use super::{Story, moment};

/// The notice of a story.
pub fn notice(bank: &Bank, names: &[Name], story: Story, looks: &[Arc<Look>]) -> Option<Notice> {
    let (kind, at, figure, half, minutes) = match story {
        Story::Level(at, by, minutes) => (Kind::LevelApart, at, by, 0.24 * by.abs(), minutes),
        Story::Spread(at, by) => (Kind::SpreadApart, at, by, 0.4, 12),
        _ => return None,
    };
    let finding = if kind == Kind::LevelApart {
        Finding::LevelApart
    } else {
        Finding::SpreadApart
    };
    let span = looks
        .iter()
        .find(|l| l.finding == finding)
        .map_or(40, |l| l.span);
    let name = names.get(at)?;
    let since = moment().plus_us(-minutes * 60 * US_PER_S);
    let unit = bank.characteristic.unit.clone();
    let (word, than, todo) = if figure < 0.0 {
        ("low", "less", "Raise")
    } else {
        ("high", "more", "Lower")
    };
    let (subject, text, advice) = if kind == Kind::LevelApart {
        (
            format!("{}: {name} {word} by {:.2} {unit}", bank.name, figure.abs()),
            format!(
                "Source {name} of {} gives {:.2} {unit} {than} than the other sources. The margin is {} {unit}. \
                 The bank’s mean is 503.03 {unit}, target 503.0 {unit}, declared 500.0 {unit}.",
                bank.name,
                figure.abs(),
                bank.margin
            ),
            format!(
                "{todo} {name} by about {:.2} {unit}, then watch whether it comes back.",
                figure.abs()
            ),
        )
    } else {
        (
            format!("{}: {name} scatters {figure:.1} times as much", bank.name),
            format!(
                "The values of source {name} scatter {figure:.1} times as much as those of the others. Its mean has not moved."
            ),
            format!("Check {name} for play, dirt or a loose sensor before adjusting its level."),
        )
    };
    let mut notice = Notice {
        id: format!("{}-2026-0007", bank.name.replace(' ', "-")).into(),
        plant: "Quayside".into(),
        bank: bank.name.clone(),
        kind,
        state: State::Normal,
        priority: Priority::Medium,
        sources: vec![NamedSource {
            source: name.clone(),
            deviation: figure,
            low: figure - half,
            high: figure + half,
        }],
        unit,
        since: Since {
            at: since,
            earliest: since.plus_us(-70 * US_PER_S),
            latest: since.plus_us(40 * US_PER_S),
        },
        raised: since.plus_us(65 * US_PER_S),
        changed: since.plus_us(65 * US_PER_S),
        returned: None,
        acknowledged: None,
        subject,
        text,
        advice,
        url: format!("http://127.0.0.1:7310/banks/{}", bank.name),
        span,
        handling: Handling::default(),
        pattern: None,
        slip: None,
        common_movement: None,
        even_mean: None,
        cost_per_hour: None,
        adjustment: None,
    };
    notice.happen(Happening::Occurs, since.plus_us(65 * US_PER_S));
    Some(notice)
}

/// Past notices of the first bank, newest first.
pub fn past_notices(view: &BankView) -> Vec<Notice> {
    let template = view.open.first().expect("the first bank has a notice");
    let past = |number: u32, hours: i64, source: &str, by: f64| {
        let start = moment().plus_us(-hours * 3600 * US_PER_S);
        Notice {
            handling: Handling::default(),
            id: format!("{}-2026-{number:04}", view.bank.name).into(),
            state: State::Normal,
            sources: vec![NamedSource {
                source: source.into(),
                deviation: by,
                low: by - 0.3,
                high: by + 0.3,
            }],
            since: Since {
                at: start,
                earliest: start,
                latest: start,
            },
            raised: start.plus_us(90 * US_PER_S),
            changed: start.plus_us(2400 * US_PER_S),
            returned: Some(start.plus_us(2400 * US_PER_S)),
            acknowledged: Some(Acknowledgement {
                by: "R. Almeida".into(),
                at: start.plus_us(300 * US_PER_S),
                comment: "valve cleaned".into(),
            }),
            subject: format!("{}: {source} high by {by:.2} g", view.bank.name),
            ..Notice::clone(template)
        }
    };
    vec![past(6, 3, "03", 1.31), past(5, 26, "11", 1.12)]
}
