//! The table that gives each pixel of an invented cube its own values.

use std::path::Path;

use backlit_inverse::Quantity;

use crate::failure::Failure;

/// The values of every pixel, (pixel, quantity); a pixel that the table lacks has none.
pub struct PixelValues {
    nx: usize,
    rows: Vec<Option<Box<[f64]>>>,
}

impl PixelValues {
    /// Reads columns `y`, `x` and names of free quantities; quantities without a column keep `start`.
    ///
    /// `start`: the value of each quantity that the table does not vary, NaN where the setup gives none.
    pub fn read(
        path: &Path,
        (ny, nx): (usize, usize),
        quantities: &[Quantity],
        start: &[f64],
    ) -> Result<Self, Failure> {
        let broken = |source| Failure::VaryRead {
            path: path.to_path_buf(),
            source,
        };
        let mut reader = csv::ReaderBuilder::new()
            .trim(csv::Trim::All)
            .comment(Some(b'#'))
            .from_path(path)
            .map_err(broken)?;
        let header: Vec<String> = reader
            .headers()
            .map_err(broken)?
            .iter()
            .map(str::to_owned)
            .collect();
        let columns = Columns::new(path, &header, quantities, start)?;
        let mut rows = vec![None; ny * nx];
        for record in reader.records() {
            let record = record.map_err(broken)?;
            let line = record.position().map_or(0, csv::Position::line);
            let cell = |column: usize| record.get(column).unwrap_or("");
            let wrong = |column: usize, need: String, hint| Failure::VaryCell {
                path: path.to_path_buf(),
                line,
                column: header[column].clone(),
                got: cell(column).to_owned(),
                need,
                hint,
            };
            let index = |column: usize, end: usize| {
                cell(column)
                    .parse::<usize>()
                    .ok()
                    .filter(|i| *i < end)
                    .ok_or_else(|| {
                        wrong(
                            column,
                            format!("a whole number from 0 to {}", end - 1),
                            "rows and columns count from 0; --cube NY,NX gives their number",
                        )
                    })
            };
            let (y, x) = (index(columns.y, ny)?, index(columns.x, nx)?);
            let mut values: Box<[f64]> = start.into();
            for &(column, quantity) in &columns.varied {
                values[quantity] = cell(column)
                    .parse::<f64>()
                    .ok()
                    .filter(|value| value.is_finite())
                    .ok_or_else(|| {
                        wrong(
                            column,
                            "a number".to_owned(),
                            "gas that is absent is a very small column, for example log10 = 0",
                        )
                    })?;
            }
            rows[y * nx + x] = Some(values);
        }
        Ok(PixelValues { nx, rows })
    }

    /// The values of one pixel, in the order of the quantities.
    pub fn of(&self, y: usize, x: usize) -> Option<&[f64]> {
        self.rows.get(y * self.nx + x)?.as_deref()
    }

    /// The values of all pixels that have any.
    pub fn all(&self) -> Vec<&[f64]> {
        self.rows.iter().flatten().map(AsRef::as_ref).collect()
    }

    /// Pixels that have values.
    pub fn filled(&self) -> usize {
        self.rows.iter().flatten().count()
    }
}

/// Which column of the table is what.
struct Columns {
    y: usize,
    x: usize,
    /// Column and quantity.
    varied: Vec<(usize, usize)>,
}

impl Columns {
    fn new(
        path: &Path,
        header: &[String],
        quantities: &[Quantity],
        start: &[f64],
    ) -> Result<Self, Failure> {
        let wrong = |what, column: &str, hint: String| Failure::VaryColumn {
            path: path.to_path_buf(),
            what,
            column: column.to_owned(),
            hint,
        };
        let known = || {
            let names: Vec<&str> = quantities.iter().map(|q| q.name.as_str()).collect();
            format!("the setup leaves these open: {}", names.join(", "))
        };
        for (i, name) in header.iter().enumerate() {
            if header[..i].contains(name) {
                return Err(wrong("repeated", name, "keep one of them".to_owned()));
            }
            let is_known = name == "y" || name == "x" || quantities.iter().any(|q| q.name == *name);
            if !is_known {
                return Err(wrong("unknown", name, known()));
            }
        }
        let position = |name: &str| header.iter().position(|h| h == name);
        let need = |name: &str| {
            position(name).ok_or_else(|| {
                wrong(
                    "no",
                    name,
                    "the header row is y,x and the names of the quantities".to_owned(),
                )
            })
        };
        let mut varied = Vec::new();
        for (i, quantity) in quantities.iter().enumerate() {
            match position(&quantity.name) {
                Some(column) => varied.push((column, i)),
                None if start[i].is_finite() => {}
                None => {
                    return Err(wrong(
                        "no",
                        &quantity.name,
                        "add the column, or give this value a `start` in the setup".to_owned(),
                    ));
                }
            }
        }
        Ok(Columns {
            y: need("y")?,
            x: need("x")?,
            varied,
        })
    }
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    use super::*;

    fn read(text: &str, start: &[f64]) -> Result<PixelValues, String> {
        let file = tempfile::NamedTempFile::new().unwrap();
        std::fs::write(file.path(), text).unwrap();
        let quantities: Vec<Quantity> = ["a", "b"]
            .iter()
            .map(|name| Quantity {
                name: (*name).to_owned(),
                units: "K".to_owned(),
                long_name: String::new(),
            })
            .collect();
        PixelValues::read(file.path(), (2, 3), &quantities, start).map_err(|e| e.to_string())
    }

    #[test]
    fn columns_come_in_any_order_and_missing_ones_keep_their_start() {
        let values = read("a,x,y\n7, 2, 1\n", &[f64::NAN, 5.0]).unwrap();
        assert_eq!(values.of(1, 2), Some(&[7.0, 5.0][..]));
        assert_eq!(values.of(0, 0), None);
        assert_eq!(values.filled(), 1);
    }

    #[test]
    fn every_refusal_names_line_and_column() {
        let nan = [f64::NAN, 5.0];
        for (text, start, part) in [
            ("y,x,c\n", &nan, "unknown column `c`"),
            ("y,x,a,a\n", &nan, "repeated column `a`"),
            ("y,a\n", &nan, "no column `x`"),
            ("y,x,b\n", &nan, "no column `a`"),
            (
                "y,x,a\n0,0,1\n0,3,1\n",
                &nan,
                "line 3, column `x`: found `3`",
            ),
            ("y,x,a\n-1,0,1\n", &nan, "line 2, column `y`: found `-1`"),
            (
                "y,x,a\n0,0,warm\n",
                &nan,
                "line 2, column `a`: found `warm`",
            ),
            ("y,x,a\n0,0,inf\n", &nan, "found `inf`"),
            ("y,x,a\n0,0\n", &nan, "cannot be read"),
        ] {
            let message = read(text, start).err().unwrap();
            assert!(
                message.contains(part) && message.contains("hint: "),
                "{message}"
            );
        }
    }
}
