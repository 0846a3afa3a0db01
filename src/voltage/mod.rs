//! From periods to the gap voltage, with an uncertainty budget.
//!
//! Every good single period is inverted through the charging law as it comes, and the mean is taken of the voltages, not
//! of the periods: the voltage is a bent function of the period. Measured periods are x_k = T_k + e_k − e_(k−1) with
//! timing errors e, so the mean of V(x_k) is off by V''·σ_e², which is taken out. The spread follows from the gap's own
//! jitter (timing noise removed by the reading) through the slope of the law, averaged over a normal gap of that jitter. Uncertainties go by the law of
//! propagation (JCGM 100, 5.1.2) over the tolerances of the bench and the statistics; the coverage interval comes from
//! propagating the distributions themselves (JCGM 101), since a limit of error is rectangular.
//!
//! Units: s, V. Memory is bounded: periods are kept in classes of 0.1 %.

mod budget;
mod classes;
mod notes;
mod scatter;
mod shape;

use crate::bench::{Bench, Quantity};
use crate::estimate::{COVERAGE_95, Estimate};
use crate::firing::{Event, EventKind};
use crate::model::breakdown::implied_spacing;
use crate::model::charging::{Circuit, MissingPart};
use crate::rhythm::{Reading, Verdict};
use crate::uncertainty::Budget;
use budget::Sources;
use classes::{Classes, Kept};
use scatter::Scatter;
use shape::{NormalGap, normal_gap};

/// Periods further from the mean than this many standard deviations do not enter: a double step or an extra strike taken
/// for a firing would weigh more than hundreds of good ones.
const FARTHEST_SD: f64 = 6.0;

/// Least half width of the band of good periods, relative; a clock without scatter must not lose its periods.
const LEAST_BAND: f64 = 0.01;

/// Fewest single periods whose voltages are averaged; below, the mean comes from the reading's figures alone.
const FEWEST_PERIODS: f64 = 10.0;

/// The gap voltage of a recording.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct VoltageResult {
    /// Mean voltage across the gap at breakdown, V.
    pub gap_voltage_v: Option<Estimate>,
    /// Its standard deviation from firing to firing, V; a drift over the recording is in it, mains ripple is not.
    pub gap_voltage_spread_v: Option<Estimate>,
    /// What the uncertainty consists of: first that of the mean, then, if they were asked for, those of the spread and of the
    /// spacing that the voltage implies. Empty without a voltage.
    pub budgets: Vec<Budget>,
    /// What a person should know about it.
    pub notes: Vec<String>,
}

/// Collects the periods of one recording and turns them into a gap voltage.
#[derive(Debug, Clone)]
pub struct VoltageMeter {
    /// The bench, with the supply voltage in force.
    bench: Bench,
    circuit: Circuit,
    classes: Classes,
    all_budgets: bool,
}

impl VoltageMeter {
    /// A meter for a bench; `supply` stands in for its `supply.voltage`. Needs what [`Circuit::from_bench`] needs; a
    /// stated ripple widens the uncertainty where the gap keeps step with it.
    ///
    /// # Errors
    /// [`MissingPart`] names the key of the bench that is missing.
    pub fn new(bench: &Bench, supply: Option<Quantity>) -> Result<Self, MissingPart> {
        let mut bench = Bench { title: None, ..bench.clone() };
        bench.tank.peaks = None;
        bench.supply.voltage = supply.or(bench.supply.voltage);
        if bench.supply.ripple_frequency.is_none() {
            bench.supply.ripple = None;
        }
        let circuit = Circuit::from_bench(&bench, None)?;
        Ok(Self { bench, circuit, classes: Classes::default(), all_budgets: false })
    }

    /// The same meter with the budgets of spread and implied spacing beside that of the mean.
    #[must_use]
    pub fn with_all_budgets(self) -> Self {
        Self { all_budgets: true, ..self }
    }

    /// Voltage that a single period implies, V; none where the law has no answer.
    #[must_use]
    pub fn gap_voltage_of(&self, period_s: f64) -> Option<f64> {
        self.circuit.gap_voltage_v(period_s).ok()
    }

    /// Takes the next event of the recording; only firings on the rhythm with a single period count.
    pub fn push(&mut self, event: &Event) {
        let Some(period_s) = event.period_s else { return };
        if event.kind == EventKind::Firing && period_s.is_finite() && period_s > 0.0 {
            self.classes.add(period_s, self.gap_voltage_of(period_s));
        }
    }

    /// The gap voltage of what was pushed, with the figures of the reading. May be called again after more events.
    #[must_use]
    pub fn finish(&self, reading: &Reading) -> VoltageResult {
        let mut result = VoltageResult::default();
        let rhythm = matches!(reading.verdict, Verdict::Steady | Verdict::Unsteady);
        let Some(period) = reading.period_s.filter(|period| rhythm && period.is_finite()) else {
            result.notes.push("no gap voltage: the recording has no rhythm with a period to invert".to_owned());
            return result;
        };
        let middle_v = match self.circuit.gap_voltage_v(period.value) {
            Ok(voltage) => voltage,
            Err(error) => {
                result.notes.push(format!("no gap voltage: {error}"));
                return result;
            }
        };
        let scatter = Scatter::of(reading, period.value);
        let kept = self.kept(period.value, &scatter);
        let tangent = NormalGap { mean_v: middle_v, slope: self.circuit.slope_v_per_s(middle_v) };
        let normal = normal_gap(&self.circuit, period.value, scatter.periods_s()).unwrap_or(tangent);
        let slope = normal.slope;
        let pull_v = slope * scatter.pull_s(period.value);
        let pull_u_v = slope * scatter.pull_u_s(period.value);
        let mean_v = self.mean_v(period.value, slope, &scatter, &kept).unwrap_or(normal.mean_v) + pull_v;
        let firings = (reading.firings.on_rhythm + reading.firings.missed).max(1);
        let sources = Sources { bench: &self.bench, period, scatter: &scatter, slope, firings, pull_u_v };
        let Some(budget) = sources.voltage(mean_v).filter(|budget| budget.result.is_finite()) else {
            result.notes.push("no gap voltage: the period is not known well enough for this bench".to_owned());
            return result;
        };
        let voltage = budget.result;
        result.gap_voltage_spread_v = self.spread(&scatter, slope, &sources).filter(Estimate::is_finite);
        result.gap_voltage_v = Some(voltage);
        result.notes = notes::notes(&notes::Facts {
            bench: &self.bench,
            circuit: &self.circuit,
            reading,
            period,
            voltage,
            slope,
            scatter: &scatter,
            kept: &kept,
            total: self.classes.total(),
            budget: &budget,
        });
        result.budgets.push(budget);
        if self.all_budgets {
            let spread = sources
                .spread()
                .map(|budget| Budget { result: result.gap_voltage_spread_v.unwrap_or(budget.result), ..budget });
            result.budgets.extend(spread);
            result.budgets.extend(implied_spacing(&self.bench, voltage));
        }
        result
    }

    /// Difference of the gap voltages of two runs at this bench, second less first, each a reading with its mean voltage, V.
    /// What the runs have in common, supply meter and parts, cancels as far as it acts alike on both.
    #[must_use]
    pub fn difference(&self, first: (&Reading, f64), second: (&Reading, f64)) -> Option<Estimate> {
        let scatter = |run: (&Reading, f64)| run.0.period_s.map(|period| Scatter::of(run.0, period.value));
        let scatters = (scatter(first)?, scatter(second)?);
        let one = self.sources(first, &scatters.0)?;
        let two = self.sources(second, &scatters.1)?;
        one.difference(first.1, &two, second.1).map(|budget| budget.result).filter(Estimate::is_finite)
    }

    fn sources<'a>(&'a self, run: (&Reading, f64), scatter: &'a Scatter) -> Option<Sources<'a>> {
        let (reading, mean_v) = run;
        let period = reading.period_s?;
        let slope = self.circuit.slope_v_per_s(mean_v);
        let firings = (reading.firings.on_rhythm + reading.firings.missed).max(1);
        let pull_u_v = slope * scatter.pull_u_s(period.value);
        Some(Sources { bench: &self.bench, period, scatter, slope, firings, pull_u_v })
    }

    /// The good periods: those within the scatter of the rhythm.
    fn kept(&self, period_s: f64, scatter: &Scatter) -> Kept {
        let half = (FARTHEST_SD * scatter.measured_s()).max(LEAST_BAND * period_s);
        self.classes.within(period_s - half, period_s + half)
    }

    /// Mean of the gap voltage from single periods, V; none where they are too few or too noisy.
    fn mean_v(&self, period_s: f64, slope: f64, scatter: &Scatter, kept: &Kept) -> Option<f64> {
        if kept.inverted < FEWEST_PERIODS || scatter.timing > scatter.periods_s() {
            return None;
        }
        let curvature = self.circuit.curvature_v_per_s2(kept.voltage_v);
        // The periods of missed clicks are in the reading's mean and not among the single ones; the slope carries the
        // mean over to it.
        Some(kept.voltage_v + slope * (period_s - kept.period_s) - curvature * scatter.timing.powi(2))
    }

    /// Spread of the gap voltage, V.
    fn spread(&self, scatter: &Scatter, slope: f64, sources: &Sources) -> Option<Estimate> {
        let own = scatter.own?;
        let with_drift = |own_s: f64| slope * own_s.hypot(scatter.drift);
        let value = with_drift(own.value);
        // Each part moves the root of the sum of squares by its own share of it.
        let share = |part_s: f64| if value > 0.0 { slope * part_s / value } else { 1.0 };
        let statistics = slope * own.u * share(own.value);
        let rest = sources.spread_rest_u_v().unwrap_or(0.0);
        let reach = COVERAGE_95 * rest;
        Some(Estimate {
            value,
            u: statistics.hypot(rest),
            low: (value - (value - with_drift(own.low)).hypot(reach)).max(0.0),
            high: value + (with_drift(own.high) - value).hypot(reach),
        })
    }
}
