//! Beginning, ending and giving up segments.

use super::*;

impl Journal {
    /// Ends the segment; the next write begins the one made ahead.
    pub(super) fn finish_segment(&mut self) {
        let first_unwritten_seq = self.first_unwritten_seq();
        if let Some(segment) = self.segment.take() {
            self.retention.adopt(segment.path, segment.n_bytes, Some(first_unwritten_seq));
        }
        if let Some(dirty) = self.dirty.back_mut() {
            dirty.finished = true;
        }
    }

    pub(super) fn first_unwritten_seq(&self) -> u64 {
        seq_of(&self.tail[self.tail.len() - self.n_unwritten..]).unwrap_or(self.next_seq)
    }

    /// Takes the file made ahead, or makes one, and writes the opening.
    pub(super) fn open_segment(&mut self, now_ns: i64) -> io::Result<()> {
        let ahead = self.ahead.take().map_or_else(|| self.make_now(), Ok);
        let Ahead { number, path, file } = ahead.inspect_err(|error| {
            self.trouble(format!("cannot open a journal segment: {error}"));
        })?;
        let first_seq = self.first_unwritten_seq();
        let opening = Record {
            seq: first_seq,
            host_ns: now_ns,
            device: DeviceIdx(0),
            body: Body::SegmentOpen(Box::new(self.opening(number, first_seq))),
        };
        let mut bytes = Vec::new();
        opening.encode(&mut bytes);
        write_whole(&*file, &bytes)?;
        self.given_up = None;
        self.begun_number = number;
        let n_bytes = bytes.len() as u64;
        self.segment = Some(Segment { path, file: Arc::clone(&file), n_bytes, opened_ns: now_ns });
        let new_in = Some(self.dir.clone());
        let in_sync = InSync::default();
        self.dirty.push_back(Dirty { file, new_in, n_bytes: 0, in_sync, oldest_ns: now_ns, finished: false });
        self.urgent = true;
        Ok(())
    }

    fn make_now(&mut self) -> io::Result<Ahead> {
        let number = self.take_number();
        let path = self.dir.join(segment_name(&self.origin.journal_id, number));
        let (file, reserved) = make(&*self.disk, &path, self.settings.segment_bytes + self.settings.reserve_bytes)?;
        self.health.reserve_possible = reserved == Reserved::Yes;
        self.health.trouble = None;
        Ok(Ahead { number, path, file })
    }

    pub(super) fn take_number(&mut self) -> u32 {
        let number = self.next_number;
        self.next_number += 1;
        number
    }

    fn opening(&self, segment: u32, first_seq: u64) -> SegmentOpen {
        let mut devices = self.origin.devices.clone();
        for (device, describe) in devices.iter_mut().zip(&self.describes) {
            device.describe_hex = describe.describe_hex();
        }
        SegmentOpen {
            format_version: FORMAT_VERSION,
            journal_id: self.origin.journal_id.clone(),
            segment,
            first_seq,
            program_version: self.origin.program_version.clone(),
            kernel_boot_id: self.origin.kernel_boot_id.clone(),
            rig_text: self.origin.rig_text.clone(),
            devices,
            open_trial: self.open_trial.clone(),
            previous_given_up: self.given_up.clone(),
            keep: self.settings.keep,
        }
    }

    /// Leaves the segment as it is; everything since the last good sync will be written again to the next one.
    pub(super) fn give_up(&mut self, why: &str) {
        if let Some(segment) = self.segment.take() {
            let name = segment.path.file_name().unwrap_or_default().to_string_lossy().into_owned();
            self.notices.push(format!("journal segment {name} given up: {why}; a new one is opened"));
            self.retention.adopt(segment.path, segment.n_bytes, Some(self.next_seq));
        } else if self.given_up.is_none() {
            self.notices.push(format!("a journal segment could not be begun: {why}; another one is tried"));
        }
        if self.given_up.is_none() {
            self.health.segments_given_up += 1;
        }
        self.given_up = Some(why.to_owned());
        self.exposed_since_ns = self.oldest_unsynced_ns();
        self.to_trim.extend(self.dirty.drain(..).map(|dirty| dirty.file));
        self.n_unwritten = self.tail.len();
        self.sync_is_void = self.sync_in_flight;
    }
}
