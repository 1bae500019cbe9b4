//! Sentences and messages of the daemon.

use std::time::Instant;

use crossbeam_channel::{Receiver, RecvTimeoutError};

use crate::feed::message::Event;
use crate::journal::{Clocks, RecorderNow};

use super::sealing::SealReport;

/// Longest time that data may wait to be durable before the crew is told.
const EXPOSURE_NS_MAX: i64 = 250_000_000;
/// Share of the recorder's queue above which it is told, until it was lower for ten seconds.
const QUEUE_HIGH: f64 = 0.5;

pub fn event(host_ns: i64, kind: &str, source: &str, text: String) -> Event {
    Event { host_ns, kind: kind.to_owned(), source: source.to_owned(), person: None, text }
}

/// The event, with the person who acted; an empty name is nobody.
pub fn by(person: &str, event: Event) -> Event {
    Event { person: (!person.is_empty()).then(|| person.to_owned()), ..event }
}

/// RFC 3339 to the millisecond; empty when the wall clock was never set.
pub fn wall(clocks: &Clocks) -> String {
    if !clocks.wall_clock_set {
        return String::new();
    }
    jiff::Timestamp::from_millisecond(clocks.realtime_ns / 1_000_000).map(|at| at.to_string()).unwrap_or_default()
}

/// The day in UTC; none when the wall clock was never set.
pub fn today() -> Option<jiff::civil::Date> {
    let clocks = Clocks::read();
    let now = jiff::Timestamp::from_millisecond(clocks.realtime_ns / 1_000_000).ok()?;
    clocks.wall_clock_set.then(|| jiff::tz::Offset::UTC.to_datetime(now).date())
}

/// Why the disk takes nothing, or soon will not; `None` when all is well.
pub fn disk_trouble(now: &RecorderNow) -> Option<String> {
    let health = &now.health;
    if now.refusing {
        let why = health.trouble.as_deref().unwrap_or("the disk takes no more");
        return Some(format!(
            "data are being LOST, {} reads so far: {why}; make room or change the disk",
            health.lost_events
        ));
    }
    if let Some(trouble) = &health.trouble {
        return Some(format!("{trouble}; data wait in memory and in the last reserve: make room or change the disk"));
    }
    None
}

/// What is slow about the recording; `None` when nothing is.
pub fn slow(now: &RecorderNow) -> Option<String> {
    let exposure_ns = now.health.exposure_ns_lately();
    if now.queue_high_water > QUEUE_HIGH {
        let percent = now.queue_high_water * 100.0;
        return Some(format!("the disk is slow, {percent:.0} % of the queue was filled in the last ten seconds"));
    }
    if exposure_ns > EXPOSURE_NS_MAX {
        let seconds = exposure_ns as f64 * 1e-9;
        return Some(format!("the disk took {seconds:.2} s to make data durable (0.1 s is wanted)"));
    }
    None
}

const DISK_FULL_UNDER_TENSION: &str =
    "the disk takes no more; the cords are NOT known to be slack: treat them as loaded, make room";

/// Why a trial ends when nothing more can be recorded.
pub fn disk_full(slack: bool) -> &'static str {
    if slack { "the disk takes no more, cords slack" } else { DISK_FULL_UNDER_TENSION }
}

/// Whether a trial that ended for this reason may go on under the same tension.
pub fn ended_under_tension(reason: &str) -> bool {
    reason == DISK_FULL_UNDER_TENSION
}

/// Passes on what sealing says until it is done with everything or `deadline` has come.
pub fn tell_sealing_until(deadline: Instant, reports: &Receiver<SealReport>, now_ns: i64, tell: &mut dyn FnMut(Event)) {
    loop {
        match reports.recv_deadline(deadline) {
            Ok(report) => tell(sealed(now_ns, &report)),
            Err(RecvTimeoutError::Disconnected) => return,
            Err(RecvTimeoutError::Timeout) => {
                let text = "sealing is not done yet: it goes on by itself, the next start looks after it".to_owned();
                return tell(event(now_ns, "seal", "daemon", text));
            }
        }
    }
}

/// One sealing's end.
pub fn sealed(now_ns: i64, report: &SealReport) -> Event {
    let text = match &report.result {
        Ok(said) => format!("trial {} is sealed: {said}", report.trial_id),
        Err(why) => format!("trial {} is not sealed, its journal is kept: {why}", report.trial_id),
    };
    event(now_ns, "seal", "seal", text)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::live::Live;

    #[test]
    fn a_queue_that_filled_is_an_alarm_with_its_time_until_it_was_low_for_a_while() {
        let rig = crate::rig::testing::north_pier();
        let mut live = Live::new(&rig);
        let mut told = |host_ns, queue_high_water| {
            let slow = slow(&RecorderNow { queue_high_water, ..RecorderNow::default() });
            live.journal_trouble(host_ns, slow.as_deref()).map(|happening| Event::of(&happening))
        };
        assert_eq!(told(1, QUEUE_HIGH), None);
        let raised = told(2, 0.8).unwrap();
        assert_eq!((raised.host_ns, raised.kind.as_str()), (2, "alarm"));
        assert!(raised.text.contains("80 % of the queue"), "{}", raised.text);
        assert_eq!(told(3, 0.9), None, "told once");
        let cleared = told(4, 0.1).unwrap();
        assert_eq!((cleared.host_ns, cleared.kind.as_str()), (4, "alarm"));
        assert_ne!(cleared.text, raised.text);
    }

    #[test]
    fn data_that_wait_too_long_to_be_durable_are_an_alarm_also_while_the_sync_hangs() {
        let mut now = RecorderNow::default();
        now.health.exposure_ns_now = EXPOSURE_NS_MAX;
        assert_eq!(slow(&now), None);
        now.health.exposure_ns_now = 5_000_000_000;
        assert!(slow(&now).unwrap().contains("took 5.00 s to make data durable"));
    }
}
