//! The peaks on an even grid of ln wavelength, where a velocity is a shift by whole cells.

use super::features::{Features, LOWEST_SNR, Peak};

/// Classes of peak height; class 0 is "no peak".
pub const CLASSES: usize = 28;
/// Heights at which classes begin, from class 1 on.
pub const CLASS_EDGES: [f64; CLASSES - 1] = [
    2.5, 3.0, 3.5, 4.0, 5.0, 6.5, 9.0, 13.0, 18.0, 26.0, 37.0, 52.0, 74.0, 104.0, 148.0, 210.0,
    296.0, 420.0, 590.0, 840.0, 1180.0, 1680.0, 2360.0, 3400.0, 4700.0, 6700.0, 9500.0,
];
/// Stretches of the spectrum, each with a frequency of peaks of its own.
pub const STRETCHES: usize = 4;
/// Codes of cells: stretch times classes plus class; then what says nothing.
pub const CODES: usize = STRETCHES * CLASSES + 2;
/// The cell belongs to a line that is already explained, or to the flank of one.
pub const BLENDED: u8 = (STRETCHES * CLASSES) as u8;
/// The cell is not in the data.
pub const OUTSIDE: u8 = BLENDED + 1;

/// The grid of ln wavelength.
#[derive(Debug, Clone)]
pub struct Grid {
    origin: f64,
    step: f64,
    /// Channel (with fraction) of each cell's centre, NaN outside.
    pub channel: Vec<f32>,
    /// How far a peak may lie from where a line should be, in cells, at each cell.
    pub reach: Vec<u16>,
    /// Cells between lines that one instrument width separates.
    pub apart: Vec<u16>,
}

/// Most cells of a grid: beyond, cells are wider than half a channel.
const MOST_CELLS: f64 = 60_000.0;

impl Grid {
    /// A grid over the channels; `scale_error_m` is the error of the data's wavelengths that is allowed for.
    pub fn new(centres_m: &[f64], fwhm_channels: &[f64], scale_error_m: f64) -> Grid {
        let count = centres_m.len();
        let origin = centres_m[0].ln();
        let span = centres_m[count - 1].ln() - origin;
        let finest = centres_m
            .windows(2)
            .map(|pair| (pair[1] / pair[0]).ln())
            .fold(f64::INFINITY, f64::min);
        let step = (0.5 * finest).max(span / MOST_CELLS);
        let cells = (span / step).floor() as usize + 1;
        let mut channel = Vec::with_capacity(cells);
        let (mut reach, mut apart) = (Vec::with_capacity(cells), Vec::with_capacity(cells));
        let mut k = 0;
        for cell in 0..cells {
            let at_m = (origin + cell as f64 * step).exp();
            while k + 2 < count && centres_m[k + 1] <= at_m {
                k += 1;
            }
            let width_m = centres_m[k + 1] - centres_m[k];
            channel.push((k as f64 + (at_m - centres_m[k]) / width_m) as f32);
            let fwhm = fwhm_channels[k] * width_m / at_m / step;
            let tolerance = (scale_error_m / at_m / step).hypot(0.35 * fwhm).max(1.0);
            reach.push(tolerance.round() as u16);
            apart.push((0.8 * fwhm).max(1.3 * tolerance).round() as u16);
        }
        Grid {
            origin,
            step,
            channel,
            reach,
            apart,
        }
    }

    /// Number of cells; never 0.
    #[allow(clippy::len_without_is_empty)]
    pub fn len(&self) -> usize {
        self.channel.len()
    }

    /// The cell of a wavelength; may lie outside.
    pub fn cell(&self, wavelength_m: f64) -> i32 {
        ((wavelength_m.ln() - self.origin) / self.step).round() as i32
    }

    /// The wavelength in the middle of a cell.
    pub fn wavelength_m(&self, cell: i32) -> f64 {
        (self.origin + f64::from(cell) * self.step).exp()
    }

    /// Step of ln wavelength.
    pub fn step(&self) -> f64 {
        self.step
    }

    /// Reach in the middle of the grid, in cells.
    pub fn usual_reach(&self) -> i32 {
        i32::from(self.reach[self.len() / 2]).max(1)
    }
}

/// What a line would find at each cell, for peaks of one sign.
#[derive(Debug, Clone)]
pub struct Map {
    /// One a cell: see [`CODES`].
    pub code: Vec<u8>,
    /// Height of the highest peak within reach; 0 if none.
    pub height: Vec<f32>,
    /// How often each code is met by chance.
    pub chance: [f64; CODES],
}

impl Map {
    /// Lays the peaks of one sign (`sign` is 1 or -1) on the grid.
    pub fn new(grid: &Grid, features: &Features, peaks: &[Peak], sign: f64) -> Map {
        let cells = grid.len();
        let mut height = vec![0.0_f32; cells];
        let mut first = 0;
        for peak in peaks {
            // Cells are in rising channel.
            while first < cells && f64::from(grid.channel[first]) < peak.channel {
                first += 1;
            }
            let at = first.min(cells - 1);
            let reach = usize::from(grid.reach[at]);
            let to = (at + reach).min(cells - 1);
            for cell in &mut height[at.saturating_sub(reach)..=to] {
                *cell = cell.max(peak.snr as f32);
            }
        }
        let code = (0..cells)
            .map(|cell| {
                let channel = (f64::from(grid.channel[cell]).round().max(0.0) as usize)
                    .min(features.snr.len() - 1);
                let stretch = cell * STRETCHES / cells;
                let here = sign * features.snr[channel];
                if height[cell] == 0.0 && here > 4.0 {
                    return BLENDED;
                }
                (stretch * CLASSES + class(f64::from(height[cell]))) as u8
            })
            .collect();
        let mut map = Map {
            code,
            height,
            chance: [0.0; CODES],
        };
        map.count(grid);
        map
    }

    /// Counts anew how often each code is met.
    pub fn count(&mut self, grid: &Grid) {
        let mut counts = [0.0; CODES];
        for code in &self.code {
            counts[usize::from(*code)] += 1.0;
        }
        let independent = f64::from(2 * grid.usual_reach() + 1).recip();
        let whole: Vec<f64> = (0..CLASSES)
            .map(|c| (0..STRETCHES).map(|s| counts[s * CLASSES + c]).sum::<f64>() * independent)
            .collect();
        let all: f64 = whole.iter().sum::<f64>() + 1.0;
        for stretch in 0..STRETCHES {
            let own = &counts[stretch * CLASSES..(stretch + 1) * CLASSES];
            let cells: f64 = own.iter().sum::<f64>() * independent;
            // A stretch leans on the whole as if it had seen 30 positions of it; no class is impossible.
            const LEAN: f64 = 30.0;
            for (c, whole) in whole.iter().enumerate() {
                let prior = (whole + 1.0 / CLASSES as f64) / all;
                self.chance[stretch * CLASSES + c] =
                    (own[c] * independent + LEAN * prior) / (cells + LEAN);
            }
        }
    }

    /// Code at a cell that may lie outside.
    pub fn at(&self, cell: i32) -> u8 {
        usize::try_from(cell)
            .ok()
            .and_then(|cell| self.code.get(cell))
            .copied()
            .unwrap_or(OUTSIDE)
    }

    /// Height at a cell that may lie outside.
    pub fn height_at(&self, cell: i32) -> f64 {
        usize::try_from(cell)
            .ok()
            .and_then(|cell| self.height.get(cell))
            .map_or(0.0, |height| f64::from(*height))
    }

    /// Gives a line's neighbourhood to a species that explains it: it says nothing about others any more.
    pub fn claim(&mut self, grid: &Grid, cell: i32) {
        if cell < 0 || cell as usize >= grid.len() {
            return;
        }
        let reach = i32::from(grid.apart[cell as usize].max(grid.reach[cell as usize]));
        let from = (cell - reach).max(0) as usize;
        let to = ((cell + reach) as usize).min(grid.len() - 1);
        self.code[from..=to].fill(BLENDED);
    }
}

/// Class of a peak height.
pub fn class(snr: f64) -> usize {
    if snr < LOWEST_SNR {
        0
    } else {
        CLASS_EDGES.partition_point(|edge| *edge <= snr)
    }
}
