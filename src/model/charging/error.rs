//! Why the charging law has no answer.

use thiserror::Error;

/// A bench does not hold what the charging law needs.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Error)]
#[error("the bench does not give {key}: {purpose}")]
pub struct MissingPart {
    /// Key or keys of the bench file that would do.
    pub key: &'static str,
    /// What they are needed for.
    pub purpose: &'static str,
}

/// The gap does not fire.
#[derive(Debug, Clone, Copy, PartialEq, Error)]
pub enum NoFiring {
    /// The capacitor never reaches the gap voltage.
    #[error(
        "the gap does not fire: it breaks down at {gap_v:.6} V and the capacitor reaches only {reach_v:.6} V; raise the supply voltage or close the gap"
    )]
    OutOfReach {
        /// Voltage at which the gap would break down, V.
        gap_v: f64,
        /// Highest voltage of the capacitor, V.
        reach_v: f64,
    },
    /// What is left after a spark is already at or above the gap voltage.
    #[error("the gap cannot fire again: {residual_v:.6} V are left after a spark and it breaks down at {gap_v:.6} V")]
    BelowResidual {
        /// Voltage at which the gap would break down, V.
        gap_v: f64,
        /// Voltage left on the capacitor, V.
        residual_v: f64,
    },
}

/// A period has no gap voltage.
#[derive(Debug, Clone, Copy, PartialEq, Error)]
pub enum NoVoltage {
    /// The period is no time at all, or not even as long as the gap conducts.
    #[error("a period of {period_s:.4e} s is not longer than the {conduction_s:.4e} s for which the gap conducts")]
    TooShort {
        /// The period, s.
        period_s: f64,
        /// Conduction time, s.
        conduction_s: f64,
    },
    /// The capacitor would have stood at its final voltage for long.
    #[error(
        "a period of {period_s:.4e} s is {time_constants:.1} time constants of the bench: the capacitor would be full long before; check resistance and capacitance"
    )]
    TooLong {
        /// The period, s.
        period_s: f64,
        /// The same in time constants.
        time_constants: f64,
    },
    /// The current source would have to go above its own voltage.
    #[error(
        "in {period_s:.4e} s the charging current would bring the capacitor to {voltage_v:.6} V, above the supply's {ceiling_v:.6} V"
    )]
    AboveSupply {
        /// The period, s.
        period_s: f64,
        /// Voltage that the ramp would reach, V.
        voltage_v: f64,
        /// Voltage of the supply, V.
        ceiling_v: f64,
    },
    /// The capacitor does not charge from the residual voltage.
    #[error(
        "the capacitor does not charge: {residual_v:.6} V are left after a spark and it would end at {reach_v:.6} V"
    )]
    DoesNotCharge {
        /// Voltage left after a spark, V.
        residual_v: f64,
        /// Voltage that the capacitor tends to, V.
        reach_v: f64,
    },
}
