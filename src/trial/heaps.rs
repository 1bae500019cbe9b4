//! Looks through a file for what would keep the HDF5 library busy for ever, before the library sees it.
//!
//! Texts lie in global heaps (HDF5 File Format Specification 3.0, III.E). The library (2.2) steps from object to object by
//! their sizes and does not notice a step of nothing: a free-space object of size 0, or a size that wraps round. A file
//! with a few lost bytes has such heaps, and reading any text of it would never end. Offsets and lengths of other
//! widths than 8 bytes, which no trial has, are refused, since heaps would be laid out otherwise.

use std::fs::File;
use std::io;
use std::os::unix::fs::FileExt;

/// HDF5's signature (II.A): what every file begins with.
pub(super) const SIGNATURE: &[u8; 8] = b"\x89HDF\r\n\x1a\n";
const HEAP: &[u8; 4] = b"GCOL";
const HEAP_VERSION: u8 = 1;
const HEADER_BYTES: u64 = 16;
const BUFFER_BYTES: usize = 1 << 20;

/// What is wrong with the file, if anything.
///
/// # Errors
/// The file can't be read.
pub(super) fn look(file: &File) -> io::Result<Option<String>> {
    let mut head = [0; 16];
    let n_head = read_at(file, &mut head, 0)?;
    // Superblock version, then where each version has its widths (II.A).
    let widths = match (n_head, head[8]) {
        (16, 0 | 1) => [head[13], head[14]],
        (16, 2 | 3) => [head[9], head[10]],
        _ => return Ok(None), // the library refuses it
    };
    if widths != [8, 8] {
        let [offsets, lengths] = widths;
        return Ok(Some(format!(
            "its offsets have {offsets} bytes and its lengths {lengths}, those of a trial have 8"
        )));
    }
    let mut buffer = vec![0; BUFFER_BYTES];
    let mut from = 0_u64;
    loop {
        let n = read_at(file, &mut buffer, from)?;
        for at in memchr::memmem::find_iter(&buffer[..n], HEAP) {
            let heap = from + at as u64;
            if never_ends(file, heap)? {
                return Ok(Some(format!("a heap of texts at byte {heap} is broken")));
            }
        }
        if n < buffer.len() {
            return Ok(None);
        }
        from += (n - HEAP.len() + 1) as u64; // one may lie across the end of the buffer
    }
}

/// Whether a walk over the objects of what may be a heap comes to a step of nothing.
fn never_ends(file: &File, heap: u64) -> io::Result<bool> {
    let mut header = [0; HEADER_BYTES as usize];
    if read_at(file, &mut header, heap)? < header.len() || header[4] != HEAP_VERSION {
        return Ok(false);
    }
    let end = heap.saturating_add(length(&header));
    let mut at = heap + HEADER_BYTES;
    while at.checked_add(HEADER_BYTES).is_some_and(|next| next <= end) {
        if read_at(file, &mut header, at)? < header.len() {
            return Ok(false); // it leads out of the file, which the library sees
        }
        let size = length(&header);
        let is_free_space = header[..2] == [0, 0];
        // Objects are padded to 8 bytes and have their header before them; free space counts its header in.
        let padded = size.wrapping_add(7) & !7;
        let step = if is_free_space { size } else { HEADER_BYTES.wrapping_add(padded) };
        if step == 0 {
            return Ok(true);
        }
        let Some(next) = at.checked_add(step) else { return Ok(false) };
        at = next;
    }
    Ok(false)
}

/// The 8-byte length in the second half of a heap's or an object's header.
fn length(header: &[u8; 16]) -> u64 {
    header.last_chunk().map_or(0, |bytes| u64::from_le_bytes(*bytes))
}

fn read_at(file: &File, into: &mut [u8], from: u64) -> io::Result<usize> {
    let mut n = 0;
    while n < into.len() {
        match file.read_at(&mut into[n..], from + n as u64) {
            Ok(0) => break,
            Ok(more) => n += more,
            Err(error) if error.kind() == io::ErrorKind::Interrupted => {}
            Err(error) => return Err(error),
        }
    }
    Ok(n)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn looked_at(objects: &[(u16, u64)], at: usize) -> Option<String> {
        let mut bytes = SIGNATURE.to_vec();
        bytes.extend([2, 8, 8, 0, 0, 0, 0, 0]);
        bytes.resize(at, 0x55);
        bytes.extend(*b"GCOL\x01\0\0\0");
        bytes.extend(4096_u64.to_le_bytes());
        for (index, size) in objects {
            bytes.extend(index.to_le_bytes());
            bytes.extend([0; 6]);
            bytes.extend(size.to_le_bytes());
            bytes.resize(bytes.len() + if *index == 0 { 0 } else { (*size as usize).next_multiple_of(8).min(64) }, 0);
        }
        bytes.resize(at + 4096, 0x55);
        let mut file = tempfile::tempfile().unwrap();
        io::Write::write_all(&mut file, &bytes).unwrap();
        look(&file).unwrap()
    }

    #[test]
    fn a_heap_in_which_the_library_would_turn_for_ever_is_found() {
        for at in [48, BUFFER_BYTES - 2, BUFFER_BYTES + 7] {
            assert_eq!(looked_at(&[(1, 5), (0, 4056)], at), None);
            let expected = format!("a heap of texts at byte {at} is broken");
            assert_eq!(looked_at(&[(1, 5), (0, 0)], at), Some(expected.clone()), "free space of nothing");
            assert_eq!(looked_at(&[(3, 16_u64.wrapping_neg())], at), Some(expected), "a size that wraps round");
        }
    }

    #[test]
    fn other_widths_are_refused_and_no_file_is_too_short() {
        let said = |bytes: &[u8]| {
            let mut file = tempfile::tempfile().unwrap();
            io::Write::write_all(&mut file, bytes).unwrap();
            look(&file).unwrap()
        };
        let narrow = [&SIGNATURE[..], &[2, 4, 4, 0, 0, 0, 0, 0]].concat();
        assert!(said(&narrow).unwrap().contains("offsets have 4 bytes"));
        (0..narrow.len()).for_each(|n| assert_eq!(said(&narrow[..n]), None));
    }
}
