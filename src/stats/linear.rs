//! Small dense symmetric systems by Cholesky's factorisation (Golub & Van Loan 2013, Matrix Computations, section 4.2).
//! Made for the handful of rows that a test or a fit needs; not for large matrices.

/// A pivot below this share of its diagonal is rounding: the matrix is singular.
const SINGULAR: f64 = 1e-12;

/// Solves `matrix` · x = `rhs` for a symmetric positive definite matrix (rows). `None` when it is singular.
#[must_use]
pub fn solve(matrix: &[Vec<f64>], rhs: &[f64]) -> Option<Vec<f64>> {
    let n = rhs.len();
    let lower = cholesky(matrix)?;
    let mut x = rhs.to_vec();
    for i in 0..n {
        for j in 0..i {
            x[i] -= lower[i][j] * x[j];
        }
        x[i] /= lower[i][i];
    }
    for i in (0..n).rev() {
        for j in i + 1..n {
            x[i] -= lower[j][i] * x[j];
        }
        x[i] /= lower[i][i];
    }
    Some(x)
}

/// v′ · matrix⁻¹ · v. `None` when the matrix is singular.
#[must_use]
pub fn quadratic_form_of_inverse(matrix: &[Vec<f64>], v: &[f64]) -> Option<f64> {
    Some(solve(matrix, v)?.iter().zip(v).map(|(a, b)| a * b).sum())
}

fn cholesky(matrix: &[Vec<f64>]) -> Option<Vec<Vec<f64>>> {
    let n = matrix.len();
    let mut lower = vec![vec![0.0; n]; n];
    for i in 0..n {
        for j in 0..=i {
            let inner: f64 = (0..j).map(|k| lower[i][k] * lower[j][k]).sum();
            let rest = matrix[i][j] - inner;
            if i == j {
                if rest.is_nan() || rest <= SINGULAR * matrix[i][i].abs() {
                    return None;
                }
                lower[i][i] = libm::sqrt(rest);
            } else {
                lower[i][j] = rest / lower[j][j];
            }
        }
    }
    Some(lower)
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    #[test]
    fn hand_checked() {
        let x = solve(&[vec![4.0, 2.0], vec![2.0, 3.0]], &[10.0, 8.0]).unwrap();
        assert_abs_diff_eq!(x[0], 1.75, epsilon = 1e-12);
        assert_abs_diff_eq!(x[1], 1.5, epsilon = 1e-12);
    }

    #[test]
    fn singular_is_none() {
        assert_eq!(solve(&[vec![1.0, 1.0], vec![1.0, 1.0]], &[1.0, 1.0]), None);
        assert_eq!(solve(&[vec![0.0]], &[1.0]), None);
    }
}
