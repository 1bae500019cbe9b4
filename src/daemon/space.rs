//! What the room on the disk means for trials: warned of early, none begun without room, and the one under way ended
//! cleanly when the disk takes nothing more.

use crate::journal::RecorderNow;
use crate::live::CordsNow;

use super::conductor::Conductor;
use super::room::Room;
use super::words;

impl Conductor {
    /// Opens a trial because tension rises, or says why not and keeps it in mind.
    pub(super) fn open_by_tension(&mut self, host_ns: i64, from_host_ns: i64) {
        let recorder = self.recorder.now();
        let (why, meanwhile) = match self.room_now(&recorder) {
            _ if recorder.refusing => ("the disk takes nothing".to_owned(), "data are being LOST"),
            Room::TooLittle(why) => (why, "recording goes on"),
            Room::Enough | Room::Low(_) => {
                self.open_trial(host_ns, from_host_ns, "tension rises", "");
                return;
            }
        };
        self.held_back_from_ns = Some(from_host_ns);
        self.complain(&format!(
            "tension rises and NO TRIAL IS OPENED: {why}; {meanwhile}, and once there is room the trial opens and reaches \
             back a minute"
        ));
    }

    /// Free room against what is needed; unknown room counts as enough, the journal has its own alarm.
    pub(super) fn room_now(&self, recorder: &RecorderNow) -> Room {
        let Some(free_bytes) = recorder.health.free_bytes else { return Room::Enough };
        self.room.judge(free_bytes, self.book.waiting(), self.book.open_bytes(self.room.n_bytes()))
    }

    /// Does with the trials what the room asks for; after the alarm was raised.
    pub(super) fn act_on_room(&mut self, recorder: &RecorderNow, room: &Room, now_ns: i64) {
        let has_room = !recorder.refusing && !matches!(room, Room::TooLittle(_));
        if recorder.refusing {
            self.end_for_want_of_room(now_ns);
        } else if has_room {
            self.open_held_back(now_ns);
        }
        if has_room && std::mem::replace(&mut self.had_room, has_room) != has_room {
            self.sealer.retry_now(); // what could not be sealed for want of room
        }
        self.had_room = has_room;
    }

    /// The closing record has room of its own in the segment: what was recorded becomes a whole trial.
    fn end_for_want_of_room(&mut self, now_ns: i64) {
        let Some(trial_id) = self.book.open().map(|open| open.trial_id.clone()) else { return };
        let slack = self.live.cords() == CordsNow::Slack;
        self.close_trial(now_ns, words::disk_full(slack), "");
        if slack {
            // Nothing to go on with: the next tension opens a trial of its own.
            self.live.forget_trial();
        } else {
            self.unfinished = Some(trial_id);
            self.held_back_from_ns = Some(now_ns);
        }
    }

    fn open_held_back(&mut self, now_ns: i64) {
        if !self.live.trial_is_open() {
            self.held_back_from_ns = None; // over meanwhile
        }
        if self.book.open().is_none()
            && let Some(from_host_ns) = self.held_back_from_ns.take()
        {
            self.open_trial(now_ns, from_host_ns, "there is room on the disk again", "");
        }
    }
}
