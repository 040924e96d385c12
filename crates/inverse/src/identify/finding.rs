//! The answer: what was looked for, what was seen, what it is worth.

use std::fmt;

/// Whether a species is there.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Verdict {
    /// Its pattern is seen and hardly any decoy does as well.
    Present,
    /// Something is seen that chance might have made.
    Possible,
    /// No more than chance makes.
    Absent,
    /// No line that could be seen lies in the data.
    Untestable,
}

impl fmt::Display for Verdict {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Verdict::Present => "present",
            Verdict::Possible => "possible",
            Verdict::Absent => "absent",
            Verdict::Untestable => "untestable",
        })
    }
}

/// What became of a line that a pattern expects.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum LineState {
    /// A peak is there.
    Seen,
    /// It should stand out and does not.
    Missing,
    /// Too weak to be expected above the noise.
    Weak,
    /// Another species or a neighbour's flank covers it.
    Blended,
    /// The shift puts it outside the data.
    Outside,
}

impl fmt::Display for LineState {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            LineState::Seen => "seen",
            LineState::Missing => "missing",
            LineState::Weak => "weak",
            LineState::Blended => "blended",
            LineState::Outside => "outside",
        })
    }
}

/// One line of a pattern, or several that the instrument cannot tell apart.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct LineFound {
    /// At rest in vacuum, m: the strongest component.
    pub rest_vac_m: f64,
    /// Where it is expected (or, if seen, found) in the data, vacuum, m.
    pub observed_vac_m: f64,
    /// Height over noise that the pattern expects.
    pub expected_snr: f64,
    /// Height over noise of the peak found there; 0 if none.
    pub snr: f64,
    /// Likelihood ratio of the line, in nats.
    pub evidence: f64,
    /// What became of it.
    pub state: LineState,
    /// Part of the light there that is this species' own, 0..=1, by the joint fit of all present ones.
    pub share: f64,
}

/// The judgement on one species.
#[derive(Debug, Clone, PartialEq)]
pub struct Finding {
    /// Name in the catalogue.
    pub name: String,
    /// Whether it is there.
    pub verdict: Verdict,
    /// Logarithm of the likelihood ratio of its pattern against chance, in nats; NaN if untestable.
    pub evidence: f64,
    /// How often a decoy of this species does as well in this spectrum; NaN if untestable.
    pub false_alarm_rate: f64,
    /// Whether its lines are bright; `None` unless it is seen.
    pub bright: Option<bool>,
    /// Velocity from the seen lines, m/s, positive receding.
    pub velocity_m_per_s: Option<f64>,
    /// Excitation temperatures that fit the pattern nearly as well as the best, K, if they leave any out.
    pub temperature_k: Option<(f64, f64)>,
    /// The lines of its best pattern, strongest first.
    pub lines: Vec<LineFound>,
    /// Peak height of its strongest line that would have been 3 sigma, in the data's unit, where not present.
    pub upper_limit_peak: Option<f64>,
    /// The strongest expected line, vacuum, m, to which the limit belongs.
    pub upper_limit_line_vac_m: Option<f64>,
}

impl Finding {
    /// Lines in a state.
    pub fn count(&self, state: LineState) -> usize {
        self.lines.iter().filter(|line| line.state == state).count()
    }

    /// Lines that should stand out: seen, missing and blended.
    pub fn expected(&self) -> usize {
        self.count(LineState::Seen)
            + self.count(LineState::Missing)
            + self.count(LineState::Blended)
    }
}

/// The judgement on all candidates.
#[derive(Debug, Clone, PartialEq)]
pub struct Identification {
    /// One a candidate: present ones first, then by evidence.
    pub species: Vec<Finding>,
    /// The velocity that most patterns share, m/s.
    pub velocity_m_per_s: Option<f64>,
    /// Instrument width in the middle of the data, m.
    pub fwhm_m: f64,
    /// Whether that was estimated from the data.
    pub fwhm_is_estimated: bool,
    /// Whether the noise was estimated from the data.
    pub noise_is_estimated: bool,
    /// Share of those called present that chance is expected to make: what decoys do, over all candidates, in this
    /// spectrum. NaN if none is present.
    pub false_discovery_rate: f64,
    /// The smooth light under the lines, one a channel, in the data's unit.
    pub continuum: Vec<f64>,
}
