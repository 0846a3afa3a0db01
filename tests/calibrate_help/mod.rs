//! Sweeps of five recordings with hidden parameters: simulated firings, with the reading that a perfect analyzer would give.
#![allow(dead_code, reason = "each test program uses a part")]

use gaptone::bench::{Bench, Quantity, Tolerance};
use gaptone::calibrate::{Calibration, Known, NoCalibration, Options, Setting, calibrate};
use gaptone::estimate::Estimate;
use gaptone::model::charging::Circuit;
use gaptone::model::firings::{Faults, GapLaw, Plan, Rhythm, Start, Train, simulate};
use gaptone::model::random::Random;

/// What is wrong with one setting of a sweep.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Fault {
    None,
    /// Ripple holds the gap at the mains.
    Locked,
    /// The supply gives less current than the highest setting asks for.
    CurrentLimit,
    /// The label is 4 % to 15 % off.
    Mislabelled,
}

/// Standard uncertainty of a supply reading, relative.
pub const READING_U: f64 = 0.003;

/// One sweep.
pub struct Sweep {
    pub tau_s: f64,
    pub gap_v: f64,
    pub settings: Vec<Setting>,
    /// The faulty one.
    pub faulty: Option<usize>,
}

/// The hidden parameters of a sweep.
pub struct Hidden {
    pub bench: Bench,
    pub tau_s: f64,
    pub gap_v: f64,
    pub spread: f64,
    pub supplies_v: Vec<f64>,
    pub duration_s: f64,
}

impl Hidden {
    /// Five supplies from 1.1..1.3 to 1.7..2.4 times the gap voltage; rates of 30/s to 400/s in the middle.
    pub fn drawn(random: &mut Random) -> Self {
        let gap_v = 3e3 * 4f64.powf(random.uniform());
        let spread = 0.005 * 8f64.powf(random.uniform());
        // Four standard deviations below the lowest supply, or the gap does not fire steadily there.
        let lowest = 1.1 + 0.2 * random.uniform() + 2.5 * spread;
        let highest = 1.7 + 0.7 * random.uniform();
        let supplies_v: Vec<f64> = (0..5)
            .map(|i| gap_v * (lowest + (highest - lowest) * (f64::from(i) + 0.3 * (random.uniform() - 0.5)) / 4.0))
            .collect();
        let middle = supplies_v[2] / gap_v;
        let rate_hz = 30.0 * 13f64.powf(random.uniform());
        let tau_s = 1.0 / (rate_hz * (middle / (middle - 1.0)).ln());
        let capacitance_f = 2e-9;
        let mut bench = Bench::default();
        bench.charging.resistance = Some(Quantity::exact(tau_s / capacitance_f));
        bench.charging.capacitance = Some(Quantity::exact(capacitance_f));
        Self { bench, tau_s, gap_v, spread, supplies_v, duration_s: 5.0 + 5.0 * random.uniform() }
    }

    pub fn circuit(&self, supply_v: f64) -> Circuit {
        Circuit::from_bench(&self.bench, Some(Quantity::exact(supply_v))).expect("a circuit")
    }

    pub fn gap(&self) -> GapLaw {
        GapLaw { spread: self.spread, ..GapLaw::steady(self.gap_v) }
    }

    fn train(&self, bench: &Bench, supply_v: f64, seed: u64) -> Train {
        let circuit = Circuit::from_bench(bench, Some(Quantity::exact(supply_v))).expect("a circuit");
        let rhythm = Rhythm::Bench { circuit, gap: self.gap() };
        let plan = Plan { rhythm, faults: Faults::none(), start: Start::Running, duration_s: self.duration_s, seed };
        simulate(&plan).expect("it fires")
    }
}

/// A supply as its meter is read: with its own random error.
pub fn reading(supply_v: f64, random: &mut Random) -> Quantity {
    let value = supply_v * (1.0 + READING_U * random.normal());
    Quantity { value, tolerance: Tolerance::Standard(READING_U * value) }
}

/// The setting of a train, as a perfect analyzer gives it.
fn setting(train: &Train, supply: Quantity) -> Setting {
    let realised = &train.realised;
    let period_s = realised.period_s.expect("a period");
    let scatter_s = realised.period_jitter_s.expect("a jitter");
    let u = (scatter_s / (realised.firings as f64).sqrt()).max(1e-7 * period_s);
    let period = Estimate::normal(period_s, u);
    Setting {
        name: format!("{:.0} V", supply.value),
        supply,
        firing_rate_hz: Some(period.reciprocal()),
        period,
        scatter_s,
        size: None,
        left_out: None,
    }
}

impl Sweep {
    /// A sweep with hidden parameters.
    pub fn drawn(number: u64, fault: Fault) -> Self {
        let mut random = Random::stream(number, 4711);
        let mut hidden = Hidden::drawn(&mut random);
        let faulty = match fault {
            Fault::None => None,
            Fault::CurrentLimit => Some(4),
            _ => Some(((5.0 * random.uniform()) as usize).min(4)),
        };
        let mut ripple = 0.03;
        if let (Fault::Locked, Some(place)) = (fault, faulty) {
            ripple = hidden.lock(place, number * 8 + place as u64);
        }
        let settings = (0..5)
            .map(|i| {
                let mut bench = hidden.bench.clone();
                let supply_v = hidden.supplies_v[i];
                let mut read = reading(supply_v, &mut random);
                match fault {
                    _ if faulty != Some(i) => {}
                    Fault::Mislabelled => {
                        let sign = if random.uniform() < 0.5 { -1.0 } else { 1.0 };
                        read.value *= 1.0 + sign * (0.04 + 0.11 * random.uniform());
                    }
                    Fault::CurrentLimit => {
                        // Charging begins with V/R; the supply gives 35 % to 75 % of it.
                        let share = 0.35 + 0.4 * random.uniform();
                        let resistance = bench.charging.resistance.expect("a resistance").value;
                        bench.supply.current_limit = Some(Quantity::exact(share * supply_v / resistance));
                    }
                    Fault::Locked => {
                        Hidden::ripple(&mut bench, ripple);
                    }
                    Fault::None => {}
                }
                setting(&hidden.train(&bench, supply_v, number * 8 + i as u64), read)
            })
            .collect();
        Self { tau_s: hidden.tau_s, gap_v: hidden.gap_v, settings, faulty }
    }

    pub fn calibrated(&self) -> Result<Calibration, NoCalibration> {
        calibrate(&self.settings, &Known::default(), Options::default())
    }
}

impl Hidden {
    pub fn ripple(bench: &mut Bench, fraction: f64) {
        bench.supply.ripple = Some(Quantity::exact(fraction));
        bench.supply.ripple_frequency = Some(Quantity::exact(100.0));
    }

    /// Scales the time constant so that one setting would run at 100/s, makes the gap as quiet as they come, and gives the
    /// ripple that holds it there.
    pub fn lock(&mut self, place: usize, seed: u64) -> f64 {
        self.spread = 0.005;
        let supply_v = self.supplies_v[place];
        let factor = 0.01 / self.circuit(supply_v).period_s(self.gap_v).expect("it fires");
        self.tau_s *= factor;
        let resistance = self.bench.charging.resistance.expect("a resistance").value;
        self.bench.charging.resistance = Some(Quantity::exact(resistance * factor));
        let held = |fraction: f64| {
            let mut bench = self.bench.clone();
            Self::ripple(&mut bench, fraction);
            let rate_hz = self.train(&bench, supply_v, seed).realised.firing_rate_hz.expect("a rate");
            (rate_hz / 100.0 - 1.0).abs() < 1e-4
        };
        [0.01, 0.02, 0.03, 0.04, 0.05, 0.06, 0.08].into_iter().find(|ripple| held(*ripple)).unwrap_or(0.1)
    }
}

/// What came out of many sweeps.
#[derive(Debug, Default)]
pub struct Tally {
    pub sweeps: usize,
    pub refused: usize,
    pub flagged: usize,
    /// Sweeps in which a setting without a fault was left out.
    pub wronged: usize,
    pub time_constant_errors: Vec<f64>,
    pub gap_voltage_errors: Vec<f64>,
    pub time_constant_covered: usize,
    pub gap_voltage_covered: usize,
}

fn median(values: &[f64]) -> f64 {
    let mut sorted = values.to_vec();
    sorted.sort_by(f64::total_cmp);
    sorted.get(sorted.len() / 2).copied().unwrap_or(f64::NAN)
}

impl Tally {
    pub fn of(sweeps: impl Iterator<Item = Sweep>) -> Self {
        let mut tally = Self::default();
        for sweep in sweeps {
            let found = sweep.calibrated();
            tally.add(&sweep, &found);
        }
        tally
    }

    pub fn add(&mut self, sweep: &Sweep, found: &Result<Calibration, NoCalibration>) {
        self.sweeps += 1;
        let Ok(found) = found else {
            self.refused += 1;
            // A refusal says that something is wrong, though not what.
            return;
        };
        let out = |i: usize| found.settings[i].left_out.is_some();
        let named = |i: usize| found.notes.iter().any(|note| note.contains(&sweep.settings[i].name));
        self.flagged += usize::from(sweep.faulty.is_some_and(|i| out(i) || named(i)));
        self.wronged += usize::from((0..found.settings.len()).any(|i| Some(i) != sweep.faulty && out(i)));
        let within = |estimate: Estimate, truth: f64| usize::from((estimate.low..=estimate.high).contains(&truth));
        self.time_constant_errors.push((found.time_constant_s.value / sweep.tau_s - 1.0).abs());
        self.gap_voltage_errors.push((found.gap_voltage_v.value / sweep.gap_v - 1.0).abs());
        self.time_constant_covered += within(found.time_constant_s, sweep.tau_s);
        self.gap_voltage_covered += within(found.gap_voltage_v, sweep.gap_v);
    }

    pub fn median_time_constant(&self) -> f64 {
        median(&self.time_constant_errors)
    }

    pub fn median_gap_voltage(&self) -> f64 {
        median(&self.gap_voltage_errors)
    }

    pub fn summary(&self) -> String {
        let share = |n: usize| 100.0 * n as f64 / self.sweeps as f64;
        format!(
            "{} sweeps, {} refused; median error of the time constant {:.2} %, of the gap voltage {:.2} %; intervals cover {:.1} % \
             and {:.1} %; faulty setting flagged in {:.1} %, a sound one left out in {:.1} %",
            self.sweeps,
            self.refused,
            100.0 * self.median_time_constant(),
            100.0 * self.median_gap_voltage(),
            share(self.time_constant_covered),
            share(self.gap_voltage_covered),
            share(self.flagged),
            share(self.wronged)
        )
    }
}
