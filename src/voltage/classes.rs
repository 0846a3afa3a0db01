//! Periods and their voltages in narrow classes: bounded memory, and still a choice at the end of what is good.

use std::collections::BTreeMap;

/// Relative width of a class.
const WIDTH: f64 = 1e-3;

/// Shortest and longest period that is kept, s: 100 kHz to a quarter of an hour. It bounds the number of classes to some
/// 18 000.
const RANGE_S: (f64, f64) = (1e-5, 1e3);

/// Sums over one class.
#[derive(Debug, Clone, Copy, Default)]
struct Class {
    count: f64,
    inverted: f64,
    period: f64,
    voltage: f64,
}

/// The periods of a recording.
#[derive(Debug, Clone, Default)]
pub(super) struct Classes {
    classes: BTreeMap<i32, Class>,
    total: f64,
}

/// The good periods.
#[derive(Debug, Clone, Copy, Default)]
pub(super) struct Kept {
    /// How many.
    pub count: f64,
    /// How many of them have a voltage.
    pub inverted: f64,
    /// Mean period of those, s.
    pub period_s: f64,
    /// Their mean voltage, V.
    pub voltage_v: f64,
}

fn class_of(period_s: f64) -> i32 {
    (period_s.clamp(RANGE_S.0, RANGE_S.1).ln() / WIDTH).floor() as i32
}

impl Classes {
    /// Adds a period and the voltage that it implies, if it implies one.
    pub fn add(&mut self, period_s: f64, voltage_v: Option<f64>) {
        self.total += 1.0;
        let class = self.classes.entry(class_of(period_s)).or_default();
        class.count += 1.0;
        if let Some(voltage_v) = voltage_v {
            class.inverted += 1.0;
            class.period += period_s;
            class.voltage += voltage_v;
        }
    }

    /// All periods, good or not.
    pub fn total(&self) -> f64 {
        self.total
    }

    /// The periods between two bounds, by whole classes.
    pub fn within(&self, low_s: f64, high_s: f64) -> Kept {
        let mut sum = Class::default();
        for class in self.classes.range(class_of(low_s)..=class_of(high_s)).map(|entry| entry.1) {
            sum.count += class.count;
            sum.inverted += class.inverted;
            sum.period += class.period;
            sum.voltage += class.voltage;
        }
        let n = sum.inverted;
        if n == 0.0 {
            return Kept { count: sum.count, ..Kept::default() };
        }
        Kept { count: sum.count, inverted: n, period_s: sum.period / n, voltage_v: sum.voltage / n }
    }
}
