//! Pages for people: HTML with SVG plots.
//!
//! [`trial_page`] is pure, data in and text out; [`page_of`] reads a trial file for it. A page needs nothing beside itself, prints, is readable without its pictures and without
//! colour. What is absent is said to be absent, with the reason; nothing is drawn across a gap.

mod beside;
mod calibration;
mod cord;
mod decimate;
mod energy;
mod figures;
mod figures_over_time;
mod forecast;
mod gather;
mod html;
mod labels;
mod page;
mod picture;
mod strip;
mod tables;
#[cfg(test)]
mod tests;

pub use beside::add_replay;
pub use calibration::{accelerometer_page, cell_page, encoder_page};
pub use cord::cord_page;
pub use forecast::{ForecastCurve, ForecastPage, forecast_page};
pub use gather::{GatherError, page, page_of};
pub use html::trial_page;
pub use page::{
    DeviceHealth, EnergyBar, EnergyPart, Heading, Inspection, MotionCurve, MotionOverRail, PageLimits, PhaseSpan,
    RailStrip, ResidualTrace, Trace, TrialPage,
};
pub use picture::PictureError;
