//! Spoken to directly: every request is obeyed.

use std::fs::File;
use std::io::{ErrorKind, Read, Write};
use std::time::{Duration, Instant};

use firmware_protocol::{
    Deframed, Deframer, Frame, Header, MAX_COBS_LEN, MAX_FRAME_LEN, Message, SetRate, TimeRequest, decode, encode,
};
use rustix::fs::{Mode, OFlags};
use rustix::termios::{OptionalActions, tcgetattr, tcsetattr};
use tautrail::capture::{Captured, DeviceDecoder, DeviceDescription};

use crate::board::Board;
use crate::daemon_process::PATIENCE;

/// The host's side of one port.
struct Host {
    port: File,
    decoder: DeviceDecoder,
    heard: Vec<Captured>,
    deframer: Deframer<[u8; MAX_COBS_LEN]>,
    /// Descriptions that came, also those that say nothing new.
    n_described: usize,
}

impl Host {
    fn open(board: &Board) -> Self {
        let flags = OFlags::RDWR | OFlags::NOCTTY | OFlags::NONBLOCK | OFlags::CLOEXEC;
        let port = rustix::fs::open(&board.port, flags, Mode::empty()).unwrap();
        let mut settings = tcgetattr(&port).unwrap();
        settings.make_raw();
        tcsetattr(&port, OptionalActions::Now, &settings).unwrap();
        let (decoder, deframer) = (DeviceDecoder::new(), Deframer::new([0; MAX_COBS_LEN]));
        Self { port: port.into(), decoder, heard: Vec::new(), deframer, n_described: 0 }
    }

    fn ask(&mut self, message: &Message<'_>) {
        let mut frame = [0; MAX_FRAME_LEN];
        let n = encode(&Header::default(), message, &mut frame).unwrap();
        self.port.write_all(&frame[..n]).unwrap();
    }

    /// Listens until something fits; keeps asking once a second, for the emulator notices a late opening late.
    #[track_caller]
    fn wait_for<T>(&mut self, what: &str, ask: &Message<'_>, fits: impl Fn(&Captured) -> Option<T>) -> T {
        let deadline = Instant::now() + PATIENCE;
        let mut ask_at = Instant::now();
        loop {
            if Instant::now() >= ask_at {
                self.ask(ask);
                ask_at += Duration::from_secs(1);
            }
            self.listen();
            if let Some(found) = std::mem::take(&mut self.heard).iter().find_map(&fits) {
                return found;
            }
            assert!(Instant::now() < deadline, "{what} did not come");
        }
    }

    fn listen(&mut self) {
        let mut buffer = [0; 4096];
        match self.port.read(&mut buffer) {
            Ok(n) => {
                let heard = &mut self.heard;
                self.decoder.feed(0, &buffer[..n], &mut |captured| heard.push(captured));
                self.count_descriptions(&buffer[..n]);
            }
            Err(error) if error.kind() == ErrorKind::WouldBlock => std::thread::sleep(Duration::from_millis(2)),
            Err(error) => panic!("the board's port: {error}"),
        }
    }
}

fn description(captured: &Captured) -> Option<DeviceDescription> {
    if let Captured::Description(description) = captured { Some(description.clone()) } else { None }
}

fn block_of(stream: u8) -> impl Fn(&Captured) -> Option<tautrail::capture::Block> {
    move |captured| match captured {
        Captured::Block(block) if block.stream == stream => Some(block.clone()),
        _ => None,
    }
}

fn reply_to(token: u32) -> impl Fn(&Captured) -> Option<(u64, u64)> {
    move |captured| match captured {
        Captured::TimeReply(reply) if reply.token == token => Some((reply.received_tick, reply.sent_tick)),
        _ => None,
    }
}

#[test]
fn the_board_describes_itself_streams_and_tells_its_time() {
    let board = Board::boot(0x0B00_7001);
    let mut host = Host::open(&board);
    let described = host.wait_for("a description", &Message::DescribeRequest, description);
    assert_eq!((described.name.as_str(), described.boot_id), ("bench-node", 0x0B00_7001));
    assert_eq!(described.streams.iter().map(|stream| stream.ticks_per_sample).collect::<Vec<_>>(), [12_500, 50_000]);

    let fast = host.wait_for("a block of stream 1", &Message::Start, block_of(1));
    assert_eq!(fast.first_tick, fast.first_index * 12_500);
    let slow = host.wait_for("a block of stream 2", &Message::Start, block_of(2));
    assert_eq!((slow.first_tick, slow.description_id), (slow.first_index * 50_000, 1));

    let first = host.wait_for("a time reply", &Message::TimeRequest(TimeRequest { token: 1 }), reply_to(1));
    let second = host.wait_for("a time reply", &Message::TimeRequest(TimeRequest { token: 2 }), reply_to(2));
    assert!(first.0 <= first.1 && first.1 <= second.0 && second.0 <= second.1, "{first:?} {second:?}");

    // Nobody asks for a while: it repeats its description all the same, a second apart.
    let since = Instant::now();
    host.n_described = 0;
    while host.n_described < 2 {
        host.listen();
        assert!(since.elapsed() < PATIENCE, "the description is not repeated unasked");
    }
    assert!(host.decoder.counters().refused.is_empty(), "{:?}", host.decoder.counters());
}

#[test]
fn the_board_follows_a_rate_it_can_and_is_silent_when_told_to_stop() {
    let board = Board::boot(0x0B00_7002);
    let mut host = Host::open(&board);
    host.wait_for("a description", &Message::DescribeRequest, description);
    host.wait_for("a block", &Message::Start, block_of(1));
    let faster = Message::SetRate(SetRate { stream: 1, ticks_per_sample: 6_250 });
    let changed = host.wait_for("another description", &faster, description);
    assert_eq!((changed.description_id, changed.streams[0].ticks_per_sample), (2, 6_250));
    let block = host.wait_for("a block at the new rate", &Message::Start, block_of(1));
    assert_eq!(block.description_id, 2);
    let too_fast = Message::SetRate(SetRate { stream: 1, ticks_per_sample: 1 });
    host.ask(&too_fast);
    host.wait_for("an answer after the refused rate", &Message::TimeRequest(TimeRequest { token: 3 }), reply_to(3));
    assert_eq!(
        host.decoder.description().map(|described| described.description_id),
        Some(2),
        "a rate it cannot follow"
    );

    // A time reply comes after what was on its way when it stopped; another one after silence.
    host.ask(&Message::Stop);
    host.wait_for("a time reply", &Message::TimeRequest(TimeRequest { token: 4 }), reply_to(4));
    let n_blocks_after = host.wait_in_silence();
    assert_eq!(n_blocks_after, 0, "blocks after stop");
    let again = host.wait_for("a block after a new start", &Message::Start, block_of(1));
    assert!(again.first_index > block.first_index, "indices go on over stop and start");
    assert!(host.decoder.counters().refused.is_empty(), "{:?}", host.decoder.counters());
}

impl Host {
    fn count_descriptions(&mut self, mut bytes: &[u8]) {
        while let Some(piece) = self.deframer.next_piece(&mut bytes) {
            if let Deframed::Frame(cobs) = piece
                && let Ok(Frame { message: Message::Describe(_), .. }) = decode(cobs)
            {
                self.n_described += 1;
            }
        }
    }

    /// Ten time requests answered, some hundred milliseconds; counts the blocks that came meanwhile.
    fn wait_in_silence(&mut self) -> usize {
        let mut n_blocks = 0;
        for token in 100..110 {
            let deadline = Instant::now() + PATIENCE;
            self.ask(&Message::TimeRequest(TimeRequest { token }));
            let mut answered = false;
            while !answered {
                self.listen();
                answered = self.heard.iter().any(|captured| reply_to(token)(captured).is_some());
                assert!(Instant::now() < deadline, "no time reply");
            }
            n_blocks += self.heard.drain(..).filter(|captured| matches!(captured, Captured::Block(_))).count();
            std::thread::sleep(Duration::from_millis(30));
        }
        n_blocks
    }
}
