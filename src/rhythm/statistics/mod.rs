//! From click times with firing numbers to period, jitter and timing noise, each with its interval.
//!
//! Model: the seen click of firing number n comes at t = s_n + e, with s_{n+1} = s_n + m + b·n + a_{n+1}; a is first-order
//! autoregressive with memory ρ and standard deviation σ_T (the gap's jitter), e is white with σ_e (timing noise of the
//! audio). A missed click is a step without an observation. m and b are taken out by restricted maximum likelihood.
//! Raw differences of click times would read √(σ_T² + 2σ_e²) instead of σ_T (Wing and Kristofferson 1973, two-level timing).

mod integral;
mod noise;
#[cfg(test)]
mod plain;
pub mod posterior;
pub mod robust;
pub mod structure;
mod whiten;

pub use noise::NoiseRange;
pub use posterior::{Posterior, PosteriorGrid};
