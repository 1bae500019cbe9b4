//! Append-only capture on a disk trait: the only thing written while data flows.
