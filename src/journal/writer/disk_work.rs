//! What a journal asks of the thread beside it, and what it makes of the outcome.

use super::*;

impl Journal {
    /// The next piece of disk work, if one is due; its outcome goes to [`Self::job_done`]. One at a time.
    pub fn next_job(&mut self, now_ns: i64) -> Option<Job> {
        if self.job_in_flight {
            return None;
        }
        let job = self.sync_job(now_ns).or_else(|| self.prepare_job(now_ns)).or_else(|| self.retention.job());
        let job = job.or_else(|| self.room_job(now_ns));
        self.job_in_flight = job.is_some();
        job
    }

    pub fn job_done(&mut self, outcome: Outcome, now_ns: i64) {
        self.job_in_flight = false;
        let is_void = std::mem::take(&mut self.sync_is_void);
        match outcome {
            Outcome::Synced { .. } | Outcome::SyncFailed { .. } if is_void => {}
            Outcome::Synced { n_bytes } => self.synced(n_bytes, now_ns),
            Outcome::SyncFailed { error } => {
                self.give_up(&format!("syncing failed: {error}"));
                self.last_sync_ns = now_ns;
                self.commit(now_ns);
            }
            Outcome::Prepared { number, path, file, reserved } => {
                self.health.reserve_possible = reserved == Reserved::Yes;
                self.health.trouble = None;
                self.ahead = Some(Ahead { number, path, file });
            }
            Outcome::PrepareFailed { path, error } => {
                self.trouble(format!("cannot make the next segment {}: {error}", path.display()));
                self.retry_ns = now_ns + RETRY_AHEAD_NS;
            }
            Outcome::Room { free_bytes } => self.health.free_bytes = free_bytes.unwrap_or(self.health.free_bytes),
            Outcome::Removed { failed } => {
                for (path, error) in failed {
                    self.notices.push(format!("cannot remove {}: {error}", path.display()));
                }
            }
        }
    }

    fn sync_job(&mut self, now_ns: i64) -> Option<Job> {
        let due = self.urgent || now_ns - self.last_sync_ns >= self.settings.sync_every_ns;
        let dirty = self.dirty.front().filter(|dirty| dirty.finished || (due && dirty.needs_sync()))?;
        if !dirty.finished {
            self.urgent = false;
        }
        Some(Job::Sync {
            file: Arc::clone(&dirty.file),
            new_in: dirty.new_in.clone(),
            n_bytes: dirty.n_bytes,
            trim: dirty.finished,
        })
    }

    fn synced(&mut self, n_bytes: usize, now_ns: i64) {
        self.last_sync_ns = now_ns;
        let Some(dirty) = self.dirty.front_mut() else { return };
        if n_bytes > 0 {
            self.health.exposed_for(now_ns - dirty.oldest_ns, now_ns);
        }
        dirty.n_bytes -= n_bytes;
        dirty.oldest_ns = now_ns;
        dirty.new_in = None;
        self.tail.drain(..n_bytes);
        if dirty.finished && dirty.n_bytes == 0 {
            self.dirty.pop_front();
        }
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
