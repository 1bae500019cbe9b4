//! A byte stream as it may come from a port: every byte that is no delimiter is handed out once, and no frame panics.
#![no_main]

use firmware_protocol::{Deframed, Deframer, MAX_COBS_LEN, decode};

libfuzzer_sys::fuzz_target!(|bytes: &[u8]| {
    let mut deframer = Deframer::new([0; MAX_COBS_LEN]);
    let (mut rest, mut n_handed_out) = (bytes, 0);
    while let Some(piece) = deframer.next_piece(&mut rest) {
        match piece {
            Deframed::Frame(cobs) => {
                n_handed_out += cobs.len();
                let _either_way = decode(cobs);
            }
            Deframed::Junk(junk) => n_handed_out += junk.len(),
        }
    }
    n_handed_out += deframer.take_partial().len();
    assert_eq!(n_handed_out, bytes.iter().filter(|byte| **byte != 0).count());
});
