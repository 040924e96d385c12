//! The pixels of one tile, one after the other.

use backlit_cubes::{Quantity as MapQuantity, Tile, TileData, TileUncertainty};
use backlit_inverse::{Ask, Fit, Intervals, Observation, Problem, Quantity, Workspace};
use ndarray::{Array2, s};

use crate::fit::is_column;

/// The answers of one tile, as the maps store wants them.
pub struct TileMaps {
    /// (quantity, pixel), in the order of [`map_quantities`].
    pub values: Array2<f64>,
    /// One word a pixel.
    pub flags: Vec<u32>,
    /// Pixels with at least one value.
    pub fitted: u64,
}

/// The maps that belong to the free quantities: each with its sigma, columns with an upper limit, the ends of the
/// intervals if they are asked for, then the quality.
pub fn map_quantities(quantities: &[Quantity], intervals: Intervals) -> Vec<MapQuantity> {
    let mut maps = Vec::new();
    for quantity in quantities {
        let (name, units, words) = (&quantity.name, &quantity.units, &quantity.long_name);
        // The unit of an interval on a logarithmic scale.
        let sigma_units = if is_column(quantity) {
            "dex"
        } else {
            units.as_str()
        };
        maps.push(MapQuantity::new(
            name.as_str(),
            units.as_str(),
            words.as_str(),
        ));
        maps.push(MapQuantity::new(
            format!("{name}_sigma"),
            sigma_units,
            format!("{words}, 1 sigma"),
        ));
        if is_column(quantity) {
            maps.push(MapQuantity::new(
                format!("{name}_upper"),
                units.as_str(),
                format!("{words}, 3-sigma upper limit"),
            ));
        }
        if intervals == Intervals::All {
            for (end, word) in [("low", "lower"), ("high", "upper")] {
                maps.push(MapQuantity::new(
                    format!("{name}_{end}"),
                    units.as_str(),
                    format!("{words}, {word} end of the 68.3 % interval"),
                ));
            }
        }
    }
    maps.push(MapQuantity::new("chi2_reduced", "1", "reduced chi-square"));
    maps.push(MapQuantity::new("iterations", "1", "iterations of the fit"));
    maps
}

/// Fits every pixel; each starts from the last good answer of the tile.
///
/// Pixels run in a serpentine, so that the pixel before is always a neighbour. Nothing from outside the tile enters.
pub fn fit(
    problem: &Problem,
    workspace: &mut Workspace,
    reversed: bool,
    tile: &Tile,
    data: TileData,
    intervals: Intervals,
) -> TileMaps {
    let quantities = problem.quantities();
    let maps = map_quantities(quantities, intervals);
    let mut values = Array2::from_elem((maps.len(), tile.pixels()), f64::NAN);
    let mut flags = vec![0; tile.pixels()];
    let mut fitted = 0;
    let data = if reversed { reverse(data) } else { data };
    let mut near: Option<Fit> = None;
    for pixel in serpentine(tile) {
        let (intensity, mask) = (data.intensity.row(pixel), data.mask.row(pixel));
        let uncertainty = data.uncertainty.row(pixel);
        let observation = Observation {
            // Rows of the reader are contiguous; an empty slice would only ever mean too little data.
            intensity: intensity.to_slice().unwrap_or_default(),
            uncertainty: uncertainty.map(|row| row.to_slice().unwrap_or_default()),
            mask: mask.to_slice().unwrap_or_default(),
        };
        let ask = Ask {
            near: near.as_ref(),
            intervals,
            ..Ask::default()
        };
        let answer = problem.fit_with(workspace, &observation, &ask);
        record(quantities, &answer, intervals, &mut values, pixel);
        flags[pixel] = answer.flags.0;
        fitted += u64::from(answer.values.iter().any(|value| value.is_finite()));
        if answer.flags.0 == 0 {
            near = Some(answer);
        }
    }
    TileMaps {
        values,
        flags,
        fitted,
    }
}

/// The same spectra with the channels in the opposite order.
fn reverse(data: TileData) -> TileData {
    fn rows<T: Copy>(values: &Array2<T>) -> Array2<T> {
        values
            .slice(s![.., ..;-1])
            .as_standard_layout()
            .into_owned()
    }
    TileData {
        intensity: rows(&data.intensity),
        uncertainty: match data.uncertainty {
            TileUncertainty::None => TileUncertainty::None,
            TileUncertainty::Channels(row) => {
                TileUncertainty::Channels(row.iter().rev().copied().collect())
            }
            TileUncertainty::Pixels(values) => TileUncertainty::Pixels(rows(&values)),
        },
        mask: rows(&data.mask),
    }
}

fn record(
    quantities: &[Quantity],
    answer: &Fit,
    intervals: Intervals,
    values: &mut Array2<f64>,
    pixel: usize,
) {
    let mut map = 0;
    let mut put = |value: f64| {
        values[(map, pixel)] = value;
        map += 1;
    };
    for (i, quantity) in quantities.iter().enumerate() {
        put(answer.values[i]);
        put(answer.sigma[i]);
        if is_column(quantity) {
            put(answer.upper[i]);
        }
        if intervals == Intervals::All {
            let (low, high) = answer.intervals[i].map_or((None, None), |i| (i.low, i.high));
            put(low.unwrap_or(f64::NAN));
            put(high.unwrap_or(f64::NAN));
        }
    }
    put(answer.chi2_reduced);
    put(f64::from(answer.iterations));
}

/// The pixels of a tile row by row, every second row backwards.
fn serpentine(tile: &Tile) -> impl Iterator<Item = usize> {
    let (height, width) = (tile.height(), tile.width());
    (0..height).flat_map(move |row| {
        (0..width).map(move |step| {
            let column = if row % 2 == 0 { step } else { width - 1 - step };
            row * width + column
        })
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_pixel_before_is_always_a_neighbour() {
        let tile = Tile {
            index: 0,
            y0: 2,
            y1: 5,
            x0: 1,
            x1: 5,
        };
        let order: Vec<usize> = serpentine(&tile).collect();
        assert_eq!(order, [0, 1, 2, 3, 7, 6, 5, 4, 8, 9, 10, 11]);
    }
}
