//! Calibration of a position encoder: marks along the rail, passed in both directions.
//!
//! x = a + c·counts ± b/2, the sign by the direction of travel: c the scale, b the backlash. Flagged readings stay in the
//! fit.

use thiserror::Error;

use crate::estimation::{Component, LinearError, Scatter, combined, least_squares};
use crate::rig::{Coefficients, Sheet, Standard};
use crate::units::{self, Dimension, QuantityError};

#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum EncoderError {
    #[error("{place}: direction {found:?} is not known: up (toward the exit) or down (back)")]
    Direction { place: String, found: String },
    #[error("{place}: the reading is not a number")]
    NotANumber { place: String },
    #[error("{place}: mark: {source}")]
    Mark { place: String, source: QuantityError },
    #[error("{found} different marks: at least 3 show whether the scale is straight")]
    TooFewMarks { found: usize },
    #[error(
        "all readings are the same, {counts} counts, at every mark: does the encoder turn, is the channel the right one?"
    )]
    AllEqual { counts: f64 },
    #[error("the fit: {0}")]
    Fit(#[from] LinearError),
    #[error("the sheet is none of an encoder")]
    OtherSheet,
}

/// A reading at a mark.
#[derive(Debug, Clone, PartialEq)]
pub struct MarkPoint {
    pub place: String,
    pub forward: bool,
    pub mark_m: f64,
    pub counts: f64,
    /// Mark minus fit.
    pub residual_m: f64,
    pub flagged: bool,
}

#[derive(Debug, Clone, PartialEq)]
pub struct EncoderCalibration {
    pub coefficients: Coefficients,
    pub points: Vec<MarkPoint>,
    /// With its standard uncertainty; none where only one direction was read.
    pub backlash_m: Option<(f64, f64)>,
    /// Greatest mean residual of a mark.
    pub linearity_m: f64,
    pub residual_sd_m: f64,
    pub tested_m: (f64, f64),
}

/// # Errors
/// [`EncoderError`]: which reading is wrong, or why there is no scale.
pub fn calibrate(sheet: &Sheet) -> Result<EncoderCalibration, EncoderError> {
    let Standard::Marks { uncertainty_m, scale_relative_uncertainty } = sheet.standard else {
        return Err(EncoderError::OtherSheet);
    };
    let mut points = sheet.readings.iter().map(point).collect::<Result<Vec<_>, _>>()?;
    let marks = marks(&points);
    if marks.len() < 3 {
        return Err(EncoderError::TooFewMarks { found: marks.len() });
    }
    let first = points.first().map_or(0.0, |point| point.counts);
    if points.iter().all(|point| point.counts == first) {
        return Err(EncoderError::AllEqual { counts: first });
    }
    let both = points.iter().any(|point| point.forward) && points.iter().any(|point| !point.forward);
    let way = |point: &MarkPoint| if point.forward { 0.5 } else { -0.5 };
    let row = |point: &MarkPoint| {
        let mut row = vec![1.0, point.counts];
        row.extend(both.then(|| way(point)));
        row
    };
    let rows: Vec<Vec<f64>> = points.iter().map(row).collect();
    let positions: Vec<f64> = points.iter().map(|point| point.mark_m).collect();
    let fit = least_squares(&rows, &positions, Scatter::Unknown)?;
    for (point, residual_m) in points.iter_mut().zip(&fit.residuals) {
        point.residual_m = *residual_m;
    }
    flag(&mut points);
    let scale = fit.parameters[1];
    let backlash_m = both.then(|| (fit.parameters[2].abs(), fit.standard_uncertainty(2)));
    let linearity_m = linearity(&points, &marks);
    let degrees_of_freedom = fit.degrees_of_freedom as f64;
    let random = |standard_uncertainty| Component { standard_uncertainty, degrees_of_freedom };
    // Which side of the backlash a reading is on is not known in use: rectangular (JCGM 100:2008, 4.3.7).
    let zero = combined(&[
        random(fit.residual_sd),
        Component::certain(uncertainty_m),
        Component::certain(backlash_m.map_or(0.0, |(backlash_m, _)| backlash_m / 12f64.sqrt())),
        Component::certain(sheet.step_counts * scale.abs() / 12f64.sqrt()),
    ]);
    // Marks displaced by their own uncertainty tilt the line as scatter of that size would.
    let tilt = uncertainty_m * spread_factor(&marks);
    let slope = combined(&[
        random(fit.standard_uncertainty(1) / scale.abs()),
        Component::certain(tilt),
        Component::certain(scale_relative_uncertainty),
    ]);
    Ok(EncoderCalibration {
        coefficients: Coefficients {
            zero_counts: -fit.parameters[0] / scale,
            coefficients: vec![0.0, scale],
            zero_uncertainty: as_normal(zero),
            scale_relative_uncertainty: as_normal(slope),
        },
        tested_m: (marks[0], marks[marks.len() - 1]),
        points,
        backlash_m,
        linearity_m,
        residual_sd_m: fit.residual_sd,
    })
}

/// The standard uncertainty that covers 95 % with the normal distribution's factor as this one does with its own.
pub(super) fn as_normal(component: Component) -> f64 {
    const NORMAL_95: f64 = 1.959_963_984_540_054;
    component.expanded(0.95) / NORMAL_95
}

fn point(reading: &crate::rig::SheetReading) -> Result<MarkPoint, EncoderError> {
    let place = reading.place.clone();
    let forward = match reading.direction.as_str() {
        "up" => true,
        "down" => false,
        other => return Err(EncoderError::Direction { place, found: other.to_owned() }),
    };
    if !reading.counts.is_finite() {
        return Err(EncoderError::NotANumber { place });
    }
    match units::parse(&reading.load, Dimension::Length) {
        Ok(mark_m) => Ok(MarkPoint { place, forward, mark_m, counts: reading.counts, residual_m: 0.0, flagged: false }),
        Err(source) => Err(EncoderError::Mark { place, source }),
    }
}

fn marks(points: &[MarkPoint]) -> Vec<f64> {
    let mut marks: Vec<f64> = points.iter().map(|point| point.mark_m).collect();
    marks.sort_by(f64::total_cmp);
    marks.dedup();
    marks
}

fn linearity(points: &[MarkPoint], marks: &[f64]) -> f64 {
    let mean = |mark_m: &f64| {
        let here = points.iter().filter(|point| point.mark_m == *mark_m);
        let (sum, n) = here.fold((0.0, 0.0), |(sum, n), point| (sum + point.residual_m, n + 1.0));
        f64::abs(sum / n)
    };
    marks.iter().map(mean).fold(0.0, f64::max)
}

/// Relative slope uncertainty per unit of the marks' own: 1/√Σ(x − x̄)².
fn spread_factor(marks: &[f64]) -> f64 {
    let mean = marks.iter().sum::<f64>() / marks.len() as f64;
    1.0 / marks.iter().map(|mark| (mark - mean).powi(2)).sum::<f64>().sqrt()
}

/// A reading far from the line through the others, by the median of the residuals' sizes about a robust line.
fn flag(points: &mut [MarkPoint]) {
    const FAR: f64 = 6.0;
    const NEVER_FAR: f64 = 0.002;
    let mut slopes: Vec<f64> = Vec::new();
    for (at, one) in points.iter().enumerate() {
        let others = points[at + 1..].iter().filter(|other| other.mark_m != one.mark_m);
        slopes.extend(others.map(|other| (other.mark_m - one.mark_m) / (other.counts - one.counts)));
    }
    let slope = median(slopes);
    let start = median(points.iter().map(|point| point.mark_m - slope * point.counts).collect());
    let off = |point: &MarkPoint| (point.mark_m - start - slope * point.counts).abs();
    let spread = 1.482_602_218_505_602 * median(points.iter().map(off).collect());
    let span = points.iter().map(|point| point.mark_m).fold(0.0, |most: f64, mark| most.max(mark.abs()));
    for point in points {
        point.flagged = off(point) > FAR * spread + NEVER_FAR * span;
    }
}

/// P. K. Sen, Journal of the American Statistical Association 63 (1968) 1379-1389, takes the median of all slopes.
fn median(mut values: Vec<f64>) -> f64 {
    values.retain(|value| value.is_finite());
    values.sort_by(f64::total_cmp);
    values.get(values.len() / 2).copied().unwrap_or(f64::NAN)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::rig::SheetReading;

    const SHEET: &str = r#"
kind = "encoder"
channel = "encoder"
sensor = "invented encoder"
person = "rig engineer"
date = "2031-05-04"
valid_until = "2032-05-04"
invented = true
drift_per_year = "0.01 %"
mark_uncertainty = "0.3 mm"
tape_uncertainty = "0.005 %"
[place]
latitude = "54.5 deg"
altitude = "6 m"
air_density = "1.225 kg/m3"
"#;

    fn sheet(change: impl Fn(usize, &mut SheetReading)) -> Sheet {
        let (sheet, findings) = Sheet::read(SHEET);
        let mut sheet = sheet.unwrap_or_else(|| panic!("{findings:?}"));
        // 0.1 mm a count from 2000 on, 0.4 mm of backlash.
        for (index, (mark, up)) in (0..7).map(|m| (m, true)).chain((0..7).rev().map(|m| (m, false))).enumerate() {
            let way = if up { -2.0 } else { 2.0 };
            let mut reading = SheetReading {
                place: format!("line {index}"),
                direction: if up { "up" } else { "down" }.to_owned(),
                load: format!("{mark} m"),
                counts: 2000.0 + 1e4 * f64::from(mark) + way,
                ..SheetReading::default()
            };
            change(index, &mut reading);
            sheet.readings.push(reading);
        }
        sheet
    }

    #[test]
    fn scale_zero_and_backlash_come_back() {
        let found = calibrate(&sheet(|_, _| ())).unwrap();
        assert!((found.coefficients.coefficients[1] - 1e-4).abs() < 1e-15);
        assert!((found.coefficients.zero_counts - 2000.0).abs() < 1e-6);
        assert!((found.backlash_m.unwrap().0 - 4e-4).abs() < 1e-12);
        assert!(found.linearity_m < 1e-12);
        assert_eq!(found.tested_m, (0.0, 6.0));
        // mark 0.3 mm, backlash 0.4/√12 mm, count 0.1/√12 mm
        assert!(
            (found.coefficients.zero_uncertainty - 3.23e-4).abs() < 5e-6,
            "{}",
            found.coefficients.zero_uncertainty
        );
        assert!(found.points.iter().all(|point| !point.flagged));
    }

    #[test]
    fn a_reading_far_off_is_flagged_and_kept() {
        let found = calibrate(&sheet(|index, reading| {
            if index == 3 {
                reading.counts *= 10.0;
            }
        }))
        .unwrap();
        assert_eq!(found.points.len(), 14);
        assert_eq!(found.points.iter().filter(|point| point.flagged).count(), 1);
        assert!(found.points[3].flagged);
    }

    #[test]
    fn what_can_not_be_a_scale_is_refused() {
        let said = |change: fn(usize, &mut SheetReading)| calibrate(&sheet(change)).expect_err("refused").to_string();
        assert!(said(|_, reading| reading.counts = 7.0).starts_with("all readings are the same, 7 counts"));
        assert_eq!(said(|_, reading| reading.counts = f64::NAN), "line 0: the reading is not a number");
        assert!(said(|_, reading| reading.load = "1 m".into()).starts_with("1 different marks"));
        assert!(said(|_, reading| reading.load = "1 kg".into()).contains("is a mass, not a length"));
        assert!(said(|_, reading| reading.direction = "left".into()).contains("direction \"left\" is not known"));
    }
}
