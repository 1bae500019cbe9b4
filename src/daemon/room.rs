//! Whether the disk has room for what may come: the longest hold at the rate at which data arrive, and the files of all
//! trials that wait for sealing. Pure: told times, bytes and free room, it says what to do.

use std::collections::VecDeque;
use std::time::Duration;

use crate::archive::file_room_bytes;

use super::found::Unsealed;

/// Free room is said to run low below this multiple of what is needed.
const EARLY: f64 = 2.0;
/// Over which the rate is looked at.
const RATE_NS: i64 = 10_000_000_000;

/// Counts what is recorded, and knows what that asks of the disk.
#[derive(Debug)]
pub struct RoomWatch {
    longest_hold_s: f64,
    /// Bytes a second that the ports could bring at most: believed until data came for a while.
    declared_bytes_per_s: f64,
    n_bytes: u64,
    /// (when, bytes by then), of the last [`RATE_NS`].
    lately: VecDeque<(i64, u64)>,
    greatest_bytes_per_s: f64,
}

/// How much room there is, against what is needed.
#[derive(Debug, Clone, PartialEq)]
pub enum Room {
    Enough,
    /// Time to make room.
    Low(String),
    /// No new trial is begun.
    TooLittle(String),
}

impl Room {
    /// What is to be told, if anything.
    pub fn sentence(&self) -> Option<&str> {
        match self {
            Self::Enough => None,
            Self::Low(sentence) | Self::TooLittle(sentence) => Some(sentence),
        }
    }
}

impl RoomWatch {
    pub fn new(longest_hold: Duration, declared_bytes_per_s: f64) -> Self {
        Self {
            longest_hold_s: longest_hold.as_secs_f64(),
            declared_bytes_per_s,
            n_bytes: 0,
            lately: VecDeque::new(),
            greatest_bytes_per_s: 0.0,
        }
    }

    /// Bytes recorded since the start.
    pub fn n_bytes(&self) -> u64 {
        self.n_bytes
    }

    pub fn recorded(&mut self, n_bytes: usize) {
        self.n_bytes += n_bytes as u64;
    }

    /// Looks at the rate; a few times a second.
    pub fn look(&mut self, now_ns: i64) {
        self.lately.push_back((now_ns, self.n_bytes));
        let Some(&(first_ns, first_bytes)) = self.lately.front() else { return };
        if now_ns - first_ns >= RATE_NS {
            let rate = (self.n_bytes - first_bytes) as f64 / ((now_ns - first_ns) as f64 * 1e-9);
            self.greatest_bytes_per_s = self.greatest_bytes_per_s.max(rate);
            self.lately.pop_front();
        }
    }

    fn bytes_per_s(&self) -> f64 {
        if self.greatest_bytes_per_s > 0.0 { self.greatest_bytes_per_s } else { self.declared_bytes_per_s }
    }

    /// Free room against what the longest hold and the files of all unsealed trials need; `open_bytes` is the trial under way,
    /// or the one that could begin.
    pub fn judge(&self, free_bytes: u64, unsealed: &[Unsealed], open_bytes: u64) -> Room {
        let hold = self.bytes_per_s() * self.longest_hold_s;
        let of_trials = || unsealed.iter().map(|unsealed| unsealed.n_bytes).chain([open_bytes]);
        let waiting = of_trials().fold(0, u64::saturating_add) as f64;
        let needed = hold + of_trials().map(file_room_bytes).fold(0, u64::saturating_add) as f64;
        let free = free_bytes as f64;
        if free >= EARLY * needed {
            return Room::Enough;
        }
        let mib = |bytes: f64| format!("{:.0} MiB", bytes / f64::from(1 << 20));
        let (free_mib, needed_mib, minutes) = (mib(free), mib(needed), self.longest_hold_s / 60.0);
        let what = format!(
            "{free_mib} free of {needed_mib} that a hold of {minutes:.0} min and {} to seal need",
            mib(waiting)
        );
        if free >= needed {
            Room::Low(format!("the disk has {what} with little to spare: make room before the next trial"))
        } else {
            Room::TooLittle(format!("the disk has {what}: no new trial is begun until there is room"))
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const MIB: u64 = 1 << 20;
    const S: i64 = 1_000_000_000;

    fn watch(bytes_per_s: u64) -> RoomWatch {
        let mut watch = RoomWatch::new(Duration::from_secs(600), 1e6);
        for s in 0..=20 {
            watch.look(s * S);
            watch.recorded(bytes_per_s as usize);
        }
        watch
    }

    fn unsealed(n_bytes: u64) -> Unsealed {
        Unsealed { journal_id: "j".to_owned(), trial_id: "t".to_owned(), first_seq: 1, n_bytes }
    }

    #[test]
    fn what_is_needed_is_the_longest_hold_at_the_rate_seen_and_a_file_of_every_unsealed_trial() {
        let watch = watch(MIB);
        // 600 s of 1 MiB/s, 2.2 times 100 MiB and 4 MiB for either file.
        let free_needed = 600 * MIB + 220 * MIB + 8 * MIB;
        let waiting = [unsealed(60 * MIB)];
        assert!(matches!(watch.judge(free_needed - 1, &waiting, 40 * MIB), Room::TooLittle(_)));
        assert!(matches!(watch.judge(free_needed, &waiting, 40 * MIB), Room::Low(_)));
        assert!(matches!(watch.judge(2 * free_needed - 1, &waiting, 40 * MIB), Room::Low(_)));
        assert_eq!(watch.judge(2 * free_needed, &waiting, 40 * MIB), Room::Enough);
    }

    #[test]
    fn before_anything_came_the_ports_rate_is_believed_and_a_pause_later_is_not() {
        let fresh = RoomWatch::new(Duration::from_secs(600), MIB as f64);
        assert!(matches!(fresh.judge(603 * MIB, &[], 0), Room::TooLittle(_)));
        assert!(matches!(fresh.judge(604 * MIB, &[], 0), Room::Low(_)));
        let mut watch = watch(MIB);
        (21..100).for_each(|s| watch.look(s * S)); // a pulled cable is no smaller rig
        assert!(matches!(watch.judge(603 * MIB, &[], 0), Room::TooLittle(_)));
    }

    #[test]
    fn the_sentence_says_how_much_there_is_and_what_is_needed() {
        let Room::TooLittle(sentence) = watch(MIB).judge(10 * MIB, &[], 0) else { panic!("enough?") };
        assert!(sentence.contains("10 MiB free of 604 MiB") && sentence.contains("10 min"), "{sentence}");
    }
}
