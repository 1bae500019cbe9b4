//! The forecast's page.

use std::fs;
use std::path::Path;

use tautrail::model::{Band, Forecast, Quantity};
use tautrail::report::{ForecastCurve, ForecastPage, forecast_page};
use tautrail::rig::Rig;
use thiserror::Error;

use super::words;
use crate::cli::Failure;

#[derive(Debug, Error)]
#[error("{path}: the page can't be written: {source}")]
struct Unwritable {
    path: String,
    source: std::io::Error,
}

/// Writes the page of a forecast.
pub fn write(path: &Path, rig: &Rig, made: &Forecast) -> Result<(), Failure> {
    let html = forecast_page(&page(rig, made))?;
    fs::write(path, html).map_err(|source| Unwritable { path: path.display().to_string(), source }.into())
}

fn page(rig: &Rig, made: &Forecast) -> ForecastPage {
    let curve = |title: &str, y_label: &str, band: &Band| ForecastCurve {
        title: title.to_owned(),
        y_label: y_label.to_owned(),
        best: band.best.clone(),
        low: band.low.clone(),
        high: band.high.clone(),
    };
    let bands = &made.bands;
    let mut sentences = words::flags(made);
    sentences.extend(words::probabilities(rig, made));
    sentences.extend(made.sensitivities());
    ForecastPage {
        heading: words::heading(rig, made),
        basis: words::basis(made),
        x_m: bands.x_m.clone(),
        curves: vec![
            curve("Speed along the rail", "speed, m/s (ground frame)", &bands.v_mps),
            curve("Acceleration along the rail", "acceleration, m/s² (kinematic, ground frame)", &bands.a_mps2),
        ],
        separation_x_m: made.run.answers.separation.map(|at| at.x_m),
        table: words::table(made, Quantity::meaning),
        energy: words::energy(made),
        sentences,
        cautions: words::cautions(rig),
        invented: rig.invented,
        program: format!("tautrail {}", env!("CARGO_PKG_VERSION")),
    }
}
