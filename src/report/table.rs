//! Tables of nodes: comma-separated text, and the NPY array format of version 1.0.

use super::stamp::Stamp;
use std::io::{self, Write};

/// Columns of a table of nodes; the first two are the variables of the patch in the order of its arguments.
pub const COLUMNS: [&str; 10] = ["param_1", "param_2", "x", "y", "z", "nx", "ny", "nz", "dA", "weight_dA"];

/// Writes rows of a table.
pub trait TableFormat {
    /// What comes before the rows; `rows` is how many will follow.
    ///
    /// # Errors
    /// What the writer reports.
    fn header(&self, out: &mut dyn Write, rows: usize) -> io::Result<()>;

    /// One row of the patch with this index in the table.
    ///
    /// # Errors
    /// What the writer reports.
    fn row(&self, out: &mut dyn Write, patch: usize, row: &[f64; COLUMNS.len()]) -> io::Result<()>;
}

/// Comma-separated values, a stamp in leading `#` lines, then the names of the columns.
pub struct CsvTable {
    /// The stamp.
    pub stamp: Stamp,
    /// Names of the two variables of the patch, which become the columns `param_NAME`: a variable may be called `z` like a coordinate.
    pub variables: [String; 2],
    /// For the table of a chain, the names of its patches, which stand in a column before the others.
    pub patches: Option<Vec<String>>,
}

impl TableFormat for CsvTable {
    fn header(&self, out: &mut dyn Write, _rows: usize) -> io::Result<()> {
        writeln!(out, "# quadrel {}", self.stamp.version)?;
        writeln!(out, "# sheet sha256 {}", self.stamp.sheet_hash)?;
        writeln!(out, "# {}", self.stamp.settings_text())?;
        let [first, second] = &self.variables;
        if self.patches.is_some() {
            out.write_all(b"patch,")?;
        }
        writeln!(out, "param_{first},param_{second},{}", COLUMNS[2..].join(","))
    }

    fn row(&self, out: &mut dyn Write, patch: usize, row: &[f64; COLUMNS.len()]) -> io::Result<()> {
        if let Some(patches) = &self.patches {
            // A moved copy may have commas in its name.
            write!(out, "\"{}\",", patches[patch].replace('"', "\"\""))?;
        }
        for (index, value) in row.iter().enumerate() {
            if index > 0 {
                out.write_all(b",")?;
            }
            write!(out, "{value:?}")?;
        }
        out.write_all(b"\n")
    }
}

/// A two-dimensional array of little-endian doubles, one row for each node, columns in the order of [`COLUMNS`].
pub struct NpyTable {
    /// For the table of a chain: a column before the others tells the patch, counted from 0.
    pub numbered: bool,
}

impl TableFormat for NpyTable {
    fn header(&self, out: &mut dyn Write, rows: usize) -> io::Result<()> {
        let mut text = format!(
            "{{'descr': '<f8', 'fortran_order': False, 'shape': ({rows}, {}), }}",
            COLUMNS.len() + usize::from(self.numbered)
        );
        // Magic, version, length and text fill a multiple of 64 bytes; the text ends with a line feed.
        let unpadded = 6 + 2 + 2 + text.len() + 1;
        text.push_str(&" ".repeat(unpadded.next_multiple_of(64) - unpadded));
        text.push('\n');
        out.write_all(b"\x93NUMPY\x01\x00")?;
        out.write_all(&(text.len() as u16).to_le_bytes())?;
        out.write_all(text.as_bytes())
    }

    fn row(&self, out: &mut dyn Write, patch: usize, row: &[f64; COLUMNS.len()]) -> io::Result<()> {
        if self.numbered {
            out.write_all(&(patch as f64).to_le_bytes())?;
        }
        for value in row {
            out.write_all(&value.to_le_bytes())?;
        }
        Ok(())
    }
}
