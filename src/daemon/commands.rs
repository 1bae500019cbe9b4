//! What people ask of the daemon through the feed, and what they are answered.

use crate::calibration::Tare;
use crate::feed::message::Command;
use crate::feed::{Replier, Request};
use crate::live::Happening;

use super::conductor::Conductor;
use super::words;

/// The journal knows its records' times this far back.
const BACK_S_MAX: f64 = 60.0;

impl Conductor {
    pub(super) fn answer(&mut self, request: Request) {
        let Request { command, replier } = request;
        let now_ns = self.clock.monotonic_ns();
        match command {
            Command::Mark { person, text, .. } => {
                if self.tell(words::by(&person, words::event(now_ns, "mark", "feed", text))) {
                    replier.answer(true, "marked");
                } else {
                    replier.answer(false, "not in the journal: it takes nothing at present and too much waits already");
                }
            }
            Command::Open { person, back_s, .. } => self.open_by_hand(now_ns, &person, back_s, replier),
            Command::Close { person, .. } => self.close_by_hand(now_ns, &person, replier),
            Command::Raw { channel, .. } => match self.live.want_raw(&channel, now_ns) {
                Ok(()) => replier.answer(true, format!("the counts of {channel} are told for ten seconds")),
                Err(why) => replier.answer(false, why),
            },
            Command::Tare { person, channel, .. } => self.tare(now_ns, &channel, &person, replier),
            Command::Acknowledge { person, .. } => {
                let n = self.live.acknowledge(&person);
                let text = format!("{n} alarms acknowledged");
                self.tell(words::by(&person, words::event(now_ns, "alarm", "feed", text.clone())));
                replier.answer(true, text);
            }
        }
    }

    fn tare(&mut self, now_ns: i64, channel: &str, person: &str, replier: Replier) {
        if self.book.open().is_some() {
            return replier.answer(false, "a trial is open: tare before it, its values keep one zero");
        }
        if self.outgoing.is_full() {
            return replier.answer(false, "the journal takes nothing at present: a tare must be recorded, try again");
        }
        match self.live.tare(channel, person, now_ns) {
            Ok(tare) => {
                self.tell(words::by(person, words::event(now_ns, "tare", "feed", tare.to_string())));
                replier.answer(true, tare.to_string());
            }
            Err(why) => replier.answer(false, why),
        }
    }

    /// A trial carries the zeros that hold in it.
    pub(super) fn tell_tares(&mut self, host_ns: i64) {
        for (tare, person) in self.live.tares().to_vec() {
            let text = format!("{}{tare}", Tare::IN_FORCE);
            self.tell_needed(words::by(&person, words::event(host_ns, "tare", "daemon", text)));
        }
    }

    fn open_by_hand(&mut self, now_ns: i64, person: &str, back_s: Option<f64>, replier: Replier) {
        if back_s.is_some_and(|back_s| !(0.0..=BACK_S_MAX).contains(&back_s)) {
            return replier.answer(false, format!("a trial can reach back 0 to {BACK_S_MAX:.0} s, no further"));
        }
        if self.recorder.now().refusing || self.outgoing.is_full() {
            return replier.answer(false, "no trial is opened: the disk takes no more; make room first");
        }
        if self.book.open().is_some() {
            return replier.answer(false, "a trial is open already");
        }
        if self.held_back_from_ns.is_some() {
            return replier.answer(false, "no trial is opened: the disk has too little room; make room first, it then opens and reaches back a minute");
        }
        let Some(Happening::OpenTrial { host_ns, preroll_from_host_ns }) = self.live.open_by_hand(now_ns) else {
            return replier.answer(false, "a trial is being opened already");
        };
        let asked_ns = back_s.map_or(preroll_from_host_ns, |back_s| now_ns - (back_s * 1e9) as i64);
        if self.open_trial(host_ns, asked_ns, "opened by hand", person) {
            let reaches_s = (host_ns - asked_ns) as f64 * 1e-9;
            let id = self.book.open().map(|open| open.trial_id.clone()).unwrap_or_default();
            replier
                .answer(true, format!("trial {id} is open and reaches back {reaches_s:.1} s, as far as was recorded"));
        } else {
            self.live.forget_trial();
            replier.answer(false, "no trial is opened: the machine gave no identifier; see the daemon's events");
        }
    }

    fn close_by_hand(&mut self, now_ns: i64, person: &str, replier: Replier) {
        let Some(id) = self.book.open().map(|open| open.trial_id.clone()) else {
            return replier.answer(false, "no trial is open");
        };
        match self.live.close_by_hand(now_ns, person) {
            Ok(happening) => {
                if let Happening::CloseTrial { host_ns, reason } = happening {
                    self.close_trial(host_ns, &reason, person);
                }
                replier.answer(true, format!("trial {id} closes and is sealed"));
            }
            Err(kept) => replier.answer(false, kept.to_string()),
        }
    }
}
