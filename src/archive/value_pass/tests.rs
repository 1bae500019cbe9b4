use super::*;
use crate::archive::raw_pass::RawPass;
use crate::capture::{ChannelDescription, ClockMethod, Encoding, TimeBase};
use crate::journal::{DeviceAtOpen, SegmentOpen};
use crate::trial::{Header, TrialFile};

const N_PER_BLOCK: u32 = 100;

fn header() -> Header {
    Header {
        trial_id: "t".into(),
        journal_id: "j".into(),
        first_seq: 1,
        last_seq: 2,
        rig: String::new(),
        started: String::new(),
        started_quality: String::new(),
        program_version: String::new(),
        configuration_hash: String::new(),
        series: String::new(),
        zero_host_ns: 0,
    }
}

fn opening() -> SegmentOpen {
    let device = |name: &str| DeviceAtOpen { name: name.into(), port: String::new(), describe_hex: String::new() };
    SegmentOpen {
        format_version: 1,
        journal_id: "j".into(),
        segment: 1,
        first_seq: 1,
        program_version: String::new(),
        kernel_boot_id: String::new(),
        rig_text: crate::rig::testing::NORTH_PIER.clone(),
        devices: vec![device("winch-node")],
        open_trial: None,
        previous_given_up: None,
        keep: false,
    }
}

fn description() -> DeviceDescription {
    let channel = |name: &str| ChannelDescription {
        name: name.into(),
        quantity: "force".into(),
        encoding: Encoding::F32,
        nominal_min: f64::NAN,
        nominal_max: f64::NAN,
        group_delay_s: 0.0,
        bandwidth_hz: None,
    };
    let channels = vec![channel("line"), channel("anchor")];
    DeviceDescription {
        device_id: 1,
        name: "winch-node".into(),
        firmware: String::new(),
        tick_rate_hz: 1e6,
        tick_tolerance_ppm: 50.0,
        boot_id: 1,
        description_id: 1,
        streams: vec![StreamDescription { stream: 1, ticks_per_sample: 100, channels }],
        time_base: TimeBase::Ticks,
    }
}

/// A clock that runs true.
fn clock() -> ClockPiece {
    ClockPiece {
        boot_id: 1,
        first_tick: 0,
        last_tick: u64::MAX,
        origin_tick: 0,
        host_ns_at_origin: 0.0,
        ns_per_tick: 1000.0,
        u_ns: 0.0,
        asymmetry_ns: 0.0,
        method: ClockMethod::Exchanges,
    }
}

fn block(k: u32, line: f32) -> Told {
    let first_index = u64::from(k * N_PER_BLOCK);
    let anchor = vec![1.0; N_PER_BLOCK as usize];
    Told::Captured(
        DeviceIdx(0),
        Captured::Block(Block {
            host_ns: 0,
            boot_id: 1,
            description_id: 1,
            stream: 1,
            sequence: k,
            first_index,
            first_tick: first_index * 100,
            sent_tick: 0,
            n_samples: N_PER_BLOCK,
            overruns: 0,
            crc: 0,
            counts: vec![Counts::Float(vec![line; N_PER_BLOCK as usize]), Counts::Float(anchor)],
        }),
    )
}

/// Plays blocks with at most `kept_max` samples for the reading; gives that, the events, and the file read back.
fn played(blocks: &[Told], clocks: Vec<ClockPiece>, kept_max: usize) -> (ForReading, Vec<String>, TrialFile) {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("t.h5");
    let mut writer = TrialWriter::create(&path, &header()).unwrap();
    let mut raw = RawPass::new(&mut writer, 0);
    raw.take(Told::Opening { host_ns: 0, open: Box::new(opening()) }).unwrap();
    let mut gathered = raw.finish().unwrap();
    let rig = crate::rig::testing::north_pier();
    let clocks = [clocks];
    let names: Vec<Source> = gathered.devices.iter().map(|device| device.source()).collect();
    let mut pass = ValuePass::new(&mut writer, &rig, &names, &clocks, 0, kept_max);
    pass.take(&Told::Known(DeviceIdx(0), description())).unwrap();
    blocks.iter().for_each(|block| pass.take(block).unwrap());
    let for_reading = pass.finish(&mut gathered.events);
    gathered.events.write(&mut writer).unwrap();
    writer.write_results(&crate::trial::ResultSet::default()).unwrap();
    writer.finish().unwrap();
    let trial = TrialFile::open(&path).unwrap();
    let texts = trial.events().unwrap().into_iter().map(|event| event.text).collect();
    (for_reading, texts, trial)
}

#[test]
fn a_long_hold_is_whole_in_the_file_and_bounded_for_the_reading() {
    let blocks: Vec<Told> = (0..500).map(|k| block(k, 20_000.0)).collect();
    let (for_reading, _, trial) = played(&blocks, vec![clock()], 10_000);
    let line = trial.signal("line").unwrap();
    assert_eq!(line.time_s.len(), 50_000);
    let whole_from_s = for_reading.whole_from_s.unwrap();
    for signal in &for_reading.signals {
        let n_whole = signal.time_s.iter().filter(|time_s| **time_s >= whole_from_s).count();
        assert!((2_500..=5_000).contains(&n_whole), "{n_whole}");
        let file = &line.time_s[line.time_s.len() - n_whole..];
        assert_eq!(&signal.time_s[signal.time_s.len() - n_whole..], file, "the latest are whole");
        let n_means = signal.time_s.len() - n_whole;
        assert!(n_means.abs_diff((50_000 - n_whole) / 100) <= 20, "{n_means} means of 10 ms");
        assert!(signal.time_s[0] < 0.011, "from the trial's beginning on");
        assert!(signal.time_s.windows(2).all(|pair| pair[0] < pair[1]));
        assert!(signal.value.iter().all(|value| (value - signal.value[0]).abs() < 1e-9), "means of what is level");
    }
    assert_eq!(for_reading.from_s, None);
}

#[test]
fn counts_that_are_no_numbers_have_no_value_and_are_told_of() {
    let blocks = [block(0, 1.0), block(1, f32::NAN), block(2, 3.0)];
    let (for_reading, texts, trial) = played(&blocks, vec![clock()], 10_000);
    assert_eq!(trial.signal("line").unwrap().time_s.len(), 200);
    assert_eq!(trial.signal("anchor").unwrap().time_s.len(), 300, "a neighbour's fault costs it nothing");
    assert!(texts.iter().any(|text| text.starts_with("100 samples of channel line have no value")), "{texts:?}");
    assert_eq!(for_reading.whole_from_s, None);
}

#[test]
fn without_a_clock_map_there_are_no_values_rather_than_guessed_times() {
    let (for_reading, texts, trial) = played(&[block(0, 1.0)], Vec::new(), 10_000);
    assert!(for_reading.signals.is_empty());
    assert_eq!(trial.signal_names().unwrap(), [""; 0]);
    assert!(texts.iter().any(|text| text.contains("no clock map")), "{texts:?}");
}

#[test]
fn time_that_runs_backward_is_left_out() {
    let blocks = [block(0, 1.0), block(1, 1.0), block(1, 1.0), block(2, 1.0)];
    let (_, texts, trial) = played(&blocks, vec![clock()], 10_000);
    assert_eq!(trial.signal("line").unwrap().time_s.len(), 300);
    assert!(texts.iter().any(|text| text.contains("do not move on")), "{texts:?}");
}

#[test]
fn blocks_queued_before_a_change_keep_their_values_and_their_datasets() {
    let changed = || {
        let mut description = description();
        description.description_id = 2;
        description.streams[0].channels.pop();
        Told::Captured(DeviceIdx(0), Captured::Description(description))
    };
    let after = || {
        let Told::Captured(device, Captured::Block(mut block)) = block(1, 2.0) else { panic!("no block") };
        block.description_id = 2;
        block.counts.pop();
        Told::Captured(device, Captured::Block(block))
    };
    let told = || [Told::Known(DeviceIdx(0), description()), changed(), block(0, 1.0), after()];
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("t.h5");
    let mut writer = TrialWriter::create(&path, &header()).unwrap();
    let mut raw = RawPass::new(&mut writer, 0);
    raw.take(Told::Opening { host_ns: 0, open: Box::new(opening()) }).unwrap();
    told().into_iter().for_each(|told| raw.take(told).unwrap());
    let mut gathered = raw.finish().unwrap();
    let (rig, clocks) = (crate::rig::parse(&crate::rig::testing::NORTH_PIER).unwrap(), [vec![clock()]]);
    let names: Vec<Source> = gathered.devices.iter().map(|device| device.source()).collect();
    let mut pass = ValuePass::new(&mut writer, &rig, &names, &clocks, 0, 1_000);
    told().iter().for_each(|told| pass.take(told).unwrap());
    pass.finish(&mut gathered.events);
    gathered.events.write(&mut writer).unwrap();
    writer.write_results(&crate::trial::ResultSet::default()).unwrap();
    writer.finish().unwrap();
    let trial = TrialFile::open(&path).unwrap();
    let channels = trial.raw_channels("winch-node").unwrap();
    let counts: Vec<_> = channels.iter().map(|c| (c.name.as_str(), c.layout, c.n_counts)).collect();
    assert_eq!(counts, [("anchor", 0, 100), ("line", 0, 100), ("line", 1, 100)]);
    assert_eq!(trial.signal("line").unwrap().time_s.len(), 200);
    assert_eq!(trial.signal("anchor").unwrap().time_s.len(), 100);
    let events = trial.events().unwrap();
    assert_eq!(events[0].kind, "device", "a change within the trial is an event: {events:?}");
}

#[test]
fn a_reboot_is_an_event_and_something_to_look_at() {
    let dir = tempfile::tempdir().unwrap();
    let mut writer = TrialWriter::create(&dir.path().join("t.h5"), &header()).unwrap();
    let mut raw = RawPass::new(&mut writer, 0);
    raw.take(Told::Opening { host_ns: 0, open: Box::new(opening()) }).unwrap();
    let reboot = crate::capture::Reboot {
        host_ns: 3_000_000_000,
        boot_id: 5,
        received_boot_id: 1,
        earlier_boot_id: 1,
        seen: crate::capture::RebootSeen::OldId,
    };
    raw.take(Told::Captured(DeviceIdx(0), Captured::Reboot(reboot))).unwrap();
    let gathered = raw.finish().unwrap();
    let finding = &gathered.devices[0].findings[0];
    assert!(finding.starts_with("winch-node at 3.000 s rebooted under a boot id that it had before"), "{finding}");
}
