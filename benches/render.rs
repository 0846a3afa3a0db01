//! Speed of the forward model: a minute of 48 kHz audio with every effect, for which one second on one core is allowed.

use gaptone::firing::{EventKind, Firing};
use gaptone::model::receiver::{
    AgcSettings, Carrier, DetectorSettings, DropOuts, Hum, Programme, ReceiverSettings, RecorderSettings, Selectivity,
};
use gaptone::model::render::{RenderSettings, Renderer};

fn main() {
    divan::main();
}

const SECONDS: f64 = 60.0;

fn firings() -> Vec<Firing> {
    let at = |k: i32| (f64::from(k) + 0.02 * (2.3 * f64::from(k)).sin()) / 437.0;
    (0..(437.0 * SECONDS) as i32)
        .map(|k| Firing { time_s: at(k), voltage_v: 5000.0, kind: EventKind::Firing })
        .collect()
}

fn everything() -> ReceiverSettings {
    ReceiverSettings {
        noise: 0.05,
        carrier: Some(Carrier { amplitude: 0.7, offset_hz: 150.0, programme: Some(Programme::Speech { depth: 0.8 }) }),
        agc: Some(AgcSettings::default()),
        detector: DetectorSettings { charge_s: 1e-6, discharge_s: 50e-6, ..DetectorSettings::default() },
        hum: Some(Hum { amplitude: 0.2, frequency_hz: 50.0, buzz: 0.5 }),
        ..ReceiverSettings::default()
    }
}

fn render(bencher: divan::Bencher<'_, '_>, receiver: ReceiverSettings) {
    let firings = firings();
    let mut settings = RenderSettings::new(receiver, SECONDS, 5).for_firings(&firings);
    let drop_outs = Some(DropOuts { rate_hz: 0.5, length_s: 0.05 });
    settings.recorder = RecorderSettings { noise: 1e-3, bits: Some(12), drop_outs };
    bencher.bench(|| Renderer::new(&settings, firings.iter().copied()).map(|clip| clip.map(f64::from).sum::<f64>()));
}

#[divan::bench(sample_count = 3)]
fn a_minute_with_every_effect(bencher: divan::Bencher<'_, '_>) {
    render(bencher, everything());
}

#[divan::bench(sample_count = 3)]
fn a_minute_through_a_flat_channel(bencher: divan::Bencher<'_, '_>) {
    let selectivity = Selectivity::Flat { edge_percent: 30 };
    render(bencher, ReceiverSettings { selectivity, ..everything() });
}
