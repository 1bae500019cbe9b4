//! What is wrong, or worth knowing, about a rig file: where it is and what would be right.

use std::fmt;

use thiserror::Error;

/// Whether a finding keeps the rig from being used.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Severity {
    /// The rig file cannot be used until this is put right.
    Error,
    /// Usable, but the crew should know.
    Caution,
}

impl Severity {
    pub const fn word(self) -> &'static str {
        match self {
            Self::Error => "error",
            Self::Caution => "caution",
        }
    }
}

/// One finding. Shown as `12:10: error: rail.length: what was found and what is allowed`.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Finding {
    pub severity: Severity,
    /// From 1.
    pub line: usize,
    /// From 1, in characters.
    pub column: usize,
    /// Path of the key, such as `rail.length` or `channel[0].role`; entries of a list count from 0. Empty for the
    /// whole file.
    pub key: String,
    /// Lower case, no full stop.
    pub message: String,
}

impl fmt::Display for Finding {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}:{}: {}: ", self.line, self.column, self.severity.word())?;
        if !self.key.is_empty() {
            write!(f, "{}: ", self.key)?;
        }
        f.write_str(&self.message)
    }
}

/// Why there is no [`Rig`](super::Rig).
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum RigError {
    #[error("{path}: cannot be read: {source}")]
    Unreadable { path: String, source: std::io::Error },
    #[error("{}", listed(path, findings))]
    Refused {
        /// Name of the file for messages; empty when the text came from elsewhere.
        path: String,
        /// Errors and cautions, in the order of the file.
        findings: Vec<Finding>,
    },
}

fn listed(path: &str, findings: &[Finding]) -> String {
    let n_errors = findings.iter().filter(|finding| finding.severity == Severity::Error).count();
    let name = if path.is_empty() { "rig file" } else { path };
    let mut text = format!("{name} has {n_errors} error{}", if n_errors == 1 { "" } else { "s" });
    for finding in findings {
        text.push_str(&format!("\n{name}:{finding}"));
    }
    text
}
