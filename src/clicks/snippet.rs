//! Short pieces of signal about places between samples.

/// Reads `out.len()` samples about a fractional position, the one with index `centre` falling on it, by cubic
/// convolution (Catmull–Rom; the signal is at least 2 × oversampled here). Outside the signal zeros are read.
pub fn read(x: &[f32], position: f64, centre: usize, out: &mut [f32]) {
    let start = position - centre as f64;
    let whole = start.floor();
    let a = (start - whole) as f32;
    let first = whole as isize;
    let (a2, a3) = (a * a, a * a * a);
    let c = [-0.5 * a3 + a2 - 0.5 * a, 1.5 * a3 - 2.5 * a2 + 1.0, -1.5 * a3 + 2.0 * a2 + 0.5 * a, 0.5 * a3 - 0.5 * a2];
    if first >= 1 && (first as usize) + out.len() + 2 < x.len() {
        let base = &x[first as usize - 1..first as usize + out.len() + 2];
        for (k, o) in out.iter_mut().enumerate() {
            *o = c[0] * base[k] + c[1] * base[k + 1] + c[2] * base[k + 2] + c[3] * base[k + 3];
        }
    } else {
        let at = |i: isize| if i >= 0 && (i as usize) < x.len() { x[i as usize] } else { 0.0 };
        for (k, o) in out.iter_mut().enumerate() {
            let i = first + k as isize;
            *o = c[0] * at(i - 1) + c[1] * at(i) + c[2] * at(i + 1) + c[3] * at(i + 2);
        }
    }
}

/// Scalar product in four lanes, so that the compiler may use vector registers.
#[must_use]
pub fn dot(a: &[f32], b: &[f32]) -> f32 {
    let mut lanes = [0.0f32; 8];
    let (ac, bc) = (a.chunks_exact(8), b.chunks_exact(8));
    let tail: f32 = ac.remainder().iter().zip(bc.remainder()).map(|(x, y)| x * y).sum();
    for (x, y) in ac.zip(bc) {
        for l in 0..8 {
            lanes[l] += x[l] * y[l];
        }
    }
    lanes.iter().sum::<f32>() + tail
}

/// Scales to unit norm; a zero vector stays.
pub fn normalise(v: &mut [f32]) {
    let norm = dot(v, v).sqrt();
    if norm > 0.0 {
        v.iter_mut().for_each(|x| *x /= norm);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn whole_positions_read_the_samples_themselves() {
        let x: Vec<f32> = (0..50).map(|n| (n as f32).sqrt()).collect();
        let mut out = [0.0; 5];
        read(&x, 20.0, 2, &mut out);
        assert_eq!(out, x[18..23]);
        read(&x, 0.0, 2, &mut out);
        assert_eq!(out[..2], [0.0, 0.0]);
    }
}
