//! A whole scenario, worked out and played in virtual time.

use std::error::Error;
use virtual_rig::device::catalogue::SensorSet;
use virtual_rig::performance::{Options, Performance, PrepareError, prepare};
use virtual_rig::play::virtual_time::{Delivered, Delivery, VirtualPlay};

fn nominal(seed: u64) -> Result<Performance, PrepareError> {
    prepare(&Options { seed, pace: 0.1, ..Options::default() })
}

/// Every kind of randomness at once.
fn noisy(seed: u64) -> Result<Performance, Box<dyn Error>> {
    let faults = ["all:bit-errors=1e-6", "winch-node:garbage@r-1+0.2", "shuttle-node:reboot@r-0.5+0.2", "all:batch=16"];
    let faults = faults.into_iter().map(str::parse).collect::<Result<_, _>>()?;
    Ok(prepare(&Options { seed, pace: 0.1, sensors: SensorSet::Full, faults, ..Options::default() })?)
}

fn reads(seed: u64) -> Result<Vec<Delivery>, Box<dyn Error>> {
    Ok(VirtualPlay::new(&noisy(seed)?)?.collect::<Result<_, _>>()?)
}

#[test]
fn the_same_seed_gives_the_same_reads_and_another_seed_does_not() {
    let (first, again, other) = (reads(1).unwrap(), reads(1).unwrap(), reads(2).unwrap());
    assert!(first == again, "two plays of seed 1 differ");
    assert!(first != other, "seeds 1 and 2 give the same reads");
}

#[test]
fn the_nominal_launch_meets_its_plan_and_closes_its_energy() {
    let run = nominal(1).unwrap().launch.unwrap();
    let separation = run.at_separation.unwrap();
    let speed_mps = (2.0 * separation.energy.payload_j / 6.2).sqrt();
    assert!((15.0..18.0).contains(&speed_mps), "launch speed {speed_mps} m/s");
    assert!(run.energy_error < 1e-6, "energy closes to {}", run.energy_error);
}

#[test]
fn every_device_is_read_in_the_order_of_time_and_logs_every_block() {
    let performance = nominal(3).unwrap();
    let mut play = VirtualPlay::new(&performance).unwrap();
    let mut last_ns = 0;
    let mut n_frames = 0;
    for delivery in play.by_ref() {
        let delivery = delivery.unwrap();
        assert!(delivery.host_ns >= last_ns);
        last_ns = delivery.host_ns;
        n_frames += usize::from(matches!(delivery.what, Delivered::Bytes(_)));
    }
    let truth = play.truth();
    let n_blocks: usize = truth.devices.iter().map(|device| device.streams[0].blocks.len()).sum();
    assert!(n_blocks > 400 && n_blocks < n_frames, "{n_blocks} blocks in {n_frames} frames");
    for device in &truth.devices {
        let blocks = &device.streams[0].blocks;
        assert!(blocks.windows(2).all(|pair| pair[1].1 == pair[0].1 + u64::from(pair[0].2)), "{}", device.name);
    }
}
