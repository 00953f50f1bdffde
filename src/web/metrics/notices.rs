//! Figures of the daemon's own notices, of the call budgets, and of the sources' clocks.

use prometheus::Registry;

use crate::engine::{Load, Snapshot};
use crate::model::{Time, US_PER_S};

use super::{MetricsError, figures, gauge, gauges, whole};

/// Registers and fills them.
pub(super) fn fill(r: &Registry, snapshot: &Snapshot, now: Time) -> Result<(), MetricsError> {
    let load = Load::of(snapshot.banks.iter().map(AsRef::as_ref), now);
    for (name, help, count) in [
        ("evenrow_notices_last_day", LAST_DAY, load.last_day),
        ("evenrow_notices_recent", LAST_TEN, load.last_ten_minutes),
        ("evenrow_notices_chattering", CHATTERING, load.chattering),
        ("evenrow_notices_standing", STANDING, load.standing),
        ("evenrow_notices_stale", STALE, load.stale),
        ("evenrow_notices_shelved", SHELVED, load.shelved),
    ] {
        gauge(r, name, help)?.set(whole(count));
    }
    fill_budgets(r, snapshot)?;
    let lag = figures(r, "evenrow_source_lag_seconds", LAG, &["bank", "source"])?;
    for view in &snapshot.banks {
        for source in &view.sources {
            if let Some(us) = source.lag_us {
                let labels = [&*view.bank.name, &*source.name];
                lag.with_label_values(&labels)
                    .set(us as f64 / US_PER_S as f64);
            }
        }
    }
    Ok(())
}

fn fill_budgets(r: &Registry, snapshot: &Snapshot) -> Result<(), MetricsError> {
    let calls = gauges(
        r,
        "evenrow_budget_calls",
        BUDGET_CALLS,
        &["bank", "outcome"],
    )?;
    let allowed = figures(r, "evenrow_budget_allowed_calls", ALLOWED, &["bank"])?;
    let low = figures(r, "evenrow_budget_lower_limit_calls", LOWER, &["bank"])?;
    for view in &snapshot.banks {
        let Some(kept) = &view.kept else {
            continue;
        };
        let bank = &*view.bank.name;
        let found = kept.told.saturating_sub(kept.nothing_found);
        let untold = kept.calls.saturating_sub(kept.told);
        for (outcome, count) in [
            ("nothing_found", kept.nothing_found),
            ("something_found", found),
            ("not_told", untold),
        ] {
            let count = i64::try_from(count).unwrap_or(i64::MAX);
            calls.with_label_values(&[bank, outcome]).set(count);
        }
        allowed.with_label_values(&[bank]).set(kept.allowed);
        low.with_label_values(&[bank]).set(kept.low);
    }
    Ok(())
}

const LAST_DAY: &str = "Notices raised in the last 24 hours. Published guidance (ISA-18.2, EEMUA 191): \
    a person handles at most about 150 a day.";
const LAST_TEN: &str = "Notices raised in the last ten minutes. Published guidance: one is the most that \
    a person handles, ten are a flood.";
const CHATTERING: &str =
    "Kinds of notices of a bank that were raised three times or more in the last hour.";
const STANDING: &str = "Notices whose condition holds, whoever has set them aside.";
const STALE: &str = "Notices whose condition holds and that were raised more than 24 hours ago.";
const SHELVED: &str = "Notices that a person has shelved or taken out of service.";
const BUDGET_CALLS: &str = "Calls of a bank by what people said came of them. nothing_found counts \
    against its call budget.";
const ALLOWED: &str = "False calls that the call budget allows in the time watched so far.";
const LOWER: &str = "Lower one-sided 95 % Poisson limit of the false calls to be expected in the time \
    watched; above evenrow_budget_allowed_calls the budget is surely exceeded.";
const LAG: &str = "Received minus taken, the median of a source's newest values; negative where its \
    clock is ahead.";
