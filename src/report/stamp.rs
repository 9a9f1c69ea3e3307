//! What an artefact was made from: version, sheet, settings.

use sha2::{Digest, Sha256};

/// Identifies the program, the sheet and the settings behind a result.
#[derive(Clone, PartialEq, Debug)]
pub struct Stamp {
    /// Version of this program.
    pub version: &'static str,
    /// SHA-256 of the text of the sheet, hexadecimal.
    pub sheet_hash: String,
    /// Settings, as words.
    pub settings: String,
}

impl Stamp {
    /// The stamp of a sheet evaluated with `settings`.
    pub fn new(sheet: &str, settings: impl Into<String>) -> Self {
        let sheet_hash = Sha256::digest(sheet.as_bytes()).iter().map(|byte| format!("{byte:02x}")).collect();
        Self { version: env!("CARGO_PKG_VERSION"), sheet_hash, settings: settings.into() }
    }

    /// The stamp as a line of text.
    pub fn line(&self) -> String {
        format!("quadrel {}, sheet SHA-256 {}", self.version, &self.sheet_hash[..12])
    }

    /// The stamp as a JSON object.
    pub fn json(&self) -> serde_json::Value {
        serde_json::json!({"version": self.version, "sheet_sha256": self.sheet_hash, "settings": self.settings})
    }
}
