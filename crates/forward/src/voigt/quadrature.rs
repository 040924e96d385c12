//! Sums of `1/(z² - t²)` over the nodes of a quadrature rule, in real arithmetic without cancellation.
//!
//! For a rule with nodes `±t_k`, `w(z) = (i/pi) ∫ exp(-t²)/(z - t) dt` becomes
//!
//! ```text
//! Re w = y (|z|² S0 + S1),   Im w = x (|z|² S0 - S1)
//! S0 = Σ g_k / D_k,   S1 = Σ t_k² g_k / D_k,   D_k = |z² - t_k²|² = (x² - y² - t_k²)² + 4 x² y²
//! ```
//!
//! All terms are positive. The sums are carried as fractions over a common denominator: joining two of them takes five operations,
//! a division on today's processors as much as sixteen, so one division at the end serves all nodes. The weight goes into the
//! denominator, which saves a number for each node.

use super::vector::Vector;

/// A pair of nodes `±t` of a quadrature rule.
#[doc(hidden)]
#[derive(Clone, Copy, Debug)]
pub struct Node {
    pub(super) t_squared: f64,
    /// One over the weight of the pair, times pi.
    pub(super) inverse_weight: f64,
}

/// A rule as a vector of points sees it: which need not have the same nodes.
pub(super) trait Nodes<V: Vector>: Copy {
    /// `t²` and the inverse weight.
    fn at(self, vector: V, k: usize) -> (V::Value, V::Value);
}

impl<V: Vector> Nodes<V> for &[Node] {
    #[inline(always)]
    fn at(self, vector: V, k: usize) -> (V::Value, V::Value) {
        (
            vector.splat(self[k].t_squared),
            vector.splat(self[k].inverse_weight),
        )
    }
}

/// What the sums need to know of a point.
#[derive(Clone, Copy)]
pub(super) struct Point<V: Vector> {
    pub vector: V,
    /// `Re z² = x² - y²`.
    pub re_z_squared: V::Value,
    /// `(Im z²)² = 4 x² y²`.
    pub im_z_squared_squared: V::Value,
}

/// `S0 = s0 / divisor`, `S1 = s1 / divisor`.
#[derive(Clone, Copy)]
pub(super) struct Fraction<V: Vector> {
    pub s0: V::Value,
    pub s1: V::Value,
    pub divisor: V::Value,
}

impl<V: Vector> Fraction<V> {
    #[inline(always)]
    fn one(point: Point<V>, nodes: impl Nodes<V>, k: usize) -> Self {
        let v = point.vector;
        let (t_squared, inverse_weight) = nodes.at(v, k);
        let distance = v.sub(point.re_z_squared, t_squared);
        let divisor = v.mul_add(distance, distance, point.im_z_squared_squared);
        Self {
            s0: v.splat(1.0),
            s1: t_squared,
            divisor: v.mul(divisor, inverse_weight),
        }
    }

    #[inline(always)]
    fn two(point: Point<V>, nodes: impl Nodes<V>, k: usize) -> Self {
        let (v, a, b) = (
            point.vector,
            Self::one(point, nodes, k),
            Self::one(point, nodes, k + 1),
        );
        Self {
            s0: v.add(a.divisor, b.divisor),
            s1: v.mul_add(a.s1, b.divisor, v.mul(b.s1, a.divisor)),
            divisor: v.mul(a.divisor, b.divisor),
        }
    }

    #[inline(always)]
    fn four(point: Point<V>, nodes: impl Nodes<V>, k: usize) -> Self {
        Self::two(point, nodes, k).join(point.vector, Self::two(point, nodes, k + 2))
    }

    #[inline(always)]
    fn join(self, v: V, other: Self) -> Self {
        Self {
            s0: v.mul_add(self.s0, other.divisor, v.mul(other.s0, self.divisor)),
            s1: v.mul_add(self.s1, other.divisor, v.mul(other.s1, self.divisor)),
            divisor: v.mul(self.divisor, other.divisor),
        }
    }

    /// The sum over all `count` nodes of a rule.
    #[inline(always)]
    pub fn sum(point: Point<V>, nodes: impl Nodes<V>, count: usize) -> Self {
        let v = point.vector;
        match count {
            1 => Self::one(point, nodes, 0),
            2 => Self::two(point, nodes, 0),
            3 => Self::two(point, nodes, 0).join(v, Self::one(point, nodes, 2)),
            4 => Self::four(point, nodes, 0),
            6 => Self::four(point, nodes, 0).join(v, Self::two(point, nodes, 4)),
            12 => Self::four(point, nodes, 0)
                .join(v, Self::four(point, nodes, 4))
                .join(v, Self::four(point, nodes, 8)),
            _ => unreachable!("rules have 1, 2, 3, 4, 6 or 12 pairs of nodes"),
        }
    }
}
