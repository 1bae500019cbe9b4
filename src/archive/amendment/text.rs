//! The text of an amendment: TOML that people can read without this program.

use serde::{Deserialize, Serialize};

pub(super) const FORMAT: &str = "tautrail-amendment";
pub(super) const FORMAT_VERSION: u32 = 1;

/// A note in free words.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct NoteSaid {
    pub text: String,
}

/// What was found when an inspection item of the rig file was looked at.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct Answer {
    pub item: String,
    pub answer: String,
}

/// A condition of the trial, in the unit it is stored in.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct ConditionSaid {
    pub name: String,
    pub value: f64,
    pub unit: String,
}

/// A whole text that takes the place of one that the trial carries in `/rig`.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct RecordSaid {
    pub name: String,
    /// SHA-256 of the text it takes the place of.
    pub replaces_sha256: String,
    pub text: String,
}

/// What a person wants to say of a trial.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Draft {
    pub person: String,
    pub reason: String,
    pub notes: Vec<NoteSaid>,
    pub answers: Vec<Answer>,
    pub conditions: Vec<ConditionSaid>,
    /// Name and text of corrected records.
    pub records: Vec<(String, String)>,
}

/// An amendment file, key for key.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub(super) struct AmendmentText {
    pub(super) format: String,
    pub(super) format_version: u32,
    pub(super) number: u32,
    pub(super) trial_id: String,
    /// Digest over all raw groups of the trial.
    pub(super) raw_sha256: String,
    /// SHA-256 of the amendment before, byte for byte; empty for the first.
    pub(super) predecessor_sha256: String,
    /// RFC 3339, by the clock of the computer it was written on.
    pub(super) written: String,
    pub(super) person: String,
    pub(super) reason: String,
    pub(super) program_version: String,
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub(super) note: Vec<NoteSaid>,
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub(super) answer: Vec<Answer>,
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub(super) condition: Vec<ConditionSaid>,
    #[serde(default, skip_serializing_if = "Vec::is_empty")]
    pub(super) record: Vec<RecordSaid>,
}

impl AmendmentText {
    /// Reads the text; the sentence says what is wrong with it.
    pub(super) fn parse(text: &str) -> Result<Self, String> {
        #[derive(Deserialize)]
        struct Version {
            format: String,
            format_version: u32,
        }
        let in_words = |error: toml::de::Error| error.to_string().trim_end().replace('\n', " / ");
        let Version { format, format_version } = toml::from_str(text).map_err(in_words)?;
        if format != FORMAT {
            return Err(format!("its format is {format:?}, not {FORMAT:?}"));
        }
        if format_version > FORMAT_VERSION {
            return Err(format!(
                "its format version is {format_version}, this program reads up to {FORMAT_VERSION}: use a newer program"
            ));
        }
        let parsed: Self = toml::from_str(text).map_err(in_words)?;
        match parsed.condition.iter().find(|condition| !condition.value.is_finite()) {
            Some(condition) => Err(format!("condition {:?} is no finite number", condition.name)),
            None => Ok(parsed),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn whole() -> AmendmentText {
        AmendmentText {
            format: FORMAT.into(),
            format_version: FORMAT_VERSION,
            number: 2,
            trial_id: "000012-7f3a9c".into(),
            raw_sha256: "ab".repeat(32),
            predecessor_sha256: String::new(),
            written: "2026-12-01T14:00:00Z".into(),
            person: "größer".into(),
            reason: "a \"quoted\" reason\nin two lines".into(),
            program_version: "0.1.0".into(),
            note: vec![NoteSaid { text: "gusty '''\n\n".into() }],
            answer: vec![Answer { item: "hook".into(), answer: "sound".into() }],
            condition: vec![ConditionSaid { name: "head_wind".into(), value: 2.5, unit: "m/s".into() }],
            record: vec![RecordSaid { name: "a.toml".into(), replaces_sha256: "00".into(), text: "x = 1\r\n".into() }],
        }
    }

    #[test]
    fn what_was_said_comes_back_to_the_letter() {
        let text = toml::to_string_pretty(&whole()).unwrap();
        assert_eq!(AmendmentText::parse(&text).unwrap(), whole());
    }

    #[test]
    fn keys_of_later_programs_are_skipped_and_later_versions_refused() {
        let text = toml::to_string_pretty(&whole()).unwrap();
        let more = format!("a_key_of_tomorrow = 1\n{text}\n[[a_table_of_tomorrow]]\nx = 1\n");
        assert_eq!(AmendmentText::parse(&more).unwrap(), whole());
        let later = text.replace("format_version = 1", "format_version = 2");
        assert!(AmendmentText::parse(&later).unwrap_err().contains("use a newer program"));
        assert!(AmendmentText::parse("x = [").is_err());
        assert!(AmendmentText::parse(&text.replace("value = 2.5", "value = nan")).unwrap_err().contains("finite"));
    }
}
