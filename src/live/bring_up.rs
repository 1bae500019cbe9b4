//! What is wrong with a link that is up and gives no samples: the question of everybody who brings up a board.

use crate::capture::{Captured, Counters, Rejected};

const SECOND_NS: i64 = 1_000_000_000;
/// Boards boot for up to two seconds after the port was opened.
const GRACE_NS: i64 = 3 * SECOND_NS;

/// Follows what came over one link since it was opened.
#[derive(Debug, Default)]
pub struct BringUp {
    up_since_ns: i64,
    /// Longest time to the first sample that is nothing unusual.
    grace_ns: i64,
    /// Whether it speaks frames, lines of text otherwise.
    frames: bool,
    heard_bytes: bool,
    n_refused: u64,
    n_accepted: u64,
    n_blocks: u64,
    last_refusal: String,
}

impl BringUp {
    pub fn of_frames() -> Self {
        Self { grace_ns: GRACE_NS, frames: true, ..Self::default() }
    }

    /// An instrument with a reading every `interval_s`, or on demand as often.
    pub fn of_text(interval_s: f64) -> Self {
        let two_readings_ns = (2.0 * interval_s * SECOND_NS as f64) as i64;
        Self { grace_ns: GRACE_NS.saturating_add(two_readings_ns), ..Self::default() }
    }

    pub fn opened(&mut self, host_ns: i64) {
        *self = Self { up_since_ns: host_ns, grace_ns: self.grace_ns, frames: self.frames, ..Self::default() };
    }

    pub fn speaks_frames(&self) -> bool {
        self.frames
    }

    pub fn heard_bytes(&mut self) {
        self.heard_bytes = true;
    }

    pub fn heard(&mut self, what: &Captured) {
        match what {
            Captured::Rejected(Rejected { reason, detail, .. }) => {
                self.n_refused += 1;
                self.last_refusal =
                    if detail.is_empty() { (*reason).to_owned() } else { format!("{reason}: {detail}") };
            }
            Captured::Block(_) => {
                self.n_accepted += 1;
                self.n_blocks += 1;
            }
            Captured::Gap(_) => {}
            _ => self.n_accepted += 1,
        }
    }

    /// Empty before the first refusal since the link came up.
    pub fn last_refusal(&self) -> &str {
        &self.last_refusal
    }

    /// Whether samples come, for long enough that every channel should have had one.
    pub fn gives_samples(&self, host_ns: i64) -> bool {
        self.n_blocks > 0 && self.should_have_begun(host_ns)
    }

    /// Whether it is up for long enough that a sample should have come.
    fn should_have_begun(&self, host_ns: i64) -> bool {
        host_ns - self.up_since_ns >= self.grace_ns
    }

    /// Why there is no sample yet, and where to look; `None` where there is one, or it is too early to tell.
    pub fn trouble(&self, host_ns: i64, described: bool, counters: &Counters) -> Option<String> {
        if self.n_blocks > 0 || !self.should_have_begun(host_ns) {
            return None;
        }
        let seconds = (host_ns - self.up_since_ns) / SECOND_NS;
        if !self.heard_bytes {
            let ask = if self.frames { "describe? (SPEC.md 4)" } else { "its start command, if it needs one" };
            return Some(format!(
                "nothing came in the {seconds} s since the port was opened: check power, wiring, that it is the right port, and that it answers {ask}"
            ));
        }
        Some(if self.frames { self.frames_trouble(described, counters) } else { self.text_trouble() })
    }

    fn text_trouble(&self) -> String {
        match self.n_refused {
            0 => "bytes come, but no line with a reading: check baud, line ends and `skip_lines`".to_owned(),
            n => format!(
                "{n} lines refused, no reading yet ({}): check baud and the [device.text] section",
                self.last_refusal
            ),
        }
    }

    fn frames_trouble(&self, described: bool, counters: &Counters) -> String {
        let (n, last) = (self.n_refused, &self.last_refusal);
        match (self.n_accepted, n) {
            (0, 0) => "bytes come, but no whole frame: check baud, and that a zero byte stands before and after each \
                       frame (SPEC.md 2)"
                .to_owned(),
            (0, n) => {
                let worst = counters.refused.iter().max_by_key(|(_, n)| **n).map_or("", |(reason, _)| *reason);
                format!("{n} frames refused, none accepted yet, mostly for {worst}; the last: {last} (SPEC.md {})", section(worst))
            }
            (_, 0) if !described => {
                "sends frames but has not described itself: it must after boot, when asked, and once a second (SPEC.md 4.1)"
                    .to_owned()
            }
            (_, n) if !described => {
                format!("has not described itself, {n} frames refused; the last: {last} (SPEC.md 4.1)")
            }
            (_, 0) => "describes itself but sends no blocks: it should begin when told start (SPEC.md 4.2)".to_owned(),
            (_, n) => format!("describes itself, but no block is accepted, {n} frames refused; the last: {last} (SPEC.md 5)"),
        }
    }
}

/// Where SPEC.md says how it should be.
fn section(reason: &str) -> &'static str {
    match reason {
        "broken byte stuffing" => "2.1",
        "too short" | "too long" | "too long for a frame" => "2",
        "checksum mismatch" => "2.3",
        "other protocol version" => "6",
        "payload cut short" | "payload value unknown" => "3",
        _ => "5",
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const S: i64 = SECOND_NS;

    fn rejected(reason: &'static str, detail: &str) -> Captured {
        Captured::Rejected(Rejected { host_ns: 0, reason, detail: detail.to_owned(), bytes: Vec::new() })
    }

    fn text() -> Captured {
        Captured::Text { host_ns: 0, text: String::new() }
    }

    #[track_caller]
    fn check(captured: Option<&[Captured]>, described: bool, expected: &str) {
        let mut link = BringUp::of_frames();
        link.opened(S);
        let mut counters = Counters::default();
        for what in captured.iter().copied().flatten() {
            if let Captured::Rejected(rejected) = what {
                *counters.refused.entry(rejected.reason).or_default() += 1;
            }
        }
        if let Some(captured) = captured {
            link.heard_bytes();
            captured.iter().for_each(|what| link.heard(what));
        }
        assert_eq!(link.trouble(3 * S, described, &counters), None, "too early");
        let trouble = link.trouble(5 * S, described, &counters).unwrap();
        assert!(trouble.contains(expected), "{trouble}");
    }

    #[test]
    fn every_way_to_give_no_samples_has_its_own_sentence() {
        check(None, false, "nothing came in the 4 s");
        check(Some(&[]), false, "no whole frame");
        let crc = || rejected("checksum mismatch", "checksum 0x1, expected 0x2");
        check(Some(&[crc(), crc()]), false, "2 frames refused, none accepted yet, mostly for checksum mismatch");
        check(Some(&[crc(), crc()]), false, "expected 0x2 (SPEC.md 2.3)");
        check(Some(&[text()]), false, "sends frames but has not described itself");
        check(
            Some(&[text(), rejected("samples before their description", "description id 7")]),
            false,
            "description id 7",
        );
        check(Some(&[text()]), true, "sends no blocks");
        check(Some(&[text(), rejected("samples do not fit the description", "")]), true, "no block is accepted");
    }

    #[test]
    fn a_slow_instrument_has_the_time_that_it_needs() {
        let mut link = BringUp::of_text(5.0);
        link.opened(0);
        assert_eq!(link.trouble(12 * S, true, &Counters::default()), None);
        assert!(link.trouble(13 * S, true, &Counters::default()).unwrap().contains("start command"));
    }
}
