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
//! a division on today's processors as much as sixteen, so one division at the end serves all nodes.

use super::arithmetic::Arithmetic;

/// A pair of nodes `±t` of a quadrature rule.
#[doc(hidden)]
#[derive(Clone, Copy, Debug)]
pub struct Node {
    pub(super) t_squared: f64,
    /// One over the weight of the pair, times pi.
    pub(super) inverse_weight: f64,
}

/// A rule as a point sees it.
pub(super) trait Nodes: Copy {
    fn at(self, k: usize) -> Node;
}

impl Nodes for &[Node] {
    #[inline(always)]
    fn at(self, k: usize) -> Node {
        self[k]
    }
}

/// What the sums need to know of a point.
#[derive(Clone, Copy)]
pub(super) struct Point {
    /// `Re z² = x² - y²`.
    pub re_z_squared: f64,
    /// `(Im z²)² = 4 x² y²`.
    pub im_z_squared_squared: f64,
}

/// `S0 = s0 / divisor`, `S1 = s1 / divisor`.
#[derive(Clone, Copy)]
pub(super) struct Fraction {
    pub s0: f64,
    pub s1: f64,
    pub divisor: f64,
}

impl Fraction {
    #[inline(always)]
    fn of<R: Arithmetic>(point: Point, node: Node) -> Self {
        let distance = point.re_z_squared - node.t_squared;
        Self {
            s0: 1.0,
            s1: node.t_squared,
            divisor: R::mul_add(distance, distance, point.im_z_squared_squared)
                * node.inverse_weight,
        }
    }

    #[inline(always)]
    fn join<R: Arithmetic>(self, other: Self) -> Self {
        Self {
            s0: R::mul_add(self.s0, other.divisor, other.s0 * self.divisor),
            s1: R::mul_add(self.s1, other.divisor, other.s1 * self.divisor),
            divisor: self.divisor * other.divisor,
        }
    }

    #[inline(always)]
    fn pair<R: Arithmetic>(point: Point, nodes: impl Nodes, first: usize) -> Self {
        let a = Self::of::<R>(point, nodes.at(first));
        let b = Self::of::<R>(point, nodes.at(first + 1));
        Self {
            s0: a.divisor + b.divisor,
            s1: R::mul_add(a.s1, b.divisor, b.s1 * a.divisor),
            divisor: a.divisor * b.divisor,
        }
    }

    #[inline(always)]
    fn four<R: Arithmetic>(point: Point, nodes: impl Nodes, first: usize) -> Self {
        Self::pair::<R>(point, nodes, first).join::<R>(Self::pair::<R>(point, nodes, first + 2))
    }

    /// The sum over all `count` nodes of a rule.
    #[inline(always)]
    pub fn sum<R: Arithmetic>(point: Point, nodes: impl Nodes, count: usize) -> Self {
        match count {
            1 => Self::of::<R>(point, nodes.at(0)),
            2 => Self::pair::<R>(point, nodes, 0),
            3 => Self::pair::<R>(point, nodes, 0).join::<R>(Self::of::<R>(point, nodes.at(2))),
            4 => Self::four::<R>(point, nodes, 0),
            6 => Self::four::<R>(point, nodes, 0).join::<R>(Self::pair::<R>(point, nodes, 4)),
            12 => Self::four::<R>(point, nodes, 0)
                .join::<R>(Self::four::<R>(point, nodes, 4))
                .join::<R>(Self::four::<R>(point, nodes, 8)),
            _ => unreachable!("rules have 1, 2, 3, 4, 6 or 12 pairs of nodes"),
        }
    }
}
