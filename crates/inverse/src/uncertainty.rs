//! The covariance of a fit, and what the data can tell apart.

use backlit_forward::engine::Gram;
use ndarray::{Array1, Array2};
use ndarray_linalg::{Eigh, UPLO};

/// Covariance of the free coordinates at a minimum.
#[derive(Debug, Clone)]
pub struct Covariance {
    /// Covariance matrix, (free, free); rows of values without any effect are NaN.
    pub matrix: Array2<f64>,
    /// Smallest eigenvalue of the normal matrix scaled to a unit diagonal: 0 means that some direction has
    /// no effect on the data, 1 that all values are independent.
    pub smallest_eigenvalue: f64,
    /// The direction of that eigenvalue, in units of each value's own (conditional) standard deviation.
    pub weakest_direction: Array1<f64>,
}

/// Eigenvalues of the scaled normal matrix below it are lost in rounding.
const RESOLVED: f64 = 1e-13;

impl Covariance {
    /// `C = (Jᵀ W J)⁻¹`, through the eigenvalues of the matrix scaled to a unit diagonal.
    ///
    /// * `gram`: at the minimum.
    ///
    /// Eigenvalues that rounding cannot resolve are raised to 1e-13: the standard deviations along such
    /// directions come out huge, not infinite. Equal to the Cramér-Rao bound for Gaussian noise of the
    /// given size. `None` if LAPACK fails, which finite input does not make it do.
    pub fn of(gram: &Gram) -> Option<Self> {
        let count = gram.free();
        if count == 0 {
            // LAPACK refuses a matrix of no size: where gas is absent and the background known, nothing is free.
            return Some(Covariance {
                matrix: Array2::zeros((0, 0)),
                smallest_eigenvalue: 1.0,
                weakest_direction: Array1::zeros(0),
            });
        }
        let size: Vec<f64> = (0..count).map(|i| gram.normal(i, i).sqrt()).collect();
        let scaled = Array2::from_shape_fn((count, count), |(i, j)| {
            if size[i] > 0.0 && size[j] > 0.0 {
                gram.normal(i, j) / (size[i] * size[j])
            } else {
                f64::from(u8::from(i == j))
            }
        });
        if scaled.iter().any(|value| !value.is_finite()) {
            return None;
        }
        let (values, vectors) = scaled.eigh(UPLO::Lower).ok()?;
        let mut matrix = Array2::zeros((count, count));
        for (value, vector) in values.iter().zip(vectors.columns()) {
            let raised = value.max(RESOLVED);
            for i in 0..count {
                for j in 0..count {
                    matrix[(i, j)] += vector[i] * vector[j] / raised / (size[i] * size[j]);
                }
            }
        }
        for (i, &size) in size.iter().enumerate() {
            if size <= 0.0 {
                matrix.row_mut(i).fill(f64::NAN);
                matrix.column_mut(i).fill(f64::NAN);
            }
        }
        Some(Covariance {
            matrix,
            smallest_eigenvalue: values.first().copied().unwrap_or(1.0),
            weakest_direction: vectors.column(0).to_owned(),
        })
    }

    /// Standard deviation of a coordinate.
    pub fn sigma(&self, i: usize) -> f64 {
        self.matrix[(i, i)].sqrt()
    }

    /// Correlation of two coordinates.
    pub fn correlation(&self, i: usize, j: usize) -> f64 {
        self.matrix[(i, j)] / (self.matrix[(i, i)] * self.matrix[(j, j)]).sqrt()
    }
}
