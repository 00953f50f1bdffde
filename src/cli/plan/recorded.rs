//! What a recording teaches of a bank: the engine itself learns from it, as in the daemon.

use crate::engine::{BankView, SourceState};
use crate::settings::Settings;
use crate::verdict::watch::{Figures, Progress};

use super::super::args::{PlanArgs, RehearseArgs};
use super::super::rehearse::{self, RehearseError};
use super::assumed::Assumed;

/// A recording that does not teach enough.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
#[error("{name} does not tell the noise of bank '{bank}': {why}; or give --sd and --cycle")]
pub struct TooShort {
    name: String,
    bank: String,
    why: String,
}

/// Runs the recording through the engine and asks what it knows then.
///
/// # Errors
/// When the recording cannot be read; inside, when it does not teach enough.
pub fn learn(
    args: &PlanArgs,
    settings: &Settings,
    at: usize,
) -> Result<Result<Assumed, TooShort>, RehearseError> {
    let recordings: Vec<_> = args.recording.iter().cloned().collect();
    let rehearsal = RehearseArgs {
        config: args.config.clone(),
        bank: Some(settings.banks[at].name.to_string()),
        json: false,
        fail_on_notice: false,
        time_column: None,
        source_column: None,
        value_column: None,
        cycle_column: None,
        recordings,
    };
    let view = rehearse::known_after(&rehearsal, settings, at)?;
    let name = rehearsal.recordings.first();
    let name = name.map_or_else(String::new, |file| file.display().to_string());
    Ok(of_view(&view, &name))
}

fn of_view(view: &BankView, name: &str) -> Result<Assumed, TooShort> {
    let too_short = |why: String| TooShort {
        name: name.to_owned(),
        bank: view.bank.name.to_string(),
        why,
    };
    let interval_us = view.interval_us.filter(|us| *us > 0);
    let interval_us =
        interval_us.ok_or_else(|| too_short("no source has two values in it".to_owned()))?;
    let (sd, own_sd, phi) = match &view.watch {
        Some(watch) => of_watch(view, &watch.progress, &watch.figures).map_err(too_short)?,
        None => of_looks(view).map_err(too_short)?,
    };
    let judged = |s: &SourceState| matches!(s, SourceState::Present | SourceState::Silent);
    Ok(Assumed {
        sources: view.sources.iter().filter(|s| judged(&s.state)).count(),
        sd,
        own_sd,
        phi: phi.max(0.0),
        interval_us,
        from: format!("learnt from {name}"),
    })
}

/// The sd, the sds of single sources, and the correlation.
type Noise = (f64, Vec<f64>, f64);

/// From the watch, once it has learnt.
fn of_watch(view: &BankView, progress: &Progress, figures: &Figures) -> Result<Noise, String> {
    match progress {
        Progress::Watching => {}
        Progress::Learning { cycles, needed } => {
            return Err(format!(
                "the watch learns from {needed} cycles and has seen {cycles}; give a longer recording"
            ));
        }
        Progress::Still => return Err("no source scatters in it".to_owned()),
        Progress::Alone => return Err("fewer than two sources are in it".to_owned()),
    }
    let sd = figures.sigma.filter(|sd| *sd > 0.0);
    let sd = sd.ok_or_else(|| "no source scatters in it".to_owned())?;
    let own = |source: crate::model::SourceIx| {
        let known = figures.own_sigma.iter().find(|(s, _)| *s == source);
        known.map_or(sd, |(_, own)| *own)
    };
    let own_sd = if figures.own_sigma.is_empty() {
        Vec::new()
    } else {
        view.sources.iter().map(|s| own(s.source)).collect()
    };
    Ok((sd, own_sd, figures.phi))
}

/// From the look over the longest span that found something to judge.
fn of_looks(view: &BankView) -> Result<Noise, String> {
    let judged = view.looks.iter().rev().find(|look| look.sigma > 0.0);
    let look = judged.ok_or_else(|| {
        let shortest = view.bank.spans.first().copied().unwrap_or(0);
        format!(
            "no look had {shortest} values of two sources that scatter; give a longer recording"
        )
    })?;
    Ok((
        look.sigma,
        Vec::new(),
        look.dependence.map_or(0.0, |d| d.phi),
    ))
}
