//! A device written in Python from SPEC.md alone, recorded by the real daemon.

use std::collections::BTreeMap;
use std::io::{BufRead, BufReader};
use std::path::{Path, PathBuf};
use std::process::{Child, ChildStdout, Command, Stdio};

use tautrail::trial::{BlockRow, TrialFile};

use crate::place::Place;

const DEVICE: &str = "spec-node";

/// Sequence, first index, samples, checksum.
type SentBlock = (u32, u64, u32, u32);

struct SpecDevice {
    process: Child,
    port: PathBuf,
    told: BufReader<ChildStdout>,
}

impl SpecDevice {
    fn start() -> Self {
        let program = Path::new(env!("CARGO_MANIFEST_DIR")).join("tools/oracles/spec_device.py");
        let mut python = Command::new("python3");
        let mut process = python.arg(program).stdin(Stdio::piped()).stdout(Stdio::piped()).spawn().unwrap();
        let mut told = BufReader::new(process.stdout.take().unwrap());
        let mut port = String::new();
        told.read_line(&mut port).unwrap();
        Self { process, port: port.trim().into(), told }
    }

    /// Ends it; what it sent, by stream.
    fn stop(mut self) -> BTreeMap<u8, Vec<SentBlock>> {
        drop(self.process.stdin.take());
        let mut sent = String::new();
        self.told.read_line(&mut sent).unwrap();
        serde_json::from_str(&sent).unwrap_or_else(|error| panic!("{error} in {sent:?}"))
    }
}

impl Drop for SpecDevice {
    fn drop(&mut self) {
        // Ended already, most likely.
        let _ = self.process.kill();
        let _ = self.process.wait();
    }
}

#[test]
fn a_device_written_from_the_document_alone_is_recorded_whole() {
    let device = SpecDevice::start();
    let place = Place::new(DEVICE);
    place.plug_in(&device.port);
    let mut daemon = place.start_daemon();
    daemon.wait_for("link", "is open");
    daemon.wait_for("trial", "opens");
    daemon.wait_for("trial", "closes");
    daemon.wait_for("seal", "is sealed");
    assert_eq!(daemon.stop(), Some(0));
    let sent = device.stop();

    let trial = TrialFile::open(&place.trial()).unwrap();
    let record = trial.device(DEVICE).unwrap();
    assert_eq!(record.rejected, [], "nothing is refused");
    assert_eq!(record.gaps, []);
    assert_eq!(record.descriptions[0].firmware, "spec_device.py (invented data)");
    assert!(record.statuses.iter().all(|status| status.temperature_c == 20.0 && status.supply_v.is_nan()));
    let (_, exchanges) = trial.clock(DEVICE).unwrap();
    assert!(exchanges.len() >= 20, "{} time replies", exchanges.len());
    let blocks = trial.blocks(DEVICE).unwrap();
    for (stream, least) in [(1, 200), (2, 200)] {
        let recorded: Vec<SentBlock> = blocks.iter().filter(|block| block.stream == stream).map(as_sent).collect();
        assert!(recorded.len() > least, "{} blocks of stream {stream}", recorded.len());
        let first = sent[&stream].iter().position(|block| *block == recorded[0]).expect("a block that was sent");
        assert_eq!(recorded[..], sent[&stream][first..first + recorded.len()], "stream {stream}");
    }
}

fn as_sent(block: &BlockRow) -> SentBlock {
    (block.sequence, block.first_index, block.n_samples, block.crc)
}
