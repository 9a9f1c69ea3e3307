//! Files that are whole or absent.

use std::io::{self, BufWriter, Write};
use std::path::Path;

/// Writes a file beside its final place and renames it when `write` has succeeded; on failure nothing is left.
///
/// # Errors
/// What the file system or `write` reports.
pub fn write_whole(path: &Path, write: impl FnOnce(&mut dyn Write) -> io::Result<()>) -> io::Result<()> {
    let mut name = path.file_name().unwrap_or_default().to_os_string();
    name.push(format!(".{}.partial", std::process::id()));
    let partial = path.with_file_name(name);
    let result = (|| {
        let mut file = BufWriter::new(std::fs::File::create(&partial)?);
        write(&mut file)?;
        let file = file.into_inner().map_err(|error| error.into_error())?;
        file.sync_all()?;
        std::fs::rename(&partial, path)
    })();
    if result.is_err() {
        // The partial file may not exist; the first error is the one to report.
        let _ = std::fs::remove_file(&partial);
    }
    result
}
