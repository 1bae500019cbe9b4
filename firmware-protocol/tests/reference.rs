//! Published values. Checksums: RFC 3720 (2004), appendix B.4. Stuffing: boundary cases as commonly tabulated for
//! Cheshire & Baker, IEEE/ACM Transactions on Networking 7(2), 1999; and the `cobs` crate as a second opinion.
#![allow(clippy::unwrap_used)]

use std::fs;
use std::path::PathBuf;

use firmware_protocol::{DecodeError, crc32c, stuff, unstuff_in_place};
use proptest::prelude::*;

/// The rows of a reference file, without comments and heading.
fn rows(file: &str) -> Vec<Vec<String>> {
    let path = PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("../tests/reference").join(file);
    let text = fs::read_to_string(path).unwrap();
    let rows = text.lines().filter(|line| !line.starts_with('#')).skip(1);
    let rows: Vec<_> = rows.map(|row| row.split(',').map(str::to_owned).collect::<Vec<_>>()).collect();
    assert!(rows.len() >= 5, "{file} has its rows");
    rows
}

fn bytes(hex: &str) -> Vec<u8> {
    (0..hex.len()).step_by(2).map(|at| u8::from_str_radix(&hex[at..at + 2], 16).unwrap()).collect()
}

#[test]
fn checksums_are_those_of_rfc_3720() {
    for row in rows("crc32c_rfc3720_b4.csv") {
        let [message, hex, crc, as_sent] = &row[..] else { panic!("{row:?}") };
        let found = crc32c(&bytes(hex));
        assert_eq!(format!("{found:#010x}"), *crc, "{message}");
        assert_eq!(found.to_le_bytes(), *bytes(as_sent), "{message}: low byte first");
    }
}

#[test]
fn stuffing_meets_every_tabulated_boundary() {
    for row in rows("cobs_vectors.csv") {
        let [case, _, _, raw, encoded] = &row[..] else { panic!("{row:?}") };
        let (raw, encoded) = (bytes(raw), bytes(encoded));
        let mut out = [0xAA; 600];
        assert_eq!(stuff(&raw, &mut out).map(|len| &out[..len]), Some(&encoded[..]), "{case}");
        let mut bytes = encoded;
        assert_eq!(unstuff_in_place(&mut bytes).map(|len| &bytes[..len]), Ok(&raw[..]), "{case}");
    }
}

#[test]
fn a_last_full_run_may_end_with_an_extra_code() {
    let mut bytes = [vec![0xFF; 255], vec![0x01]].concat();
    assert_eq!(unstuff_in_place(&mut bytes), Ok(254));
}

fn stuffable() -> impl Strategy<Value = Vec<u8>> {
    let byte = prop_oneof![1 => Just(0_u8), 30 => any::<u8>()];
    let run = prop_oneof![3 => prop::collection::vec(byte, 0..40), 1 => (1_u8..=255, 250_usize..260).prop_map(|(b, n)| vec![b; n])];
    prop::collection::vec(run, 0..6).prop_map(|runs| runs.concat())
}

proptest! {
    #[test]
    fn stuffing_agrees_with_another_implementation(raw in stuffable()) {
        let (mut ours, mut theirs) = ([0; 2100], [0; 2100]);
        let len = stuff(&raw, &mut ours).unwrap();
        let same = cobs::encode(&raw, &mut theirs);
        prop_assert_eq!(&ours[..len], &theirs[..same]);
        prop_assert!(!ours[..len].contains(&0));
    }

    #[test]
    fn unstuffing_agrees_with_another_implementation(bytes in prop::collection::vec(1_u8..=255, 1..600)) {
        let (mut ours, mut theirs) = (bytes.clone(), bytes);
        match (unstuff_in_place(&mut ours), cobs::decode_in_place(&mut theirs)) {
            (Ok(len), Ok(same)) => prop_assert_eq!(&ours[..len], &theirs[..same]),
            (Err(DecodeError::Stuffing { .. }), Err(_)) => {}
            different => prop_assert!(false, "{:?}", different),
        }
    }
}
