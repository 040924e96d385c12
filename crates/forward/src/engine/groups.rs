//! Which lines reach into each other, and the nodes on which a group of them is evaluated.

use super::lines::LineState;
use crate::nodes::{Plan, Planner, Shape, Surroundings};
use crate::sightline::{LineSpread, Sightline};
use std::ops::Range;

/// The groups at the current point.
#[derive(Default)]
pub struct Groups {
    /// Indices of the lines, by observed wavelength.
    order: Vec<usize>,
    groups: Vec<Range<usize>>,
    /// Upper end of each group's reach.
    ends_m: Vec<f64>,
}

/// Lines that share nodes.
#[derive(Clone, Copy)]
pub struct Group<'a> {
    /// Indices of its lines, by observed wavelength.
    pub members: &'a [usize],
}

/// A plan and the wavelength to which its places refer.
pub struct Placed<'a> {
    pub nodes: &'a Plan,
    pub reference_m: f64,
}

impl Groups {
    /// Sorts the lines and joins those whose reaches overlap.
    pub fn form(&mut self, lines: &[LineState]) {
        self.order.clear();
        self.order.extend(0..lines.len());
        self.order
            .sort_unstable_by(|&a, &b| lines[a].centre_m.total_cmp(&lines[b].centre_m));
        // A wide line may swallow narrow ones that came before: join by the lower ends of the reaches.
        let low =
            |index: usize| lines[index].centre_m * (1.0 - lines[index].shape.relative_reach());
        let high =
            |index: usize| lines[index].centre_m * (1.0 + lines[index].shape.relative_reach());
        self.groups.clear();
        self.ends_m.clear();
        for position in 0..self.order.len() {
            let index = self.order[position];
            let (mut start, mut end) = (position, high(index));
            while let (Some(last), Some(&reach)) = (self.groups.last(), self.ends_m.last()) {
                if reach < low(index) {
                    break;
                }
                start = last.start;
                end = end.max(reach);
                self.groups.pop();
                self.ends_m.pop();
            }
            self.groups.push(start..position + 1);
            self.ends_m.push(end);
        }
    }

    /// The groups, by wavelength.
    pub fn iter(&self) -> impl Iterator<Item = Group<'_>> {
        self.groups.iter().map(|range| Group {
            members: &self.order[range.clone()],
        })
    }
}

/// The nodes of a group.
pub fn plan<'a>(
    group: Group<'_>,
    sightline: &Sightline,
    planner: &'a mut Planner,
    key: &mut Vec<Shape>,
    lines: &[LineState],
) -> Placed<'a> {
    let reference_m = lines[group.members[0]].centre_m;
    let sharp = is_sharp(sightline, &lines[group.members[0]]);
    key.clear();
    for &index in group.members {
        let line = &lines[index];
        let place = if sharp {
            line.centre_m.ln()
        } else {
            line.centre_m / reference_m - 1.0
        };
        key.push(line.shape.at(place));
    }
    let surroundings = Surroundings {
        channels: &sightline.channels,
        sigma_m: sightline.line_spread.sigma_m(reference_m),
        sharp,
    };
    Placed {
        nodes: planner.plan(key, &surroundings),
        reference_m,
    }
}

/// True where the line-spread function is so narrow, against both line and channel, that a channel's edge
/// is a step in the integrand.
fn is_sharp(sightline: &Sightline, line: &LineState) -> bool {
    let channels = &sightline.channels;
    let channel_m = channels.mean_width_m();
    let sigma_m = sightline.line_spread.sigma_m(line.centre_m);
    sightline.line_spread == LineSpread::None
        || (sigma_m < channel_m / 24.0 && sigma_m < 0.25 * line.centre_m * line.relative_width)
}
