//! What an artefact was made from: version, sheet, settings.

use serde_json::Value;
use sha2::{Digest, Sha256};

/// Identifies the program, the sheet and the settings behind a result.
#[derive(Clone, PartialEq, Debug)]
pub struct Stamp {
    /// Version of this program.
    pub version: &'static str,
    /// SHA-256 of the text of the sheet, hexadecimal.
    pub sheet_hash: String,
    /// Settings by name.
    pub settings: Vec<(&'static str, Value)>,
}

impl Stamp {
    /// The stamp of a sheet evaluated with `settings`.
    pub fn new(sheet: &str, settings: Vec<(&'static str, Value)>) -> Self {
        let sheet_hash = Sha256::digest(sheet.as_bytes()).iter().map(|byte| format!("{byte:02x}")).collect();
        Self { version: env!("CARGO_PKG_VERSION"), sheet_hash, settings }
    }

    /// The stamp as a JSON object.
    pub fn json(&self) -> Value {
        let settings: serde_json::Map<String, Value> =
            self.settings.iter().map(|(name, value)| ((*name).to_owned(), value.clone())).collect();
        serde_json::json!({"version": self.version, "sheet_sha256": self.sheet_hash, "settings": settings})
    }

    /// The settings as words: `rel 1e-9, abs 0, set D = 3 m`.
    pub fn settings_text(&self) -> String {
        let words = self.settings.iter().filter_map(|(name, value)| match value {
            Value::Null => None,
            Value::String(text) if text.is_empty() => None,
            Value::String(text) => Some(format!("{name} {text}")),
            Value::Number(number) => Some(match number.as_f64() {
                Some(float) if number.is_f64() && float != 0.0 => format!("{name} {float:e}"),
                Some(float) if number.is_f64() => format!("{name} {float}"),
                _ => format!("{name} {number}"),
            }),
            other => Some(format!("{name} {other}")),
        });
        words.collect::<Vec<_>>().join(", ")
    }

    /// One line to cite: `quadrel 0.1.0, sheet SHA-256 0123456789ab, rel 1e-9, ...`
    pub fn line(&self) -> String {
        let settings = self.settings_text();
        let separator = if settings.is_empty() { "" } else { ", " };
        format!("quadrel {}, sheet SHA-256 {}{separator}{settings}", self.version, &self.sheet_hash[..12])
    }
}
