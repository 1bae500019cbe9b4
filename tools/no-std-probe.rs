//! Every entry point of firmware-protocol behind C names, without std: see `check-no-std`.
#![no_std]

use core::slice;

use firmware_protocol::{Deframed, Deframer, Header, MAX_COBS_LEN, Message, decode, encode};

#[panic_handler]
fn panic(_: &core::panic::PanicInfo<'_>) -> ! {
    loop {}
}

/// # Safety
/// `payload` and `out` point to that many bytes.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn probe_encode(kind: u8, payload: *const u8, len: usize, out: *mut u8, out_len: usize) -> usize {
    // SAFETY: the caller's promise.
    let (payload, out) = unsafe { (slice::from_raw_parts(payload, len), slice::from_raw_parts_mut(out, out_len)) };
    let Ok(text) = core::str::from_utf8(payload) else { return 0 };
    let message = if kind == 6 { Message::Text(text) } else { Message::Unknown { kind, payload } };
    encode(&Header::default(), &message, out).unwrap_or(0)
}

/// # Safety
/// `bytes` points to `len` bytes.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn probe_decode(bytes: *mut u8, len: usize) -> usize {
    // SAFETY: the caller's promise.
    let bytes = unsafe { slice::from_raw_parts_mut(bytes, len) };
    let mut out = [0; 2100];
    match decode(bytes) {
        Ok(frame) => encode(&frame.header, &frame.message, &mut out).unwrap_or(0),
        Err(_) => 0,
    }
}

/// # Safety
/// `bytes` points to `len` bytes.
#[unsafe(no_mangle)]
pub unsafe extern "C" fn probe_deframe(bytes: *const u8, len: usize) -> usize {
    // SAFETY: the caller's promise.
    let mut bytes = unsafe { slice::from_raw_parts(bytes, len) };
    let mut deframer = Deframer::new([0; MAX_COBS_LEN]);
    let mut n_frames = 0;
    while let Some(piece) = deframer.next_piece(&mut bytes) {
        n_frames += usize::from(matches!(piece, Deframed::Frame(_)));
    }
    n_frames + deframer.take_partial().len()
}
