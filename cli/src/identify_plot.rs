//! The picture of an identification: the spectrum, and under it one row of lines a species.

use std::fmt::Write as _;

use backlit_inverse::identify::{Finding, Identification, LineState, Verdict};

const WIDTH: f64 = 1200.0;
const LEFT: f64 = 90.0;
const RIGHT: f64 = 20.0;
const TOP: f64 = 30.0;
const SPECTRUM_HEIGHT: f64 = 300.0;
const ROW: f64 = 26.0;
const AXIS: f64 = 46.0;
/// Rows of species: more would not be read.
const MOST_ROWS: usize = 30;

/// An SVG with its meaning in shapes as well as in shades: a full stroke is a seen line, an open circle a missing one,
/// a short grey stroke a blended one.
pub fn draw(
    centres_m: &[f64],
    intensity: &[f64],
    mask: &[bool],
    answer: &Identification,
) -> String {
    let rows: Vec<&Finding> = answer
        .species
        .iter()
        .filter(|f| matches!(f.verdict, Verdict::Present | Verdict::Possible))
        .take(MOST_ROWS)
        .collect();
    let bottom = TOP + SPECTRUM_HEIGHT;
    let height = bottom + AXIS + ROW * rows.len() as f64 + 34.0;
    let (low_m, high_m) = (centres_m[0], centres_m[centres_m.len() - 1]);
    let x = |m: f64| LEFT + (WIDTH - LEFT - RIGHT) * (m - low_m) / (high_m - low_m);
    let used = || (0..centres_m.len()).filter(|&k| !mask[k] && intensity[k].is_finite());
    let low = used().map(|k| intensity[k]).fold(f64::INFINITY, f64::min);
    let high = used()
        .map(|k| intensity[k])
        .fold(f64::NEG_INFINITY, f64::max);
    let y = |v: f64| bottom - SPECTRUM_HEIGHT * (v - low) / (high - low).max(f64::MIN_POSITIVE);
    let mut svg = format!(
        "<svg xmlns=\"http://www.w3.org/2000/svg\" viewBox=\"0 0 {WIDTH} {height}\" font-family=\"sans-serif\" font-size=\"13\">\n\
         <rect width=\"100%\" height=\"100%\" fill=\"#ffffff\"/>\n"
    );
    let path = |values: &dyn Fn(usize) -> f64| -> String {
        let mut path = String::new();
        let mut pen_down = false;
        for k in 0..centres_m.len() {
            if mask[k] || !values(k).is_finite() {
                pen_down = false;
                continue;
            }
            let _ = write!(
                path,
                "{}{:.1} {:.1}",
                if pen_down { "L" } else { "M" },
                x(centres_m[k]),
                y(values(k)).clamp(TOP, bottom)
            );
            pen_down = true;
        }
        path
    };
    let _ = writeln!(
        svg,
        "<path d=\"{}\" fill=\"none\" stroke=\"#8a8a8a\" stroke-dasharray=\"5 4\"/>",
        path(&|k| answer.continuum[k])
    );
    let _ = writeln!(
        svg,
        "<path d=\"{}\" fill=\"none\" stroke=\"#123a5c\" stroke-width=\"1\"/>",
        path(&|k| intensity[k])
    );
    for nm in ticks(low_m * 1e9, high_m * 1e9) {
        let at = x(nm * 1e-9);
        let _ = writeln!(
            svg,
            "<path d=\"M{at:.1} {bottom}V{:.1}\" stroke=\"#444444\"/><text x=\"{at:.1}\" y=\"{:.1}\" text-anchor=\"middle\">{nm}</text>",
            bottom + 6.0,
            bottom + 20.0
        );
    }
    let _ = writeln!(
        svg,
        "<path d=\"M{LEFT} {bottom}H{:.1}\" stroke=\"#444444\"/>\
         <text x=\"{:.1}\" y=\"{:.1}\" text-anchor=\"middle\">vacuum wavelength, nm</text>",
        WIDTH - RIGHT,
        0.5 * (LEFT + WIDTH - RIGHT),
        bottom + 36.0
    );
    for (row, finding) in rows.iter().enumerate() {
        let middle = bottom + AXIS + ROW * (row as f64 + 0.5);
        let certain = finding.verdict == Verdict::Present;
        let shade = if certain { "#0b6e4f" } else { "#9a6a00" };
        let _ = writeln!(
            svg,
            "<g><title>{}: {}</title><text x=\"{:.1}\" y=\"{:.1}\" text-anchor=\"end\" fill=\"{shade}\">{}{}</text>\
             <path d=\"M{LEFT} {middle:.1}H{:.1}\" stroke=\"#e4e4e4\"/>",
            finding.name,
            finding.verdict,
            LEFT - 8.0,
            middle + 4.5,
            finding.name,
            if certain { "" } else { " ?" },
            WIDTH - RIGHT
        );
        for line in &finding.lines {
            let at = x(line.observed_vac_m);
            let _ = match line.state {
                LineState::Seen => writeln!(
                    svg,
                    "<path d=\"M{at:.1} {:.1}V{:.1}\" stroke=\"{shade}\" stroke-width=\"2\"/>",
                    middle - 10.0,
                    middle + 10.0
                ),
                LineState::Missing => writeln!(
                    svg,
                    "<circle cx=\"{at:.1}\" cy=\"{middle:.1}\" r=\"4\" fill=\"none\" stroke=\"#b3261e\" stroke-width=\"1.5\"/>"
                ),
                LineState::Blended => writeln!(
                    svg,
                    "<path d=\"M{at:.1} {:.1}V{:.1}\" stroke=\"#8a8a8a\" stroke-width=\"2\"/>",
                    middle - 4.0,
                    middle + 4.0
                ),
                LineState::Weak | LineState::Outside => Ok(()),
            };
        }
        svg.push_str("</g>\n");
    }
    let _ = writeln!(
        svg,
        "<text x=\"{LEFT}\" y=\"{:.1}\" fill=\"#444444\">long stroke: seen · circle: expected and missing · short grey stroke: blended · ?: possible · dashes: smooth light</text>\n</svg>",
        height - 12.0
    );
    svg
}

/// Round wavelengths, five to twelve of them.
fn ticks(low_nm: f64, high_nm: f64) -> Vec<f64> {
    let rough = (high_nm - low_nm) / 8.0;
    let decade = 10.0_f64.powf(rough.log10().floor());
    let step = [1.0, 2.0, 5.0, 10.0]
        .into_iter()
        .map(|m| m * decade)
        .find(|step| *step >= rough)
        .unwrap_or(decade);
    let mut out = Vec::new();
    let mut tick = (low_nm / step).ceil();
    while tick * step <= high_nm {
        // Through text, so that no digits show that only rounding made.
        out.push(format!("{:.6}", tick * step).parse().unwrap_or(tick * step));
        tick += 1.0;
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ticks_are_round_and_inside() {
        assert_eq!(
            ticks(588.0, 591.0),
            [588.0, 588.5, 589.0, 589.5, 590.0, 590.5, 591.0]
        );
        assert!(
            ticks(280.0, 4000.0)
                .iter()
                .all(|t| (280.0..=4000.0).contains(t))
        );
    }
}
