//! Texts that a rig file points to (calibration records, cord cards), carried behind its own text in one.
//!
//! The joined text is what the journal keeps: alone it says all that the rig file and its records say, and it is still
//! TOML, because every attached line is a comment. Taking apart what was joined gives back every byte.

use std::path::Path;

use toml::de::{DeTable, DeValue};

use super::finding::RigError;

const BEGIN: &str = "\n#@attached ";
const END: &str = "\n#@end\n";
const LINE: &str = "#| ";

/// A text that a rig file points to.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Attached {
    /// The path as the rig file writes it.
    pub name: String,
    pub text: String,
}

/// A rig file's text with the texts that it points to.
pub fn join(rig_text: &str, attached: &[Attached]) -> String {
    let mut joined = rig_text.to_owned();
    for Attached { name, text } in attached {
        let lines: Vec<String> = text.split('\n').map(|line| format!("{LINE}{line}")).collect();
        joined.push_str(&format!("{BEGIN}{name}\n{}{END}", lines.join("\n")));
    }
    joined
}

/// The rig file's own text, and what is attached to it. Text that was not joined has nothing attached.
pub fn take_apart(joined: &str) -> (&str, Vec<Attached>) {
    let mut attached = Vec::new();
    let start = joined.find(BEGIN).unwrap_or(joined.len());
    let (own, mut rest) = joined.split_at(start);
    while let Some(after) = rest.strip_prefix(BEGIN) {
        let (part, next) = after.split_once(END).unwrap_or((after, ""));
        let (name, lines) = part.split_once('\n').unwrap_or((part, ""));
        let lines: Vec<&str> = lines.split('\n').map(|line| line.strip_prefix(LINE).unwrap_or(line)).collect();
        attached.push(Attached { name: name.to_owned(), text: lines.join("\n") });
        rest = next;
    }
    (own, attached)
}

/// The paths that a rig file's text points to, each once, in its order: every `record` of a channel, every `card`.
///
/// Empty where the text is no TOML: its findings are told when it is read.
pub fn pointed_to(rig_text: &str) -> Vec<String> {
    const POINTERS: [&str; 2] = ["record", "card"];
    let (document, _) = DeTable::parse_recoverable(rig_text);
    let mut found: Vec<(usize, String)> = Vec::new();
    let mut tables: Vec<&DeTable<'_>> = vec![document.get_ref()];
    while let Some(table) = tables.pop() {
        for (key, value) in table.iter() {
            match value.get_ref() {
                DeValue::String(path) if POINTERS.contains(&key.get_ref().as_ref()) => {
                    found.push((value.span().start, path.to_string()));
                }
                DeValue::Table(inner) => tables.push(inner),
                DeValue::Array(entries) => {
                    tables.extend(entries.iter().filter_map(|entry| entry.get_ref().as_table()));
                }
                _ => {}
            }
        }
    }
    found.sort();
    let mut paths: Vec<String> = Vec::new();
    for (_, path) in found {
        if !paths.contains(&path) && !path.trim().is_empty() && !path.contains('\n') {
            paths.push(path);
        }
    }
    paths
}

/// The text of a rig file joined with what it points to; relative paths start at the rig file's folder. What can't be
/// read is left out, and [`check`](super::check) says where it is missing.
///
/// # Errors
/// The rig file itself can't be read.
pub fn read_joined(path: &Path) -> Result<String, RigError> {
    let shown = || path.display().to_string();
    let rig_text = std::fs::read_to_string(path).map_err(|source| RigError::Unreadable { path: shown(), source })?;
    // Taken from a trial it is joined already: what it carries counts, and only what it lacks is looked for.
    let (own, mut attached) = take_apart(&rig_text);
    let n_carried = attached.len();
    let folder = path.parent().unwrap_or(Path::new(""));
    for name in pointed_to(own) {
        if attached.iter().any(|carried| carried.name == name) {
            continue;
        }
        if let Ok(text) = std::fs::read_to_string(folder.join(&name)) {
            attached.push(Attached { name, text });
        }
    }
    Ok(if attached.len() == n_carried { rig_text } else { join(own, &attached) })
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    #[test]
    fn pointers_are_found_in_order_and_once() {
        let text = "[[channel]]\nrecord = \"records/b.toml\"\n[[channel]]\nrecord = \"a.toml\"\n\
                    [cords]\ncard = \"cards/six.toml\"\n[[channel]]\nrecord = \"a.toml\"\nname = \"record\"";
        assert_eq!(pointed_to(text), ["records/b.toml", "a.toml", "cards/six.toml"]);
        assert!(pointed_to("[[channel]\nrecord = ").is_empty());
    }

    #[test]
    fn a_joined_text_is_toml_and_says_the_same() {
        let joined = join("name = \"x\"\n", &[Attached { name: "a.toml".into(), text: "b = [1,\n 2]\n".into() }]);
        let table: toml::Table = joined.parse().unwrap();
        assert_eq!(table.len(), 1);
    }

    #[test]
    fn a_rig_file_from_a_trial_keeps_its_records_and_finds_what_was_added_to_it() {
        let dir = tempfile::tempdir().unwrap();
        let text = |name: &str, text: &str| std::fs::write(dir.path().join(name), text).unwrap();
        text("a.toml", "of the disk");
        text("b.toml", "beside it");
        let own = "x = 1\n[[channel]]\nrecord = \"a.toml\"\n[cords]\ncard = \"b.toml\"\n";
        text("rig.toml", &join(own, &[Attached { name: "a.toml".into(), text: "of the trial".into() }]));
        let joined = read_joined(&dir.path().join("rig.toml")).unwrap();
        let (found, attached) = take_apart(&joined);
        let texts: Vec<&str> = attached.iter().map(|one| one.text.as_str()).collect();
        assert_eq!((found, texts), (own, vec!["of the trial", "beside it"]));
    }

    proptest! {
        #[test]
        fn what_was_joined_comes_apart_to_the_byte(
            own in "([a-z =\"\r\n]|\\PC){0,60}",
            texts in prop::collection::vec(("[a-z/.-]{1,12}", "([a-z#|@ \r\n]|\\PC){0,60}"), 0..4),
        ) {
            let attached: Vec<Attached> = texts.into_iter().map(|(name, text)| Attached { name, text }).collect();
            let joined = join(&own, &attached);
            prop_assert_eq!(take_apart(&joined), (own.as_str(), attached));
        }

        #[test]
        fn no_text_makes_it_panic(text in "([#@|\na-z]|#@attached |#@end|\\PC){0,80}") {
            let _ = take_apart(&text);
            let _ = pointed_to(&text);
        }
    }
}
