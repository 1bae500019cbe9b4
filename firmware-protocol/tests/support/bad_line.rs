//! A line that turns bits over: frames are sent through it, and what comes out is compared with what went in.

use firmware_protocol::{
    Block, Deframed, Deframer, Frame, Header, MAX_COBS_LEN, MAX_FRAME_LEN, Message, decode, encode,
};

/// Seeded: xorshift64* (Vigna 2016, from memory).
pub struct Random(pub u64);

impl Random {
    fn next(&mut self) -> u64 {
        self.0 ^= self.0 >> 12;
        self.0 ^= self.0 << 25;
        self.0 ^= self.0 >> 27;
        self.0.wrapping_mul(0x2545_F491_4F6C_DD1D)
    }

    fn below(&mut self, limit: u64) -> u64 {
        (self.next() >> 16) % limit
    }

    /// Bits until the next one that is damaged: geometrically distributed.
    fn bits_to_damage(&mut self, rate: f64) -> u64 {
        let uniform = (self.next() >> 11) as f64 / (1_u64 << 53) as f64;
        ((1.0 - uniform).ln() / (-rate).ln_1p()) as u64
    }
}

/// What went through a line, and what became of it.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
pub struct Tally {
    pub bytes: usize,
    pub frames: usize,
    /// Frames of which a bit was turned over, delimiters included.
    pub touched: usize,
    pub accepted: usize,
    /// Accepted though touched: only a delimiter was, and what it said came through whole.
    pub accepted_touched: usize,
    /// Accepted, but not what was sent. Must stay 0.
    pub accepted_damaged: usize,
    /// Not touched, and not accepted. Must stay 0.
    pub lost_untouched: usize,
}

impl Tally {
    fn add(&mut self, more: Self) {
        self.bytes += more.bytes;
        self.frames += more.frames;
        self.touched += more.touched;
        self.accepted += more.accepted;
        self.accepted_touched += more.accepted_touched;
        self.accepted_damaged += more.accepted_damaged;
        self.lost_untouched += more.lost_untouched;
    }
}

/// Sends at least `n_bytes` of frames through a line of this bit error rate.
pub fn sweep(random: &mut Random, n_bytes: usize, bit_error_rate: f64) -> Tally {
    let mut tally = Tally::default();
    while tally.bytes < n_bytes {
        let mut sent = Sent::some(random, 2000);
        sent.damage(random, bit_error_rate);
        tally.add(sent.received());
    }
    tally
}

/// A stream of frames, each with its place and the samples it carries.
struct Sent {
    bytes: Vec<u8>,
    frames: Vec<SentFrame>,
}

struct SentFrame {
    from: usize,
    to: usize,
    samples: Vec<u8>,
    is_touched: bool,
    came_through: bool,
}

impl SentFrame {
    fn header(at: usize) -> Header {
        Header { flags: 0, stream: 1, sequence: at as u32, boot_id: 0xB007, description_id: 1 }
    }

    fn block(&self, at: usize) -> Block<'_> {
        let (first_index, samples) = (at as u64 * 100, &self.samples[..]);
        let (tick, sent_tick) = (first_index * 100, first_index * 100 + 77);
        Block {
            first_index,
            tick,
            sent_tick,
            overruns: 0,
            n_samples: (samples.len() / 6) as u16,
            sample_len: 6,
            samples,
        }
    }
}

impl Sent {
    /// Blocks of 1 to 100 samples, a quarter of them mostly zeros.
    fn some(random: &mut Random, n_frames: usize) -> Self {
        let mut sent = Self { bytes: Vec::new(), frames: Vec::new() };
        for at in 0..n_frames {
            let n_samples = random.below(100) + 1;
            let sparse = random.below(4) == 0;
            let byte = |random: &mut Random| if sparse && random.below(8) != 0 { 0 } else { random.next() as u8 };
            let samples: Vec<u8> = (0..n_samples * 6).map(|_| byte(random)).collect();
            let from = sent.bytes.len();
            let mut frame = SentFrame { from, to: 0, samples, is_touched: false, came_through: false };
            let mut out = [0; MAX_FRAME_LEN];
            let len = encode(&SentFrame::header(at), &Message::Block(frame.block(at)), &mut out).unwrap();
            sent.bytes.extend_from_slice(&out[..len]);
            frame.to = from + len;
            sent.frames.push(frame);
        }
        sent
    }

    fn damage(&mut self, random: &mut Random, bit_error_rate: f64) {
        let mut bit = random.bits_to_damage(bit_error_rate);
        let mut frame = 0;
        while let Some(byte) = self.bytes.get_mut((bit / 8) as usize) {
            *byte ^= 1 << (bit % 8);
            while self.frames[frame].to <= (bit / 8) as usize {
                frame += 1;
            }
            assert!(self.frames[frame].from <= (bit / 8) as usize);
            self.frames[frame].is_touched = true;
            bit += 1 + random.bits_to_damage(bit_error_rate);
        }
    }

    fn received(mut self) -> Tally {
        let mut tally = Tally { bytes: self.bytes.len(), frames: self.frames.len(), ..Tally::default() };
        let mut deframer = Deframer::new([0; MAX_COBS_LEN]);
        for mut read in self.bytes.chunks(1021) {
            while let Some(piece) = deframer.next_piece(&mut read) {
                let Deframed::Frame(cobs) = piece else { continue };
                let Ok(frame) = decode(cobs) else { continue };
                tally.accepted += 1;
                match self.frames.get_mut(frame.header.sequence as usize) {
                    Some(sent) if is_what_was_sent(sent, &frame) => sent.came_through = true,
                    _ => tally.accepted_damaged += 1,
                }
            }
        }
        let count = |of: fn(&SentFrame) -> bool| self.frames.iter().filter(|frame| of(frame)).count();
        tally.touched = count(|frame| frame.is_touched);
        tally.accepted_touched = count(|frame| frame.is_touched && frame.came_through);
        tally.lost_untouched = count(|frame| !frame.is_touched && !frame.came_through);
        tally
    }
}

/// Every field of it, and for the first time.
fn is_what_was_sent(sent: &SentFrame, frame: &Frame<'_>) -> bool {
    let at = frame.header.sequence as usize;
    !sent.came_through && frame.header == SentFrame::header(at) && frame.message == Message::Block(sent.block(at))
}
