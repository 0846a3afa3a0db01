//! What a whole prediction works from: a bench at one supply setting.

use super::PredictError;
use super::figures::{self, Charging, Figure, Means};
use super::propagate::{Propagated, propagate};
use crate::bench::{Bench, Quantity, Tolerance};
use crate::model::breakdown::{GapVoltage, NoGapVoltage, gap_voltage};
use crate::model::charging::Parts;

/// A bench at one supply setting.
pub(super) struct Setting<'a> {
    pub(super) bench: &'a Bench,
    pub(super) parts: Parts,
    /// The charging circuit; none if the bench does not say enough.
    pub(super) charging: Option<Charging>,
    /// Supply voltage as set; its tolerance is that of `supply.voltage`, relative.
    pub(super) supply: Option<Quantity>,
    pub(super) gap: Option<GapVoltage>,
    /// Highest voltage of the capacitor if the gap never fires, V; crests of a ripple are in it.
    pub(super) reach_v: Option<f64>,
    pub(super) fires: Option<bool>,
}

impl<'a> Setting<'a> {
    pub(super) fn new(bench: &'a Bench, supply_v: Option<f64>) -> Result<Self, PredictError> {
        if let Some(volts) = supply_v
            && !(volts.is_finite() && volts > 0.0)
        {
            return Err(PredictError::Supply(volts));
        }
        let gap = match gap_voltage(bench) {
            Ok(gap) => Some(gap),
            Err(NoGapVoltage::Missing(_)) => None,
            Err(error) => return Err(error.into()),
        };
        let supply = supply_v.map(|volts| set_to(bench.supply.voltage, volts)).or(bench.supply.voltage);
        let charging = figures::charging(bench, supply.map(|supply| supply.value)).ok();
        let reach_v = charging.map(|charging| charging.circuit.crest_v());
        let supply_set = supply.map(|supply| supply.value);
        let fires = charging.zip(gap.as_ref()).map(|(charging, gap)| {
            let at_crests = gap.voltage_v < charging.circuit.crest_v() && charging.circuit.ripple().is_some();
            gap.voltage_v > charging.circuit.residual_v()
                && (at_crests || figures::period(bench, supply_set, gap.voltage_v).is_some())
        });
        let parts = figures::parts(bench, supply.map(|supply| supply.value));
        Ok(Self { bench, parts, charging, supply, gap, reach_v, fires })
    }

    pub(super) fn gap_v(&self) -> Option<f64> {
        self.gap.as_ref().map(|gap| gap.voltage_v)
    }

    pub(super) fn supply_v(&self) -> Option<f64> {
        self.supply.map(|supply| supply.value)
    }

    pub(super) fn figure(&self, figure: Figure) -> Option<f64> {
        figure(self.bench, self.supply_v(), self.gap_v()?).filter(|value| value.is_finite())
    }

    pub(super) fn propagated(&self, figure: Figure) -> Option<Propagated> {
        let gap = self.gap.as_ref()?.quantity();
        propagate(self.bench, self.supply, gap, figure).filter(|found| found.value.is_finite() && found.u.is_finite())
    }

    /// The same with the tolerances of supply and gap alone, for figures that take long.
    pub(super) fn propagated_at_edge(&self, figure: Figure) -> Option<Propagated> {
        let (supply, gap) = (self.supply?, self.gap.as_ref()?.quantity());
        let value = figure(self.bench, Some(supply.value), gap.value)?;
        let ends = [
            (figure(self.bench, Some(supply.value + supply.u()), gap.value), supply.u()),
            (figure(self.bench, Some(supply.value), gap.value - gap.u()), gap.u()),
        ];
        // One side only: on the other it may not fire.
        let part = |end: &(Option<f64>, f64)| if end.1 > 0.0 { end.0.map_or(0.0, |end| end - value) } else { 0.0 };
        Some(Propagated { value, u: part(&ends[0]).hypot(part(&ends[1])), at_the_edge: true })
    }

    /// Change of the rate with the supply voltage, Hz/V, ripple left out.
    pub(super) fn slope_hz_per_v(&self) -> Option<f64> {
        /// Half step of the difference, relative.
        const STEP: f64 = 1e-5;
        let (supply_v, gap_v) = (self.supply_v()?, self.gap_v()?);
        let rate = |side: f64| figures::period(self.bench, Some(supply_v * (1.0 + side * STEP)), gap_v).map(f64::recip);
        Some((rate(1.0)? - rate(-1.0)?) / (2.0 * STEP * supply_v))
    }

    /// What the curvature of the charging law adds to the mean period of a gap that scatters, s.
    pub(super) fn curvature_s(&self) -> f64 {
        let both = self.figure(figures::mean_period).zip(self.figure(figures::period));
        both.map_or(0.0, |(mean_s, period_s)| mean_s - period_s)
    }

    /// Relative change of the rate that the drift of the gap makes, 1/s: −(dT/dVb)·(Vb/T) times the drift.
    pub(super) fn rate_drift_per_s(&self) -> Option<f64> {
        /// Half step of the difference, relative.
        const STEP: f64 = 1e-5;
        let (drift, gap_v) = (self.bench.gap.drift?.value, self.gap_v()?);
        let at = |side: f64| figures::period(self.bench, self.supply_v(), gap_v * (1.0 + side * STEP));
        let (above, below) = (at(1.0)?, at(-1.0)?);
        Some(-drift * (above - below) / (STEP * (above + below)))
    }

    /// Mean statistical lag, s.
    pub(super) fn lag_s(&self) -> f64 {
        self.bench.gap.statistical_lag.map_or(0.0, |lag| lag.value)
    }

    pub(super) fn means(&self) -> Option<Means> {
        figures::means(self.charging.as_ref()?, self.gap_v()?).filter(|means| means.supply_a.is_finite())
    }

    /// Voltage at which the stored energy is stated, V.
    pub(super) fn stored_v(&self) -> Option<f64> {
        match self.fires {
            Some(true) => self.gap_v(),
            Some(false) => self.reach_v,
            None => self.gap_v().or(self.reach_v),
        }
        .filter(|volts| volts.is_finite())
    }

    /// Highest voltage that the capacitor can take, V: the gap may fail to fire.
    pub(super) fn worst_v(&self) -> Option<f64> {
        let reach = self.reach_v.filter(|volts| volts.is_finite());
        match (reach, self.gap_v()) {
            (Some(reach), Some(gap)) => Some(reach.max(gap)),
            (reach, gap) => reach.or(gap),
        }
    }

    /// Greatest voltage across the charging resistor, V: right after a spark, with the ripple at its crest; in current limit
    /// no more than the limit makes.
    pub(super) fn resistor_voltage_v(&self) -> Option<f64> {
        if self.parts.current_a.is_some() {
            return None;
        }
        let crest = 1.0 + self.parts.ripple.map_or(0.0, |ripple| ripple.fraction);
        let across = self.parts.supply_v? * crest - self.parts.residual_v.min(0.0);
        let limited = self.parts.current_limit_a.zip(figures::resistance_ohm(&self.parts)).map(|(limit, r)| limit * r);
        Some(limited.map_or(across, |limited| across.min(limited)))
    }

    /// Least supply voltage at which the gap fires, V; none if there is none or the bench does not say.
    pub(super) fn least_supply_v(&self) -> Option<f64> {
        let gap_v = self.gap_v()?;
        if gap_v <= self.parts.residual_v {
            return None;
        }
        let at = |supply_v: f64| figures::charging(self.bench, Some(supply_v)).ok().map(|c| c.circuit);
        // Leakage and ripple scale with the supply voltage; the leakage's current must be had at the gap voltage too.
        let least_v = if self.parts.current_a.is_some() {
            gap_v
        } else {
            let unlimited = Parts { supply_v: Some(1.0), current_limit_a: None, ..self.parts };
            gap_v / unlimited.circuit().ok()?.crest_v()
        };
        (at(2.0 * least_v)?.crest_v() > gap_v).then_some(least_v)
    }
}

/// A quantity set to another value, with the same relative tolerance: the same meter reads it.
fn set_to(stated: Option<Quantity>, value: f64) -> Quantity {
    let Some(stated) = stated else { return Quantity::exact(value) };
    let scale = value / stated.value;
    let tolerance = match stated.tolerance {
        Tolerance::Exact => Tolerance::Exact,
        Tolerance::Limit(half_width) => Tolerance::Limit(half_width * scale),
        Tolerance::Standard(u) => Tolerance::Standard(u * scale),
    };
    Quantity { value, tolerance }
}
