//! Chi-square, gradient and normal matrix from the rows of an evaluation.

use crate::lanes::{Kernel, LANES, dispatch};
use crate::voigt::{Arithmetic, Vector};

/// `[r | J]ᵀ W [r | J]` of the residuals r = data - model and the derivatives J: chi-square in its corner,
/// `Jᵀ W r` beside it, the normal matrix `Jᵀ W J` in the rest.
#[derive(Debug, Clone, Default)]
pub struct Gram {
    size: usize,
    stride: usize,
    products: Vec<f64>,
}

impl Gram {
    /// `Σ w (data - model)²`.
    pub fn chi_square(&self) -> f64 {
        self.products[0]
    }

    /// Half the steepest descent of chi-square: `Jᵀ W r`.
    pub fn descent(&self, free: usize) -> f64 {
        self.products[free + 1]
    }

    /// An element of the normal matrix `Jᵀ W J`.
    pub fn normal(&self, row: usize, column: usize) -> f64 {
        self.products[(row + 1) * self.stride + column + 1]
    }

    /// Number of free parameters.
    pub fn free(&self) -> usize {
        self.size - 1
    }

    pub(super) fn accumulate(
        &mut self,
        rows: &[f64],
        stride: usize,
        free: usize,
        data: &[f64],
        weight: &[f64],
    ) {
        self.size = free + 1;
        self.stride = stride;
        self.products.clear();
        self.products.resize(self.size * stride, 0.0);
        dispatch(Accumulate {
            size: self.size,
            stride,
            rows,
            data,
            weight,
            products: &mut self.products,
        });
    }
}

struct Accumulate<'a> {
    size: usize,
    stride: usize,
    rows: &'a [f64],
    data: &'a [f64],
    weight: &'a [f64],
    products: &'a mut [f64],
}

impl Kernel for Accumulate<'_> {
    #[inline(always)]
    fn run<R: Arithmetic>(self) {
        let Some(vector) = R::vector() else { return };
        if self.stride == LANES {
            // All products fit in registers.
            let mut sums = [[0.0; LANES]; LANES];
            for ((row, &data), &weight) in self
                .rows
                .as_chunks::<LANES>()
                .0
                .iter()
                .zip(self.data)
                .zip(self.weight)
            {
                let mut row = *row;
                row[0] = data - row[0];
                for (one, sums) in sums.iter_mut().enumerate() {
                    add(vector, sums, weight * row[one], &row);
                }
            }
            for (products, sums) in self.products.chunks_exact_mut(LANES).zip(sums) {
                products.copy_from_slice(&sums);
            }
            return;
        }
        let mut row = vec![0.0; self.stride];
        for ((stored, &data), &weight) in self
            .rows
            .chunks_exact(self.stride)
            .zip(self.data)
            .zip(self.weight)
        {
            row.copy_from_slice(stored);
            row[0] = data - row[0];
            for one in 0..self.size {
                let products = &mut self.products[one * self.stride..(one + 1) * self.stride];
                add(vector, products, weight * row[one], &row);
            }
        }
    }
}

/// `sums += factor × row`, both of whole vectors.
#[inline(always)]
fn add<V: Vector>(vector: V, sums: &mut [f64], factor: f64, row: &[f64]) {
    let factor = vector.splat(factor);
    for (sum, value) in V::vectors_mut(sums).iter_mut().zip(V::vectors(row)) {
        *sum = vector.mul_add(factor, *value, *sum);
    }
}
