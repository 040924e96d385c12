//! The Cramér-Rao bound: the smallest scatter that any unbiased estimate can have.

/// Standard deviations `sqrt([(Jᵀ C⁻¹ J)⁻¹]_ii)` for independent normal noise of one width.
///
/// Source: Kay (1993), Fundamentals of Statistical Signal Processing, vol. 1, eq. 3.31.
///
/// * `derivatives`: one row a parameter, one column a channel.
/// * `noise`: standard deviation of every channel.
///
/// # Panics
/// If the parameters cannot be told apart.
pub fn cramer_rao(derivatives: &[Vec<f64>], noise: f64) -> Vec<f64> {
    let n = derivatives.len();
    let mut matrix: Vec<Vec<f64>> = (0..n)
        .map(|i| {
            let mut row: Vec<f64> = (0..n)
                .map(|j| {
                    derivatives[i]
                        .iter()
                        .zip(&derivatives[j])
                        .map(|(a, b)| a * b)
                        .sum::<f64>()
                })
                .collect();
            row.extend((0..n).map(|j| if i == j { 1.0 } else { 0.0 }));
            row
        })
        .collect();
    // Scale to a unit diagonal, then Gauss-Jordan with the largest pivot.
    let scale: Vec<f64> = (0..n).map(|i| matrix[i][i].sqrt()).collect();
    for i in 0..n {
        for j in 0..n {
            matrix[i][j] /= scale[i] * scale[j];
        }
    }
    for column in 0..n {
        let pivot = (column..n)
            .max_by(|&a, &b| matrix[a][column].abs().total_cmp(&matrix[b][column].abs()));
        let pivot = pivot.expect("at least one parameter");
        matrix.swap(column, pivot);
        assert!(
            matrix[column][column].abs() > 1e-12,
            "parameters that cannot be told apart"
        );
        let divisor = matrix[column][column];
        matrix[column].iter_mut().for_each(|x| *x /= divisor);
        let pivot_row = matrix[column].clone();
        for (i, row) in matrix.iter_mut().enumerate() {
            if i != column {
                let factor = row[column];
                row.iter_mut()
                    .zip(&pivot_row)
                    .for_each(|(x, p)| *x -= factor * p);
            }
        }
    }
    (0..n)
        .map(|i| noise * matrix[i][n + i].sqrt() / scale[i])
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A straight line a + b x at x = -1, 0, 1: var(a) = σ²/3, var(b) = σ²/2 (any textbook on least squares).
    #[test]
    fn a_straight_line_has_its_textbook_errors() {
        let bound = cramer_rao(&[vec![1.0; 3], vec![-1.0, 0.0, 1.0]], 0.1);
        assert!((bound[0] - 0.1 / 3.0_f64.sqrt()).abs() < 1e-15);
        assert!((bound[1] - 0.1 / 2.0_f64.sqrt()).abs() < 1e-15);
    }

    /// y = a + b x at x = 0, 1, 2: the matrix is 3 3 / 3 5, its inverse 5/6 -1/2 / -1/2 1/2.
    #[test]
    fn correlated_parameters_are_inverted_together() {
        let bound = cramer_rao(&[vec![1.0; 3], vec![0.0, 1.0, 2.0]], 1.0);
        assert!((bound[0] - (5.0_f64 / 6.0).sqrt()).abs() < 1e-14);
        assert!((bound[1] - 0.5_f64.sqrt()).abs() < 1e-14);
    }
}
