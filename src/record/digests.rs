//! What shows later that the files of a record still belong together.

use crate::sheet::DataFile;
use serde::{Deserialize, Serialize};
use sha2::{Digest, Sha256};
use std::collections::BTreeMap;

/// Name of the list of digests.
pub const FILE: &str = "digests.json";

/// Digests of all files of a record.
#[derive(Debug, Clone, PartialEq, Eq, Default, Serialize, Deserialize)]
pub struct Digests {
    /// SHA-256 of each file, in hexadecimal.
    pub files: BTreeMap<String, String>,
    /// Data files of the sheet: the name that the sheet writes, the file of the record.
    #[serde(default)]
    pub data: BTreeMap<String, String>,
}

/// SHA-256, in hexadecimal.
pub fn digest(content: &[u8]) -> String {
    Sha256::digest(content).iter().map(|b| format!("{b:02x}")).collect()
}

/// Adds the data files of the sheet and the digests of everything.
pub fn seal(files: &mut Vec<(String, Vec<u8>)>, data: &[DataFile]) {
    let mut digests = Digests::default();
    for (k, file) in data.iter().enumerate() {
        let Ok(content) = &file.content else { continue };
        let plain = |c: char| if c.is_ascii_alphanumeric() || c == '.' { c } else { '-' };
        let last = file.name.rsplit(['/', '\\']).next().unwrap_or("");
        let name: String = format!("data/{:02}-{}", k + 1, last.chars().map(plain).take(60).collect::<String>());
        files.push((name.clone(), content.clone().into_bytes()));
        digests.data.insert(file.name.clone(), name);
    }
    digests.files = files.iter().map(|(name, content)| (name.clone(), digest(content))).collect();
    // Plain data with text keys always serialise.
    let mut text = serde_json::to_string_pretty(&digests).unwrap_or_default();
    text.push('\n');
    files.push((FILE.into(), text.into_bytes()));
}

/// How a file stands to its digest.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum State {
    /// As it was written.
    Unchanged,
    /// Not as it was written.
    Changed,
    /// Not there.
    Missing,
}

impl Digests {
    /// Reads the list.
    ///
    /// # Errors
    /// What is wrong with the text.
    pub fn read(text: &str) -> Result<Self, String> {
        serde_json::from_str(text).map_err(|error| error.to_string())
    }

    /// All files against their digests; `content` gives a file of the record.
    pub fn states(&self, content: impl Fn(&str) -> Option<Vec<u8>>) -> Vec<(String, State)> {
        let state = |name: &str, expected: &str| match content(name) {
            None => State::Missing,
            Some(content) if digest(&content) == expected => State::Unchanged,
            Some(_) => State::Changed,
        };
        self.files.iter().map(|(name, expected)| (name.clone(), state(name, expected))).collect()
    }
}
