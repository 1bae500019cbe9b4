//! The daemon's book of trials: which is open, which wait for sealing, what of the journal they need.

use std::io;

use super::found::Unsealed;
use super::machine::identifier;

/// The trial under way.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct OpenTrial {
    pub trial_id: String,
    /// Known once the recorder has written the opening.
    pub first_seq: Option<u64>,
    pub opened_ns: i64,
    /// Bytes that this run had recorded when the trial began, less what the trial took before.
    pub bytes_from: i64,
}

#[derive(Debug)]
pub struct TrialBook {
    journal_id: String,
    next_number: u32,
    open: Option<OpenTrial>,
    /// Closed, but not known to be on the disk yet; then sealed.
    waiting: Vec<Unsealed>,
}

impl TrialBook {
    pub fn new(journal_id: String, next_number: u32, waiting: Vec<Unsealed>) -> Self {
        Self { journal_id, next_number, open: None, waiting }
    }

    pub fn open(&self) -> Option<&OpenTrial> {
        self.open.as_ref()
    }

    pub fn waiting(&self) -> &[Unsealed] {
        &self.waiting
    }

    /// Begins a trial under a new identifier.
    ///
    /// `recorded_bytes` is what this run has recorded by now.
    pub fn begin(&mut self, opened_ns: i64, recorded_bytes: u64) -> io::Result<String> {
        let trial_id = identifier(self.next_number)?;
        self.next_number += 1;
        self.open = Some(OpenTrial {
            trial_id: trial_id.clone(),
            first_seq: None,
            opened_ns,
            bytes_from: recorded_bytes as i64,
        });
        Ok(trial_id)
    }

    /// Goes on with a trial of an earlier run, which took `n_bytes` of the journal so far.
    pub fn resume(&mut self, trial_id: String, first_seq: u64, opened_ns: i64, n_bytes: u64) {
        let bytes_from = -(n_bytes as i64);
        self.open = Some(OpenTrial { trial_id, first_seq: Some(first_seq), opened_ns, bytes_from });
    }

    /// The recorder wrote the opening.
    pub fn opened(&mut self, trial_id: &str, seq: u64) {
        if let Some(open) = self.open.as_mut().filter(|open| open.trial_id == trial_id) {
            open.first_seq = Some(seq);
        }
        for closed in self.waiting.iter_mut().filter(|closed| closed.trial_id == trial_id) {
            closed.first_seq = seq;
        }
    }

    /// Ends the trial under way; it waits for sealing from now on.
    pub fn close(&mut self, recorded_bytes: u64) -> Option<String> {
        let n_bytes = self.open_bytes(recorded_bytes);
        let open = self.open.take()?;
        self.waiting.push(Unsealed {
            journal_id: self.journal_id.clone(),
            trial_id: open.trial_id.clone(),
            first_seq: open.first_seq.unwrap_or(0), // unknown for an instant: keep everything
            n_bytes,
        });
        Some(open.trial_id)
    }

    /// What of the journal the trial under way takes by now.
    pub fn open_bytes(&self, recorded_bytes: u64) -> u64 {
        self.open.as_ref().map_or(0, |open| u64::try_from(recorded_bytes as i64 - open.bytes_from).unwrap_or(0))
    }

    pub fn find_waiting(&self, trial_id: &str) -> Option<&Unsealed> {
        self.waiting.iter().find(|unsealed| unsealed.trial_id == trial_id)
    }

    /// The trial has its file.
    pub fn sealed(&mut self, trial_id: &str) {
        self.waiting.retain(|unsealed| unsealed.trial_id != trial_id);
    }

    /// Greatest running number of a trial so far.
    pub fn last_number(&self) -> u32 {
        self.next_number.saturating_sub(1)
    }

    pub fn journal_id(&self) -> &str {
        &self.journal_id
    }

    /// First record of this journal that an unsealed trial needs.
    pub fn pinned_from(&self) -> Option<u64> {
        let waiting = self.waiting.iter().filter(|unsealed| unsealed.journal_id == self.journal_id);
        let open = self.open.as_ref().map(|open| open.first_seq.unwrap_or(0));
        waiting.map(|unsealed| unsealed.first_seq).chain(open).min()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_pin_is_the_oldest_record_any_unsealed_trial_needs() {
        let mut book = TrialBook::new("000002-aaaaaa".into(), 7, Vec::new());
        assert_eq!(book.pinned_from(), None);
        let first = book.begin(0, 0).unwrap();
        assert!(first.starts_with("000007-"));
        assert_eq!(book.pinned_from(), Some(0), "not known yet: everything");
        book.opened(&first, 100);
        book.close(40);
        let second = book.begin(5, 100).unwrap();
        book.opened(&second, 200);
        assert_eq!(book.pinned_from(), Some(100));
        book.sealed(&first);
        assert_eq!(book.pinned_from(), Some(200));
        book.close(150);
        assert_eq!(book.waiting()[0].n_bytes, 50);
        book.sealed(&second);
        assert_eq!(book.pinned_from(), None);
    }

    #[test]
    fn a_trial_of_an_older_journal_pins_nothing_here() {
        let older =
            Unsealed { journal_id: "000001-bbbbbb".into(), trial_id: "000003-cccccc".into(), first_seq: 9, n_bytes: 1 };
        let book = TrialBook::new("000002-aaaaaa".into(), 7, vec![older]);
        assert_eq!(book.pinned_from(), None);
    }
}
