//! What an instrument prints, cut into reads anyhow: nothing panics, nothing is handed out that did not come, readings
//! are finite numbers, and their indices and ticks rise.
//!
//! First byte: which instrument; second: bytes of a read; the rest is the stream.
#![no_main]

use std::sync::LazyLock;

use fuzz::capture::{Block, Captured, Counts, DeviceDecoder};
use fuzz::rig::{Checked, Device, check};

const INSTRUMENTS: [&str; 4] = [
    r#"pattern = '^(ST|US),[+-] *(?P<force>[+-]? *[0-9.]+) kg$'
interval = "12.5 ms"
column = [{ name = "force", unit = "kgf" }]"#,
    r##"separator = ","
fields = 3
interval = "10 ms"
time_field = 1
time_unit = "ms"
time_wrap = 65536
header_lines = 1
skip_prefix = "#"
column = [{ name = "force", field = 3, unit = "N" }]"##,
    r#"separator = "spaces"
fields = 2
interval = "100 ms"
column = [{ name = "force", field = 1, unit = "N" }]"#,
    r#"separator = ";"
fields = 2
interval = "10 ms"
time_field = 2
time_unit = "us"
time_wrap = 4294967296
column = [{ name = "force", field = 1, unit = "kN" }]"#,
];

static DEVICES: LazyLock<Vec<Device>> = LazyLock::new(|| INSTRUMENTS.iter().map(|text| device(text)).collect());

/// The rehearsal's rig with this one instrument.
fn device(text: &str) -> Device {
    let rig = include_str!("../../../rehearsal/north-pier.toml").split("[[device]]").next().unwrap_or_default();
    let rig = format!(
        "{rig}\n[[device]]\nname = \"gauge\"\nport = \"ports/gauge\"\nbaud = 9600\nprotocol = \"text\"\n[device.text]\n{text}\n\
         [[channel]]\nname = \"line\"\ndevice = \"gauge\"\ndevice_channel = \"force\"\nrole = \"release_line_tension\"\n\
         [channel.calibration]\nwithout_record = true\nzero_uncertainty = \"0.5 N\"\nscale_uncertainty = \"0.1 %\"\n"
    );
    let Checked { rig, findings } = check(&rig);
    rig.unwrap_or_else(|| panic!("{findings:#?}")).devices.remove(0)
}

libfuzzer_sys::fuzz_target!(|bytes: &[u8]| {
    let [which, read_len, stream @ ..] = bytes else { return };
    let mut decoder = DeviceDecoder::of(&DEVICES[usize::from(*which) % DEVICES.len()]);
    let (mut n_handed_out, mut last) = (0, None);
    let mut take = |captured: Captured| match captured {
        Captured::Text { text, .. } => n_handed_out += text.chars().count(), // broken UTF-8 shows as one letter a byte or less
        Captured::Rejected(rejected) => n_handed_out += rejected.bytes.len(),
        Captured::Block(block) => last = Some(follows(last.take(), block)),
        _ => {}
    };
    let mut host_ns = 1_000_000_000;
    for read in stream.chunks(usize::from(*read_len) + 1) {
        host_ns += 1_000_000 * i64::from(*read_len);
        decoder.feed(host_ns, read, &mut take);
    }
    decoder.link_lost(host_ns, &mut take);
    assert!(n_handed_out <= stream.len(), "{n_handed_out} bytes out of {}", stream.len());
});

fn follows(last: Option<Block>, block: Block) -> Block {
    for counts in &block.counts {
        let Counts::Float(values) = counts else { panic!("text gives floats") };
        assert!(values.iter().all(|value| value.is_finite()), "{values:?}");
    }
    if let Some(last) = last.filter(|last| last.boot_id == block.boot_id) {
        assert!(last.first_index + u64::from(last.n_samples) <= block.first_index, "{last:?} {block:?}");
        assert!(last.first_tick <= block.first_tick, "{last:?} {block:?}");
    }
    block
}
