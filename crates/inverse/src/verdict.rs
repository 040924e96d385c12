//! What the numbers of a fit are worth: the flags, and why each was raised.

use crate::coordinate::Kind;
use crate::fit::Found;
use crate::problem::Problem;
use backlit_forward::engine::PeakDepth;
use backlit_forward::planck::{radiance, radiance_slope};
use backlit_forward::{Background, Layout};

/// The flags of one fit: bits with fixed names.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct Flags(pub u32);

impl Flags {
    /// No minimum was reached.
    pub const NOT_CONVERGED: u32 = 1;
    /// A value stands at the edge of its range.
    pub const AT_BOUND: u32 = 2;
    /// Gas and background are equally hot.
    pub const NO_CONTRAST: u32 = 4;
    /// All lines of a species are opaque.
    pub const SATURATED: u32 = 8;
    /// A species does not stand out of the noise.
    pub const NOT_DETECTED: u32 = 16;
    /// Some values cannot be told apart.
    pub const DEGENERATE: u32 = 32;
    /// Too few usable channels.
    pub const TOO_LITTLE_DATA: u32 = 64;
    /// The model does not describe the data.
    pub const POOR_FIT: u32 = 128;

    /// Bit and name of every flag.
    pub const ALL: [(u32, &'static str); 8] = [
        (Self::NOT_CONVERGED, "not_converged"),
        (Self::AT_BOUND, "at_bound"),
        (Self::NO_CONTRAST, "no_contrast"),
        (Self::SATURATED, "saturated"),
        (Self::NOT_DETECTED, "not_detected"),
        (Self::DEGENERATE, "degenerate"),
        (Self::TOO_LITTLE_DATA, "too_little_data"),
        (Self::POOR_FIT, "poor_fit"),
    ];

    /// Raises a flag.
    pub fn raise(&mut self, flag: u32) {
        self.0 |= flag;
    }

    /// True if the flag is up.
    pub fn has(self, flag: u32) -> bool {
        self.0 & flag != 0
    }

    /// Names of the flags that are up.
    pub fn names(self) -> Vec<&'static str> {
        Self::ALL
            .iter()
            .filter(|(bit, _)| self.has(*bit))
            .map(|&(_, name)| name)
            .collect()
    }
}

/// Two values with a stronger correlation are one, if that leaves them uncertain by more than
/// [`LOOSE`].
const TIED: f64 = 0.99;
/// Relative standard deviation above which a tied value is not worth its name.
const LOOSE: f64 = 0.1;
/// A correlation that no reader should overlook however small the standard deviations are.
const INSEPARABLE: f64 = 0.9995;
/// Standard deviation, in e-folds, of a value that is as good as unknown.
const WIDE_OPEN: f64 = 0.7;
/// Gas and background closer than this many standard deviations are as good as equal.
const CONTRAST: f64 = 3.0;
/// Optical depth of the faintest line from which a column is a guess at any noise.
const OPAQUE: f64 = 50.0;
/// Optical depth from which a column that the noise leaves open is called saturated.
const BLACK: f64 = 3.0;
/// Standard deviation of a column, in e-folds, from which it is open.
const OPEN: f64 = 0.25;
/// Reduced chi-square is too large beyond this many of its standard deviations, and beyond the factor.
const MISFIT: f64 = 5.0;
const MISFIT_FACTOR: f64 = 1.15;

/// Raises the flags that concern values which were found, and says why; returns the free values whose covariance
/// is not to be believed.
pub(crate) fn judge(
    problem: &Problem,
    found: &Found,
    flags: &mut Flags,
    messages: &mut Vec<String>,
) -> Vec<usize> {
    let mut raised = Raised {
        flags,
        messages,
        doubtful: Vec::new(),
    };
    bounds(problem, found, &mut raised);
    contrast(problem, found, &mut raised);
    saturation(problem, found, &mut raised);
    ties(problem, found, &mut raised);
    open_values(problem, found, &mut raised);
    let mut doubtful = raised.doubtful;
    doubtful.sort_unstable();
    doubtful.dedup();
    doubtful
}

/// What the verdict has against the answer so far.
struct Raised<'a> {
    flags: &'a mut Flags,
    messages: &'a mut Vec<String>,
    /// Free values whose covariance means little.
    doubtful: Vec<usize>,
}

impl Raised<'_> {
    fn raise(&mut self, flag: u32, free: &[usize], message: String) {
        self.flags.raise(flag);
        self.messages.push(message);
        self.doubtful.extend_from_slice(free);
    }
}

fn bounds(problem: &Problem, found: &Found, raised: &mut Raised<'_>) {
    for &i in &found.free {
        let value = &problem.free[i];
        let at = found.parameters[value.parameter];
        let margin = 1e-9 * (value.high - value.low);
        let side = if at <= value.low + margin {
            "lower"
        } else if at >= value.high - margin {
            "upper"
        } else {
            continue;
        };
        let message = format!(
            "{} stands at its {side} bound",
            problem.quantities()[i].name
        );
        raised.raise(Flags::AT_BOUND, &[i], message);
    }
}

fn contrast(problem: &Problem, found: &Found, raised: &mut Raised<'_>) {
    if !matches!(
        problem.engine.sightline().background,
        Background::Blackbody { .. }
    ) {
        return;
    }
    for (cloud, place) in problem.engine.layout().clouds.iter().enumerate() {
        if found.absent.contains(&cloud) {
            continue;
        }
        // Where the gas shows most, its contrast S - I_bg against the contrast's own uncertainty.
        let strongest = found
            .depths
            .iter()
            .filter(|(depth, _)| depth.cloud == cloud)
            .max_by(|a, b| a.0.optical_depth.total_cmp(&b.0.optical_depth));
        let Some((line, _)) = strongest else { continue };
        let (gas, behind) = (place.temperature(), Layout::BACKGROUND_TEMPERATURE);
        let at = |parameter: usize| {
            let temperature_k = found.parameters[parameter].exp();
            (
                radiance(line.centre_m, temperature_k),
                radiance_slope(line.centre_m, temperature_k),
            )
        };
        let ((source, source_slope), (light, light_slope)) = (at(gas), at(behind));
        let dilution = found.parameters[Layout::DILUTION];
        let contrast = source - dilution * light;
        // Within its bounds the gas may be hotter only, or cooler only: then it cannot be as hot.
        let (low, high) = problem.range_of(gas, &found.parameters);
        let side = |ln_t: f64| radiance(line.centre_m, ln_t.exp()) > dilution * light;
        if high > low && side(low) == side(high) {
            continue;
        }
        let slopes: Vec<(usize, f64)> = [
            (gas, source_slope),
            (behind, -dilution * light_slope),
            (Layout::DILUTION, -light),
        ]
        .into_iter()
        .filter_map(|(parameter, slope)| {
            let position = found
                .free
                .iter()
                .position(|&i| problem.free[i].parameter == parameter)?;
            Some((position, slope))
        })
        .collect();
        let mut variance = 0.0;
        for &(a, slope_a) in &slopes {
            for &(b, slope_b) in &slopes {
                variance += slope_a * slope_b * found.covariance.matrix[(a, b)];
            }
        }
        let sigma = variance.max(0.0).sqrt();
        if contrast.abs() < CONTRAST * sigma || contrast.abs() < 1e-9 * light {
            let involved: Vec<usize> = found
                .free
                .iter()
                .copied()
                .filter(|&i| {
                    let value = &problem.free[i];
                    !found.absent_columns.contains(&i)
                        && (value.cloud == Some(cloud) && value.kind != Kind::Velocity
                            || slopes
                                .iter()
                                .any(|&(position, _)| found.free[position] == i))
                })
                .collect();
            let message = format!(
                "cloud {} is as hot as the background within {:.1} standard deviations",
                cloud + 1,
                if sigma > 0.0 {
                    contrast.abs() / sigma
                } else {
                    0.0
                }
            );
            raised.raise(Flags::NO_CONTRAST, &involved, message);
        }
    }
}

fn saturation(problem: &Problem, found: &Found, raised: &mut Raised<'_>) {
    for (position, &i) in found.free.iter().enumerate() {
        let value = &problem.free[i];
        let (Kind::Column, Some(cloud), Some(species)) = (value.kind, value.cloud, value.species)
        else {
            continue;
        };
        if found.absent_columns.contains(&i) {
            continue;
        }
        // Lines that the noise hides say nothing.
        let seen: Vec<f64> = found
            .depths
            .iter()
            .filter(|(depth, seen)| depth.cloud == cloud && depth.species == species && *seen)
            .map(|(depth, _): &(PeakDepth, bool)| depth.optical_depth)
            .collect();
        let faintest = seen.iter().copied().fold(f64::INFINITY, f64::min);
        let open = found.covariance.sigma(position) > OPEN;
        if !seen.is_empty() && (faintest > OPAQUE || (faintest > BLACK && open)) {
            let message = format!(
                "every line of {} that shows is opaque (optical depth {faintest:.3} and more)",
                problem.species[cloud][species]
            );
            raised.raise(Flags::SATURATED, &[i], message);
        }
    }
}

fn ties(problem: &Problem, found: &Found, raised: &mut Raised<'_>) {
    let quantities = problem.quantities();
    for (a, &i) in found.free.iter().enumerate() {
        if found.absent_columns.contains(&i) {
            continue;
        }
        let value = &problem.free[i];
        if !found.covariance.sigma(a).is_finite() {
            let message = format!("{} has no effect on the data", quantities[i].name);
            raised.raise(Flags::DEGENERATE, &[i], message);
            continue;
        }
        for (b, &j) in found.free.iter().enumerate().skip(a + 1) {
            let correlation = found.covariance.correlation(a, b);
            let loose = loose(found, a, value.kind) || loose(found, b, problem.free[j].kind);
            if correlation.abs() > INSEPARABLE || (correlation.abs() > TIED && loose) {
                let message = format!(
                    "{} and {}: correlation {correlation:.4}",
                    quantities[i].name, quantities[j].name
                );
                raised.raise(Flags::DEGENERATE, &[i, j], message);
            }
        }
    }
    // Three or more values may be tied with no two of them strongly correlated.
    if !raised.flags.has(Flags::DEGENERATE) && found.covariance.smallest_eigenvalue < 1e-9 {
        let tied: Vec<usize> = found
            .free
            .iter()
            .zip(&found.covariance.weakest_direction)
            .filter(|(_, part)| part.abs() > 0.2)
            .map(|(&i, _)| i)
            .collect();
        let names: Vec<&str> = tied.iter().map(|&i| quantities[i].name.as_str()).collect();
        let message = format!("only a combination is fixed of: {}", names.join(", "));
        raised.raise(Flags::DEGENERATE, &tied, message);
    }
}

/// Raises `degenerate` for values that the data leave open over much of their range, alone or because
/// another minimum fits as well.
fn open_values(problem: &Problem, found: &Found, raised: &mut Raised<'_>) {
    let quantities = problem.quantities();
    // The same clouds in another order are no other answer.
    let in_order = |parameters: &[f64]| {
        problem
            .twins_in_order(parameters)
            .unwrap_or_else(|| parameters.to_vec())
    };
    let here = in_order(&found.parameters);
    let rivals: Vec<Vec<f64>> = found.rivals.iter().map(|rival| in_order(rival)).collect();
    for (position, &i) in found.free.iter().enumerate() {
        let value = &problem.free[i];
        let hidden = value
            .cloud
            .is_some_and(|cloud| found.absent.contains(&cloud));
        if hidden || found.absent_columns.contains(&i) {
            continue;
        }
        let at = here[value.parameter];
        let sigma = found.covariance.sigma(position);
        let enough = match value.kind {
            Kind::Temperature | Kind::Column | Kind::Scale => {
                WIDE_OPEN.min(0.5 * (value.high - value.low))
            }
            Kind::Dilution => 0.3,
            // A width of nothing is a bound, a velocity is searched for: neither is a matter of degeneracy.
            _ => continue,
        };
        if sigma > enough {
            let message = format!("{} is left open by the data", quantities[i].name);
            raised.raise(Flags::DEGENERATE, &[i], message);
        } else if let Some(rival) = rivals
            .iter()
            .find(|rival| (rival[value.parameter] - at).abs() > (5.0 * sigma).max(0.5 * enough))
        {
            let message = format!(
                "{} = {:.5} {} fits as well",
                quantities[i].name,
                value.kind.reported(rival[value.parameter]),
                quantities[i].units
            );
            raised.raise(Flags::DEGENERATE, &[i], message);
        }
    }
}

fn loose(found: &Found, position: usize, kind: Kind) -> bool {
    let sigma = found.covariance.sigma(position);
    match kind {
        Kind::Temperature | Kind::Column | Kind::Scale => sigma > LOOSE,
        Kind::Dilution => sigma > 0.1 * LOOSE,
        _ => false,
    }
}

/// Raises `poor_fit` where the residuals are larger than the noise, over all channels or near the lines.
pub(crate) fn misfit(
    chi_square: f64,
    degrees: f64,
    near_lines: (f64, f64),
    flags: &mut Flags,
    messages: &mut Vec<String>,
) {
    let too_large = |chi_square: f64, degrees: f64| {
        degrees > 0.0
            && chi_square > degrees + MISFIT * (2.0 * degrees).sqrt()
            && chi_square > MISFIT_FACTOR * degrees
    };
    if too_large(chi_square, degrees) {
        flags.raise(Flags::POOR_FIT);
        messages.push(format!("reduced chi-square is {:.3}", chi_square / degrees));
    } else if too_large(near_lines.0, near_lines.1) {
        flags.raise(Flags::POOR_FIT);
        messages.push(format!(
            "reduced chi-square near the lines is {:.3}",
            near_lines.0 / near_lines.1
        ));
    }
}
