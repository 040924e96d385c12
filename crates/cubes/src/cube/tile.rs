//! How a cube or a set of maps is divided into tiles.

use serde::{Deserialize, Serialize};

/// A rectangle of pixels: rows `y0..y1`, columns `x0..x1`.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub struct Tile {
    /// Position in the list of tiles.
    pub index: usize,
    /// First row.
    pub y0: usize,
    /// Row after the last.
    pub y1: usize,
    /// First column.
    pub x0: usize,
    /// Column after the last.
    pub x1: usize,
}

impl Tile {
    /// Number of pixels.
    pub fn pixels(&self) -> usize {
        self.height().saturating_mul(self.width())
    }

    /// Number of rows.
    pub fn height(&self) -> usize {
        self.y1.saturating_sub(self.y0)
    }

    /// Number of columns.
    pub fn width(&self) -> usize {
        self.x1.saturating_sub(self.x0)
    }

    /// Row and column in the cube of the tile's pixel `p`; pixels run along x first.
    pub fn position(&self, p: usize) -> (usize, usize) {
        let width = self.width().max(1);
        (self.y0 + p / width, self.x0 + p % width)
    }
}

/// A chunk larger than this many wanted tiles is not read whole: memory comes first.
const LARGEST_CHUNK_IN_TILES: usize = 4;

/// Divides `ny` by `nx` pixels into tiles of about `wanted` pixels, in file order, each a whole number of chunks
/// (`chunk` rows by columns) so that no chunk is read and decompressed twice.
///
/// Returns the tiles and whether they are aligned with the chunks.
pub fn divide(ny: usize, nx: usize, wanted: usize, chunk: (usize, usize)) -> (Vec<Tile>, bool) {
    let wanted = wanted.max(1);
    let (cy, cx) = (chunk.0.clamp(1, ny.max(1)), chunk.1.clamp(1, nx.max(1)));
    let aligned = cy * cx <= wanted.saturating_mul(LARGEST_CHUNK_IN_TILES);
    let (cy, cx) = if aligned { (cy, cx) } else { (1, 1) };
    let (height, width) = if wanted >= cy * nx {
        (wanted / (cy * nx).max(1) * cy, nx)
    } else {
        (cy, (wanted / (cy * cx)).max(1) * cx)
    };
    let mut tiles = Vec::new();
    for y0 in (0..ny).step_by(height.max(1)) {
        for x0 in (0..nx).step_by(width.max(1)) {
            let (y1, x1) = ((y0 + height).min(ny), (x0 + width).min(nx));
            tiles.push(Tile {
                index: tiles.len(),
                y0,
                y1,
                x0,
                x1,
            });
        }
    }
    (tiles, aligned)
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    proptest! {
        #[test]
        fn every_pixel_is_in_exactly_one_tile(
            ny in 1..40usize, nx in 1..40usize, wanted in 0..300usize, cy in 0..50usize, cx in 0..50usize,
        ) {
            let (tiles, aligned) = divide(ny, nx, wanted, (cy, cx));
            let mut count = vec![0; ny * nx];
            for (i, tile) in tiles.iter().enumerate() {
                prop_assert_eq!(tile.index, i);
                prop_assert!(tile.pixels() > 0);
                prop_assert!(tile.pixels() <= wanted.max(1) * LARGEST_CHUNK_IN_TILES);
                for p in 0..tile.pixels() {
                    let (y, x) = tile.position(p);
                    count[y * nx + x] += 1;
                }
                if aligned {
                    prop_assert_eq!(tile.y0 % cy.clamp(1, ny), 0);
                    prop_assert_eq!(tile.x0 % cx.clamp(1, nx), 0);
                }
            }
            prop_assert!(count.iter().all(|c| *c == 1));
        }
    }

    #[test]
    fn a_row_that_fits_is_not_split_and_a_series_is() {
        assert_eq!(divide(300, 300, 393, (1, 1)).0.len(), 300);
        assert_eq!(divide(1, 1000, 100, (1, 1)).0.len(), 10);
        assert_eq!(divide(64, 64, 1024, (1, 1)).0.len(), 4);
    }
}
