//! Chi-square, gradient and normal matrix from the rows of an evaluation.

use crate::lanes::{Kernel, LANES, dispatch};
use crate::voigt::Arithmetic;

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
        if self.stride == LANES {
            // All products fit in registers.
            let mut sums = [[0.0; LANES]; LANES];
            for ((row, &data), &weight) in self
                .rows
                .chunks_exact(LANES)
                .zip(self.data)
                .zip(self.weight)
            {
                let mut row: [f64; LANES] = std::array::from_fn(|lane| row[lane]);
                row[0] = data - row[0];
                for (one, sums) in sums.iter_mut().enumerate() {
                    let factor = weight * row[one];
                    for lane in 0..LANES {
                        sums[lane] = R::mul_add(factor, row[lane], sums[lane]);
                    }
                }
            }
            for (products, sums) in self.products.chunks_exact_mut(LANES).zip(sums) {
                products.copy_from_slice(&sums);
            }
            return;
        }
        for ((row, &data), &weight) in self
            .rows
            .chunks_exact(self.stride)
            .zip(self.data)
            .zip(self.weight)
        {
            let residual = data - row[0];
            for one in 0..self.size {
                let factor = weight * if one == 0 { residual } else { row[one] };
                let products = &mut self.products[one * self.stride..(one + 1) * self.stride];
                products[0] = R::mul_add(factor, residual, products[0]);
                for (product, value) in products[1..].iter_mut().zip(&row[1..]) {
                    *product = R::mul_add(factor, *value, *product);
                }
            }
        }
    }
}
