//! The trial file as this program writes and reads it, and as HDF5's own Python reader sees it (h5py, pinned).

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a test that cannot go on stops here")]

mod support;

use std::path::Path;

use tautrail::calibration::Signal;
use tautrail::capture::{
    ChannelDescription, Counts, DeviceDescription, Edge, Encoding, Gap, Rejected, Status, StreamDescription, TimeBase,
};
use tautrail::rig::Role;
use tautrail::trial::{
    AbsentEntry, BlockRow, CarriedText, ClockRow, Condition, DerivedSignal, EventRow, ExchangeRow, Header,
    HostClocksRow, InstantEntry, ResultEntry, ResultSet, TextLine, TrialError, TrialFile, TrialWriter,
};

const RIG_TEXT: &str = "# north-pier, größer als gedacht: 6°\nname = \"north-pier\"\n";
const N_BLOCKS: u32 = 700;
const N_PER_BLOCK: u32 = 100;

fn header() -> Header {
    Header {
        trial_id: "000012-7f3a9c".into(),
        journal_id: "j-0001".into(),
        first_seq: 5,
        last_seq: 900,
        rig: "north-pier".into(),
        started: "2026-12-01T14:00:00.000000000+00:00".into(),
        started_quality: "set".into(),
        program_version: "0.1.0".into(),
        configuration_hash: tautrail::trial::text_sha256(RIG_TEXT),
        series: String::new(),
        zero_host_ns: 1_000_000_000_000,
    }
}

fn channel(name: &str, encoding: Encoding) -> ChannelDescription {
    ChannelDescription {
        name: name.into(),
        quantity: "tension".into(),
        encoding,
        nominal_min: 0.0,
        nominal_max: 2000.0,
        group_delay_s: 1e-4,
        bandwidth_hz: Some(2500.0),
    }
}

fn description(second: Encoding) -> DeviceDescription {
    let channels = vec![channel("line", Encoding::I24), channel("../anchor", second)];
    DeviceDescription {
        device_id: 77,
        name: "winch-node".into(),
        firmware: "1.2".into(),
        tick_rate_hz: 1e6,
        tick_tolerance_ppm: 50.0,
        boot_id: 3,
        description_id: 1,
        streams: vec![StreamDescription { stream: 1, ticks_per_sample: 100, channels }],
        time_base: TimeBase::Ticks,
    }
}

/// Counts with a pattern of their own, both ends of the i24 range among them.
fn line_count(index: u64) -> i32 {
    match index % 5000 {
        17 => -8_388_608,
        18 => 8_388_607,
        19 => -1,
        n => (n as i32 * 7919) % 100_000,
    }
}

fn block(k: u32, layout: u16) -> BlockRow {
    let first_index = u64::from(k * N_PER_BLOCK);
    BlockRow {
        first_index,
        first_tick: first_index * 100,
        sent_tick: first_index * 100 + 10_050,
        host_ns: 1_000_000_000_000 + i64::from(k) * 10_000_000,
        boot_id: 3,
        sequence: k,
        n_samples: N_PER_BLOCK,
        overruns: 0,
        crc: k.wrapping_mul(2_654_435_761),
        layout,
        stream: 1,
    }
}

fn counts(k: u32, float: bool) -> Vec<Counts> {
    let indices = || (u64::from(k * N_PER_BLOCK)..).take(N_PER_BLOCK as usize);
    let line = Counts::Integer(indices().map(line_count).collect());
    let anchor = if float {
        Counts::Float(indices().map(|i| i as f32 * 0.5).collect())
    } else {
        Counts::Integer(indices().map(|i| -(i as i32)).collect())
    };
    vec![line, anchor]
}

fn signal() -> Signal {
    let n = 70_000;
    Signal {
        name: "release_line".into(),
        role: Role::ReleaseLineTension,
        time_s: (0..n).map(|i| f64::from(i) * 1e-4).collect(),
        value: (0..n).map(|i| 700.0 * (f64::from(i) * 1e-3).sin()).collect(),
        zero_uncertainty: 0.5,
        scale_relative_uncertainty: 0.001,
        time_uncertainty_s: 5e-5,
        nominal_rate_hz: 1e4,
        bandwidth_hz: Some(2500.0),
        resolution: 2000.0 / 8_388_608.0,
        range: Some((0.0, 2000.0)),
    }
}

fn results() -> ResultSet {
    ResultSet {
        outcome: "launched".into(),
        outcome_evidence: vec!["release line fell below half its hold tension".into(), "größer".into()],
        findings: vec![],
        entries: vec![ResultEntry {
            name: "launch_speed".into(),
            value: 16.4,
            unit: "m/s".into(),
            standard_uncertainty: 0.02,
            low: 16.36,
            high: 16.44,
            method: "smoother".into(),
            budget: vec![("calibration".into(), 0.016), ("noise".into(), 0.012)],
        }],
        instants: vec![InstantEntry {
            name: "release".into(),
            time_s: 20.5,
            standard_uncertainty_s: 1e-4,
            evidence: "release line".into(),
        }],
        absent: vec![AbsentEntry { name: "arrest_distance".into(), reason: "no data after separation".into() }],
    }
}

fn events() -> Vec<EventRow> {
    let row = |time_s, kind: &str, text: &str| EventRow {
        time_s,
        kind: kind.into(),
        source: "daemon".into(),
        person: String::new(),
        text: text.into(),
    };
    vec![row(0.0, "phase", "winch-back"), row(20.5, "phase", "launch: größer")]
}

fn write_raw(writer: &mut TrialWriter) -> Result<(), TrialError> {
    let device = writer.add_device("winch-node")?;
    let layout = writer.describe(device, &description(Encoding::I24))?;
    for k in 0..N_BLOCKS {
        writer.append_block(device, &block(k, layout), &counts(k, false))?;
    }
    let again = writer.describe(device, &description(Encoding::I24))?;
    assert_eq!(again, layout, "the same channels keep their datasets after a new boot");
    let other = writer.describe(device, &description(Encoding::F32))?;
    writer.append_block(device, &block(N_BLOCKS, other), &counts(N_BLOCKS, true))?;
    writer
        .append_gap(device, &Gap { host_ns: 9, boot_id: 3, stream: 1, first_missing_index: 70_100, n_missing: 100 })?;
    writer.append_edge(device, &Edge { host_ns: 10, boot_id: 3, input: 1, rising: true, tick: 123 })?;
    let (temperature_c, supply_v, excitation_v) = (21.5, 5.0, 4.9);
    let status = Status { host_ns: 11, boot_id: 3, tick: 99, temperature_c, supply_v, excitation_v, overruns: 0 };
    writer.append_status(device, &status)?;
    writer.append_text_line(device, &TextLine { host_ns: 12, text: "booted\0twice".into() })?;
    for bytes in [vec![1, 2, 3], vec![], vec![255; 4]] {
        writer.append_rejected(device, &Rejected { host_ns: 13, reason: "checksum", detail: String::new(), bytes })?;
    }
    writer.add_device("shuttle-node")?;
    Ok(())
}

fn write_trial(path: &Path) -> Result<(), TrialError> {
    let mut writer = TrialWriter::create(path, &header())?;
    writer.add_text(&CarriedText { name: "rig.toml".into(), text: RIG_TEXT.into() })?;
    write_raw(&mut writer)?;
    let piece = ClockRow {
        origin_tick: 0,
        host_ns_at_origin: 1e12,
        ns_per_tick: 1000.01,
        standard_uncertainty_ns: 2e4,
        asymmetry_ns: 1e4,
        boot_id: 3,
        first_tick: 0,
        last_tick: 7_000_000,
        two_way: true,
    };
    let (requested_host_ns, replied_host_ns, residual_ns) = (5, 9, -1.5);
    let (received_tick, sent_tick, boot_id) = (1, 2, 3);
    let exchange = ExchangeRow { requested_host_ns, replied_host_ns, received_tick, sent_tick, boot_id, residual_ns };
    writer.write_clock("winch-node", &[piece], &[exchange])?;
    writer.append_host_clocks(&HostClocksRow {
        monotonic_ns: 1,
        monotonic_raw_ns: 2,
        boottime_ns: 3,
        realtime_ns: 4,
    })?;
    writer.begin_signal(&signal())?;
    writer.write_derived(&DerivedSignal {
        name: "velocity".into(),
        unit: "m/s".into(),
        method: "smoother".into(),
        time_s: vec![0.0, 0.1, 0.2],
        value: vec![0.0, 1.0, 2.0],
        standard_uncertainty: vec![0.1, 0.1, 0.1],
    })?;
    events().iter().try_for_each(|event| writer.append_event(event))?;
    writer.add_note(&CarriedText { name: "operator".into(), text: "gusty".into() })?;
    let air = ("air_density", 1.225, "kg/m^3", "rig file");
    let (name, unit, source) = (air.0.into(), air.2.into(), air.3.into());
    writer.add_condition(&Condition { name, value: air.1, unit, source })?;
    writer.write_results(&results())?;
    writer.finish()
}

fn trial_in(dir: &tempfile::TempDir) -> std::path::PathBuf {
    let path = dir.path().join("trial.h5");
    write_trial(&path).expect("the trial is written");
    path
}

#[test]
fn what_was_written_is_read_back() {
    let dir = tempfile::tempdir().unwrap();
    let trial = TrialFile::open(&trial_in(&dir)).unwrap();
    assert_eq!(trial.header(), &header());
    assert_eq!(trial.outcome(), "launched");
    assert_eq!(trial.signals().unwrap(), [signal()]);
    assert_eq!(trial.results().unwrap(), results());
    assert_eq!(trial.events().unwrap(), events());
    assert_eq!(trial.texts().unwrap(), [CarriedText { name: "rig.toml".into(), text: RIG_TEXT.into() }]);
    assert_eq!(trial.notes().unwrap(), [CarriedText { name: "operator".into(), text: "gusty".into() }]);
    assert_eq!(trial.conditions().unwrap()[0].value, 1.225);
    assert_eq!(trial.derived_names().unwrap(), ["velocity"]);
    assert_eq!(trial.derived("velocity").unwrap().standard_uncertainty, [0.1; 3]);
    let (map, exchanges) = trial.clock("winch-node").unwrap();
    assert_eq!((map[0].ns_per_tick, exchanges[0].residual_ns), (1000.01, -1.5));
    assert_eq!(trial.host_clocks().unwrap()[0].realtime_ns, 4);
}

#[test]
fn counts_come_back_bit_for_bit_with_their_blocks() {
    let dir = tempfile::tempdir().unwrap();
    let trial = TrialFile::open(&trial_in(&dir)).unwrap();
    assert_eq!(trial.device_names().unwrap(), ["shuttle-node", "winch-node"]);
    let blocks = trial.blocks("winch-node").unwrap();
    assert_eq!(blocks.len() as u32, N_BLOCKS + 1);
    assert_eq!(blocks[123], block(123, 0));
    let all = trial.all_counts("winch-node").unwrap();
    let named = |name: &str| all.iter().find(|raw| raw.channel.dataset == name).expect(name);
    let n = u64::from(N_BLOCKS * N_PER_BLOCK);
    assert_eq!(named("line").counts, Counts::Integer((0..n).map(line_count).collect()));
    assert_eq!(named("_._anchor").counts, Counts::Integer((0..n).map(|i| -(i as i32)).collect()));
    assert_eq!(named("_._anchor").channel.name, "../anchor");
    let floats = (n..n + u64::from(N_PER_BLOCK)).map(|i| i as f32 * 0.5).collect();
    assert_eq!(named("_._anchor~2").counts, Counts::Float(floats));
    let record = trial.device("winch-node").unwrap();
    let descriptions = [Encoding::I24, Encoding::I24, Encoding::F32].map(description);
    assert_eq!(record.descriptions, descriptions);
    assert_eq!(record.gaps[0].n_missing, 100);
    assert_eq!((record.edges[0].tick, record.statuses[0].temperature_c), (123, 21.5));
    assert_eq!(record.text_lines[0].text, "booted\u{2400}twice");
    let rejected: Vec<_> = record.rejected.iter().map(|r| r.bytes.clone()).collect();
    assert_eq!(rejected, [vec![1, 2, 3], vec![], vec![255; 4]]);
}

#[test]
fn a_window_of_a_signal_is_that_part_of_it() {
    let dir = tempfile::tempdir().unwrap();
    let trial = TrialFile::open(&trial_in(&dir)).unwrap();
    let window = trial.signal_between("release_line", 2.0, 2.5).unwrap();
    let whole = signal();
    assert_eq!(window.time_s, whole.time_s[20_000..25_000]);
    assert_eq!(window.value, whole.value[20_000..25_000]);
    assert!(trial.signal_between("release_line", 3.0, 2.0).unwrap().time_s.is_empty());
    assert!(matches!(trial.signal("no_such"), Err(TrialError::NoSuch { .. })));
}

#[test]
fn the_same_trial_written_twice_has_the_same_bytes() {
    let (one, two) = (tempfile::tempdir().unwrap(), tempfile::tempdir().unwrap());
    let first = std::fs::read(trial_in(&one)).unwrap();
    std::thread::sleep(std::time::Duration::from_millis(1100));
    assert!(first == std::fs::read(trial_in(&two)).unwrap(), "a timestamp or stray memory went into the file");
}

#[test]
fn an_existing_file_is_never_replaced() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("trial.h5");
    std::fs::write(&path, b"somebody's").unwrap();
    assert!(TrialWriter::create(&path, &header()).is_err());
    assert_eq!(std::fs::read(&path).unwrap(), b"somebody's");
}

#[test]
fn a_block_that_does_not_fit_its_description_is_refused() {
    let dir = tempfile::tempdir().unwrap();
    let mut writer = TrialWriter::create(&dir.path().join("t.h5"), &header()).unwrap();
    let device = writer.add_device("winch-node").unwrap();
    let layout = writer.describe(device, &description(Encoding::I24)).unwrap();
    let mut short = counts(0, false);
    short[1] = Counts::Integer(vec![1, 2]);
    let refused = writer.append_block(device, &block(0, layout), &short);
    assert!(matches!(refused, Err(TrialError::BlockShape { found: 2, .. })), "{refused:?}");
}

#[test]
fn broken_and_foreign_files_are_named_as_such() {
    let dir = tempfile::tempdir().unwrap();
    let path = trial_in(&dir);
    let whole = std::fs::read(&path).unwrap();
    let open = |bytes: &[u8]| {
        let broken = dir.path().join("broken.h5");
        std::fs::write(&broken, bytes).unwrap();
        TrialFile::open(&broken)
    };
    for length in [0, 7, 48, 100, whole.len() / 2, whole.len() - 1] {
        let error = open(&whole[..length]).expect_err("a cut file does not open").to_string();
        assert!(error.contains("no readable HDF5 file") && error.contains("broken.h5"), "{length}: {error}");
    }
    assert!(matches!(open(b"not hdf5 at all"), Err(TrialError::OtherKind { .. })));
    assert!(matches!(TrialFile::open(&dir.path().join("absent.h5")), Err(TrialError::Io { .. })));
    let script = "import sys,h5py\nwith h5py.File(sys.argv[1],'w') as f: f['x']=[1,2]";
    let foreign = dir.path().join("foreign.h5");
    support::run_oracle(script, &[foreign.to_str().unwrap()]);
    assert!(matches!(TrialFile::open(&foreign), Err(TrialError::NotATrial { .. })));
}

/// Alters a copy of the trial through h5py and opens it here.
fn altered(dir: &tempfile::TempDir, deed: &str) -> TrialFile {
    let n = std::fs::read_dir(dir.path()).unwrap().count();
    let path = dir.path().join(format!("altered-{n}.h5"));
    std::fs::copy(dir.path().join("trial.h5"), &path).unwrap();
    let script = format!("import sys,h5py,numpy as np\nf=h5py.File(sys.argv[1],'r+')\n{deed}\nf.close()");
    support::run_oracle(&script, &[path.to_str().unwrap()]);
    TrialFile::open(&path).unwrap()
}

#[test]
fn links_lies_and_wrong_types_inside_a_file_are_refused() {
    let dir = tempfile::tempdir().unwrap();
    trial_in(&dir);
    let external = altered(&dir, "del f['events']; f['events']=h5py.ExternalLink('/etc/passwd','/')");
    assert!(matches!(external.events(), Err(TrialError::Foreign { .. })));
    let soft = altered(&dir, "del f['signals/velocity/time']; f['signals/velocity/time']=h5py.SoftLink('/raw')");
    assert!(matches!(soft.derived("velocity"), Err(TrialError::Foreign { .. })));
    let huge = altered(
        &dir,
        "f['signals/release_line/value'].resize((2**40,)); f['signals/release_line/time'].resize((2**40,))",
    );
    assert!(matches!(huge.signal("release_line"), Err(TrialError::TooLarge { .. })));
    let typed = altered(&dir, "del f['events/time']; f['events/time']=np.array([1,2],dtype='i4')");
    assert!(matches!(typed.events(), Err(TrialError::WrongType { .. })));
    let uneven = altered(&dir, "f['events/kind'].resize((1,))");
    assert!(matches!(uneven.events(), Err(TrialError::Uneven { .. })));
}

#[test]
fn a_text_that_is_no_utf_8_is_read_with_its_damage_to_be_seen() {
    let dir = tempfile::tempdir().unwrap();
    let path = trial_in(&dir);
    let mut bytes = std::fs::read(&path).unwrap();
    let at =
        bytes.windows(8).position(|part| part == b"# north-").expect("the rig file's text lies in the file as it is");
    bytes[at + 2] = 0xff;
    let damaged = dir.path().join("damaged.h5");
    std::fs::write(&damaged, bytes).unwrap();
    let texts = TrialFile::open(&damaged).unwrap().texts_with_digests().unwrap();
    assert!(texts[0].text.text.starts_with("# \u{fffd}orth-"), "{texts:?}");
    assert_ne!(texts[0].sealed, tautrail::trial::text_sha256(&texts[0].text.text));
}

#[test]
fn every_altered_count_shows_in_the_raw_digest() {
    let dir = tempfile::tempdir().unwrap();
    let untouched = TrialFile::open(&trial_in(&dir)).unwrap().raw_digests().unwrap();
    assert!(untouched.iter().all(|digest| digest.sealed == digest.found), "{untouched:?}");
    for deed in [
        "f['raw/winch-node/line'][69999] += 1",
        "f['raw/winch-node/blocks/crc'][3] ^= 1",
        "f['raw/winch-node/rejected/bytes'][0] = 9",
        "f['raw/winch-node/text_lines/text'][0] = 'booted'",
        "f['raw/winch-node/line'].resize((69999,))",
    ] {
        let digests = altered(&dir, deed).raw_digests().unwrap();
        let changed: Vec<_> = digests.iter().filter(|d| d.sealed != d.found).map(|d| d.device.as_str()).collect();
        assert_eq!(changed, ["winch-node"], "{deed}");
    }
}

/// The digest as FORMAT.md defines it, by another hand: h5py, numpy and hashlib.
const RAW_DIGEST_PY: &str = r"
import sys, hashlib, struct, h5py, numpy as np
def text(t): b = t.encode(); return struct.pack('<I', len(b)) + b
def dataset_digest(name, d):
    if d.dtype.kind == 'O':
        code = 'utf8'
        values = b''.join(text(s) for s in ([d.asstr()[()]] if d.shape == () else d.asstr()[:]))
    elif d.dtype == bool:
        code, values = '|b1', d[()].astype('u1').tobytes()
    else:
        little = d.dtype.newbyteorder('<')
        code, values = little.str, d[()].astype(little).tobytes()
    dims = struct.pack('<I', d.ndim) + b''.join(struct.pack('<Q', n) for n in d.shape)
    return hashlib.sha256(text(name) + text(code) + dims + hashlib.sha256(values).digest()).digest()
with h5py.File(sys.argv[1]) as f:
    for device, group in f['raw'].items():
        found = {}
        group.visititems(lambda n, o: found.update({n: dataset_digest(n, o)}) if isinstance(o, h5py.Dataset) else None)
        whole = hashlib.sha256(b''.join(found[n] for n in sorted(found, key=str.encode))).hexdigest()
        print(group.attrs['device'], whole == group.attrs['sha256'])
";

#[test]
fn the_raw_digest_follows_its_written_definition() {
    let dir = tempfile::tempdir().unwrap();
    let path = trial_in(&dir);
    let printed = support::run_oracle(RAW_DIGEST_PY, &[path.to_str().unwrap()]);
    assert_eq!(printed, "shuttle-node True\nwinch-node True\n");
}

/// Walks the file with h5py alone and asserts what design and NeXus (manual, "NXdata", "NXroot": `default`, `signal`,
/// `axes`) promise to viewers.
const READ_ALONE_PY: &str = r"
import sys, h5py, numpy as np
f = h5py.File(sys.argv[1])
assert f.id.get_create_plist().get_version()[0] <= 3
entry = f[f.attrs['default']]
data = entry[entry.attrs['default']]
assert (f.attrs['NX_class'], entry.attrs['NX_class'], data.attrs['NX_class']) == ('NXroot', 'NXentry', 'NXdata')
assert data.attrs['role'] == 'release_line_tension'
value, axes = data[data.attrs['signal']], list(data.attrs['axes'])
assert axes == ['time'] and value.attrs['units'] == 'N' and data['time'].attrs['units'] == 's'
assert value.dims[0][0] == data['time'] and data['time'].is_scale
assert np.array_equal(value.dims[0]['time'][:], np.arange(70000) * 1e-4)
assert np.array_equal(value[:], 700.0 * np.sin(np.arange(70000) * 1e-3)) or np.allclose(value[:], 700.0 * np.sin(np.arange(70000) * 1e-3), rtol=0, atol=1e-9)
assert list(f['events/text'].asstr()[:]) == ['winch-back', 'launch: größer']
assert f['events/text'].dims[0][0] == f['events/time']
assert f['rig/rig.toml'].asstr()[()].startswith('# north-pier, größer')
speed = f['result/launch_speed']
assert (speed[()], speed.attrs['units'], speed.attrs['standard_uncertainty']) == (16.4, 'm/s', 0.02)
line = f['raw/winch-node/line']
assert line[17] == -8388608 and line[18] == 8388607 and line.dtype == '<i4' and line.shape == (70000,)
assert line.shuffle and line.compression == 'gzip' and line.compression_opts == 1 and line.fletcher32
assert 16384 <= line.chunks[0] <= 65536
bad = []
def look(name, o):
    for key in o.attrs:
        if key in ('CLASS', 'NAME'): continue
        kind = h5py.h5a.open(o.id, key.encode()).get_type()
        if isinstance(kind, h5py.h5t.TypeStringID) and not (kind.is_variable_str() and kind.get_cset() == h5py.h5t.CSET_UTF8):
            bad.append((name, key))
    if isinstance(o, h5py.Dataset):
        if o.dtype.kind in 'iufb' and not o.attrs.get('units'): bad.append((name, 'units'))
        if o.dtype.kind == 'S': bad.append((name, 'fixed string'))
        if h5py.h5o.get_info(o.id).mtime if hasattr(h5py.h5o.get_info(o.id), 'mtime') else 0: bad.append((name, 'mtime'))
f.visititems(look)
assert not bad, bad
print('ok')
";

#[test]
fn h5py_alone_finds_signals_units_axes_events_texts_and_results() {
    let dir = tempfile::tempdir().unwrap();
    let path = trial_in(&dir);
    assert_eq!(support::run_oracle(READ_ALONE_PY, &[path.to_str().unwrap()]), "ok\n");
}
