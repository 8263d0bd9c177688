//! Small dense symmetric systems.

/// Cholesky factor of a symmetric positive-definite matrix given row by row; `None` when it is
/// not positive definite.
fn cholesky(matrix: &[f64], n: usize) -> Option<Vec<f64>> {
    let mut l = vec![0.0; n * n];
    for i in 0..n {
        for j in 0..=i {
            let dot: f64 = (0..j).map(|k| l[i * n + k] * l[j * n + k]).sum();
            let rest = matrix[i * n + j] - dot;
            if i == j {
                if rest <= 0.0 || !rest.is_finite() {
                    return None;
                }
                l[i * n + i] = rest.sqrt();
            } else {
                l[i * n + j] = rest / l[j * n + j];
            }
        }
    }
    Some(l)
}

/// Solves `matrix · x = rhs` for a symmetric positive-definite matrix; `None` when it is not.
pub fn solve(matrix: &[f64], rhs: &[f64]) -> Option<Vec<f64>> {
    let n = rhs.len();
    let l = cholesky(matrix, n)?;
    let mut x = rhs.to_vec();
    for i in 0..n {
        let dot: f64 = (0..i).map(|k| l[i * n + k] * x[k]).sum();
        x[i] = (x[i] - dot) / l[i * n + i];
    }
    for i in (0..n).rev() {
        let dot: f64 = (i + 1..n).map(|k| l[k * n + i] * x[k]).sum();
        x[i] = (x[i] - dot) / l[i * n + i];
    }
    Some(x)
}

/// Inverse of a symmetric positive-definite matrix; `None` when it is not.
pub fn inverse(matrix: &[f64], n: usize) -> Option<Vec<f64>> {
    let mut out = vec![0.0; n * n];
    for j in 0..n {
        let mut unit = vec![0.0; n];
        unit[j] = 1.0;
        let column = solve(matrix, &unit)?;
        (0..n).for_each(|i| out[i * n + j] = column[i]);
    }
    Some(out)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn solves_and_inverts() {
        let m = [4.0, 2.0, 2.0, 3.0];
        let x = solve(&m, &[2.0, 1.0]).unwrap();
        assert!((x[0] - 0.5).abs() < 1e-15 && x[1].abs() < 1e-15);
        let inv = inverse(&m, 2).unwrap();
        assert!((inv[0] - 0.375).abs() < 1e-15 && (inv[1] + 0.25).abs() < 1e-15);
        assert!(solve(&[1.0, 1.0, 1.0, 1.0], &[1.0, 1.0]).is_none());
    }
}
