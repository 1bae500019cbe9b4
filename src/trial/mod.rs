//! The only room that knows HDF5: the trial file, its schema, writing and reading.

mod content;

pub use content::*;
