//! Where to evaluate a group of overlapping lines, so that few points give every channel exactly.
//!
//! A channel sees `∫ g(λ) K_j(λ) dλ`: the gas's change of the light times the line-spread function averaged
//! over the channel. Sampling at channel centres is wrong wherever a line is narrower than a channel;
//! oversampling costs the ratio of widths. The integral is taken instead on nodes that cluster where the
//! integrand moves: the trapezoidal rule after the map
//!
//! `u(z) = Σ (w/d) atan((z - e)/w) + Σ_l β asinh((z - z_l)/v_l) + z/cap`
//!
//! with a dense stretch (spacing d, half-width w) at the core of a thin line and at the places e where a
//! saturated one turns from black to clear, a few nodes per e-fold of distance in its damping wings, and
//! `cap` the spacing that the line-spread function itself needs. The rule converges exponentially, because the integrand is smooth in u. Where the instrument has no or a very
//! sharp line-spread function the kernel is not smooth, and Gauss-Legendre panels between the channel
//! edges take over.
//!
//! A plan depends on the lines' widths, depths, dampings and relative places only through their rounded
//! logarithms ([`Shape`]), so that one plan serves many evaluations and a fit sees a smooth model.

use crate::oracle::GAUSS_LEGENDRE_10;
use crate::sightline::Channels;
use std::collections::HashMap;

/// The rounded shape of one line: what a plan depends on.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub struct Shape {
    /// Centre minus the reference centre (or minus nothing, see [`Plan::absolute`]), in eighths of `width`.
    pub centre: i64,
    /// 1/e half-width over wavelength: quarter powers of 2.
    pub width: i16,
    /// Optical depth at the centre: half powers of 2, rounded up.
    pub depth: i16,
    /// Damping parameter: half powers of 2, rounded up.
    pub damping: i16,
    /// Reach in widths: eighth powers of 2, rounded up.
    pub reach: i16,
    /// Standard deviation of the line-spread function over wavelength: eighth powers of 2, rounded down.
    pub spread: i16,
}

/// Depths below it are all alike to the planner: the line is thin.
const THIN_DEPTH: f64 = 0.04;
/// Dampings below it are all alike: no wing of such a line is ever seen.
const SLIGHT_DAMPING: f64 = 1e-9;

impl Shape {
    /// Rounds the shape of a line; it reaches nowhere until [`Shape::reaching`].
    ///
    /// * `width`: 1/e half-width over wavelength; `depth`: optical depth scale at the centre.
    pub fn rounded(width: f64, depth: f64, damping: f64) -> Self {
        Shape {
            centre: 0,
            width: (4.0 * width.log2()).round() as i16,
            depth: (2.0 * depth.max(THIN_DEPTH).log2()).ceil() as i16,
            damping: (2.0 * damping.max(SLIGHT_DAMPING).log2()).ceil() as i16,
            reach: 0,
            spread: 0,
        }
    }

    /// The same shape with its reach.
    ///
    /// * `reach`: distance in rounded widths beyond which the line is not seen.
    /// * `spread`: standard deviation of the line-spread function over wavelength.
    pub fn reaching(mut self, reach: f64, spread: f64) -> Self {
        self.reach = (8.0 * reach.log2()).ceil() as i16;
        self.spread = (8.0 * spread.max(1e-12).log2()).floor() as i16;
        self
    }

    /// The rounded depth, from above.
    pub fn rounded_depth(&self) -> f64 {
        (0.5 * f64::from(self.depth)).exp2()
    }

    /// The rounded damping, from above.
    pub fn rounded_damping(&self) -> f64 {
        (0.5 * f64::from(self.damping)).exp2()
    }

    /// The same shape with its centre at `place` (in the unit of [`Shape::width`]: relative wavelength).
    pub fn at(mut self, place: f64) -> Self {
        self.centre = (8.0 * place / self.relative_width()).round() as i64;
        self
    }

    /// The rounded width.
    pub fn relative_width(&self) -> f64 {
        (0.25 * f64::from(self.width)).exp2()
    }

    /// The rounded reach, in relative wavelength.
    pub fn relative_reach(&self) -> f64 {
        (0.125 * f64::from(self.reach)).exp2() * self.relative_width()
    }

    /// Depth, damping and centre as the planner takes them.
    fn feature(&self, digits: f64, spacing_per_sigma: f64) -> Feature {
        let (depth, damping) = (self.rounded_depth(), self.rounded_damping());
        let width = self.relative_width();
        let centre = 0.125 * self.centre as f64 * width;
        let mut bumps = Vec::new();
        let mut bump = |place: f64, spacing: f64, extent: f64| {
            for side in [-1.0, 1.0] {
                bumps.push(Bump {
                    centre: centre + side * place * width,
                    spacing: spacing * width * if place == 0.0 { 2.0 } else { 1.0 },
                    extent: extent * width,
                });
            }
        };
        // The spacing that a Gaussian exp(-x²) needs: its transform is exp(-(π/spacing)²).
        let gaussian_spacing = std::f64::consts::PI / digits.sqrt();
        let edge = depth.max(1.0).ln().sqrt();
        let wing_edge = (depth * damping / std::f64::consts::PI.sqrt()).sqrt();
        // What the wing leaves of the light at the edge of the Gaussian core.
        let left = (-(wing_edge / edge.max(1.0)).powi(2)).exp();
        if depth <= 1.0 {
            bump(0.0, gaussian_spacing / (1.0 + 0.3 * depth), CORE_EXTENT);
        } else if left > (-digits).exp() {
            // 1 - exp(-exp(-y)) is smooth within π/2 of the real axis, y = 2 edge x.
            let softness = 1.0 / (4.0 * edge * edge + 1.7).sqrt();
            let apart = 0.5 + 0.5 * (edge / softness).tanh();
            bump(
                edge,
                std::f64::consts::PI.powi(2) / digits * softness / apart,
                EDGE_EXTENT * softness,
            );
        }
        if wing_edge > 2.0 {
            // exp(-(w/x)²) has the transform exp(-0.945 (w k)^(2/3)), by its saddle point at |x| = 0.4 w.
            let spacing = 2.0 * std::f64::consts::PI * wing_edge * (digits / 0.945).powf(-1.5);
            bump(0.6 * wing_edge, 1.2 * spacing, 0.8 * wing_edge);
        }
        // Beyond a few steps of the kernel's own spacing a wing is smooth on those steps already.
        let wing_extent = wing_edge.max(3.0 + edge) * width;
        let kernel_extent = 3.0 * spacing_per_sigma * (0.125 * f64::from(self.spread)).exp2();
        let has_wing = damping > 2.0 * SLIGHT_DAMPING && wing_extent < kernel_extent;
        Feature {
            centre,
            bumps,
            wing: if has_wing {
                WING_DENSITY * digits / 15.0
            } else {
                0.0
            },
            wing_extent,
            kernel_extent,
            reach: self.relative_reach(),
            edge: edge.max(wing_edge) * width,
            width,
            softness: width / (1.0 + 2.0 * edge),
        }
    }
}

/// Half-width of the dense part of the map of a thin line, in 1/e half-widths.
const CORE_EXTENT: f64 = 2.8;
/// The same around the edge of a saturated line, in units of the edge's softness.
const EDGE_EXTENT: f64 = 5.0;
/// Nodes per e-fold of distance in a damping wing, at a tolerance of exp(-15).
const WING_DENSITY: f64 = 1.1;

/// A stretch of dense nodes: density `1/(spacing (1 + ((z - centre)/extent)²))`.
struct Bump {
    centre: f64,
    spacing: f64,
    extent: f64,
}

/// The planner's view of one line, in relative wavelength.
struct Feature {
    centre: f64,
    bumps: Vec<Bump>,
    /// Density `wing/sqrt((z - centre)² + wing_extent²)` less the same with `kernel_extent`.
    wing: f64,
    wing_extent: f64,
    kernel_extent: f64,
    reach: f64,
    edge: f64,
    width: f64,
    softness: f64,
}

impl Feature {
    /// The line's part of the map u(z) and of its slope.
    fn map(&self, z: f64) -> (f64, f64) {
        let mut u = 0.0;
        let mut slope = 0.0;
        for bump in &self.bumps {
            let t = (z - bump.centre) / bump.extent;
            u += bump.extent / bump.spacing * t.atan();
            slope += 1.0 / (bump.spacing * (1.0 + t * t));
        }
        if self.wing > 0.0 {
            let near = (z - self.centre) / self.wing_extent;
            let far = (z - self.centre) / self.kernel_extent;
            u += self.wing * (near.asinh() - far.asinh());
            slope += self.wing
                * (1.0 / (self.wing_extent * (1.0 + near * near).sqrt())
                    - 1.0 / (self.kernel_extent * (1.0 + far * far).sqrt()));
        }
        (u, slope)
    }
}

/// Nodes and weights for a group of lines.
#[derive(Debug, Clone)]
pub struct Plan {
    /// Place of each node: relative to the reference centre (λ = λ_ref (1 + z)), or the vacuum wavelength
    /// in m where `absolute`; rising.
    pub place: Vec<f64>,
    /// Weight of each node, in the unit of its place.
    pub weight: Vec<f64>,
    /// True where the nodes are tied to the channels and not to the lines.
    pub absolute: bool,
}

/// Makes plans and keeps them.
pub struct Planner {
    digits: f64,
    spacing_per_sigma: f64,
    plans: HashMap<Vec<Shape>, usize>,
    kept: Vec<Plan>,
}

/// What a plan needs to know about the instrument near a group of lines.
pub struct Surroundings<'a> {
    /// Channels in use.
    pub channels: &'a Channels,
    /// Standard deviation of the line-spread function, in m.
    pub sigma_m: f64,
    /// True if nodes are to be tied to the channels; then the shapes' centres are absolute, as ln λ.
    pub sharp: bool,
}

/// More plans than this are not kept: they are made anew (a plan depends on nothing but its key).
const PLANS_KEPT: usize = 20_000;

impl Planner {
    /// A planner for a relative accuracy of the channel integrals.
    pub fn new(tolerance: f64) -> Self {
        let digits = (1.0 / tolerance.clamp(1e-12, 0.1)).ln();
        // The line-spread function's transform is exp(-2 (π σ/spacing)²).
        let spacing_per_sigma = (2.0 / digits).sqrt() * std::f64::consts::PI;
        Planner {
            digits,
            spacing_per_sigma,
            plans: HashMap::new(),
            kept: Vec::new(),
        }
    }

    /// The plan for a group of lines with overlapping reach, sorted by centre.
    pub fn plan(&mut self, shapes: &[Shape], surroundings: &Surroundings) -> &Plan {
        if let Some(&index) = self.plans.get(shapes) {
            return &self.kept[index];
        }
        if self.kept.len() >= PLANS_KEPT {
            self.plans.clear();
            self.kept.clear();
        }
        let features: Vec<Feature> = shapes
            .iter()
            .map(|shape| shape.feature(self.digits, self.spacing_per_sigma))
            .collect();
        let plan = if surroundings.sharp {
            self.panels(&features, surroundings)
        } else {
            self.mapped(&features, (0.125 * f64::from(shapes[0].spread)).exp2())
        };
        self.plans.insert(shapes.to_vec(), self.kept.len());
        self.kept.push(plan);
        &self.kept[self.kept.len() - 1]
    }

    /// The trapezoidal rule in the mapped coordinate.
    fn mapped(&self, features: &[Feature], sigma: f64) -> Plan {
        let cap = self.spacing_per_sigma * sigma;
        let map = |z: f64| {
            let mut u = z / cap;
            let mut slope = 1.0 / cap;
            for feature in features {
                let part = feature.map(z);
                u += part.0;
                slope += part.1;
            }
            (u, slope)
        };
        let low = features
            .iter()
            .map(|f| f.centre - f.reach)
            .fold(f64::INFINITY, f64::min);
        let high = features
            .iter()
            .map(|f| f.centre + f.reach)
            .fold(f64::NEG_INFINITY, f64::max);
        let (first, last) = (map(low).0, map(high).0);
        let count = (last - first).ceil() as usize + 1;
        let start = 0.5 * (first + last) - 0.5 * (count - 1) as f64;
        let mut plan = Plan {
            place: Vec::new(),
            weight: Vec::new(),
            absolute: false,
        };
        let (mut below, mut z) = (low - (high - low) - cap, low);
        for k in 0..count {
            let wanted = start + k as f64;
            // u rises with z: Newton's step, held inside the bracket of the last node and the far end.
            let (mut lower, mut upper) = (below, high + (high - low) + cap);
            let mut slope = 1.0;
            for _ in 0..100 {
                let (u, steepness) = map(z);
                slope = steepness;
                // A node may sit off its place by this part of a step: it is far below the rule's own error.
                if (u - wanted).abs() < 1e-9 {
                    break;
                }
                if u < wanted {
                    lower = z;
                } else {
                    upper = z;
                }
                let next = z - (u - wanted) / slope;
                z = if next > lower && next < upper {
                    next
                } else {
                    0.5 * (lower + upper)
                };
            }
            plan.place.push(z);
            plan.weight.push(1.0 / slope);
            below = z;
            // One step further at the present density.
            z += 1.0 / slope;
        }
        plan
    }

    /// Gauss-Legendre panels between channel edges and the structure of the lines.
    fn panels(&self, features: &[Feature], surroundings: &Surroundings) -> Plan {
        const IN_SIGMAS: [f64; 5] = [0.0, 1.0, 2.2, 3.8, 6.5];
        let low = features
            .iter()
            .map(|f| f.centre - f.reach)
            .fold(f64::INFINITY, f64::min)
            .exp();
        let high = features
            .iter()
            .map(|f| f.centre + f.reach)
            .fold(f64::NEG_INFINITY, f64::max)
            .exp();
        let sigma = surroundings.sigma_m;
        let mut points = vec![low, high];
        for run in surroundings.channels.runs() {
            for &edge in surroundings.channels.edges_of(run) {
                if edge > low - 7.0 * sigma && edge < high + 7.0 * sigma {
                    points.extend(
                        IN_SIGMAS
                            .iter()
                            .flat_map(|s| [edge - s * sigma, edge + s * sigma]),
                    );
                }
            }
        }
        for feature in features {
            let mut step = 0.0;
            let mut stride = 1.5 * feature.softness.min(feature.width);
            while step < feature.reach {
                // Even around both edges of a saturated line, growing away from it.
                for side in [-1.0, 1.0] {
                    points.push((feature.centre + side * (feature.edge + step)).exp());
                    if step < feature.edge {
                        points.push((feature.centre + side * (feature.edge - step)).exp());
                    }
                }
                step += stride;
                stride *= if step > 4.0 * feature.width { 1.5 } else { 1.0 };
            }
        }
        points.retain(|&point| point >= low && point <= high);
        points.sort_by(f64::total_cmp);
        points.dedup_by(|b, a| *b - *a < 1e-13 * *a);
        let mut plan = Plan {
            place: Vec::new(),
            weight: Vec::new(),
            absolute: true,
        };
        for panel in points.windows(2) {
            let (middle, half) = (0.5 * (panel[0] + panel[1]), 0.5 * (panel[1] - panel[0]));
            for (node, weight) in GAUSS_LEGENDRE_10 {
                plan.place.push(middle + half * node);
                plan.weight.push(half * weight);
            }
        }
        plan
    }
}
