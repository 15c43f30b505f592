//! Matrix Market export (Boisvert, Pozo & Remington, NISTIR 5935, 1996), to hand a matrix to
//! other solvers.

use std::fs::File;
use std::io::{self, BufWriter, Write};
use std::path::Path;

use crate::Pattern;

/// Writes a symmetric matrix as Matrix Market coordinates, one line per stored entry.
///
/// The format wants the lower triangle, so each stored (row, column) is written as its mirror
/// image; numbering starts at one. Values keep all their digits.
///
/// # Errors
/// `InvalidInput` if `values` does not match the pattern; otherwise what writing the file gives.
pub fn write_matrix_market(path: &Path, pattern: &Pattern, values: &[f64]) -> io::Result<()> {
    pattern.check().map_err(|error| io::Error::new(io::ErrorKind::InvalidInput, error))?;
    if values.len() != pattern.entries() {
        let text = format!("{} values for {} entries", values.len(), pattern.entries());
        return Err(io::Error::new(io::ErrorKind::InvalidInput, text));
    }
    let mut file = BufWriter::new(File::create(path)?);
    writeln!(file, "%%MatrixMarket matrix coordinate real symmetric")?;
    writeln!(file, "{0} {0} {1}", pattern.n, pattern.entries())?;
    let mut values = values.iter();
    for column in 0..pattern.n {
        for (row, value) in pattern.rows(column).iter().zip(&mut values) {
            writeln!(file, "{} {} {value:e}", column + 1, row + 1)?;
        }
    }
    file.flush()
}
