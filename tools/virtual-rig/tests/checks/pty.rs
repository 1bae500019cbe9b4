//! The rig on ptys in real time, heard through the slaves' paths as any host would.

use crate::host::{Heard, heard};
use firmware_protocol::{Header, MAX_FRAME_LEN, Message, encode};
use std::error::Error;
use std::fs::OpenOptions;
use std::io::{Read, Write};
use std::path::Path;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::thread;
use std::time::Duration;
use virtual_rig::performance::{Options, prepare};
use virtual_rig::play::pty::{PlayError, PtySettings, monotonic_ns, play};
use virtual_rig::truth::Truth;

const DEVICES: [&str; 2] = ["winch-node", "shuttle-node"];

fn request(message: &Message) -> Vec<u8> {
    let mut frame = vec![0; MAX_FRAME_LEN];
    let n_bytes = encode(&Header::default(), message, &mut frame).unwrap_or(0);
    frame.truncate(n_bytes);
    frame
}

/// Listens to one device until `over`, opening its port again whenever it is lost.
fn listen(port: &Path, over: &AtomicBool) -> Vec<(i64, Vec<u8>)> {
    let mut reads = Vec::new();
    while !over.load(Ordering::Relaxed) {
        thread::sleep(Duration::from_millis(5));
        let Ok(mut line) = OpenOptions::new().read(true).write(true).open(port) else { continue };
        if line.write_all(&request(&Message::DescribeRequest)).is_err()
            || line.write_all(&request(&Message::Start)).is_err()
        {
            continue;
        }
        let mut buffer = [0; 4096];
        while let Ok(n_bytes @ 1..) = line.read(&mut buffer) {
            reads.push((monotonic_ns(), buffer[..n_bytes].to_vec()));
        }
    }
    reads
}

/// Plays on ptys with `faults` and returns the truth and what each device's host heard.
fn played(faults: &[&str]) -> Result<(Truth, Vec<Heard>), Box<dyn Error>> {
    let dir = std::env::temp_dir().join(format!("virtual-rig-{}-{}", std::process::id(), monotonic_ns()));
    let faults = faults.iter().map(|text| text.parse()).collect::<Result<_, _>>()?;
    let performance = prepare(&Options { pace: 0.05, faults, ..Options::default() })?;
    let over = Arc::new(AtomicBool::new(false));
    let hosts: Vec<_> = DEVICES
        .iter()
        .map(|name| (dir.join("ports").join(name), Arc::clone(&over)))
        .map(|(port, over)| thread::spawn(move || listen(&port, &over)))
        .collect();
    let stop = Arc::new(AtomicBool::new(false));
    let settings = PtySettings { dir: dir.clone(), wait_for_start: Duration::from_secs(20), stop };
    let truth = play(&performance, &settings);
    over.store(true, Ordering::Relaxed);
    let written = std::fs::read_to_string(dir.join("truth.json"))?;
    assert!(written.contains("\"CLOCK_MONOTONIC\""));
    let mut all_heard = Vec::new();
    for host in hosts {
        let reads = host.join().map_err(|_| "a listener panicked")?;
        all_heard.push(heard(reads.iter().map(|(host_ns, bytes)| (*host_ns, &bytes[..]))));
    }
    std::fs::remove_dir_all(&dir)?;
    Ok((truth?, all_heard))
}

fn checksums(heard: &Heard) -> Vec<u32> {
    heard.blocks.iter().map(|block| block.crc).collect()
}

#[test]
fn on_ptys_every_block_that_the_truth_names_comes_and_no_other() {
    let (truth, all_heard) = played(&["winch-node:stall@r-0.5+0.3", "shuttle-node:batch=16"]).unwrap();
    for (device, heard) in truth.devices.iter().zip(&all_heard) {
        let named: Vec<u32> = device.streams[0].blocks.iter().map(|block| block.3).collect();
        assert!(named.len() > 300, "{}: {} blocks", device.name, named.len());
        assert!(checksums(heard) == named, "{}: {} came of {}", device.name, heard.blocks.len(), named.len());
    }
}

#[test]
fn on_ptys_a_pulled_cable_hangs_up_and_the_port_comes_back() {
    let (truth, all_heard) = played(&["winch-node:cable-pull@r-0.5+0.3"]).unwrap();
    let named: Vec<u32> = truth.devices[0].streams[0].blocks.iter().map(|block| block.3).collect();
    let came = checksums(&all_heard[0]);
    assert!(came.iter().all(|crc| named.contains(crc)), "a block came that the truth does not name");
    // What stood unread in the pty at the hang-up is gone: 4 kB hold six blocks.
    assert!(named.len() - came.len() <= 12, "{} of {} blocks came", came.len(), named.len());
    let blocks = &all_heard[0].blocks;
    let gaps = blocks.windows(2).filter(|pair| pair[1].first_index > pair[0].first_index + 100).count();
    assert_eq!(gaps, 1);
}

#[test]
fn on_ptys_a_rig_that_nobody_starts_gives_up_and_says_so() {
    let dir = std::env::temp_dir().join(format!("virtual-rig-{}-alone", std::process::id()));
    let performance = prepare(&Options { pace: 0.05, ..Options::default() }).unwrap();
    let stop = Arc::new(AtomicBool::new(false));
    let settings = PtySettings { dir: dir.clone(), wait_for_start: Duration::from_millis(50), stop };
    let error = play(&performance, &settings).unwrap_err();
    assert!(matches!(error, PlayError::NobodyCame { .. }), "{error}");
    std::fs::remove_dir_all(&dir).unwrap();
}
