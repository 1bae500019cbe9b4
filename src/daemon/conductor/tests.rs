use super::*;
use crate::feed::message::Hello;
use crate::journal::{Ends, Journal, JournalReader, Origin, Settings, StagedDisk, Start};
use crate::link::{DeviceIdx, SystemClock};
use bytes::Bytes;
use crossbeam_channel::{Sender, bounded};
use std::path::Path;

use super::super::room::Room;
use super::super::sealing::SealCommand;
use super::super::service::ServiceManager;

/// A conductor whose journal is on a staged disk and whose ports are this test.
struct Pit {
    _dir: tempfile::TempDir,
    disk: StagedDisk,
    conductor: Conductor,
    inputs: Inputs,
    journal: Sender<FromLinks>,
    live: Sender<FromLinks>,
    shutdown: Sender<String>,
}

fn pit() -> Pit {
    let dir = tempfile::tempdir().unwrap();
    let rig = crate::rig::testing::north_pier();
    let disk = StagedDisk::default();
    let clock: Arc<dyn HostClock> = Arc::new(SystemClock);
    let origin = Origin {
        journal_id: "000001-abc123".to_owned(),
        program_version: "0".to_owned(),
        kernel_boot_id: "boot".to_owned(),
        rig_text: rig.text.clone(),
        devices: Vec::new(),
    };
    let now_ns = clock.monotonic_ns();
    let on_disk = Arc::new(disk.clone());
    let journal =
        Journal::begin(on_disk.clone(), Path::new("j"), origin, Start::fresh(), Settings::default(), now_ns).unwrap();
    let ((to_journal, links), (orders, orders_end), (reports_in, reports)) = (bounded(999), bounded(99), bounded(99));
    let ends = Ends { links, orders: orders_end, reports: reports_in };
    let recorder = Recorder::spawn(journal, on_disk, ends, Arc::clone(&clock), Clocks::read).unwrap();
    let seal = SealCommand::new(PathBuf::from("/bin/false"), dir.path().to_owned());
    let (sealer, sealed) = Sealer::spawn(seal).unwrap();
    let (feed, requests) = FeedServer::start(&dir.path().join("feed.sock"), Hello::of(&rig)).unwrap();
    let ((to_live, live), (shutdown, told)) = (bounded(999), bounded(1));
    let conductor = Conductor {
        live: Live::new(&rig),
        feed,
        outgoing: Outgoing::new(orders),
        recorder,
        links: None,
        sealer,
        cords: None,
        book: TrialBook::new("000001-abc123".to_owned(), 1, Vec::new()),
        clock,
        on_event: Box::new(|_| {}),
        unfinished: None,
        device_names: rig.devices.iter().map(|device| device.name.clone()).collect(),
        dir: dir.path().to_owned(),
        seal_patience: Duration::from_secs(5),
        room: RoomWatch::new(Duration::from_secs(60), 1e5),
        held_back_from_ns: None,
        had_room: true,
        settle_at_ns: 0,
        openings: FirstOpenings::of(&rig),
        wait_for_ports: false,
        service: Service::reach(&ServiceManager::default()),
    };
    let inputs = Inputs { live, requests, reports, sealed, counted: crossbeam_channel::never(), shutdown: told };
    Pit { _dir: dir, disk, conductor, inputs, journal: to_journal, live: to_live, shutdown }
}

fn bytes(i: u32) -> FromLinks {
    let what = LinkWhat::Bytes(Bytes::copy_from_slice(&i.to_le_bytes()));
    FromLinks::Event(LinkEvent { host_ns: SystemClock.monotonic_ns(), device: DeviceIdx(0), what })
}

/// Reads of a device that the journal holds after a power cut which spared nothing unsynced.
fn reads_on_disk(disk: &StagedDisk) -> usize {
    let after = Arc::new(disk.after_power_cut(&mut || 1));
    let reader = JournalReader::open(after, Path::new("j"), "000001-abc123").unwrap();
    let is_read = |item: &crate::journal::Item| {
        matches!(item, crate::journal::Item::Record(record)
            if matches!(record.body, crate::journal::Body::Link(LinkWhat::Bytes(_))))
    };
    reader.records().filter(|item| item.as_ref().is_ok_and(is_read)).count()
}

#[test]
fn when_the_links_thread_dies_what_it_gave_is_durable_before_the_daemon_ends() {
    let Pit { _dir, disk, conductor, inputs, journal, live, shutdown } = pit();
    (0..500).for_each(|i| journal.send(bytes(i)).unwrap());
    drop((journal, live)); // as when their thread panics
    let error = conductor.run(inputs).unwrap_err();
    assert!(matches!(error, DaemonError::ThreadEnded { thread: "links" }), "{error}");
    assert_eq!(reads_on_disk(&disk), 500);
    drop(shutdown);
}

#[test]
fn when_the_sealing_thread_dies_the_recorder_is_still_stopped_in_order() {
    let Pit { _dir, disk, conductor, mut inputs, journal, live, shutdown } = pit();
    (0..500).for_each(|i| journal.send(bytes(i)).unwrap());
    inputs.sealed = bounded(1).1; // its other end is gone
    // The ports' thread lets go of its queues when it is told to stop; this test is nobody's to tell, and has done so.
    drop((journal, live));
    let error = conductor.run(inputs).unwrap_err();
    assert!(matches!(error, DaemonError::ThreadEnded { .. }), "{error}");
    assert_eq!(reads_on_disk(&disk), 500);
    drop(shutdown);
}

#[test]
fn no_room_at_all_is_too_little_and_room_not_asked_for_is_not() {
    let Pit { _dir, conductor, .. } = pit();
    let mut recorder = RecorderNow::default();
    assert_eq!(conductor.room_now(&recorder), Room::Enough);
    recorder.health.free_bytes = Some(0);
    assert!(matches!(conductor.room_now(&recorder), Room::TooLittle(_)));
}

#[test]
fn a_zero_in_force_reaches_the_journal_although_too_much_waits_already() {
    let Pit { _dir, disk, mut conductor, inputs, journal, live, shutdown } = pit();
    let event = |kind: &str| words::event(1, kind, "daemon", format!("a {kind}"));
    while conductor.tell(event("mark")) {}
    conductor.tell_needed(event("tare"));
    drop((journal, live));
    conductor.run(inputs).unwrap_err();
    let reader = JournalReader::open(Arc::new(disk.after_kill()), Path::new("j"), "000001-abc123").unwrap();
    let is_tare = |item: &crate::journal::Item| {
        matches!(item, crate::journal::Item::Record(record)
            if matches!(&record.body, crate::journal::Body::Event(event) if event.text == "a tare"))
    };
    assert_eq!(reader.records().filter(|item| item.as_ref().is_ok_and(is_tare)).count(), 1);
    drop(shutdown);
}

/// What the recorder shows once it has asked the disk for its room; it asks every two seconds.
fn once(conductor: &Conductor, shows: impl Fn(&RecorderNow) -> bool) -> RecorderNow {
    let deadline = Instant::now() + Duration::from_secs(60);
    loop {
        let now = conductor.recorder.now();
        if shows(&now) {
            return now;
        }
        assert!(Instant::now() < deadline, "never shown: {now:?}");
        std::thread::sleep(Duration::from_millis(20));
    }
}

#[test]
fn without_room_no_trial_begins_and_with_room_again_it_opens_and_reaches_back() {
    let Pit { _dir, disk, mut conductor, inputs, journal, live, shutdown } = pit();
    const GIB: u64 = 1 << 30;
    disk.set_capacity(Some(GIB / 1024));
    once(&conductor, |now| now.health.free_bytes.is_some_and(|free| free < GIB));
    let tension_ns = conductor.clock.monotonic_ns();
    conductor.live.open_by_hand(tension_ns).expect("it has no trial yet");
    conductor.open_by_tension(tension_ns, tension_ns);
    assert_eq!((conductor.book.open(), conductor.held_back_from_ns), (None, Some(tension_ns)));

    let act = |conductor: &mut Conductor, recorder: &RecorderNow| {
        let (room, now_ns) = (conductor.room_now(recorder), conductor.clock.monotonic_ns());
        conductor.act_on_room(recorder, &room, now_ns);
    };
    let short = conductor.recorder.now();
    act(&mut conductor, &short);
    assert_eq!((conductor.book.open(), conductor.had_room), (None, false), "still none");
    disk.set_capacity(Some(GIB));
    let ample = once(&conductor, |now| now.health.free_bytes.is_some_and(|free| free > GIB / 2));
    act(&mut conductor, &ample);
    let opened = conductor.book.open().expect("the trial").clone();
    assert_eq!((conductor.held_back_from_ns, conductor.had_room), (None, true));

    // The disk takes nothing: the trial ends, and goes on under the same tension when it does again.
    let refusing = RecorderNow { refusing: true, ..ample.clone() };
    act(&mut conductor, &refusing);
    assert_eq!((conductor.book.open(), &conductor.unfinished), (None, &Some(opened.trial_id.clone())));
    let another_ns = conductor.clock.monotonic_ns();
    act(&mut conductor, &refusing);
    assert!(conductor.held_back_from_ns.is_some_and(|from_ns| from_ns <= another_ns), "from its end on");
    act(&mut conductor, &ample);
    assert_ne!(conductor.book.open().map(|open| &open.trial_id), Some(&opened.trial_id));
    assert_eq!((conductor.book.open().is_some(), &conductor.unfinished), (true, &None));
    drop((journal, live));
    conductor.run(inputs).unwrap_err();
    let reader = JournalReader::open(Arc::new(disk.after_kill()), Path::new("j"), "000001-abc123").unwrap();
    let trials = reader.trials().unwrap();
    assert_eq!(trials.len(), 2);
    assert_eq!(trials[0].closed.as_ref().unwrap().reason, words::disk_full(false));
    assert_eq!(trials[1].opened.continues.as_ref(), Some(&opened.trial_id));
    drop(shutdown);
}

#[test]
fn while_the_disk_takes_nothing_no_trial_begins() {
    let Pit { _dir, disk, mut conductor, inputs, journal, live, shutdown } = pit();
    once(&conductor, |now| now.health.free_bytes.is_some());
    disk.set_capacity(Some(0));
    let load = vec![0; 1 << 20];
    let full = || {
        let what = LinkWhat::Bytes(Bytes::copy_from_slice(&load));
        let event = LinkEvent { host_ns: SystemClock.monotonic_ns(), device: DeviceIdx(0), what };
        let _ = journal.try_send(FromLinks::Event(event)); // as many as it takes
    };
    let deadline = Instant::now() + Duration::from_secs(60);
    while !conductor.recorder.now().refusing {
        assert!(Instant::now() < deadline);
        full();
        std::thread::sleep(Duration::from_millis(5));
    }
    let now_ns = conductor.clock.monotonic_ns();
    conductor.open_by_tension(now_ns, now_ns);
    assert_eq!((conductor.book.open(), conductor.held_back_from_ns), (None, Some(now_ns)));
    disk.set_capacity(None);
    drop((journal, live));
    conductor.run(inputs).unwrap_err();
    drop(shutdown);
}
