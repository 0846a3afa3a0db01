//! A whole clip: trains of firings, the receiver, and the truth about both.

use super::receiver::ReceiverError;
use super::render::{RenderSettings, Renderer};
use super::truth::{TrainTruth, Truth};
use crate::firing::{EventKind, Firing};

/// Longest stretch before time zero in which a gap that runs already is heard, s: longer than any audio low cut remembers.
const LEAD_IN_S: f64 = 0.25;

/// A clip ready to be rendered.
#[derive(Debug, Clone)]
pub struct Clip {
    /// Its samples.
    pub renderer: Renderer<std::vec::IntoIter<Firing>>,
    /// What it holds.
    pub truth: Truth,
}

impl Clip {
    /// Joins trains and receiver. Reference voltage and expected rate of the settings are set from the trains, of which the
    /// first has the largest clicks; a gap that was running at time zero is also heard before it, so that the clip does not
    /// start with a jolt.
    ///
    /// # Errors
    /// If a setting is out of range.
    pub fn new(settings: RenderSettings, trains: Vec<TrainTruth>) -> Result<Self, ReceiverError> {
        let mut settings = match trains.first() {
            Some(strongest) => settings.for_firings(&strongest.firings),
            None => settings,
        };
        settings.expected_rate_hz = trains.iter().filter_map(|train| train.realised.firing_rate_hz).sum();
        let mut firings: Vec<Firing> = Vec::new();
        for train in &trains {
            if !train.drawn.is_some_and(|drawn| drawn.switched_on) {
                firings.extend(lead_in(&train.firings));
            }
            firings.extend(&train.firings);
        }
        firings.sort_by(|a, b| a.time_s.total_cmp(&b.time_s));
        let renderer = Renderer::new(&settings, firings)?;
        let truth = Truth::new(settings, trains, renderer.delay_s(), renderer.click_full_scale());
        Ok(Self { renderer, truth })
    }
}

/// Firings before time zero of a gap that runs already: the beginning of the train mirrored at its first firing, which has
/// the statistics of a train that goes on. None for a train that starts later than within two of its periods.
#[must_use]
pub fn lead_in(firings: &[Firing]) -> Vec<Firing> {
    let mut regular = firings.iter().filter(|firing| firing.kind != EventKind::Extra);
    let (Some(first), Some(second)) = (regular.next(), regular.next()) else { return Vec::new() };
    let turn_s = first.time_s;
    if turn_s > 2.0 * (second.time_s - turn_s) {
        return Vec::new();
    }
    let mirrored = |firing: &Firing| Firing { time_s: 2.0 * turn_s - firing.time_s, ..*firing };
    let mut before: Vec<Firing> = firings
        .iter()
        .map(mirrored)
        .take_while(|firing| firing.time_s > -LEAD_IN_S)
        .filter(|firing| firing.time_s < 0.0)
        .collect();
    before.reverse();
    before
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::receiver::ReceiverSettings;

    fn train(start_s: f64, voltage_v: f64) -> Vec<Firing> {
        let at = |k: i32| start_s + 2e-3 * f64::from(k) + 1e-5 * f64::from(k * k % 7);
        (0..200).map(|k| Firing { time_s: at(k), voltage_v, kind: EventKind::Firing }).collect()
    }

    #[test]
    fn a_running_gap_is_heard_before_time_zero_with_its_own_periods() {
        let firings = train(1e-3, 5000.0);
        let before = lead_in(&firings);
        assert!(before.len() > 100 && before.windows(2).all(|pair| pair[0].time_s < pair[1].time_s));
        assert!(before[0].time_s > -LEAD_IN_S && before[before.len() - 1].time_s < 0.0);
        let gap = firings[0].time_s - before[before.len() - 1].time_s;
        assert!((gap - (firings[1].time_s - firings[0].time_s)).abs() < 1e-12);
        assert!(lead_in(&train(0.1, 5000.0)).is_empty(), "a gap that starts later was silent before");
        assert!(lead_in(&[]).is_empty());
    }

    #[test]
    fn the_truth_of_a_clip_tells_its_trains_and_survives_json() {
        let trains = vec![TrainTruth::of(train(1e-3, 5000.0), &[]), TrainTruth::of(train(1.5e-3, 2000.0), &[])];
        let clip = Clip::new(RenderSettings::new(ReceiverSettings::default(), 0.4, 9), trains).unwrap();
        assert_eq!(clip.truth.settings.reference_voltage_v, 5000.0);
        assert!((clip.truth.settings.expected_rate_hz - 1000.0).abs() < 20.0);
        let text = serde_json::to_string(&clip.truth).unwrap();
        let back: Truth = serde_json::from_str(&text).unwrap();
        assert!(back.trains[1].firings == clip.truth.trains[1].firings, "times survive to the last bit");
        assert_eq!(back.settings, clip.truth.settings);
        assert_eq!(clip.renderer.count(), 19_200);
    }
}
