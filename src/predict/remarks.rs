//! What changes along a range of supply settings.

use super::Prediction;
use super::notes::{clicks_overlap_hz, pitch_lost_jitter};
use super::ripple::Locks;
use crate::bench::{Bench, si};

/// Remarks on a range of settings from low to high.
pub(super) fn remarks(bench: &Bench, settings: &[Prediction], locks: &Locks) -> Vec<String> {
    let mut said = Vec::new();
    let volts = |setting: &Prediction| si(setting.supply_v.unwrap_or(0.0), "V", 4);
    let firing = |setting: &&Prediction| setting.fires == Some(true);
    if settings.iter().any(|setting| setting.fires == Some(false))
        && let Some(least_v) = settings.iter().find_map(|setting| setting.least_supply_v)
    {
        said.push(format!("it stops firing below {}", si(least_v, "V", 4)));
    }
    let rate = |setting: &Prediction| setting.firing_rate_hz.map_or(0.0, |rate| rate.value);
    if let Some(first) = settings.iter().filter(firing).find(|setting| rate(setting) > clicks_overlap_hz(bench)) {
        said.push(format!(
            "from {} on ({}) clicks overlap in this receiver: single clicks are lost there, the tone is not",
            volts(first),
            si(rate(first), "/s", 3)
        ));
    }
    let lost = |setting: &&Prediction| {
        let share = setting.period_jitter_s.zip(setting.period_s).map(|(jitter, period)| jitter.value / period.value);
        share.is_some_and(|share| share > pitch_lost_jitter())
    };
    let count = settings.iter().filter(firing).filter(lost).count();
    if count > 0 {
        let last = settings.iter().filter(firing).rfind(lost).map(volts).unwrap_or_default();
        let first = settings.iter().filter(firing).find(lost).map(volts).unwrap_or_default();
        said.push(format!(
            "from {first} to {last} the jitter is so large that no pitch is left ({count} of the settings)"
        ));
    }
    for lock in locks.values().flatten() {
        said.push(format!(
            "the ripple locks it at {} between {} and {}",
            si(lock.firing_rate_hz, "/s", 5),
            si(lock.low_supply_v, "V", 4),
            si(lock.high_supply_v, "V", 4)
        ));
    }
    let patterns =
        settings.iter().filter_map(|setting| setting.ripple.as_ref()?.locked).filter(|lock| lock.firings > 1);
    let patterns = patterns.count();
    if patterns > 0 {
        said.push(format!(
            "locked in a pattern of several firings (firings:ripple periods in the table): {patterns} of the settings; at one \
             setting predict tells how far such a lock reaches"
        ));
    }
    said
}
