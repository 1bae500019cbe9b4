//! What a device says of itself, by SPEC.md of `firmware-protocol`, section 4.

use crate::host::heard;
use virtual_rig::device::Device;
use virtual_rig::performance::{Options, prepare};

#[test]
fn a_running_device_describes_itself_once_a_second_unasked() {
    let performance = prepare(&Options { pace: 0.15, ..Options::default() }).expect("a performance");
    let mut device = Device::boot(0, &performance, 0);
    device.start(1);
    let mut said = Vec::new();
    for host_ns in (0..5_000_000_000).step_by(5_000_000) {
        while let Some(outgoing) = device.next(host_ns, |t_s| performance.trajectory.at(t_s)).expect("a frame") {
            said.push((host_ns, outgoing.bytes));
        }
    }
    let heard = heard(said.iter().map(|(host_ns, bytes)| (*host_ns, &bytes[..])));
    assert_eq!((heard.device_ids.len(), heard.n_refused), (5, 0));
    assert!(heard.blocks.len() > 450, "{} blocks in five seconds", heard.blocks.len());
}
