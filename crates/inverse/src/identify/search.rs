//! The search: one velocity for all, the strongest species first, then what they leave unexplained.

use super::blend::{self, Shape};
use super::continuum::{Flattened, flatten, median};
use super::decoys::{DECOYS, Displacement, Null, Reached};
use super::evidence::{Best, Expectation, Worth, search};
use super::features::{self, Features, Peak};
use super::finding::{Finding, Identification, LineFound, LineState, Verdict};
use super::map::{BLENDED, Grid, Map, OUTSIDE};
use super::pattern::{Pattern, PatternLine, STEPS, STEPS_PER_OCTAVE, patterns};
use super::{Choices, Observed, Width};
use backlit_species::Species;
use backlit_units::doppler::{velocity_from_factor, wavelength_factor};
use std::sync::Arc;

/// Dark, then bright.
const SIGNS: [f64; 2] = [-1.0, 1.0];
/// Height of a line that should stand out, in standard deviations.
const STANDS_OUT: f64 = 5.0;
/// Height of a peak that counts as seen.
const SEEN: f64 = 3.5;
/// Decoys as good as this leave a species possible.
const POSSIBLE_RATE: f64 = 0.01;
/// Evidence below this is no reason to take part in the choice of the common velocity.
const TAKES_PART: f64 = 5.0;
/// The least evidence for `present`, in nats: odds of 55 to 1 whatever the decoys say.
const LEAST_EVIDENCE: f64 = 4.0;
/// Loss of evidence, in nats, of a species whose lines have the other sign than those of the strongest: what stands
/// between dark lines looks bright, and the other way round.
const OTHER_SIGN: f64 = 8.0;
/// Rare isotopes that stand for a common one within the errors of velocity and scale, and the logarithm of their
/// share: D/H 1.6e-4 (ocean water), 13C/12C 1.1e-2, 18O/16O 2.0e-3; from memory, after Meija et al. 2016, Pure Appl.
/// Chem. 88, 293.
const RARE: [(&str, f64); 3] = [("D I", -8.8), ("13CO", -4.5), ("C18O", -6.2)];
/// A pattern explains a peak up to this many times what it expects.
const EXPLAINS: f64 = 12.0;
/// Loss of evidence at which a temperature no longer fits, in nats.
const TEMPERATURE_LOSS: f64 = 3.0;

struct Candidate {
    species: Arc<Species>,
    /// For each sign.
    patterns: [Vec<Pattern>; 2],
}

struct Sky {
    grid: Grid,
    features: Features,
    flattened: Flattened,
    maps: [Map; 2],
    worths: [Worth; 2],
    highest_top: [usize; 2],
    /// What evidence of each sign loses.
    loss: [f64; 2],
}

/// Judges every candidate species; see the module for the method.
///
/// * `candidates`: the species in question, usually a whole catalogue.
///
/// `None` with fewer than 41 usable channels. False alarms are measured with decoys on the very same spectrum;
/// what is called present keeps the wanted false discovery rate by the rule of Benjamini & Hochberg (1995, J. R.
/// Statist. Soc. B 57, 289). A species with one usable line is never more than possible, unless it is expected.
pub fn identify(
    observed: &Observed<'_>,
    candidates: &[Arc<Species>],
    choices: &Choices,
) -> Option<Identification> {
    let centres_m = observed.centres_vac_m;
    let flattened = flatten(observed.intensity, observed.uncertainty, observed.mask)?;
    let fwhm_channels = fwhm_channels(centres_m, &flattened, choices.width);
    let features = features::find(&flattened, fwhm_channels);
    let grid = Grid::new(centres_m, &features.fwhm_channels, choices.scale_error_m);
    let expectation = Expectation::of_normal_noise();
    let sheets = [&features.dark, &features.bright];
    let maps = [0, 1].map(|s| Map::new(&grid, &features, sheets[s], SIGNS[s]));
    let worths = [0, 1].map(|s: usize| expectation.worth(&maps[s]));
    let highest_top = [0, 1].map(|s: usize| {
        let highest = sheets[s].iter().map(|peak| peak.snr).fold(2.0, f64::max);
        ((2.0 * highest).log2() * STEPS_PER_OCTAVE)
            .ceil()
            .min((STEPS - 1) as f64) as usize
    });
    let pool: Vec<Candidate> = candidates
        .iter()
        .map(|species| Candidate {
            species: species.clone(),
            patterns: [false, true]
                .map(|bright| patterns(species, centres_m, &flattened, &features, &grid, bright)),
        })
        .collect();
    let fresh = Sky {
        grid,
        features,
        flattened,
        maps,
        worths,
        highest_top,
        loss: [0.0; 2],
    };
    let shifts = shifts(&fresh.grid, choices.velocity_m_per_s);
    let (common, lone_shifts) = common_shift(&fresh, &pool, &shifts);
    let near: Vec<i32> = shifts
        .iter()
        .copied()
        .filter(|shift| (shift - common).abs() <= fresh.grid.usual_reach())
        .collect();
    Some(judge(
        fresh,
        &pool,
        &near,
        lone_shifts,
        choices,
        &expectation,
        centres_m,
    ))
}

fn fwhm_channels(centres_m: &[f64], flattened: &Flattened, width: Width) -> Vec<f64> {
    let count = centres_m.len();
    let channel_m = |k: usize| {
        let (from, to) = (k.saturating_sub(1), (k + 1).min(count - 1));
        (centres_m[to] - centres_m[from]) / (to - from) as f64
    };
    // A channel is itself a box of one channel: 0.8 FWHM of its equal Gaussian.
    let sampled = |fwhm: f64| fwhm.hypot(0.8).clamp(0.8, 200.0);
    match width {
        Width::Unknown => vec![features::estimate_fwhm_channels(flattened); count],
        Width::Fwhm { fwhm_m } => (0..count).map(|k| sampled(fwhm_m / channel_m(k))).collect(),
        Width::ResolvingPower { resolving_power } => (0..count)
            .map(|k| sampled(centres_m[k] / resolving_power / channel_m(k)))
            .collect(),
    }
}

fn shifts(grid: &Grid, velocity_m_per_s: (f64, f64)) -> Vec<i32> {
    let cells = |v: f64| wavelength_factor(v).ln() / grid.step();
    let (low, high) = (cells(velocity_m_per_s.0), cells(velocity_m_per_s.1));
    let step = (0.7 * f64::from(grid.usual_reach())).max(1.0);
    let count = ((high - low) / step).ceil() as usize;
    let mut shifts: Vec<i32> = (0..=count)
        .map(|k| (low + (high - low) * k as f64 / count.max(1) as f64).round() as i32)
        .collect();
    shifts.dedup();
    shifts
}

/// The shift that most evidence shares, and how many independent shifts there were to choose from.
fn common_shift(sky: &Sky, pool: &[Candidate], shifts: &[i32]) -> (i32, f64) {
    let mut total = vec![0.0; shifts.len()];
    for candidate in pool {
        let mut curve = vec![f64::NEG_INFINITY; shifts.len()];
        for s in 0..2 {
            search(
                &sky.maps[s],
                &sky.worths[s],
                &candidate.patterns[s],
                shifts,
                sky.highest_top[s],
                &|cell| cell,
                &mut |nth, here| curve[nth] = curve[nth].max(here),
            );
        }
        let usual = median(&mut curve.clone());
        for (sum, here) in total.iter_mut().zip(&curve) {
            let above = here - usual.max(0.0) - TAKES_PART;
            if above > 0.0 {
                *sum += above;
            }
        }
    }
    let middle = (shifts.len() - 1) as f64 / 2.0;
    let best = (0..shifts.len())
        .max_by(|&a, &b| {
            // Where nothing tells, the velocity nearest to the middle.
            let near = |k: usize| -(k as f64 - middle).abs();
            total[a]
                .total_cmp(&total[b])
                .then(near(a).total_cmp(&near(b)))
        })
        .unwrap_or(0);
    (shifts[best], (shifts.len() as f64 / 2.0).max(1.0))
}

fn best_of(
    sky: &Sky,
    candidate: &Candidate,
    near: &[i32],
    place: &impl Fn(i32) -> i32,
) -> (usize, Best) {
    let mut best = (0, Best::NONE);
    for s in 0..2 {
        let mut here = search(
            &sky.maps[s],
            &sky.worths[s],
            &candidate.patterns[s],
            near,
            sky.highest_top[s],
            place,
            &mut |_, _| {},
        );
        here.evidence -= sky.loss[s];
        if here.evidence > best.1.evidence {
            best = (s, here);
        }
    }
    best
}

fn null(sky: &Sky, pool: &[Candidate], near: &[i32]) -> Null {
    let decoys: Vec<Vec<Reached>> = pool
        .iter()
        .enumerate()
        .map(|(index, candidate)| {
            (0..DECOYS)
                .map(|decoy| {
                    let moved = Displacement::new(&sky.grid, index, decoy);
                    let place = |cell| moved.place(cell);
                    let (s, best) = best_of(sky, candidate, near, &place);
                    Reached {
                        evidence: best.evidence,
                        seen: seen(sky, candidate, s, &best, &place),
                    }
                })
                .filter(|reached| reached.evidence.is_finite())
                .collect()
        })
        .collect();
    Null::new(&decoys)
}

/// Lines of the best pattern that count as seen.
fn seen(
    sky: &Sky,
    candidate: &Candidate,
    s: usize,
    best: &Best,
    place: &impl Fn(i32) -> i32,
) -> usize {
    let Some(pattern) = candidate.patterns[s].get(best.pattern) else {
        return 0;
    };
    pattern
        .lines
        .iter()
        .filter(|line| usize::from(line.below) <= best.top)
        .filter(|line| {
            let cell = place(line.cell) + best.shift;
            let code = sky.maps[s].at(cell);
            code < BLENDED
                && sky.maps[s].height_at(cell) >= SEEN
                && sky.worths[s].of(best.top - usize::from(line.below), code) > 0.0
        })
        .count()
}

fn judge(
    mut sky: Sky,
    pool: &[Candidate],
    near: &[i32],
    choice_of_shifts: f64,
    choices: &Choices,
    expectation: &Expectation,
    centres_m: &[f64],
) -> Identification {
    let fresh_maps = sky.maps.clone();
    let testable = pool
        .iter()
        .filter(|c| c.patterns.iter().any(|p| !p.is_empty()))
        .count()
        .max(1);
    // Species, sign, best, lines as they were found, rate.
    let mut accepted: Vec<(usize, Finding)> = Vec::new();
    let mut claims: Vec<(usize, Best)> = Vec::new();
    let mut rest: Vec<Finding>;
    // What chance is expected to make, at the round in which it makes most.
    let mut by_chance: f64 = 0.0;
    let by_chance = loop {
        let null = null(&sky, pool, near);
        let others = (0..pool.len()).filter(|index| {
            let testable = pool[*index].patterns.iter().any(|p| !p.is_empty());
            testable && accepted.iter().all(|(done, _)| done != index)
        });
        let rate = choices.false_discovery_rate * (accepted.len() + 1) as f64 / testable as f64;
        by_chance = by_chance.max(null.expected_by_chance(others, rate, LEAST_EVIDENCE));
        let mut chosen: Option<(usize, usize, Best, Finding)> = None;
        let mut strongest = f64::NEG_INFINITY;
        rest = Vec::new();
        for (index, candidate) in pool.iter().enumerate() {
            if accepted.iter().any(|(done, _)| *done == index) {
                continue;
            }
            let (s, best) = best_of(&sky, candidate, near, &|cell| cell);
            let mut finding = finding(&sky, &fresh_maps, candidate, s, &best);
            let expected = choices.expected.contains(&finding.name);
            if best.evidence.is_finite() {
                finding.false_alarm_rate = null.rate(index, best.evidence);
            }
            let seen = finding.count(LineState::Seen);
            let rank = (accepted.len() + 1) as f64;
            // The first one also chooses the velocity, out of many.
            let chances = if accepted.is_empty() {
                choice_of_shifts
            } else {
                1.0
            };
            let share = finding.false_alarm_rate * testable as f64 / rank;
            let enough = seen >= 2 || (seen >= 1 && expected);
            let wanted = if expected {
                1.0
            } else {
                choices.false_discovery_rate
            };
            let weighed = best.evidence + if expected { 0.0 } else { rarity(&finding.name) };
            let convincing = weighed >= LEAST_EVIDENCE || expected;
            if enough && convincing && share * chances <= wanted && weighed > strongest {
                strongest = weighed;
                chosen = Some((index, s, best, finding.clone()));
            }
            rest.push(finding);
        }
        let Some((index, s, best, mut finding)) = chosen else {
            break by_chance;
        };
        finding.verdict = Verdict::Present;
        if accepted.is_empty() {
            sky.loss[1 - s] = OTHER_SIGN;
        }
        claim(&mut sky, &pool[index], s, &best, expectation);
        accepted.push((index, finding));
        claims.push((s, best));
    };
    for finding in &mut rest {
        let seen = finding.count(LineState::Seen);
        finding.verdict = if !finding.evidence.is_finite() {
            Verdict::Untestable
        } else if seen >= 1 && finding.false_alarm_rate <= POSSIBLE_RATE && finding.evidence > 2.0 {
            Verdict::Possible
        } else {
            Verdict::Absent
        };
        if finding.verdict == Verdict::Absent {
            finding.bright = None;
            finding.velocity_m_per_s = None;
            finding.temperature_k = None;
        }
    }
    share_out(&sky, pool, &claims, &mut accepted);
    let present = accepted
        .iter()
        .filter(|(_, f)| f.verdict == Verdict::Present)
        .count() as f64;
    let shared: Vec<(f64, f64)> = accepted
        .iter()
        .filter_map(|(_, f)| f.velocity_m_per_s.map(|v| (v, f.evidence)))
        .collect();
    let velocity_m_per_s = (!shared.is_empty()).then(|| {
        shared.iter().map(|(v, w)| v * w).sum::<f64>() / shared.iter().map(|(_, w)| w).sum::<f64>()
    });
    rest.sort_by(|a, b| {
        (a.verdict as u8)
            .cmp(&(b.verdict as u8))
            .then(b.evidence.total_cmp(&a.evidence))
    });
    let mut species: Vec<Finding> = accepted.into_iter().map(|(_, f)| f).collect();
    species.extend(rest);
    species.sort_by_key(|f| f.verdict as u8);
    let middle = centres_m.len() / 2;
    Identification {
        species,
        velocity_m_per_s,
        fwhm_m: features::middle(&sky.features.fwhm_channels)
            * (centres_m[middle] - centres_m[middle - 1]),
        fwhm_is_estimated: choices.width == Width::Unknown,
        noise_is_estimated: sky.flattened.noise_is_estimated,
        false_discovery_rate: if present > 0.0 {
            (by_chance / present).min(1.0)
        } else {
            f64::NAN
        },
        continuum: sky.flattened.continuum,
    }
}

/// Shares blends out among the accepted species; one that owns nothing then is only possible.
fn share_out(
    sky: &Sky,
    pool: &[Candidate],
    claims: &[(usize, Best)],
    accepted: &mut [(usize, Finding)],
) {
    for (sign, factor) in SIGNS.into_iter().enumerate() {
        let mut shapes: Vec<Shape> = Vec::new();
        for (nth, ((s, best), (index, _))) in claims.iter().zip(accepted.iter()).enumerate() {
            if *s != sign {
                continue;
            }
            let pattern = &pool[*index].patterns[*s][best.pattern];
            let expected = pattern
                .lines
                .iter()
                .filter(|l| usize::from(l.below) <= best.top);
            shapes.extend(expected.filter_map(|line| {
                let cell = usize::try_from(line.cell + best.shift).ok()?;
                let channel = f64::from(*sky.grid.channel.get(cell)?);
                let k = (channel.round() as usize).min(sky.features.gain.len() - 1);
                Some(Shape {
                    species: nth,
                    channel,
                    fwhm_channels: sky.features.fwhm_channels[k],
                    height: height(best.top - usize::from(line.below)) * sky.features.gain[k],
                })
            }));
        }
        if shapes.is_empty() {
            continue;
        }
        let data: Vec<f64> = sky
            .flattened
            .residual_sigmas
            .iter()
            .map(|residual| factor * residual)
            .collect();
        let amounts = blend::shares(&data, &shapes, accepted.len());
        for (nth, (_, finding)) in accepted.iter_mut().enumerate() {
            if claims[nth].0 != sign {
                continue;
            }
            if amounts[nth] == 0.0 {
                finding.verdict = Verdict::Possible;
            }
            let own = shapes.iter().filter(|shape| shape.species == nth);
            let inside = |line: &&mut LineFound| line.state != LineState::Outside;
            for (line, shape) in finding.lines.iter_mut().filter(inside).zip(own) {
                let at = |other: &Shape| {
                    let u = 2.354_82 * (other.channel - shape.channel) / shape.fwhm_channels;
                    amounts[other.species] * other.height * (-0.5 * u * u).exp()
                };
                let (mut all, mut mine) = (0.0, 0.0);
                for other in &shapes {
                    let part = at(other);
                    all += part;
                    if other.species == nth {
                        mine += part;
                    }
                }
                line.share = if all > 0.0 { mine / all } else { 0.0 };
            }
        }
    }
}

/// Takes what a species explains from the maps.
fn claim(sky: &mut Sky, candidate: &Candidate, s: usize, best: &Best, expectation: &Expectation) {
    for line in &candidate.patterns[s][best.pattern].lines {
        if usize::from(line.below) > best.top {
            continue;
        }
        let expected = height(best.top - usize::from(line.below));
        let cell = line.cell + best.shift;
        let found = sky.maps[s].height_at(cell);
        if found > 0.0 && expected * EXPLAINS >= found {
            sky.maps[s].claim(&sky.grid, cell);
        }
    }
    sky.maps[s].count(&sky.grid);
    sky.worths[s] = expectation.worth(&sky.maps[s]);
}

/// Logarithm of the share of a rare isotope; 0 for the others.
fn rarity(name: &str) -> f64 {
    RARE.iter()
        .find(|(rare, _)| *rare == name)
        .map_or(0.0, |(_, share)| *share)
}

fn height(step: usize) -> f64 {
    (step as f64 / STEPS_PER_OCTAVE).exp2()
}

fn finding(sky: &Sky, fresh: &[Map; 2], candidate: &Candidate, s: usize, best: &Best) -> Finding {
    let mut finding = Finding {
        name: candidate.species.name.clone(),
        verdict: Verdict::Absent,
        evidence: f64::NAN,
        false_alarm_rate: f64::NAN,
        bright: None,
        velocity_m_per_s: None,
        temperature_k: None,
        lines: Vec::new(),
        upper_limit_peak: None,
        upper_limit_line_vac_m: None,
    };
    let Some(pattern) = candidate.patterns[s].get(best.pattern) else {
        return finding;
    };
    finding.evidence = best.evidence;
    finding.bright = Some(s == 1);
    finding.lines = pattern
        .lines
        .iter()
        .filter(|line| usize::from(line.below) <= best.top)
        .map(|line| line_found(sky, fresh, candidate, s, best, line))
        .collect();
    let (mut sum, mut weight) = (0.0, 0.0);
    for line in finding.lines.iter().filter(|l| l.state == LineState::Seen) {
        let own = line.snr.min(30.0).powi(2);
        sum += own * velocity_from_factor(line.observed_vac_m / line.rest_vac_m);
        weight += own;
    }
    finding.velocity_m_per_s = (weight > 0.0).then(|| sum / weight);
    finding.temperature_k = temperatures(sky, candidate, s, best);
    if let Some(line) = pattern.lines.first() {
        let k = channel(sky, line.cell);
        finding.upper_limit_peak = Some(3.0 * sky.flattened.sigma[k] * sky.features.gain[k]);
        finding.upper_limit_line_vac_m =
            Some(candidate.species.lines[line.line as usize].wavelength_vac_m);
    }
    finding
}

fn channel(sky: &Sky, cell: i32) -> usize {
    let cell = cell.clamp(0, sky.grid.len() as i32 - 1) as usize;
    (sky.grid.channel[cell].round() as usize).min(sky.features.snr.len() - 1)
}

fn line_found(
    sky: &Sky,
    fresh: &[Map; 2],
    candidate: &Candidate,
    s: usize,
    best: &Best,
    line: &PatternLine,
) -> LineFound {
    let step = best.top - usize::from(line.below);
    let expected_snr = height(step);
    let cell = line.cell + best.shift;
    let code = sky.maps[s].at(cell);
    let rest_vac_m = candidate.species.lines[line.line as usize].wavelength_vac_m;
    let mut observed_vac_m = sky.grid.wavelength_m(cell);
    let snr = fresh[s].height_at(cell);
    let evidence = sky.worths[s].of(step, code);
    let state = match code {
        OUTSIDE => LineState::Outside,
        BLENDED => LineState::Blended,
        _ if snr >= SEEN && evidence > 0.0 => LineState::Seen,
        _ if expected_snr >= STANDS_OUT => LineState::Missing,
        _ => LineState::Weak,
    };
    if state == LineState::Seen {
        let peaks = if s == 1 {
            &sky.features.bright
        } else {
            &sky.features.dark
        };
        if let Some(at) = peak_wavelength_m(sky, peaks, cell) {
            observed_vac_m = at;
        }
    }
    LineFound {
        rest_vac_m,
        observed_vac_m,
        expected_snr,
        snr,
        evidence,
        state,
        share: 1.0,
    }
}

/// The highest peak within reach of a cell.
fn peak_wavelength_m(sky: &Sky, peaks: &[Peak], cell: i32) -> Option<f64> {
    let reach = i32::from(*sky.grid.reach.get(usize::try_from(cell).ok()?)?) + 1;
    let bound =
        |c: i32| f64::from(sky.grid.channel[c.clamp(0, sky.grid.len() as i32 - 1) as usize]);
    let (from, to) = (bound(cell - reach), bound(cell + reach));
    let first = peaks.partition_point(|peak| peak.channel < from);
    let peak = peaks[first..]
        .iter()
        .take_while(|peak| peak.channel <= to)
        .max_by(|a, b| a.snr.total_cmp(&b.snr))?;
    let after = sky
        .grid
        .channel
        .partition_point(|channel| f64::from(*channel) < peak.channel);
    Some(sky.grid.wavelength_m(after as i32))
}

/// Temperatures whose best pattern loses little; `None` if all do well.
fn temperatures(sky: &Sky, candidate: &Candidate, s: usize, best: &Best) -> Option<(f64, f64)> {
    let mut range: Option<(f64, f64)> = None;
    let mut all = true;
    for pattern in &candidate.patterns[s] {
        let own = search(
            &sky.maps[s],
            &sky.worths[s],
            std::slice::from_ref(pattern),
            &[best.shift],
            sky.highest_top[s],
            &|cell| cell,
            &mut |_, _| {},
        );
        if own.evidence - sky.loss[s] >= best.evidence - TEMPERATURE_LOSS {
            let t = pattern.temperature_k;
            range = Some(range.map_or((t, t), |(low, high)| (low.min(t), high.max(t))));
        } else {
            all = false;
        }
    }
    if all { None } else { range }
}
