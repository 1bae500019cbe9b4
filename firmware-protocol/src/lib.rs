//! Tautrail's wire protocol: frames, messages, checksums. `no_std`, no allocation; SPEC.md is the document of record.
#![no_std]
#![forbid(unsafe_code)]
