//! From a text to what it says, with every finding.

use toml::de::DeTable;

use super::document::{Findings, Section, start_of};
use super::finding::{Finding, Severity};

/// What `whole` makes of a text's tables; nothing where a finding is an error. Errors of the syntax come alone.
pub(super) fn read_text<T>(
    text: &str,
    whole: impl FnOnce(Section<'_, '_>, &mut Findings<'_>) -> Option<T>,
) -> (Option<T>, Vec<Finding>) {
    let mut findings = Findings::of(text);
    let (document, syntax_errors) = DeTable::parse_recoverable(text);
    for error in &syntax_errors {
        findings.at(start_of(error.span()), Severity::Error, "", error.message().replace('\n', ", "));
    }
    if !syntax_errors.is_empty() {
        return (None, findings.in_order());
    }
    let read = whole(Section::root(&document), &mut findings);
    let findings = findings.in_order();
    let usable = findings.iter().all(|finding| finding.severity != Severity::Error);
    (read.filter(|_| usable), findings)
}
