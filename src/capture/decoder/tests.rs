use firmware_protocol::{Channel, Channels, Describe, Encoding, MAX_FRAME_LEN, Stream, Streams, encode};
use proptest::prelude::*;

use super::*;

/// A device that writes frames as firmware would.
struct Device {
    boot_id: u32,
    description_id: u16,
    sequences: [u32; 2],
    next_index: u64,
}

impl Device {
    fn booted(boot_id: u32) -> Self {
        Self { boot_id, description_id: 1, sequences: [0, 0], next_index: 0 }
    }

    fn frame(&mut self, stream: u8, message: &Message<'_>) -> Vec<u8> {
        let sequence = &mut self.sequences[usize::from(stream)];
        let (boot_id, description_id) = (self.boot_id, self.description_id);
        let header = Header { flags: 0, stream, sequence: *sequence, boot_id, description_id };
        *sequence += 1;
        let mut out = vec![0; MAX_FRAME_LEN];
        let len = encode(&header, message, &mut out).unwrap();
        out.truncate(len);
        out
    }

    fn describe(&mut self) -> Vec<u8> {
        self.describe_as(["line", "accel", "encoder", "bridge"])
    }

    fn describe_as(&mut self, [line, accel, encoder, bridge]: [&str; 4]) -> Vec<u8> {
        let channel = |name, encoding: Encoding| Channel {
            name,
            quantity: "force",
            encoding,
            nominal_min: -8_388_608.0,
            nominal_max: 8_388_607.0,
            group_delay_s: 0.0,
            bandwidth_hz: None,
        };
        let channels = [
            channel(line, Encoding::I24),
            channel(accel, Encoding::I16),
            channel(encoder, Encoding::I32),
            channel(bridge, Encoding::F32),
        ];
        let streams = [Stream { id: 1, ticks_per_sample: 100, channels: Channels::given(&channels) }];
        self.frame(
            0,
            &Message::Describe(Describe {
                device_id: 42,
                name: "winch-node",
                firmware: "1",
                tick_rate_hz: 1e6,
                tick_tolerance_ppm: 50.0,
                streams: Streams::given(&streams),
            }),
        )
    }

    /// The same board after a reset, with the boot id it had.
    fn started_again(&self) -> Self {
        Self { boot_id: self.boot_id, description_id: self.description_id, sequences: [0, 0], next_index: 0 }
    }

    /// Two samples: one with the smallest counts, one with minus one everywhere.
    fn block(&mut self) -> Vec<u8> {
        let tick = self.next_index.wrapping_mul(100);
        self.block_sent_at(tick.wrapping_add(250))
    }

    fn block_sent_at(&mut self, sent_tick: u64) -> Vec<u8> {
        let mut samples = vec![0x00, 0x00, 0x80, 0x00, 0x80, 0x00, 0x00, 0x00, 0x80];
        samples.extend_from_slice(&1.5_f32.to_le_bytes());
        samples.extend_from_slice(&[0xFF; 9]);
        samples.extend_from_slice(&(-0.25_f32).to_le_bytes());
        let first_index = self.next_index;
        self.next_index += 2;
        let tick = first_index.wrapping_mul(100);
        let block = firmware_protocol::Block {
            first_index,
            tick,
            sent_tick,
            overruns: 0,
            n_samples: 2,
            sample_len: 13,
            samples: &samples,
        };
        self.frame(1, &Message::Block(block))
    }
}

fn decode_all(decoder: &mut FrameDecoder, bytes: &[u8]) -> Vec<Captured> {
    let mut captured = Vec::new();
    decoder.feed(7, bytes, &mut |what| captured.push(what));
    captured
}

fn indices(captured: &[Captured]) -> Vec<u64> {
    let blocks = captured.iter().filter_map(|what| match what {
        Captured::Block(block) => Some(block.first_index),
        _ => None,
    });
    blocks.collect()
}

fn gaps(captured: &[Captured]) -> Vec<(u64, u64)> {
    let gaps = captured.iter().filter_map(|what| match what {
        Captured::Gap(gap) => Some((gap.first_missing_index, gap.n_missing)),
        _ => None,
    });
    gaps.collect()
}

fn rejections(captured: &[Captured]) -> Vec<(&'static str, Vec<u8>)> {
    let rejected = captured.iter().filter_map(|what| match what {
        Captured::Rejected(rejected) => Some((rejected.reason, rejected.bytes.clone())),
        _ => None,
    });
    rejected.collect()
}

#[test]
fn counts_keep_their_sign_in_every_encoding() {
    let mut device = Device::booted(1);
    let bytes = [device.describe(), device.block()].concat();
    let captured = decode_all(&mut FrameDecoder::new(), &bytes);
    let Some(Captured::Block(block)) = captured.last() else { panic!("no block in {captured:?}") };
    assert_eq!(
        block.counts,
        [
            Counts::Integer(vec![-8_388_608, -1]),
            Counts::Integer(vec![-32_768, -1]),
            Counts::Integer(vec![i32::MIN, -1]),
            Counts::Float(vec![1.5, -0.25]),
        ]
    );
}

#[test]
fn a_lost_block_leaves_a_gap_of_its_samples_and_nothing_else() {
    let mut device = Device::booted(1);
    let mut bytes = [device.describe(), device.block()].concat();
    let _lost_on_the_way = [device.block(), device.block()];
    bytes.extend(device.block());
    let mut decoder = FrameDecoder::new();
    let captured = decode_all(&mut decoder, &bytes);
    assert_eq!(indices(&captured), [0, 6]);
    assert_eq!(gaps(&captured), [(2, 4)]);
    assert_eq!((decoder.counters().missing, decoder.counters().lost_frames), (4, 2));
}

#[test]
fn samples_before_their_description_are_kept_as_bytes_and_covered_by_a_gap() {
    let mut device = Device::booted(1);
    let early = device.block();
    let bytes = [early.clone(), device.block(), device.describe(), device.block()].concat();
    let captured = decode_all(&mut FrameDecoder::new(), &bytes);
    let rejected = rejections(&captured);
    assert_eq!(rejected.len(), 2);
    assert_eq!(rejected[0], (NO_DESCRIPTION, early[1..early.len() - 1].to_vec()));
    assert_eq!((gaps(&captured), indices(&captured)), (vec![(0, 4)], vec![4]));
}

#[test]
fn a_reboot_starts_afresh_and_needs_its_own_description() {
    let (mut before, mut after) = (Device::booted(1), Device::booted(2));
    let bytes = [before.describe(), before.block(), after.block(), after.describe(), after.block()].concat();
    let mut decoder = FrameDecoder::new();
    let captured = decode_all(&mut decoder, &bytes);
    let boots = captured.iter().filter_map(|what| match what {
        Captured::Description(described) => Some(described.boot_id),
        _ => None,
    });
    assert_eq!(boots.collect::<Vec<_>>(), [1, 2]);
    assert_eq!((indices(&captured), gaps(&captured)), (vec![0, 2], vec![(0, 2)]));
    assert_eq!(decoder.counters().lost_frames, 0);
    assert_eq!(decoder.description().map(|described| described.boot_id), Some(2));
}

#[test]
fn a_description_repeated_is_said_once_and_a_changed_one_again() {
    let mut device = Device::booted(1);
    let mut bytes = [device.describe(), device.describe()].concat();
    device.description_id = 2;
    bytes.extend([device.describe(), device.block()].concat());
    let captured = decode_all(&mut FrameDecoder::new(), &bytes);
    let described = captured.iter().filter(|what| matches!(what, Captured::Description(_))).count();
    assert_eq!((described, indices(&captured)), (2, vec![0]));
}

#[test]
fn a_decoder_that_knows_the_device_takes_samples_at_once() {
    let mut device = Device::booted(1);
    let mut first = FrameDecoder::new();
    decode_all(&mut first, &device.describe());
    let mut second = FrameDecoder::knowing(first.description().unwrap().clone());
    assert_eq!(indices(&decode_all(&mut second, &device.block())), [0]);
}

#[test]
fn a_link_lost_inside_a_frame_gives_up_its_bytes_and_later_shows_the_gap() {
    let mut device = Device::booted(1);
    let mut decoder = FrameDecoder::new();
    decode_all(&mut decoder, &[device.describe(), device.block()].concat());
    let cut = device.block();
    let mut captured = decode_all(&mut decoder, &cut[..cut.len() / 2]);
    decoder.link_lost(9, &mut |what| captured.push(what));
    assert_eq!(rejections(&captured), [(CUT_OFF, cut[1..cut.len() / 2].to_vec())]);
    let captured = decode_all(&mut decoder, &device.block());
    assert_eq!((gaps(&captured), indices(&captured)), (vec![(2, 2)], vec![4]));
}

#[test]
fn an_echoed_request_is_told_apart_from_the_device() {
    let mut host = Device { boot_id: 0, description_id: 0, sequences: [0, 0], next_index: 0 };
    let echoed = host.frame(0, &Message::Start);
    let mut device = Device::booted(1);
    let bytes = [device.describe(), echoed, device.block()].concat();
    let captured = decode_all(&mut FrameDecoder::new(), &bytes);
    assert_eq!(rejections(&captured).len(), 1);
    assert_eq!(rejections(&captured)[0].0, FROM_A_HOST);
    assert_eq!(indices(&captured), [0], "the echo does not look like a reboot");
}

#[test]
fn an_index_that_runs_backward_is_refused() {
    let mut device = Device::booted(1);
    let mut bytes = [device.describe(), device.block(), device.block()].concat();
    device.next_index = 2;
    bytes.extend(device.block());
    let captured = decode_all(&mut FrameDecoder::new(), &bytes);
    assert_eq!(indices(&captured), [0, 2]);
    assert_eq!(rejections(&captured)[0].0, BACKWARD);
}

proptest! {
    #[test]
    fn every_byte_is_accounted_for_whatever_comes(reads in prop::collection::vec(prop::collection::vec(any::<u8>(), 0..600), 0..20)) {
        let mut decoder = FrameDecoder::new();
        let mut n_rejected = 0;
        let mut count = |what| {
            if let Captured::Rejected(rejected) = what {
                n_rejected += rejected.bytes.len();
            }
        };
        for read in &reads {
            decoder.feed(0, read, &mut count);
        }
        decoder.link_lost(0, &mut count);
        let n_not_delimiters = reads.iter().flatten().filter(|&&byte| byte != 0).count();
        prop_assert_eq!(n_rejected, n_not_delimiters);
    }

    #[test]
    fn the_cut_of_reads_changes_nothing(cuts in prop::collection::vec(1_usize..40, 1..40)) {
        let mut device = Device::booted(1);
        let mut bytes = device.describe();
        for _ in 0..8 {
            bytes.extend(device.block());
        }
        let whole = decode_all(&mut FrameDecoder::new(), &bytes);
        let mut decoder = FrameDecoder::new();
        let mut pieces = Vec::new();
        let mut rest = &bytes[..];
        for cut in cuts.iter().cycle() {
            let (read, later) = rest.split_at((*cut).min(rest.len()));
            pieces.extend(decode_all(&mut decoder, read));
            rest = later;
            if rest.is_empty() {
                break;
            }
        }
        prop_assert_eq!(pieces, whole);
    }
}

#[test]
fn an_index_beyond_belief_stops_no_stream() {
    let mut device = Device::booted(7);
    let mut decoder = FrameDecoder::new();
    let mut heard = Vec::new();
    let mut feed = |bytes: &[u8]| decoder.feed(1, bytes, &mut |captured| heard.push(captured));
    feed(&device.describe());
    for odd in [u64::MAX - 1, u64::MAX, 1 << 57, 1 << 41] {
        feed(&device.block());
        let next = std::mem::replace(&mut device.next_index, odd.saturating_sub(2));
        feed(&device.block());
        device.next_index = next;
    }
    feed(&device.block());
    let blocks = heard.iter().filter(|captured| matches!(captured, Captured::Block(_))).count();
    let gaps = heard.iter().filter(|captured| matches!(captured, Captured::Gap(_))).count();
    assert_eq!((blocks, gaps), (5, 0));
    assert_eq!(decoder.counters().refused["index beyond belief"], 4);
}

fn reboots(captured: &[Captured]) -> Vec<(u32, RebootSeen)> {
    let reboots = captured.iter().filter_map(|what| match what {
        Captured::Reboot(reboot) => Some((reboot.boot_id, reboot.seen)),
        _ => None,
    });
    reboots.collect()
}

fn boots_of_blocks(captured: &[Captured]) -> Vec<u32> {
    let boots = captured.iter().filter_map(|what| match what {
        Captured::Block(block) => Some(block.boot_id),
        _ => None,
    });
    boots.collect()
}

#[test]
fn blocks_queued_before_a_change_are_read_by_the_description_that_they_name() {
    let mut device = Device::booted(1);
    let mut bytes = device.describe();
    let queued = device.block();
    device.description_id = 2;
    bytes.extend(device.describe_as(["line", "accel", "encoder", "spare"]));
    bytes.extend(queued);
    bytes.extend(device.block());
    let mut decoder = FrameDecoder::new();
    let captured = decode_all(&mut decoder, &bytes);
    assert_eq!((indices(&captured), rejections(&captured).len()), (vec![0, 2], 0));
    let ids = captured.iter().filter_map(|what| match what {
        Captured::Block(block) => Some(block.description_id),
        _ => None,
    });
    assert_eq!(ids.collect::<Vec<_>>(), [1, 2]);
    assert_eq!(decoder.description().map(|described| described.description_id), Some(2));
}

#[test]
fn only_the_last_four_descriptions_can_be_named() {
    let mut device = Device::booted(1);
    let mut bytes = device.describe();
    let queued = device.block();
    for id in 2..=5 {
        device.description_id = id;
        bytes.extend(device.describe());
    }
    bytes.extend(queued);
    let captured = decode_all(&mut FrameDecoder::new(), &bytes);
    let Some(Captured::Rejected(rejected)) = captured.last() else { panic!("{captured:?}") };
    assert_eq!(rejected.reason, NO_DESCRIPTION);
    assert_eq!(rejected.detail, "block of stream 1 with description id 1, described: 2, 3, 4, 5");
}

#[test]
fn a_channel_named_twice_is_refused_by_its_name() {
    let mut device = Device::booted(1);
    let bytes = device.describe_as(["line", "accel", "line", "bridge"]);
    let captured = decode_all(&mut FrameDecoder::new(), &bytes);
    let [Captured::Rejected(rejected)] = &captured[..] else { panic!("{captured:?}") };
    assert_eq!((rejected.reason, rejected.detail.as_str()), ("description names a channel twice", "\"line\""));
}

#[test]
fn a_reboot_under_the_old_id_is_never_joined_to_the_run_before() {
    let mut before = Device::booted(1);
    let mut bytes = before.describe();
    (0..200).for_each(|_| bytes.extend(before.block()));
    let mut after = before.started_again();
    bytes.extend(after.describe());
    (0..300).for_each(|_| bytes.extend(after.block()));
    let captured = decode_all(&mut FrameDecoder::new(), &bytes);
    let [(boot_id, RebootSeen::OldId)] = reboots(&captured)[..] else { panic!("{:?}", reboots(&captured)) };
    assert_ne!(boot_id, 1);
    assert_eq!(boots_of_blocks(&captured), [vec![1; 200], vec![boot_id; 300]].concat());
    assert_eq!((gaps(&captured).len(), rejections(&captured).len()), (0, 0));
    let described: Vec<_> = captured.iter().filter(|what| matches!(what, Captured::Description(_))).collect();
    assert_eq!(described.len(), 2, "the new run has a description of its own");
}

#[test]
fn a_run_under_the_old_id_takes_nothing_from_the_description_before_it() {
    let mut before = Device::booted(1);
    let mut bytes = before.describe();
    (0..200).for_each(|_| bytes.extend(before.block()));
    let mut after = before.started_again();
    bytes.extend([after.block(), after.describe(), after.block()].concat());
    let captured = decode_all(&mut FrameDecoder::new(), &bytes);
    assert_eq!(reboots(&captured).len(), 1);
    assert_eq!(rejections(&captured).iter().map(|(reason, _)| *reason).collect::<Vec<_>>(), [NO_DESCRIPTION]);
    assert_eq!(indices(&captured)[200..], [2]);
}

#[test]
fn a_boot_id_that_comes_again_later_is_another_boot() {
    let mut bytes = Vec::new();
    for boot_id in [1, 2, 1] {
        let mut device = Device::booted(boot_id);
        bytes.extend([device.describe(), device.block()].concat());
    }
    let captured = decode_all(&mut FrameDecoder::new(), &bytes);
    let [(2, RebootSeen::NewId), (third, RebootSeen::IdOfAnEarlierBoot)] = reboots(&captured)[..] else {
        panic!("{:?}", reboots(&captured))
    };
    assert_eq!(boots_of_blocks(&captured), [1, 2, third]);
    assert!(third != 1 && third != 2);
}

#[test]
fn one_lying_tick_at_send_costs_its_block_and_two_are_a_new_start() {
    const S: u64 = 1_000_000;
    let mut device = Device::booted(1);
    let mut bytes = [device.describe(), device.block_sent_at(5 * S)].concat();
    bytes.extend(device.block_sent_at(S));
    bytes.extend([device.block_sent_at(5 * S + 10), device.block_sent_at(5 * S - 500_000)].concat());
    let mut decoder = FrameDecoder::new();
    let captured = decode_all(&mut decoder, &bytes);
    assert_eq!((indices(&captured), gaps(&captured)), (vec![0, 4, 6], vec![(2, 2)]));
    assert_eq!(rejections(&captured)[0].0, SENT_BACKWARD);
    let captured = decode_all(&mut decoder, &[device.block_sent_at(10), device.block_sent_at(20)].concat());
    let [(boot_id, RebootSeen::ClockAnew)] = reboots(&captured)[..] else { panic!("{captured:?}") };
    assert_eq!(boots_of_blocks(&captured), [boot_id], "its description still holds: only the clock began again");
}

#[test]
fn firmware_that_never_counts_its_frames_does_not_reboot() {
    let mut device = Device::booted(1);
    let mut bytes = device.describe();
    for _ in 0..50 {
        device.sequences = [0, 0];
        bytes.extend([device.describe(), device.block()].concat());
    }
    let mut decoder = FrameDecoder::new();
    let captured = decode_all(&mut decoder, &bytes);
    assert_eq!((reboots(&captured), indices(&captured).len()), (vec![], 50));
    assert_eq!(decoder.counters().lost_frames, 0);
}
