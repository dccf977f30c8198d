//! Matrices in files: Matrix Market and comma-separated values.
//!
//! Source of the format: R. F. Boisvert, R. Pozo, K. A. Remington, *The Matrix
//! Market Exchange Formats: Initial Design*, NISTIR 5935 (1996) (from memory).

use super::tree::{decode, short};
use crate::diagnostic::{Diagnostic, Error, Place, Result};
use crate::model::C64;
use crate::units::read_number;

/// Largest file, in bytes.
const LARGEST_FILE: usize = 1 << 30;

/// Rows of elements.
#[derive(Clone, Debug, PartialEq)]
pub struct Grid {
    /// Elements, row by row.
    pub rows: Vec<Vec<C64>>,
}

/// A line with the byte at which it begins.
struct Line<'a> {
    start: usize,
    text: &'a str,
}

struct Reader<'a> {
    file: &'a str,
}

/// Reads a matrix; the ending of `name` says in which format.
///
/// # Errors
/// At the first line that is wrong.
pub fn read(file: &str, bytes: &[u8], name: &str, most: usize) -> Result<Grid> {
    let (text, offset) = decode(file, bytes, LARGEST_FILE)?;
    let reader = Reader { file };
    let mut start = offset;
    let lines: Vec<Line<'_>> = text
        .split('\n')
        .map(|line| {
            let here = start;
            start += line.len() + 1;
            Line { start: here, text: line.trim_end_matches('\r') }
        })
        .collect();
    if name.ends_with(".csv") {
        reader.csv(&lines, most)
    } else if name.ends_with(".mtx") {
        reader.market(&lines, most)
    } else {
        Err(Error::spec(
            Diagnostic::new("file-ending", format!("{}: the ending says no format", short(name)))
                .expected("a name that ends in .mtx or .csv"),
        ))
    }
}

impl Reader<'_> {
    fn fault(&self, line: &Line<'_>, message: &str) -> Diagnostic {
        let end = line.start + line.text.len();
        let place = Place { file: self.file.to_owned(), start: line.start, end };
        Diagnostic::new("matrix-file", message).at(Some(place)).found(format!("`{}`", short(line.text)))
    }

    fn missing(&self, message: &str) -> Error {
        let place = Place { file: self.file.to_owned(), start: 0, end: 0 };
        Error::spec(Diagnostic::new("matrix-file", message).at(Some(place)))
    }

    fn csv(&self, lines: &[Line<'_>], most: usize) -> Result<Grid> {
        let mut rows = Vec::new();
        for line in lines.iter().filter(|line| !line.text.trim().is_empty()) {
            let mut row = Vec::new();
            for cell in line.text.split(',') {
                row.push(complex(cell).ok_or_else(|| {
                    Error::spec(
                        self.fault(line, "an entry is no number")
                            .found(format!("`{}`", short(cell.trim())))
                            .expected("a finite number, complex ones as `a+bi`"),
                    )
                })?);
                if row.len() > most {
                    return Err(Error::spec(
                        self.fault(line, "the matrix is too large").expected(format!("order at most {most}")),
                    ));
                }
            }
            rows.push(row);
            if rows.len() > most {
                return Err(Error::spec(
                    self.fault(line, "the matrix is too large").expected(format!("order at most {most}")),
                ));
            }
        }
        Ok(Grid { rows })
    }

    fn market(&self, lines: &[Line<'_>], most: usize) -> Result<Grid> {
        let head = lines.first().ok_or_else(|| self.missing("the file is empty"))?;
        let words: Vec<String> = head.text.split_whitespace().map(str::to_ascii_lowercase).collect();
        let words: Vec<&str> = words.iter().map(String::as_str).collect();
        let (coordinate, field, symmetry) = match words.as_slice() {
            ["%%matrixmarket", "matrix", format @ ("coordinate" | "array"), field, symmetry] => {
                (*format == "coordinate", *field, *symmetry)
            }
            _ => {
                return Err(Error::spec(
                    self.fault(head, "the first line is no Matrix Market head")
                        .expected("`%%MatrixMarket matrix coordinate real symmetric` or the like"),
                ));
            }
        };
        let complex_field = match field {
            "real" | "integer" | "double" => false,
            "complex" => true,
            _ => {
                return Err(Error::spec(
                    self.fault(head, "this field is not read").expected("real, integer or complex"),
                ));
            }
        };
        // What stands at (j, i) if x stands at (i, j).
        let mirror: Option<fn(C64) -> C64> = match symmetry {
            "general" => None,
            "symmetric" => Some(|x| x),
            "hermitian" => Some(|x| x.conj()),
            "skew-symmetric" => Some(|x| -x),
            _ => {
                return Err(Error::spec(
                    self.fault(head, "this symmetry is not read")
                        .expected("general, symmetric, hermitian or skew-symmetric"),
                ));
            }
        };
        let mut body = lines
            .iter()
            .skip(1)
            .filter(|line| !line.text.trim().is_empty() && !line.text.trim_start().starts_with('%'));
        let size = body.next().ok_or_else(|| self.missing("the line of sizes is missing"))?;
        let sizes: Vec<usize> = size.text.split_whitespace().map_while(|word| word.parse().ok()).collect();
        let (rows, columns, entries) = match (coordinate, sizes.as_slice()) {
            (true, [rows, columns, entries]) => (*rows, *columns, *entries),
            (false, [rows, columns]) => (*rows, *columns, usize::MAX),
            _ => {
                return Err(Error::spec(
                    self.fault(size, "the line of sizes is wrong").expected(if coordinate {
                        "rows, columns, entries"
                    } else {
                        "rows, columns"
                    }),
                ));
            }
        };
        if rows != columns || rows == 0 || rows > most {
            return Err(Error::spec(
                self.fault(size, "the matrix has a size that cannot be used")
                    .expected(format!("as many rows as columns, from 1 to {most}")),
            ));
        }
        let mut grid = vec![vec![C64::new(0.0, 0.0); columns]; rows];
        let mut seen = vec![vec![false; columns]; rows];
        let mut count = 0_usize;
        let first = |column: usize| match symmetry {
            "general" => 0,
            "skew-symmetric" => column + 1,
            _ => column,
        };
        let (mut i, mut j) = (first(0), 0);
        for line in body {
            let mut words = line.text.split_whitespace();
            let wrong = |what: &str| Error::spec(self.fault(line, what));
            if coordinate {
                let mut index = || {
                    words
                        .next()
                        .and_then(|word| word.parse::<usize>().ok())
                        .filter(|index| (1..=rows).contains(index))
                        .map(|index| index - 1)
                };
                (i, j) = index().zip(index()).ok_or_else(|| wrong("an index is wrong"))?;
            } else {
                while i >= rows && j < columns {
                    j += 1;
                    i = first(j);
                }
            }
            let mut number = || words.next().and_then(real);
            let re = number().ok_or_else(|| wrong("an element is no finite number"))?;
            let im = if complex_field {
                number().ok_or_else(|| wrong("an element is no finite complex number"))?
            } else {
                0.0
            };
            if words.next().is_some() {
                return Err(wrong("the line holds too much"));
            }
            let value = C64::new(re, im);
            let mut put = |i: usize, j: usize, value: C64| match (
                grid.get_mut(i).and_then(|row| row.get_mut(j)),
                seen.get_mut(i).and_then(|row| row.get_mut(j)),
            ) {
                (Some(slot), Some(seen)) if !*seen => {
                    *slot = value;
                    *seen = true;
                    true
                }
                _ => false,
            };
            if !put(i, j, value) {
                return Err(wrong("this element stands twice, or beyond the matrix"));
            }
            if let Some(mirror) = mirror
                && i != j
                && !put(j, i, mirror(value))
            {
                return Err(wrong("this element and its mirror image both stand here"));
            }
            count += 1;
            i += 1;
        }
        let wanted = if coordinate {
            entries
        } else {
            (0..columns).map(|column| rows.saturating_sub(first(column))).sum()
        };
        if count != wanted {
            return Err(Error::spec(
                self.fault(size, "the number of elements is wrong")
                    .found(format!("{count} elements"))
                    .expected(format!("{wanted}")),
            ));
        }
        Ok(Grid { rows: grid })
    }
}

fn real(text: &str) -> Option<f64> {
    let text = text.trim();
    read_number(text)
        .filter(|(value, length)| *length == text.len() && value.is_finite())
        .map(|(value, _)| value)
}

/// `a`, `a+bi`, `bi` or `i`, with `j` for `i` too.
fn complex(text: &str) -> Option<C64> {
    let text = text.trim();
    let Some(body) = text.strip_suffix(['i', 'j']) else {
        return real(text).map(|re| C64::new(re, 0.0));
    };
    let imaginary = |text: &str| match text {
        "" | "+" => Some(1.0),
        "-" => Some(-1.0),
        other => real(other),
    };
    // The sign that parts the two numbers is the last one not of an exponent.
    let split = body
        .char_indices()
        .rev()
        .find(|(at, c)| {
            matches!(c, '+' | '-')
                && *at > 0
                && !body.get(..*at).is_some_and(|head| head.ends_with(['e', 'E']))
        })
        .map(|(at, _)| at);
    match split.and_then(|at| Some((body.get(..at)?, body.get(at..)?))) {
        Some((re, im)) => Some(C64::new(real(re)?, imaginary(&im.replace(' ', ""))?)),
        None => Some(C64::new(0.0, imaginary(body.trim())?)),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn market(text: &str) -> Result<Grid> {
        read("m.mtx", text.as_bytes(), "m.mtx", 100)
    }

    #[test]
    fn each_symmetry_fills_the_other_triangle() {
        let grid =
            market("%%MatrixMarket matrix coordinate complex hermitian\n% c\n2 2 2\n1 1 3 0\n2 1 1 2\n")
                .unwrap();
        assert_eq!(
            grid.rows,
            [[C64::new(3.0, 0.0), C64::new(1.0, -2.0)], [C64::new(1.0, 2.0), C64::new(0.0, 0.0)]]
        );
        let grid = market("%%MatrixMarket matrix array real symmetric\n2 2\n1\n2\n3\n").unwrap();
        assert_eq!(grid.rows[0][1].re, 2.0);
        assert_eq!(grid.rows[1][1].re, 3.0);
        let grid = market("%%MatrixMarket matrix array integer skew-symmetric\n3 3\n1\n2\n3\n").unwrap();
        assert_eq!((grid.rows[2][1].re, grid.rows[1][2].re), (3.0, -3.0));
        let grid = market("%%MatrixMarket matrix array real general\n2 2\n1\n2\n3\n4\n").unwrap();
        assert_eq!(grid.rows[1][0].re, 2.0);
    }

    #[test]
    fn wrong_files_are_told_with_their_line() {
        for text in [
            "",
            "%%MatrixMarket matrix coordinate real",
            "%%MatrixMarket matrix coordinate pattern general\n1 1 1\n1 1\n",
            "%%MatrixMarket matrix coordinate real general\n2 2 1\n3 1 4\n",
            "%%MatrixMarket matrix coordinate real general\n2 2 2\n1 1 4\n",
            "%%MatrixMarket matrix coordinate real general\n2 2 2\n1 1 4\n1 1 4\n",
            "%%MatrixMarket matrix coordinate real general\n2 2 1\n1 1 nan\n",
            "%%MatrixMarket matrix coordinate real general\n2 2 1\n1 1 1e999\n",
            "%%MatrixMarket matrix coordinate real general\n99999999999 99999999999 1\n",
            "%%MatrixMarket matrix array real general\n2 2\n1\n2\n3\n4\n5\n",
            "%%MatrixMarket matrix array real skew-symmetric\n2 2\n1\n2\n",
        ] {
            assert!(market(text).unwrap_err().diagnostics()[0].place.is_some(), "{text}");
        }
    }

    #[test]
    fn complex_numbers_of_csv_files() {
        assert_eq!(complex("1e-3-2e+1i"), Some(C64::new(1e-3, -20.0)));
        assert_eq!(complex(" -i"), Some(C64::new(0.0, -1.0)));
        assert_eq!(complex("4"), Some(C64::new(4.0, 0.0)));
        assert_eq!(complex("3+i"), Some(C64::new(3.0, 1.0)));
        for bad in ["", "x", "1+2", "1e400", "nan", "inf", "1+infi", "i+1", "+-i"] {
            assert_eq!(complex(bad), None, "{bad}");
        }
        assert_eq!(read("m", b"1,2+1i\n2-1i,3\n", "m.csv", 9).unwrap().rows[0][1], C64::new(2.0, 1.0));
    }
}
