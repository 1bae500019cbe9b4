//! Launch physics and forecast. Pure: no clock, no file, no randomness that was not passed in.
