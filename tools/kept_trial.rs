//! Makes the small trial file that is kept of each version of the format: `cargo run --example kept-trial -- OUT-DIR`.
//!
//! INVENTED DATA: some hundredths of a second about the release of a virtual launch, with bytes that are no frame and a hole in
//! it. It is packed with `gzip -9n` for tests/archive-files. A file that was kept is never made again; a new version of the format gets a new one.

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a tool that cannot go on stops here")]
#![allow(dead_code, reason = "the support file serves tests too")]

#[path = "../tests/support/journal.rs"]
mod journal_file;

use std::path::PathBuf;
use std::sync::Arc;

use journal_file::{JournalFile, RIG_TEXT, opened};
use tautrail::archive::seal;
use tautrail::journal::{Body, Disk, RealDisk};
use tautrail::link::LinkWhat;
use virtual_rig::performance::{Options, prepare};
use virtual_rig::play::virtual_time::{Delivered, VirtualPlay};

/// Before the release, and after it.
const FROM_S: f64 = -0.03;
const TO_S: f64 = 0.05;
/// Deliveries of the second device that are lost, from the middle on.
const N_LOST: usize = 3;

fn main() {
    let out = PathBuf::from(std::env::args().nth(1).expect("a directory to write into"));
    std::fs::create_dir_all(&out).unwrap();
    let dir = tempfile::tempdir().unwrap();
    let performance = prepare(&Options { pace: 0.1, ..Options::default() }).unwrap();
    let mut play = VirtualPlay::new(&performance).unwrap();
    let deliveries: Vec<_> = play.by_ref().map(|delivery| delivery.unwrap()).collect();
    let release = play.truth().events.iter().find(|event| event.kind == "hook-opens").unwrap().t_s;
    let release_ns = play.scenario_zero_host_ns() + (release * 1e9) as i64;
    let at = |from_release_s: f64| release_ns + (from_release_s * 1e9) as i64;
    let mut file = JournalFile::begin(dir.path(), &RIG_TEXT);
    let (mut first, mut last_ns, mut n_lost, mut spoilt) = (None, 0, 0, false);
    // A second ahead of the trial: the descriptions in force and the clocks.
    for delivery in deliveries.into_iter().filter(|delivery| (at(-1.2)..at(TO_S)).contains(&delivery.host_ns)) {
        let (host_ns, device) = (delivery.host_ns, delivery.device as u16);
        let within = host_ns >= at(FROM_S);
        let seq = match delivery.what {
            Delivered::Bytes(_) if within && device == 1 && host_ns > at(-0.005) && n_lost < N_LOST => {
                n_lost += 1;
                continue;
            }
            Delivered::Bytes(bytes) => file.bytes(host_ns, device, bytes),
            Delivered::TimeRequested { token } => {
                file.add(host_ns, device, Body::Link(LinkWhat::TimeRequested { token }))
            }
            Delivered::Down | Delivered::Up => continue,
        };
        if within && first.is_none() {
            file.open_trial(host_ns, seq, host_ns);
            first = Some(seq);
        }
        if within && !spoilt && host_ns > release_ns {
            file.clocks(host_ns);
            file.bytes(host_ns, 0, b"\0no frame\0".to_vec());
            spoilt = true;
        }
        last_ns = host_ns;
    }
    file.close_trial(last_ns);
    file.save();
    let (reader, range) = opened(dir.path());
    let disk: Arc<dyn Disk> = Arc::new(RealDisk);
    let sealed = seal(&reader, &range, &out, &disk).unwrap();
    println!(
        "{}: {} samples, {} missing, raw sha256 {}",
        sealed.path.display(),
        sealed.n_samples,
        sealed.n_missing,
        sealed.raw_sha256
    );
}
