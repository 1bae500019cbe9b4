//! The live display: the only room that knows the terminal.
