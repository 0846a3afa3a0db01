//! The mains in a recording: in the firing, where the supply's ripple pulls or holds the gap, and in the audio, as hum.

use crate::evidence::Spectrum;
use crate::rhythm::{Reading, locked_to};

/// Frequencies of mains, Hz.
const MAINS_HZ: [f64; 2] = [50.0, 60.0];
/// Multiples that are looked at.
const MULTIPLES: u32 = 8;
/// How far a mains line may be from its nominal frequency, relative, and beside that, in lines that the spectrum tells apart.
const OFF: (f64, f64) = (2e-3, 0.8);
/// A line this near to a multiple of the rate is the gap's own, relative and in lines.
const OWN: (f64, f64) = (0.012, 2.0);

/// The ripple line (Hz) that shows in the firing: a part of the jitter keeps step with it, or the rate sits on it.
pub(super) fn in_the_firing(reading: &Reading) -> Option<f64> {
    let pulled = reading.mains_locked_jitter_s.map(|mains| mains.frequency_hz);
    pulled.or_else(|| {
        let (rate, period, jitter) = (reading.firing_rate_hz?, reading.period_s?, reading.period_jitter_s?);
        locked_to(rate.value, jitter.value / period.value)
    })
}

/// The mains frequency (Hz) whose lines stand in the audio, and those lines: frequency in Hz, level in dB. `stands_out` tells of
/// a line whether it rises from what is beside it.
pub(super) fn in_the_audio(
    spectrum: &Spectrum,
    rate_hz: Option<f64>,
    stands_out: impl Fn((f64, f64)) -> bool,
) -> Option<(f64, Vec<(f64, f64)>)> {
    let own = |at_hz: f64| {
        rate_hz.is_some_and(|rate_hz| {
            let off_hz = (at_hz - rate_hz * (at_hz / rate_hz).round()).abs();
            off_hz < (OWN.0 * at_hz).max(OWN.1 * spectrum.resolution_hz)
        })
    };
    let lines = |mains_hz: f64| -> Vec<(f64, f64)> {
        let at = (1..=MULTIPLES).map(|k| f64::from(k) * mains_hz).filter(|at_hz| !own(*at_hz));
        at.filter_map(|at_hz| {
            let within_hz = OFF.0 * at_hz + OFF.1 * spectrum.resolution_hz;
            let near = spectrum.peaks.iter().filter(|peak| (peak.0 - at_hz).abs() < within_hz);
            near.max_by(|a, b| a.1.total_cmp(&b.1)).copied()
        })
        .filter(|line| stands_out(*line))
        .collect()
    };
    let found = MAINS_HZ.map(|mains_hz| (mains_hz, lines(mains_hz)));
    let (mains_hz, lines) = found.into_iter().max_by_key(|(_, lines)| lines.len())?;
    // One line alone may be anything, unless it is the first or the second.
    let low = lines.first().is_some_and(|line| line.0 < 2.5 * mains_hz);
    (lines.len() > 1 || low).then_some((mains_hz, lines))
}
