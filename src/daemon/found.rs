//! What an archive directory holds when a daemon starts: journals to go on with, trials to seal, segments to look after.
//!
//! Reads only. A journal goes on where the machine has not restarted and the rig file has not changed; else the host
//! times or the devices' order would not compare, and a new journal begins.

use std::path::{Path, PathBuf};
use std::sync::Arc;

use crate::archive::Settled;
use crate::journal::{
    DeviceAtOpen, Disk, JournalReader, ReadError, SegmentInfo, Start, Survey, TrialRange, journals, parse_segment_name,
};

use super::machine::number_of;
use super::words;

/// A trial that has no file yet.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Unsealed {
    pub journal_id: String,
    pub trial_id: String,
    /// In its own journal.
    pub first_seq: u64,
    /// What of the journal it takes, about.
    pub n_bytes: u64,
}

/// A journal that goes on.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Resumed {
    pub journal_id: String,
    pub start: Start,
    pub devices: Vec<DeviceAtOpen>,
    pub last_host_ns: i64,
    /// The trial that was under way.
    pub open_trial: Option<TrialRange>,
    /// What of the journal that trial takes so far, about.
    pub open_bytes: u64,
}

#[derive(Debug, Default)]
pub struct Found {
    pub next_journal_number: u32,
    pub next_trial_number: u32,
    pub resumed: Option<Resumed>,
    /// The trial a lost machine, a changed rig file, a recovery or a full disk left unfinished and that does not go on itself.
    pub unfinished: Option<String>,
    pub unsealed: Vec<Unsealed>,
    /// Finished segments that the journal takes charge of, each with the number after its last record.
    pub segments: Vec<(SegmentInfo, u64)>,
    /// Made ahead by an earlier run and never begun.
    pub never_begun: Vec<PathBuf>,
    /// Journals that have ended and whose trials all have their files, as this start found by reading them.
    pub done_with: Vec<String>,
    /// What is worth telling a person.
    pub remarks: Vec<String>,
    /// Journals that could not be read: left as they are, none of them goes on.
    pub unreadable: Vec<ReadError>,
}

/// What tells whether a journal can go on.
#[derive(Debug, Clone, Copy)]
pub struct Present<'a> {
    pub kernel_boot_id: &'a str,
    pub rig_text: &'a str,
}

/// What is known of trials without reading journals.
#[derive(Clone, Copy)]
pub struct Known<'a> {
    /// Whether a trial has its file.
    pub is_sealed: &'a dyn Fn(&TrialRange) -> bool,
    /// How far a journal is done with.
    pub settled: &'a dyn Fn(&str) -> Option<Settled>,
}

impl std::fmt::Debug for Known<'_> {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("Known").finish_non_exhaustive()
    }
}

/// Looks through the archive `dir` and its journals, reading what is not known to be done with.
///
/// # Errors
/// A directory that cannot be listed. A journal that cannot be read keeps nobody from recording: [`Found::unreadable`].
pub fn look(
    disk: &Arc<dyn Disk>,
    dir: &Path,
    journal_dir: &Path,
    present: Present<'_>,
    known: Known<'_>,
) -> Result<Found, ReadError> {
    let ids = journals(&**disk, journal_dir)?;
    let mut found = Found { next_journal_number: 1, next_trial_number: 1, ..Found::default() };
    found.count_trial_files(&**disk, dir)?;
    for id in &ids {
        found.next_journal_number = found.next_journal_number.max(number_of(id).unwrap_or(0) + 1);
        let is_newest = Some(id) == ids.last();
        let read = JournalReader::open(Arc::clone(disk), journal_dir, id);
        match read.and_then(|reader| found.take(&reader, is_newest, present, known)) {
            Ok(()) => {}
            Err(error @ ReadError::NeverBegun { .. }) => found.remarks.push(error.to_string()),
            Err(error) => found.unreadable.push(error),
        }
    }
    found.find_never_begun(&**disk, journal_dir)?;
    Ok(found)
}

impl Found {
    fn count_trial_files(&mut self, disk: &dyn Disk, dir: &Path) -> Result<(), ReadError> {
        let listed = disk.list(dir).map_err(|source| ReadError::Io { path: dir.to_owned(), source })?;
        let numbers =
            listed.iter().filter_map(|file| number_of(file.name.strip_prefix("trial-")?.strip_suffix(".h5")?));
        self.next_trial_number = numbers.max().unwrap_or(0) + 1;
        Ok(())
    }

    fn find_never_begun(&mut self, disk: &dyn Disk, journal_dir: &Path) -> Result<(), ReadError> {
        let listed = match disk.list(journal_dir) {
            Ok(listed) => listed,
            Err(error) if error.kind() == std::io::ErrorKind::NotFound => return Ok(()),
            Err(source) => return Err(ReadError::Io { path: journal_dir.to_owned(), source }),
        };
        let empty = listed.iter().filter(|file| file.bytes == 0 && parse_segment_name(&file.name).is_some());
        self.never_begun = empty.map(|file| journal_dir.join(&file.name)).collect();
        Ok(())
    }

    /// Nothing is taken of a journal that cannot be read to its end.
    fn take(
        &mut self,
        reader: &JournalReader,
        is_newest: bool,
        present: Present<'_>,
        known: Known<'_>,
    ) -> Result<(), ReadError> {
        let Known { is_sealed, settled } = known;
        let settled = settled(reader.journal_id());
        let survey = match settled {
            Some(Settled { from_segment: None, .. }) if !is_newest => Survey::default(), // nothing of it is needed
            Some(Settled { from_segment: Some(number), .. }) => reader.survey_from(number)?,
            _ => reader.survey()?,
        };
        if let Some(Settled { trial_number, .. }) = settled {
            self.next_trial_number = self.next_trial_number.max(trial_number.saturating_add(1));
        }
        self.remarks.extend(reader.unopenable().iter().map(|damage| format!("journal: {damage:?}")));
        for trial in &survey.trials {
            self.next_trial_number = self.next_trial_number.max(number_of(&trial.trial_id).unwrap_or(0) + 1);
        }
        let goes_on = is_newest && goes_on(reader, present);
        let open_trial = survey.open_trial().filter(|trial| goes_on && !is_sealed(trial)).cloned();
        let waiting = |trial: &&TrialRange| Some(*trial) != open_trial.as_ref() && !is_sealed(trial);
        if is_newest && open_trial.is_none() {
            let for_want_of_room = |trial: &&TrialRange| {
                trial.closed.as_ref().is_some_and(|close| words::ended_under_tension(&close.reason))
            };
            let left = survey.open_trial().or_else(|| survey.trials.last().filter(for_want_of_room));
            self.unfinished = left.map(|trial| trial.trial_id.clone());
        }
        let n_before = self.unsealed.len();
        self.unsealed.extend(survey.trials.iter().filter(waiting).map(|trial| Unsealed {
            journal_id: trial.journal_id.clone(),
            trial_id: trial.trial_id.clone(),
            first_seq: trial.first_seq,
            n_bytes: bytes_of(reader, trial),
        }));
        if !is_newest && self.unsealed.len() == n_before && settled.is_none_or(|known| known.from_segment.is_some()) {
            self.done_with.push(reader.journal_id().to_owned());
        }
        // Segments of an older journal stay until all its trials are sealed.
        if goes_on || self.unsealed.len() == n_before {
            self.segments.extend(with_ends(reader, &survey));
        }
        if goes_on {
            self.resumed = Some(resumed(reader, &survey, open_trial));
        }
        Ok(())
    }
}

/// Whole segments, so rather too much.
fn bytes_of(reader: &JournalReader, trial: &TrialRange) -> u64 {
    let segments = reader.segments();
    let ends_before = |index: usize| segments.get(index + 1).is_some_and(|next| next.open.first_seq <= trial.first_seq);
    let of_trial = segments
        .iter()
        .enumerate()
        .filter(|(index, segment)| !ends_before(*index) && segment.open.first_seq <= trial.last_seq);
    of_trial.map(|(_, segment)| segment.bytes).sum()
}

fn goes_on(reader: &JournalReader, present: Present<'_>) -> bool {
    let last = reader.segments().last().map(|segment| &segment.open);
    last.is_some_and(|open| open.kernel_boot_id == present.kernel_boot_id && open.rig_text == present.rig_text)
}

fn with_ends(reader: &JournalReader, survey: &Survey) -> Vec<(SegmentInfo, u64)> {
    let segments = reader.segments();
    let next_starts = segments.iter().skip(1).map(|next| next.open.first_seq);
    let end = survey.last_seq.map_or(u64::MAX, |seq| seq.saturating_add(1));
    segments.iter().cloned().zip(next_starts.chain([end])).collect()
}

fn resumed(reader: &JournalReader, survey: &Survey, open_trial: Option<TrialRange>) -> Resumed {
    let last = &reader.segments()[reader.segments().len() - 1];
    let mut devices = last.open.devices.clone();
    for (device, hex) in devices.iter_mut().zip(&survey.describes_hex) {
        device.describe_hex.clone_from(hex);
    }
    let number = reader.highest_number();
    Resumed {
        journal_id: reader.journal_id().to_owned(),
        start: Start {
            segment: number + 1,
            seq: survey.last_seq.map_or(last.open.first_seq, |seq| seq + 1),
            open_trial: open_trial.as_ref().map(|trial| trial.trial_id.clone()),
            previous_given_up: None,
        },
        devices,
        last_host_ns: survey.last_host_ns,
        open_bytes: open_trial.as_ref().map_or(0, |trial| bytes_of(reader, trial)),
        open_trial,
    }
}

#[cfg(test)]
mod tests;
