//! Inverse of a small symmetric matrix.

/// Pivot, relative to the diagonal of a matrix scaled to ones, below which there is no inverse: two parameters that cannot be
/// told apart in double precision.
const LEAST_PIVOT: f64 = 1e-12;

/// The inverse of a positive definite matrix; none where it has none.
pub(super) fn inverse(matrix: &[Vec<f64>]) -> Option<Vec<Vec<f64>>> {
    let n = matrix.len();
    let scale: Vec<f64> = (0..n).map(|i| matrix[i][i].sqrt()).collect();
    if scale.iter().any(|s| !(*s > 0.0 && s.is_finite())) {
        return None;
    }
    // Gauss–Jordan on the scaled matrix beside the unit matrix.
    let mut rows: Vec<Vec<f64>> = (0..n)
        .map(|i| {
            let own = (0..n).map(|j| matrix[i][j] / (scale[i] * scale[j]));
            own.chain((0..n).map(|j| f64::from(u8::from(i == j)))).collect()
        })
        .collect();
    for pivot in 0..n {
        let divisor = rows[pivot][pivot];
        if divisor.is_nan() || divisor < LEAST_PIVOT {
            return None;
        }
        rows[pivot].iter_mut().for_each(|x| *x /= divisor);
        let pivot_row = rows[pivot].clone();
        for (_, row) in rows.iter_mut().enumerate().filter(|(i, _)| *i != pivot) {
            let factor = row[pivot];
            row.iter_mut().zip(&pivot_row).for_each(|(x, p)| *x -= factor * p);
        }
    }
    Some((0..n).map(|i| (0..n).map(|j| rows[i][n + j] / (scale[i] * scale[j])).collect()).collect())
}

/// The solution x of A·x = b for a positive definite A.
pub(super) fn solve(matrix: &[Vec<f64>], right: &[f64]) -> Option<Vec<f64>> {
    let inverse = inverse(matrix)?;
    Some(inverse.iter().map(|row| row.iter().zip(right).map(|(a, b)| a * b).sum()).collect())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_inverse_times_the_matrix_is_one_and_a_singular_matrix_has_none() {
        let matrix = [vec![4.0, 1.0, 0.5], vec![1.0, 3.0, -1.0], vec![0.5, -1.0, 2.0]];
        let inverse = inverse(&matrix).unwrap();
        for (i, row) in matrix.iter().enumerate() {
            for j in 0..row.len() {
                let product: f64 = row.iter().zip(&inverse).map(|(a, column)| a * column[j]).sum();
                assert!((product - f64::from(u8::from(i == j))).abs() < 1e-14);
            }
        }
        assert!(super::inverse(&[vec![1.0, 1.0], vec![1.0, 1.0]]).is_none());
        assert_eq!(solve(&[vec![2.0, 0.0], vec![0.0, 4.0]], &[2.0, 4.0]).unwrap(), [1.0, 1.0]);
    }
}
