//! Seal, recover, verify, list, show: composes journal, capture, reading and trial.
