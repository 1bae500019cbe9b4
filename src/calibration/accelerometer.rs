//! Calibration of an accelerometer by turning it in the field of gravity: ±1 g, and optionally four positions across.
//!
//! With its axis up it reads +g at rest, with its axis down −g (specific force). Never tared on an incline: at rest on
//! the rail it must read g sin θ, which is checked here against the record, not taken into it.

use thiserror::Error;

use crate::estimation::{Component, combined};
use crate::rig::{Coefficients, Sheet, SheetReading, Standard};

use super::encoder::as_normal;
use super::to_value;

#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum AccelerometerError {
    #[error("{place}: position {found:?} is not known: up, down, across (level), or rest (on the rail)")]
    Position { place: String, found: String },
    #[error("{place}: the reading is not a number")]
    NotANumber { place: String },
    #[error("{place}: {counts} counts are at the end of what the channel can read ({low} to {high}): it is saturated")]
    Saturated { place: String, counts: f64, low: f64, high: f64 },
    #[error("there is no reading with the axis {position}: one up and one down are needed")]
    Missing { position: &'static str },
    #[error("up and down read the same, {counts} counts: was it turned, is the channel the right one?")]
    AllEqual { counts: f64 },
    #[error("there is a reading at rest on the rail, and the sheet has no incline")]
    NoIncline,
    #[error("the sheet is none of an accelerometer")]
    OtherSheet,
}

/// A reading at rest on the rail against g sin θ.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct AtRest {
    pub found_mps2: f64,
    pub expected_mps2: f64,
    /// Of the difference.
    pub standard_uncertainty_mps2: f64,
    /// Within the expanded uncertainty.
    pub agrees: bool,
}

#[derive(Debug, Clone, PartialEq)]
pub struct AccelerometerCalibration {
    pub coefficients: Coefficients,
    /// Standard deviation of single readings; none where the readings have no scatter.
    pub noise_mps2: Option<f64>,
    /// Greatest reading across, over the zero; none without such readings.
    pub cross_mps2: Option<f64>,
    pub at_rest: Option<AtRest>,
    pub tested_mps2: (f64, f64),
}

/// # Errors
/// [`AccelerometerError`]: which reading is wrong, or which is missing.
pub fn calibrate(sheet: &Sheet) -> Result<AccelerometerCalibration, AccelerometerError> {
    let Standard::Gravity { axis_uncertainty_rad, incline_rad } = sheet.standard else {
        return Err(AccelerometerError::OtherSheet);
    };
    sheet.readings.iter().try_for_each(|reading| sound(sheet, reading))?;
    let gravity = sheet.place.gravity_mps2;
    let (up, u_up) = mean(sheet, "up").ok_or(AccelerometerError::Missing { position: "up" })?;
    let (down, u_down) = mean(sheet, "down").ok_or(AccelerometerError::Missing { position: "down" })?;
    if up == down {
        return Err(AccelerometerError::AllEqual { counts: up });
    }
    let scale = 2.0 * gravity / (up - down);
    let u_counts = 0.5 * u_up.hypot(u_down);
    let across = mean(sheet, "across");
    let zero_counts = f64::midpoint(up, down);
    let cross_mps2 = greatest_across(sheet, zero_counts).map(|counts| counts * scale.abs());
    // Tilted by δ the axis reads g cos δ: −g δ²/2 in both, which is nothing to the zero and δ²/2 to the scale.
    let cosine = 0.5 * axis_uncertainty_rad * axis_uncertainty_rad;
    let zero = combined(&[
        Component::certain(u_counts * scale.abs()),
        Component::certain(sheet.step_counts * scale.abs() / 12f64.sqrt()),
        // Readings across differ from the zero by the tilt and the crosstalk; their mean tells of the zero alone.
        Component::certain(across.map_or(0.0, |(counts, _)| (counts - zero_counts).abs() * scale.abs() / 3f64.sqrt())),
    ]);
    let slope = combined(&[
        Component::certain(u_counts * scale.abs() / gravity),
        Component::certain(cosine),
        Component::certain(sheet.place.gravity_uncertainty_mps2 / gravity),
    ]);
    let coefficients = Coefficients {
        zero_counts,
        coefficients: vec![0.0, scale],
        zero_uncertainty: as_normal(zero),
        scale_relative_uncertainty: as_normal(slope),
    };
    let at_rest = at_rest(sheet, &coefficients, incline_rad, axis_uncertainty_rad)?;
    Ok(AccelerometerCalibration {
        noise_mps2: noise(sheet).map(|counts| counts * scale.abs()),
        cross_mps2,
        at_rest,
        tested_mps2: (-gravity, gravity),
        coefficients,
    })
}

fn sound(sheet: &Sheet, reading: &SheetReading) -> Result<(), AccelerometerError> {
    let (place, counts) = (reading.place.clone(), reading.counts);
    let (low, high) = sheet.counts_range;
    if !["up", "down", "across", "rest"].contains(&reading.direction.as_str()) {
        return Err(AccelerometerError::Position { place, found: reading.direction.clone() });
    }
    if !counts.is_finite() {
        return Err(AccelerometerError::NotANumber { place });
    }
    if counts <= low || counts >= high {
        return Err(AccelerometerError::Saturated { place, counts, low, high });
    }
    Ok(())
}

/// Mean counts of a position and its standard uncertainty.
fn mean(sheet: &Sheet, position: &str) -> Option<(f64, f64)> {
    let here: Vec<&SheetReading> = sheet.readings.iter().filter(|reading| reading.direction == position).collect();
    let n = here.len() as f64;
    let mean = here.iter().map(|reading| reading.counts).sum::<f64>() / n;
    let of_one = |reading: &&SheetReading| reading.sd_counts.unwrap_or(0.0) / reading.n.unwrap_or(1.0).max(1.0).sqrt();
    let own = here.iter().map(|reading| of_one(reading).powi(2)).sum::<f64>().sqrt() / n;
    let between = if here.len() > 1 {
        let squares: f64 = here.iter().map(|reading| (reading.counts - mean).powi(2)).sum();
        (squares / (n - 1.0) / n).sqrt()
    } else {
        0.0
    };
    (!here.is_empty()).then(|| (mean, own.max(between)))
}

fn greatest_across(sheet: &Sheet, zero_counts: f64) -> Option<f64> {
    let across = sheet.readings.iter().filter(|reading| reading.direction == "across");
    across.map(|reading| (reading.counts - zero_counts).abs()).reduce(f64::max)
}

fn noise(sheet: &Sheet) -> Option<f64> {
    let sds: Vec<f64> = sheet.readings.iter().filter_map(|reading| reading.sd_counts).collect();
    (!sds.is_empty()).then(|| (sds.iter().map(|sd| sd * sd).sum::<f64>() / sds.len() as f64).sqrt())
}

fn at_rest(
    sheet: &Sheet,
    coefficients: &Coefficients,
    incline_rad: Option<f64>,
    axis_uncertainty_rad: f64,
) -> Result<Option<AtRest>, AccelerometerError> {
    let Some((counts, u_counts)) = mean(sheet, "rest") else { return Ok(None) };
    let incline_rad = incline_rad.ok_or(AccelerometerError::NoIncline)?;
    Ok(Some(rest_on_rail(
        to_value(coefficients, counts),
        u_counts * coefficients.coefficients[1].abs(),
        coefficients,
        (sheet.place.gravity_mps2, incline_rad, axis_uncertainty_rad),
    )))
}

/// What an accelerometer reads at rest on the rail against g sin θ; `(gravity, incline, its standard uncertainty)`.
pub fn rest_on_rail(
    found_mps2: f64,
    u_found_mps2: f64,
    coefficients: &Coefficients,
    (gravity_mps2, incline_rad, incline_uncertainty_rad): (f64, f64, f64),
) -> AtRest {
    const NORMAL_95: f64 = 1.959_963_984_540_054;
    let expected_mps2 = gravity_mps2 * incline_rad.sin();
    let tilt = gravity_mps2 * incline_rad.cos() * incline_uncertainty_rad;
    let scale = coefficients.scale_relative_uncertainty * expected_mps2;
    let standard_uncertainty_mps2 =
        [u_found_mps2, coefficients.zero_uncertainty, tilt, scale].iter().fold(0.0, |u: f64, v| u.hypot(*v));
    let agrees = (found_mps2 - expected_mps2).abs() <= NORMAL_95 * standard_uncertainty_mps2;
    AtRest { found_mps2, expected_mps2, standard_uncertainty_mps2, agrees }
}

#[cfg(test)]
mod tests {
    use super::*;

    const SHEET: &str = r#"
kind = "accelerometer"
channel = "accel"
sensor = "invented accelerometer"
person = "rig engineer"
date = "2031-05-04"
valid_until = "2032-05-04"
invented = true
drift_per_year = "0.1 %"
axis_uncertainty = "0.5 deg"
incline = "6 deg"
[place]
gravity = "9.8146 m/s2"
air_density = "1.225 kg/m3"
[[reading]]
direction = "up"
counts = 825
sd = 4
n = 400
[[reading]]
direction = "down"
counts = -775
sd = 4
n = 400
"#;

    fn calibrated(more: &str) -> Result<AccelerometerCalibration, AccelerometerError> {
        let (sheet, findings) = Sheet::read(&format!("{SHEET}{more}"));
        calibrate(&sheet.unwrap_or_else(|| panic!("{findings:?}")))
    }

    #[test]
    fn a_turn_gives_scale_and_zero_with_local_gravity() {
        let found = calibrated("").unwrap();
        assert_eq!(found.coefficients.zero_counts, 25.0);
        assert!((found.coefficients.coefficients[1] - 9.8146 / 800.0).abs() < 1e-12);
        // 4 counts over √400, as newton per kilogram
        assert!((found.noise_mps2.unwrap() - 4.0 * 9.8146 / 800.0).abs() < 1e-12);
        assert!(found.at_rest.is_none());
    }

    #[test]
    fn at_rest_on_the_rail_it_must_read_g_sin_theta() {
        // g sin 6° = 1.02590 m/s² is 83.62 counts over the zero of 25.
        let right = calibrated("[[reading]]\ndirection = \"rest\"\ncounts = 108.6\n").unwrap().at_rest.unwrap();
        assert!(right.agrees, "{right:?}");
        assert!((right.expected_mps2 - 1.0259).abs() < 1e-4);
        let tared = calibrated("[[reading]]\ndirection = \"rest\"\ncounts = 25\n").unwrap().at_rest.unwrap();
        assert!(!tared.agrees, "an accelerometer that was tared on the incline reads zero there: {tared:?}");
    }

    #[test]
    fn six_positions_tell_of_the_cross_axis() {
        let across = [27, 23, 29, 25].map(|counts| format!("[[reading]]\ndirection = \"across\"\ncounts = {counts}\n"));
        let found = calibrated(&across.concat()).unwrap();
        assert!((found.cross_mps2.unwrap() - 4.0 * 9.8146 / 800.0).abs() < 1e-12);
        assert!(found.coefficients.zero_uncertainty > calibrated("").unwrap().coefficients.zero_uncertainty);
    }

    #[test]
    fn what_is_wrong_with_a_turn_is_said() {
        let said = |change: (&str, &str)| {
            let (sheet, findings) = Sheet::read(&SHEET.replace(change.0, change.1));
            calibrate(&sheet.unwrap_or_else(|| panic!("{findings:?}"))).expect_err("refused").to_string()
        };
        assert_eq!(
            said(("\"down\"", "\"up\"")),
            "there is no reading with the axis down: one up and one down are needed"
        );
        assert!(said(("-775", "825")).starts_with("up and down read the same, 825 counts"));
        assert!(said(("\"down\"", "\"left\"")).contains("position \"left\" is not known"));
        assert!(said(("-775", "-8388608")).contains("saturated"));
    }
}
