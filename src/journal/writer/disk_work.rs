//! What a journal asks of the thread beside it, and what it makes of the outcome.

use super::*;

impl Journal {
    /// The next piece of disk work, if one is due; its outcome goes to [`Self::job_done`]. At most one sync and one
    /// chore are under way, each on a thread of its own: a removal that takes long holds up no sync.
    pub fn next_job(&mut self, now_ns: i64) -> Option<Job> {
        if !self.sync_in_flight
            && let Some(sync) = self.sync_job(now_ns)
        {
            self.sync_in_flight = true;
            return Some(sync);
        }
        if self.chore_in_flight {
            return None;
        }
        let chore = self.prepare_job(now_ns).or_else(|| self.trim_job()).or_else(|| self.retention.job());
        let chore = chore.or_else(|| self.room_job(now_ns));
        self.chore_in_flight = chore.is_some();
        chore
    }

    pub fn job_done(&mut self, outcome: Outcome, now_ns: i64) {
        match outcome {
            Outcome::Synced { .. } | Outcome::SyncFailed { .. } => self.sync_done(outcome, now_ns),
            chore => self.chore_done(chore, now_ns),
        }
    }

    fn sync_done(&mut self, outcome: Outcome, now_ns: i64) {
        self.sync_in_flight = false;
        let is_void = std::mem::take(&mut self.sync_is_void);
        match outcome {
            Outcome::Synced { n_bytes } if !is_void => self.synced(n_bytes, now_ns),
            Outcome::SyncFailed { error } if !is_void => {
                self.give_up(&format!("syncing failed: {error}"));
                self.commit(now_ns);
            }
            _ => {}
        }
    }

    fn chore_done(&mut self, outcome: Outcome, now_ns: i64) {
        self.chore_in_flight = false;
        match outcome {
            Outcome::Synced { .. } | Outcome::SyncFailed { .. } | Outcome::Trimmed => {}
            Outcome::Prepared { number, path, file, reserved } => {
                self.health.reserve_possible = reserved == Reserved::Yes;
                self.health.trouble = None;
                if number > self.begun_number {
                    self.ahead = Some(Ahead { number, path, file });
                } else {
                    // A segment was given up meanwhile and a later number begun: readers go by numbers.
                    self.retention.doom(path);
                }
            }
            Outcome::PrepareFailed { path, error } => {
                // Without the segment's number, so that it is told once and not at every attempt.
                let dir = path.parent().unwrap_or(&path).display();
                self.trouble(format!("cannot make the next segment in {dir}: {error}"));
                self.retry_ns = now_ns + RETRY_AHEAD_NS;
            }
            Outcome::Room { free_bytes } => self.health.free_bytes = free_bytes.or(self.health.free_bytes),
            Outcome::Removed { failed } => {
                for (path, error) in failed {
                    self.notices.push(format!("cannot remove {}: {error}", path.display()));
                }
            }
        }
    }

    fn sync_job(&mut self, now_ns: i64) -> Option<Job> {
        while let Some(done) = self.dirty.pop_front_if(|dirty| dirty.finished && !dirty.needs_sync()) {
            self.to_trim.push(done.file);
        }
        let dirty = self.dirty.front_mut().filter(|dirty| dirty.needs_sync())?;
        let due = self.urgent || dirty.finished || now_ns - dirty.oldest_ns >= self.settings.sync_every_ns;
        if !due {
            return None;
        }
        if !dirty.finished {
            self.urgent = false;
        }
        dirty.in_sync = InSync { n_bytes: dirty.n_bytes, oldest_ns: dirty.oldest_ns };
        Some(Job::Sync { file: Arc::clone(&dirty.file), new_in: dirty.new_in.clone(), n_bytes: dirty.n_bytes })
    }

    fn synced(&mut self, n_bytes: usize, now_ns: i64) {
        let Some(dirty) = self.dirty.front_mut() else { return };
        let in_sync = std::mem::take(&mut dirty.in_sync);
        if n_bytes > 0 {
            self.health.exposed_for(now_ns - in_sync.oldest_ns, now_ns);
        }
        dirty.n_bytes -= n_bytes;
        dirty.new_in = None;
        self.tail.drain(..n_bytes);
    }

    fn trim_job(&mut self) -> Option<Job> {
        self.to_trim.pop().map(|file| Job::Trim { file })
    }

    fn room_job(&mut self, now_ns: i64) -> Option<Job> {
        if now_ns < self.ask_room_ns {
            return None;
        }
        self.ask_room_ns = now_ns + ASK_ROOM_EVERY_NS;
        Some(Job::AskRoom { dir: self.dir.clone() })
    }

    fn prepare_job(&mut self, now_ns: i64) -> Option<Job> {
        if self.ahead.is_some() || now_ns < self.retry_ns {
            return None;
        }
        let number = self.take_number();
        let path = self.dir.join(segment_name(&self.origin.journal_id, number));
        Some(Job::Prepare { number, path, reserve_bytes: self.settings.segment_bytes + self.settings.reserve_bytes })
    }
}
