//! Journal to trial file: what was received is in the file bit for bit, once, whole or not at all.

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a test that cannot go on stops here")]

mod faults;
#[path = "../support/journal.rs"]
mod journal_file;
#[path = "../support/mod.rs"]
mod support;

use std::path::{Path, PathBuf};
use std::sync::{Arc, LazyLock};

use firmware_protocol as wire;
use journal_file::{JOURNAL_ID, JournalFile, RIG_TEXT, TRIAL_ID, nominal, opened};
use tautrail::archive::{Depth, Fate, SealError, Sealed, recover, seal, verify};
use tautrail::capture::Counts;
use tautrail::journal::{ArchiveLock, Body, Disk, RealDisk, TrialRange};
use tautrail::trial::TrialFile;

const PACE: f64 = 0.1;

/// A nominal launch in a journal, played once for all tests that only read it.
static NOMINAL: LazyLock<tempfile::TempDir> = LazyLock::new(|| {
    let dir = tempfile::tempdir().unwrap();
    nominal(dir.path(), PACE, true);
    dir
});

/// A directory of its own with that journal.
fn nominal_copy() -> tempfile::TempDir {
    let dir = tempfile::tempdir().unwrap();
    std::fs::create_dir(dir.path().join("journal")).unwrap();
    let name = segment();
    std::fs::copy(NOMINAL.path().join(&name), dir.path().join(&name)).unwrap();
    dir
}

fn segment() -> PathBuf {
    Path::new("journal").join(tautrail::journal::segment_name(JOURNAL_ID, 1))
}

fn real() -> Arc<dyn Disk> {
    Arc::new(RealDisk)
}

fn seal_in(dir: &Path, disk: &Arc<dyn Disk>) -> Result<Sealed, SealError> {
    let (reader, range) = opened(dir);
    seal(&reader, &range, dir, disk)
}

/// Names in the directory, sorted, hidden ones too.
fn names(dir: &Path) -> Vec<String> {
    let mut names: Vec<String> =
        std::fs::read_dir(dir).unwrap().map(|entry| entry.unwrap().file_name().into_string().unwrap()).collect();
    names.sort();
    names
}

#[test]
fn every_count_equals_what_an_independent_reader_finds_in_the_journal() {
    let dir = nominal_copy();
    let sealed = seal_in(dir.path(), &real()).unwrap();
    let script = include_str!("../support/decode_journal.py");
    let journal = dir.path().join(segment());
    let compared = support::run_oracle(script, &[journal.to_str().unwrap(), sealed.path.to_str().unwrap()]);
    let n_compared: u64 = compared.trim().parse().unwrap();
    assert_eq!(n_compared, 2 * sealed.n_samples, "two channels a device");
    assert!(n_compared > 100_000, "{n_compared} counts are no trial");
    assert_eq!(sealed.n_missing, 0);
}

#[test]
fn a_played_launch_reads_as_one() {
    let dir = nominal_copy();
    let sealed = seal_in(dir.path(), &real()).unwrap();
    let trial = TrialFile::open(&sealed.path).unwrap();
    let results = trial.results().unwrap();
    assert_eq!(results.outcome, "launched", "{results:?}");
    assert_eq!(trial.signal_names().unwrap(), ["accel", "anchor", "encoder", "line"]);
    assert!(results.entries.iter().any(|entry| entry.name == "launch_speed"), "{results:?}");
    assert_eq!(trial.derived_names().unwrap(), ["motion_acceleration", "motion_position", "motion_velocity"]);
    let texts = trial.texts().unwrap();
    let (rigs, records): (Vec<_>, Vec<_>) = texts.into_iter().partition(|text| text.name == "rig.toml");
    assert_eq!(rigs.iter().map(|rig| rig.text.as_str()).collect::<Vec<_>>(), [RIG_TEXT.as_str()]);
    assert_eq!(records.len(), 4, "each channel's record is carried whole: {records:?}");
    assert!(trial.header().started.starts_with("2026-11-"), "{}", trial.header().started);
    assert_eq!(trial.header().started_quality, "set");
    let kinds: Vec<String> = trial.events().unwrap().into_iter().map(|event| event.kind).collect();
    assert_eq!(kinds, ["device", "device", "trial", "trial"]);
    let (map, exchanges) = trial.clock("winch-node").unwrap();
    assert!(!map.is_empty() && exchanges.len() > 10 && map[0].two_way);
    assert!(exchanges.iter().all(|exchange| exchange.residual_ns.abs() < 2e6), "{exchanges:?}");
    let verified = verify(&sealed.path, Depth::Everything).unwrap();
    assert_eq!(verified.findings, [""; 0]);
    assert_eq!((verified.n_samples, verified.raw_sha256), (sealed.n_samples, sealed.raw_sha256));
}

#[test]
fn sealing_twice_gives_identical_bytes() {
    let (one, two) = (nominal_copy(), nominal_copy());
    let first = seal_in(one.path(), &real()).unwrap();
    std::thread::sleep(std::time::Duration::from_millis(1100));
    let second = seal_in(two.path(), &real()).unwrap();
    assert!(std::fs::read(&first.path).unwrap() == std::fs::read(&second.path).unwrap(), "the bytes differ");
    let again = seal_in(one.path(), &real()).unwrap();
    assert!(first.is_new && !again.is_new);
    assert_eq!(again.path, first.path);
    assert_eq!(names(one.path()), ["journal".to_owned(), format!("trial-{TRIAL_ID}.h5")]);
}

#[test]
fn a_sealed_file_is_read_only_and_never_replaced() {
    use std::os::unix::fs::PermissionsExt;
    let dir = nominal_copy();
    let target = dir.path().join(format!("trial-{TRIAL_ID}.h5"));
    // Another trial's file under this name: same program, other journal.
    let strange = tempfile::tempdir().unwrap();
    let mut journal = JournalFile::begin(strange.path(), &RIG_TEXT);
    journal.clocks(1);
    journal.open_trial(2, 1, 1);
    journal.close_trial(3);
    journal.save();
    let strange = seal_in(strange.path(), &real()).unwrap();
    std::fs::copy(&strange.path, &target).unwrap();
    let before = std::fs::read(&target).unwrap();
    assert!(matches!(seal_in(dir.path(), &real()), Err(SealError::Differs { .. })));
    assert!(std::fs::read(&target).unwrap() == before);
    assert_eq!(names(dir.path()).len(), 2, "the temporary file is gone");
    let mode = std::fs::metadata(&strange.path).unwrap().permissions().mode();
    assert_eq!(mode & 0o777, 0o444);
}

#[test]
fn recover_says_that_a_directory_is_not_there() {
    let dir = tempfile::tempdir().unwrap();
    let error = recover(&dir.path().join("none"), &real(), &mut |_| {}).unwrap_err().to_string();
    assert!(error.contains("there is no directory") && error.contains("none"), "{error}");
}

#[test]
fn what_a_killed_sealing_left_is_removed_by_the_next() {
    let dir = nominal_copy();
    // No process has this number: it is above what the kernel gives out.
    let stale = dir.path().join(format!(".trial-{TRIAL_ID}.{}.part", i32::MAX));
    std::fs::write(&stale, b"half a file").unwrap();
    seal_in(dir.path(), &real()).unwrap();
    assert!(!stale.exists());
}

#[test]
fn a_trial_id_cannot_lead_out_of_the_directory() {
    let dir = nominal_copy();
    let (reader, range) = opened(dir.path());
    for trial_id in ["../elsewhere", "", "a/b", "a.b", "ü"] {
        let range = TrialRange { trial_id: trial_id.into(), ..range.clone() };
        assert!(matches!(seal(&reader, &range, dir.path(), &real()), Err(SealError::TrialId { .. })), "{trial_id}");
    }
}

#[test]
fn an_unclosed_trial_is_sealed_as_truncated_and_left_alone_while_live() {
    let dir = tempfile::tempdir().unwrap();
    nominal(dir.path(), PACE, false);
    let lock = ArchiveLock::take(dir.path(), "a daemon").unwrap();
    let beside = recover(dir.path(), &real(), &mut |_| {}).unwrap().trials;
    assert!(matches!(beside[..], [ref one] if matches!(one.fate, Fate::Live)), "{beside:?}");
    drop(lock);
    let after = recover(dir.path(), &real(), &mut |_| {}).unwrap().trials;
    let [one] = &after[..] else { panic!("{after:?}") };
    let Fate::Sealed(sealed) = &one.fate else { panic!("{one:?}") };
    assert_eq!(sealed.outcome, "truncated");
    let results = TrialFile::open(&sealed.path).unwrap().results().unwrap();
    assert!(results.outcome_evidence[0].contains("launched"), "{results:?}");
    let again = recover(dir.path(), &real(), &mut |_| {}).unwrap().trials;
    assert!(matches!(again[..], [ref one] if matches!(one.fate, Fate::AlreadySealed(_))), "{again:?}");
}

#[test]
fn a_trial_that_goes_on_after_it_was_recovered_gets_a_file_of_its_own() {
    let dir = nominal_copy();
    let (reader, range) = opened(dir.path());
    let half = TrialRange { last_seq: range.last_seq / 2, closed: None, ..range.clone() };
    let first = seal(&reader, &half, dir.path(), &real()).unwrap();
    let whole = seal(&reader, &range, dir.path(), &real()).unwrap();
    assert_eq!(whole.path.file_name().unwrap().to_str().unwrap(), format!("trial-{TRIAL_ID}-2.h5"));
    assert!(whole.n_samples > first.n_samples && verify(&first.path, Depth::Stored).unwrap().findings.is_empty());
    let known = recover(dir.path(), &real(), &mut |_| {}).unwrap().trials;
    assert!(matches!(&known[0].fate, Fate::AlreadySealed(path) if *path == whole.path), "{known:?}");
}

fn frame(header: &wire::Header, message: &wire::Message<'_>) -> Vec<u8> {
    let mut out = [0; wire::MAX_FRAME_LEN];
    let n = wire::encode(header, message, &mut out).unwrap();
    out[..n].to_vec()
}

/// One channel, 1 kHz, 10 samples a block; `description` as an own frame of bytes.
fn description(boot_id: u32) -> Vec<u8> {
    let channels = [wire::Channel {
        name: "line",
        quantity: "force",
        encoding: wire::Encoding::I16,
        nominal_min: -32768.0,
        nominal_max: 32767.0,
        group_delay_s: 0.0,
        bandwidth_hz: None,
    }];
    let streams = [wire::Stream { id: 1, ticks_per_sample: 1000, channels: wire::Channels::given(&channels) }];
    let describe = wire::Describe {
        device_id: 1,
        name: "winch-node",
        firmware: "t",
        tick_rate_hz: 1e6,
        tick_tolerance_ppm: 50.0,
        streams: wire::Streams::given(&streams),
    };
    frame(&wire::Header { boot_id, description_id: 1, ..Default::default() }, &wire::Message::Describe(describe))
}

fn block(boot_id: u32, k: u32) -> Vec<u8> {
    let samples: Vec<u8> = (0..10_u32).flat_map(|i| ((k * 10 + i) as i16).to_le_bytes()).collect();
    let first_index = u64::from(k) * 10;
    let message = wire::Message::Block(wire::Block {
        first_index,
        tick: first_index * 1000,
        sent_tick: first_index * 1000 + 10_000,
        overruns: 0,
        n_samples: 10,
        sample_len: 2,
        samples: &samples,
    });
    frame(&wire::Header { stream: 1, sequence: k, boot_id, description_id: 1, ..Default::default() }, &message)
}

fn block_ns(k: u32) -> i64 {
    1_000_000_000 + i64::from(k) * 10_000_000
}

/// Blocks `0..100` of one device through `alter`; the trial begins at block 20.
fn short_trial(dir: &Path, alter: impl Fn(u32, Vec<u8>) -> Vec<u8>) {
    let mut journal = JournalFile::begin(dir, &RIG_TEXT);
    journal.bytes(900_000_000, 0, description(7));
    let mut first_seq = 0;
    for k in 0..100 {
        let seq = journal.bytes(block_ns(k), 0, alter(k, block(7, k)));
        match k {
            20 => first_seq = seq,
            40 => journal.open_trial(block_ns(k), first_seq, block_ns(20)),
            _ => {}
        }
    }
    journal.close_trial(block_ns(100));
    journal.save();
}

fn line_counts(trial: &TrialFile) -> Vec<i32> {
    let raw = trial.all_counts("winch-node").unwrap().remove(0);
    let Counts::Integer(counts) = raw.counts else { panic!("{raw:?}") };
    counts
}

#[test]
fn the_preroll_is_in_and_what_came_before_is_not() {
    let dir = tempfile::tempdir().unwrap();
    short_trial(dir.path(), |_, bytes| bytes);
    let trial = TrialFile::open(&seal_in(dir.path(), &real()).unwrap().path).unwrap();
    assert_eq!(line_counts(&trial), (200..1000).collect::<Vec<i32>>());
    let line = trial.signal("line").unwrap();
    assert_eq!(line.time_s.len(), 800);
    // Arrivals alone: the earliest bound is the true one here, 10 ms after the first sample of each block.
    assert!((line.time_s[0] + 0.01).abs() < 1e-6, "{}", line.time_s[0]);
    // The scale is that of the invented record, 5e-4 N a count to nine digits.
    assert!((line.value[0] - (200.0 - 12_000.0) * 5e-4).abs() < 1e-7, "{}", line.value[0]);
}

#[test]
fn a_frame_cut_by_the_ranges_start_is_whole() {
    let dir = tempfile::tempdir().unwrap();
    let mut journal = JournalFile::begin(dir.path(), &RIG_TEXT);
    journal.bytes(900_000_000, 0, description(7));
    let stream: Vec<u8> = (0..100).flat_map(|k| block(7, k)).collect();
    let mut first_seq = 0;
    for (i, read) in stream.chunks(23).enumerate() {
        let seq = journal.bytes(block_ns(0) + i as i64 * 1_000_000, 0, read.to_vec());
        if i == 55 {
            first_seq = seq;
        }
    }
    journal.open_trial(block_ns(90), first_seq, block_ns(0) + 55_000_000);
    journal.close_trial(block_ns(100));
    journal.save();
    let trial = TrialFile::open(&seal_in(dir.path(), &real()).unwrap().path).unwrap();
    let frame_len = block(7, 1).len();
    let first_block = (55 * 23 / frame_len) as i32;
    let counts = line_counts(&trial);
    assert!((counts[0] - first_block * 10).abs() <= 20, "{} {first_block}", counts[0]);
    assert_eq!(counts, (counts[0]..1000).collect::<Vec<i32>>());
    assert!(trial.device("winch-node").unwrap().rejected.is_empty());
}

#[test]
fn a_lost_block_is_a_gap_and_damaged_bytes_are_kept() {
    let dir = tempfile::tempdir().unwrap();
    short_trial(dir.path(), |k, mut bytes| {
        match k {
            50 => bytes.clear(),
            60 => bytes[20] ^= 0x10,
            _ => {}
        }
        bytes
    });
    let sealed = seal_in(dir.path(), &real()).unwrap();
    assert_eq!((sealed.n_missing, sealed.n_samples), (20, 780));
    let trial = TrialFile::open(&sealed.path).unwrap();
    let expected: Vec<i32> = (200..1000).filter(|i| !(500..510).contains(i) && !(600..610).contains(i)).collect();
    assert_eq!(line_counts(&trial), expected);
    let record = trial.device("winch-node").unwrap();
    let gaps: Vec<_> = record.gaps.iter().map(|gap| (gap.first_missing_index, gap.n_missing)).collect();
    assert_eq!(gaps, [(500, 10), (600, 10)]);
    let mut damaged = block(7, 60);
    damaged[20] ^= 0x10;
    assert_eq!(record.rejected[0].bytes, damaged[1..damaged.len() - 1], "as received, without delimiters");
    let line = trial.signal("line").unwrap();
    assert_eq!(line.time_s.len(), 780);
    let steps: Vec<f64> = line.time_s.windows(2).map(|pair| pair[1] - pair[0]).collect();
    let n_gaps = steps.iter().filter(|step| (**step - 0.011).abs() < 1e-6).count();
    assert_eq!(n_gaps, 2, "gaps are absent samples, never filled");
    assert_eq!(verify(&sealed.path, Depth::Everything).unwrap().findings, [""; 0]);
}

#[test]
fn a_reset_device_starts_a_new_clock_and_the_trial_goes_on() {
    let dir = tempfile::tempdir().unwrap();
    let mut journal = JournalFile::begin(dir.path(), &RIG_TEXT);
    let first_seq = journal.bytes(900_000_000, 0, description(7));
    journal.open_trial(900_000_000, first_seq, 900_000_000);
    (0..50).for_each(|k| {
        journal.bytes(block_ns(k), 0, block(7, k));
    });
    journal.bytes(block_ns(60), 0, description(8));
    (0..50).for_each(|k| {
        journal.bytes(block_ns(61 + k), 0, block(8, k));
    });
    journal.close_trial(block_ns(200));
    journal.save();
    let sealed = seal_in(dir.path(), &real()).unwrap();
    let trial = TrialFile::open(&sealed.path).unwrap();
    assert_eq!(line_counts(&trial).len(), 1000);
    assert_eq!(trial.signal("line").unwrap().time_s.len(), 1000);
    let (map, _) = trial.clock("winch-node").unwrap();
    assert_eq!(map.iter().map(|piece| piece.boot_id).collect::<Vec<_>>(), [7, 8]);
    assert_eq!(verify(&sealed.path, Depth::Everything).unwrap().findings, [""; 0]);
}

#[test]
fn a_rig_text_this_program_refuses_still_leaves_every_count() {
    let dir = tempfile::tempdir().unwrap();
    let mut journal = JournalFile::begin(dir.path(), "name = \"of a later program\"\nfuture = 1\n");
    let first_seq = journal.bytes(900_000_000, 0, description(7));
    journal.open_trial(900_000_000, first_seq, 900_000_000);
    (0..50).for_each(|k| {
        journal.bytes(block_ns(k), 0, block(7, k));
    });
    journal.close_trial(block_ns(50));
    journal.save();
    let sealed = seal_in(dir.path(), &real()).unwrap();
    let trial = TrialFile::open(&sealed.path).unwrap();
    assert_eq!((sealed.outcome.as_str(), line_counts(&trial).len()), ("unread", 500));
    assert!(trial.results().unwrap().outcome_evidence[0].contains("refused"));
}

#[test]
fn records_of_unknown_devices_and_torn_tails_do_not_stop_sealing() {
    let dir = tempfile::tempdir().unwrap();
    let mut journal = JournalFile::begin(dir.path(), &RIG_TEXT);
    let first_seq = journal.bytes(900_000_000, 0, description(7));
    journal.open_trial(900_000_000, first_seq, 900_000_000);
    journal.bytes(900_000_001, 77, vec![1, 2, 3]);
    (0..50).for_each(|k| {
        journal.bytes(block_ns(k), 0, block(7, k));
    });
    journal.add(block_ns(50), 0, Body::Heartbeat);
    journal.save();
    let path = dir.path().join(segment());
    let whole = std::fs::read(&path).unwrap();
    std::fs::write(&path, &whole[..whole.len() - 3]).unwrap();
    let sealed = seal_in(dir.path(), &real()).unwrap();
    let trial = TrialFile::open(&sealed.path).unwrap();
    assert_eq!((sealed.outcome.as_str(), line_counts(&trial).len()), ("truncated", 500));
    let texts: Vec<String> = trial.events().unwrap().into_iter().map(|event| event.text).collect();
    assert!(texts.iter().any(|text| text.contains("device 77")), "{texts:?}");
    assert!(texts.iter().any(|text| text.contains("cannot be read beyond")), "{texts:?}");
}
