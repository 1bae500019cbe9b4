//! Lines of text to samples: what an indicator or a hobby board prints.
//!
//! Every line is handed on as it came, as [`Captured::Text`], or as [`Captured::Rejected`] with the reason; a reading
//! becomes a block of one sample beside it. Lines carry no checksum: a damaged digit that still reads as a number cannot
//! be seen. Lines have no index either: what is missing is worked out from the device's time, or from silences and
//! refused lines where there is none, and is then an estimate.

mod decoder;
mod line;
mod reader;
#[cfg(test)]
mod tests;
mod time;

pub(super) use decoder::TextDecoder;
