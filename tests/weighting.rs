//! The weighting detectors against the pulse response of CISPR 16-1-1.
//!
//! The tables of the standard are from memory, and the column beside each row was computed elsewhere from the theoretical
//! receiver of its informative annex.

use gaptone::model::receiver::{Band, Instrument, QuasiPeak, Weighting, reading};

/// How far the library may lie from the independently computed curve, dB.
const CURVE_DB: f64 = 0.15;

fn db(ratio: f64) -> f64 {
    20.0 * ratio.log10()
}

/// A row: repetition rate in Hz (none: one pulse alone), level in dB of the standard, its tolerance, and the computed level.
type Row = (Option<f64>, f64, f64, f64);

fn rows_hold(band: Band, reference_hz: f64, rows: &[Row]) {
    let reference = reading(band, Weighting::QuasiPeak, Some(reference_hz));
    for &(rate_hz, level_db, tolerance_db, computed_db) in rows {
        let got = db(reference / reading(band, Weighting::QuasiPeak, rate_hz));
        eprintln!("{band:?} {rate_hz:?}: {got:.2} dB, standard {level_db} +- {tolerance_db}, computed {computed_db}");
        assert!((got - level_db).abs() <= tolerance_db, "{band:?} {rate_hz:?}: {got} dB");
        assert!((got - computed_db).abs() <= CURVE_DB, "{band:?} {rate_hz:?}: {got} dB against {computed_db}");
    }
}

// CISPR 16-1-1, pulse response of the quasi-peak receiver, band A (9 to 150 kHz), relative to 25 Hz (from memory).
#[test]
fn band_a_needs_the_levels_of_the_standard_for_equal_readings() {
    let rows = [
        (Some(100.0), -4.0, 1.0, -3.41),
        (Some(60.0), -3.0, 1.0, -2.66),
        (Some(10.0), 4.0, 1.0, 3.85),
        (Some(5.0), 7.5, 1.5, 7.56),
        (Some(2.0), 13.0, 2.0, 13.17),
        (Some(1.0), 17.0, 2.0, 16.75),
        // The outside column has 19.06 here; a second outside computation (Euler's rule at 20 µs) gave 18.59.
        (None, 19.0, 2.0, 18.59),
    ];
    rows_hold(Band::A, 25.0, &rows);
}

// Band B (0.15 to 30 MHz), relative to 100 Hz (from memory).
#[test]
fn band_b_needs_the_levels_of_the_standard_for_equal_readings() {
    let rows = [
        (Some(1000.0), -4.5, 1.0, -4.22),
        (Some(20.0), 6.5, 1.0, 6.40),
        (Some(10.0), 10.0, 1.5, 10.33),
        (Some(2.0), 20.5, 2.0, 20.92),
        (Some(1.0), 22.5, 2.0, 23.25),
        (None, 23.5, 2.0, 23.57),
    ];
    rows_hold(Band::B, 100.0, &rows);
}

// Bands C and D (30 to 1000 MHz), relative to 100 Hz (from memory). The wide band takes many steps, so not every row is run.
#[test]
fn bands_c_and_d_need_the_levels_of_the_standard_for_equal_readings() {
    rows_hold(
        Band::C,
        100.0,
        &[(Some(1000.0), -8.0, 1.0, -7.27), (Some(20.0), 9.0, 1.0, 9.38), (None, 31.5, 2.0, 31.90)],
    );
}

// A pulse of 13.5 µVs at 25 Hz (A) and 0.316 µVs at 100 Hz (B), both e.m.f., must read like a sine of 2 mV rms e.m.f.,
// 66 dBµV ± 1.5 dB (from memory). The peak of a pulse of area G reads like a sine of √2·G·Bimp rms.
#[test]
fn the_calibration_pulses_read_like_a_sine_of_66_dbuv() {
    /// Impulse bandwidth of two critically coupled pairs over their 6 dB bandwidth.
    const IMPULSE: f64 = 1.04817;
    for (band, area_vs, rate_hz, computed_db) in [(Band::A, 13.5e-6, 25.0, 65.80), (Band::B, 0.316e-6, 100.0, 66.40)] {
        let peak_db = db(2f64.sqrt() * area_vs * IMPULSE * band.bandwidth_hz() / 1e-6);
        let got = peak_db + db(reading(band, Weighting::QuasiPeak, Some(rate_hz)));
        eprintln!("{band:?}: {got:.2} dBuV");
        assert!((got - 66.0).abs() <= 1.5, "{band:?}: {got} dBµV");
        assert!((got - computed_db).abs() < CURVE_DB, "{band:?}: {got} against {computed_db}");
    }
}

// Published differences (from memory): quasi-peak less average 12.4 dB (A at 25 Hz) and 32.9 dB (B at 100 Hz), with an average
// of √2·area·rate. The envelope detector does not take the ringing tail as negative: its mean is ∫|A| = 1.133·∫A (evaluated
// numerically elsewhere), 1.08 dB more.
#[test]
fn the_average_reading_is_as_far_below_peak_and_quasi_peak_as_published_but_for_the_ringing_tail() {
    const RINGING_DB: f64 = 1.085;
    for (band, rate_hz, published_db, bimp_hz) in [(Band::A, 25.0, 12.4, 209.63), (Band::B, 100.0, 32.9, 9433.5)] {
        let average = reading(band, Weighting::Average, Some(rate_hz));
        let quasi_peak = reading(band, Weighting::QuasiPeak, Some(rate_hz));
        let difference = db(quasi_peak / average);
        eprintln!("{band:?}: quasi-peak less average {difference:.2} dB");
        // The published figures are those of a reading of 66 dBµV sharp; the theoretical receiver is 0.4 dB above in band B.
        assert!((difference + RINGING_DB - published_db).abs() < 0.6, "{band:?}: {difference} dB");
        let below_peak = db(1.0 / average) + RINGING_DB;
        assert!((below_peak - db(bimp_hz / rate_hz)).abs() < 0.1, "{band:?}: {below_peak} dB");
        assert!(quasi_peak <= 1.0);
        assert!((reading(band, Weighting::Peak, Some(rate_hz)) - 1.0).abs() < 1e-3);
    }
}

#[test]
fn twice_the_rate_raises_quasi_peak_by_one_to_two_decibel_average_by_six_and_peak_by_none() {
    let raise = |weighting| db(reading(Band::B, weighting, Some(200.0)) / reading(Band::B, weighting, Some(100.0)));
    let quasi_peak = raise(Weighting::QuasiPeak);
    assert!((1.0..2.0).contains(&quasi_peak), "{quasi_peak}");
    let average = raise(Weighting::Average);
    assert!((average - 6.02).abs() < 0.05, "{average}");
    assert!(raise(Weighting::Peak).abs() < 0.01);
}

// The definition of the charge time constant: a sine applied suddenly reaches 63 % of its final voltage.
#[test]
fn a_sudden_sine_reaches_63_percent_in_the_charge_time_and_falls_with_the_discharge_time() {
    for band in [Band::A, Band::B, Band::C] {
        let step_s = band.charge_s() / 2000.0;
        let mut detector = QuasiPeak::new(band, step_s);
        // The first step is half: the envelope comes along a straight line.
        let at_charge = (0..2000).map(|_| detector.step(1.0)).last().unwrap();
        assert!((at_charge - (1.0 - (-1f64).exp())).abs() < 2e-3, "{band:?}: {at_charge}");
        let steady = (0..200_000).map(|_| detector.step(1.0)).last().unwrap();
        assert!((steady - 1.0).abs() < 1e-6, "{band:?}: {steady}");
        let steps = (band.discharge_s() / step_s).round() as usize;
        let after = (0..=steps).map(|_| detector.step(0.0)).last().unwrap();
        assert!((after - (-1f64).exp()).abs() < 1e-3, "{band:?}: {after}");
    }
}

#[test]
fn a_steady_tone_reads_the_same_with_every_weighting() {
    let step_s = 1e-5;
    let (mut detector, mut behind, mut average) =
        (QuasiPeak::new(Band::B, step_s), Instrument::new(Band::B, step_s), Instrument::new(Band::B, step_s));
    let (mut quasi_peak, mut mean) = (0.0, 0.0);
    for _ in 0..500_000 {
        quasi_peak = behind.step(detector.step(0.37));
        mean = average.step(0.37);
    }
    assert!((quasi_peak - 0.37).abs() < 1e-6 && (mean - 0.37).abs() < 1e-9, "{quasi_peak} {mean}");
}
