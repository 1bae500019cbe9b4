//! Which segments are kept: all that a trial needs, and of the others as much as the budget allows.

use std::collections::VecDeque;
use std::path::PathBuf;

use super::job::Job;

/// Records kept before a pinned one: a reader starts a segment early (see the reader's lead-in).
const LEAD_IN_RECORDS: u64 = 2000;

/// Finished segments, oldest first.
#[derive(Debug, Default)]
pub(super) struct Retention {
    kept: VecDeque<Kept>,
    doomed: Vec<PathBuf>,
}

#[derive(Debug)]
struct Kept {
    path: PathBuf,
    n_bytes: u64,
    /// One past its last record; `None` for a segment of an earlier journal, whose pins do not compare.
    end_seq: Option<u64>,
}

impl Retention {
    /// Takes a finished segment; `end_seq` is `None` for one of an earlier journal, which no pin concerns.
    pub fn adopt(&mut self, path: PathBuf, n_bytes: u64, end_seq: Option<u64>) {
        self.kept.push_back(Kept { path, n_bytes, end_seq });
    }

    /// Removes a file that holds nothing.
    pub fn doom(&mut self, path: PathBuf) {
        self.doomed.push(path);
    }

    pub fn n_bytes(&self) -> u64 {
        self.kept.iter().map(|kept| kept.n_bytes).sum()
    }

    pub fn release(&mut self, pinned_from_seq: Option<u64>, budget_bytes: u64) {
        let mut n_bytes = self.n_bytes();
        while n_bytes > budget_bytes {
            let Some(oldest) = self.kept.front() else { return };
            let needed = match (oldest.end_seq, pinned_from_seq) {
                (Some(end_seq), Some(pinned)) => end_seq.saturating_add(LEAD_IN_RECORDS) > pinned,
                _ => false,
            };
            if needed {
                return;
            }
            if let Some(oldest) = self.kept.pop_front() {
                n_bytes -= oldest.n_bytes;
                self.doomed.push(oldest.path);
            }
        }
    }

    pub fn job(&mut self) -> Option<Job> {
        (!self.doomed.is_empty()).then(|| Job::Remove { paths: std::mem::take(&mut self.doomed) })
    }
}
