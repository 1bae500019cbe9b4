//! Gaps and refusals of one device as people can read them: a sentence at once, then at most one every ten seconds.

use std::collections::BTreeMap;

use crate::capture::{Captured, Gap};

const EVERY_NS: i64 = 10_000_000_000;

/// What was lost since it was last told.
#[derive(Debug, Default)]
pub struct Losses {
    missing: BTreeMap<u8, (u64, u64)>,
    refused: BTreeMap<&'static str, u64>,
    told_ns: Option<i64>,
}

impl Losses {
    /// Takes note; everything but gaps and refusals passes.
    pub fn heard(&mut self, what: &Captured) {
        match what {
            Captured::Gap(Gap { stream, n_missing, .. }) => {
                let (samples, places) = self.missing.entry(*stream).or_default();
                *samples = samples.saturating_add(*n_missing);
                *places += 1;
            }
            Captured::Rejected(rejected) => *self.refused.entry(rejected.reason).or_default() += 1,
            _ => {}
        }
    }

    /// What is to be told now, if anything.
    pub fn tell(&mut self, host_ns: i64) -> Option<String> {
        let nothing = self.missing.is_empty() && self.refused.is_empty();
        if nothing || self.told_ns.is_some_and(|told_ns| host_ns - told_ns < EVERY_NS) {
            return None;
        }
        self.told_ns = Some(host_ns);
        let mut parts: Vec<String> = Vec::new();
        for (stream, (samples, places)) in std::mem::take(&mut self.missing) {
            let places = if places == 1 { String::new() } else { format!(" in {places} gaps") };
            parts.push(format!("{samples} samples of stream {stream} missing{places}"));
        }
        for (reason, n) in std::mem::take(&mut self.refused) {
            parts.push(format!("{n} refused, {reason}"));
        }
        Some(parts.join("; "))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_gap_is_told_at_once_and_a_flood_of_them_every_ten_seconds() {
        const S: i64 = 1_000_000_000;
        let gap = |stream| Captured::Gap(Gap { host_ns: 0, boot_id: 1, stream, first_missing_index: 0, n_missing: 50 });
        let mut losses = Losses::default();
        assert_eq!(losses.tell(0), None);
        losses.heard(&gap(1));
        assert_eq!(losses.tell(0).unwrap(), "50 samples of stream 1 missing");
        (0..3).for_each(|_| losses.heard(&gap(2)));
        assert_eq!(losses.tell(9 * S), None);
        assert_eq!(losses.tell(10 * S).unwrap(), "150 samples of stream 2 missing in 3 gaps");
        assert_eq!(losses.tell(30 * S), None);
    }
}
