//! Rate and jitter against the bound that statistics set: the root mean square error over many trains, divided by the
//! Cramér–Rao bound of a train of independent periods seen with independent timing noise.
//!
//! The n = N − 1 measured periods x_k = T_k + e_k − e_{k−1} have the covariance σ_T²·I + σ_e²·tridiag(−1, 2, −1), whose eigenvalues
//! are λ_j = σ_T² + 4σ_e²·sin²(πj/2(n + 1)) with sines as eigenvectors (textbook algebra). From these:
//!
//! - jitter: the Fisher matrix of (σ_T², σ_e²) is ½·Σ ∂λ_j ∂λ_j/λ_j²;
//! - mean period: 1/Σ (1·v_j)²/λ_j, the best linear unbiased estimate.
//!
//! The grids print their tables by
//!
//!     cargo test --release --lib bound_tests -- --ignored --nocapture

mod audio;
mod events;

use std::f64::consts::PI;

/// The bound for one train: relative standard deviations.
#[derive(Debug, Clone, Copy)]
struct Bound {
    /// Of the mean period, and so of the rate.
    rate: f64,
    /// Of the jitter where the timing noise is not known.
    jitter: f64,
    /// Of the jitter where the timing noise is known.
    jitter_known: f64,
}

impl Bound {
    /// For `clicks` clicks with a period, a jitter and a timing noise in one unit.
    fn of(clicks: usize, period: f64, jitter: f64, noise: f64) -> Self {
        let n = clicks - 1;
        let (a, b) = (jitter * jitter, noise * noise);
        let (mut aa, mut ab, mut bb, mut mean) = (0.0, 0.0, 0.0, 0.0);
        for j in 1..=n {
            let angle = PI * j as f64 / (2.0 * (n + 1) as f64);
            let g = 4.0 * angle.sin().powi(2);
            let lambda = a + b * g;
            aa += 0.5 / lambda.powi(2);
            ab += 0.5 * g / lambda.powi(2);
            bb += 0.5 * g * g / lambda.powi(2);
            if j % 2 == 1 {
                // Square of the sum of the normalised sine vector number j; it is zero for even j.
                mean += 2.0 / (n + 1) as f64 / angle.tan().powi(2) / lambda;
            }
        }
        let variance = bb / (aa * bb - ab * ab);
        Self {
            rate: (1.0 / mean).sqrt() / period,
            jitter: 0.5 * variance.sqrt() / a,
            jitter_known: 0.5 * (1.0 / aa).sqrt() / a,
        }
    }
}

/// Relative errors of rate and jitter of one train; none where no figure was given.
type Errors = Option<(f64, f64)>;

/// What many trains of one kind show.
#[derive(Debug, Clone, Copy)]
struct Cell {
    /// Root mean square errors over their bounds, and the jitter's over the bound for known timing noise.
    rate: f64,
    jitter: f64,
    jitter_known: f64,
    /// Mean relative error of the jitter, and its root mean square.
    bias: f64,
    rms: f64,
    /// Trains without a figure.
    silent: usize,
}

impl Cell {
    fn of(errors: &[Errors], bound: Bound) -> Self {
        let found: Vec<(f64, f64)> = errors.iter().flatten().copied().collect();
        let n = found.len().max(1) as f64;
        let rms = |of: fn(&(f64, f64)) -> f64| (found.iter().map(|e| of(e).powi(2)).sum::<f64>() / n).sqrt();
        Self {
            rate: rms(|e| e.0) / bound.rate,
            jitter: rms(|e| e.1) / bound.jitter,
            jitter_known: rms(|e| e.1) / bound.jitter_known,
            bias: found.iter().map(|e| e.1).sum::<f64>() / n,
            rms: rms(|e| e.1),
            silent: errors.len() - found.len(),
        }
    }

    /// A row of the table.
    fn print(&self, what: &str) {
        println!(
            "{what} | {:5.2} | {:5.2} | {:5.2} | {:6.2} | {:+6.2} | {}",
            self.rate,
            self.jitter,
            self.jitter_known,
            100.0 * self.rms,
            100.0 * self.bias,
            self.silent
        );
    }
}

const HEAD: &str = "rate/bound | jitter/bound | jitter/(noise known) | jitter rms % | bias % | no figure";

/// Applies `work` to 0..count on all cores; results in order.
fn on_all_cores<T: Send>(count: usize, work: impl Fn(usize) -> T + Sync) -> Vec<T> {
    let cores = std::thread::available_parallelism().map_or(1, usize::from);
    let work = &work;
    std::thread::scope(|scope| {
        let lanes: Vec<_> = (0..cores)
            .map(|lane| scope.spawn(move || (lane..count).step_by(cores).map(|i| (i, work(i))).collect::<Vec<_>>()))
            .collect();
        let mut all: Vec<(usize, T)> =
            lanes.into_iter().flat_map(|lane| lane.join().expect("no thread panicked")).collect();
        all.sort_by_key(|(i, _)| *i);
        all.into_iter().map(|(_, result)| result).collect()
    })
}

#[test]
fn the_bound_has_its_known_limits() {
    // Without timing noise: 1/√(2n) if that is known. Where it has to be found from the same periods, 4·sin² has the mean 2 and the
    // mean square 6, and 6/(6 − 2²) = 3 in the variance is the price.
    let clean = Bound::of(2001, 1.0, 0.01, 1e-6);
    assert!((clean.jitter_known * 4000f64.sqrt() - 1.0).abs() < 1e-3, "{clean:?}");
    assert!((clean.jitter * (4000f64 / 3.0).sqrt() - 1.0).abs() < 1e-2, "{clean:?}");
    assert!((clean.rate * 2000f64.sqrt() / 0.01 - 1.0).abs() < 1e-3, "{clean:?}");
    // A clock with noisy edges: the straight line's σ_e·√(12/(N(N² − 1))), 1.7065 µs for N = 101 and 0.5 ms (Kay 1993; evaluated
    // independently).
    let clock = Bound::of(101, 10e-3, 1e-9, 0.5e-3);
    assert!((clock.rate * 10e-3 / 1.7065e-6 - 1.0).abs() < 1e-3, "{clock:?}");
}
