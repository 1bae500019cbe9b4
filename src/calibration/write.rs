//! Calibration records as text: what a channel uses first, then the evidence, the sheet whole.
//!
//! Numbers are written so that reading them back gives the same double.

use std::fmt::Write;

use crate::rig::{Coefficients, Sheet};
use crate::units::significant;

use super::accelerometer::AccelerometerCalibration;
use super::cell::{CellCalibration, Direction, Manners, Point};
use super::encoder::EncoderCalibration;

const CAUTION: &str = "# Tautrail advises and records only; it is no accredited laboratory and no safety device.\n";

/// A text as a TOML string.
fn quoted(text: &str) -> String {
    toml::Value::String(text.to_owned()).to_string()
}

fn list(texts: &[String]) -> String {
    texts.iter().map(|text| quoted(text)).collect::<Vec<_>>().join(", ")
}

fn head(sheet: &Sheet) -> String {
    let mut text = format!("# Calibration record, written by tautrail {}.\n{CAUTION}", env!("CARGO_PKG_VERSION"));
    if sheet.invented {
        text.push_str("# INVENTED DATA.\n");
    }
    let pairs = [
        ("kind", sheet.kind.word().to_owned()),
        ("channel", sheet.channel.clone()),
        ("sensor", sheet.sensor.clone()),
        ("person", sheet.person.clone()),
        ("date", sheet.date.to_string()),
        ("valid_until", sheet.valid_until.to_string()),
    ];
    for (key, value) in pairs {
        text.push_str(&format!("{key} = {}\n", quoted(&value)));
    }
    text.push_str(&format!("invented = {}\n", sheet.invented));
    text
}

fn values(sheet: &Sheet, coefficients: &Coefficients, tested: (f64, f64)) -> String {
    let unit = sheet.kind.unit();
    let terms: Vec<String> = coefficients.coefficients.iter().map(|value| format!("{value} {unit}")).collect();
    format!(
        "\n[values]\nzero_counts = {}\ncoefficients = [{}]\nzero_uncertainty = \"{} {unit}\"\n\
         scale_uncertainty = \"{} %\"\ntested_from = \"{} {unit}\"\ntested_to = \"{} {unit}\"\n\
         drift_per_year = \"{} %\"\n",
        coefficients.zero_counts,
        list(&terms),
        coefficients.zero_uncertainty,
        100.0 * coefficients.scale_relative_uncertainty,
        tested.0,
        tested.1,
        100.0 * sheet.drift_relative_per_year,
    )
}

/// The sheet that was calibrated from, whole, so that everything can be worked out again.
fn evidence(method: &str, sheet_text: &str) -> String {
    format!("\n[evidence]\nmethod = {}\nsheet = {}\n", quoted(method), quoted(sheet_text))
}

/// The record of a cell. `sheet_text` is the sheet's own text with its readings.
pub fn cell_record(sheet: &Sheet, calibration: &CellCalibration, sheet_text: &str) -> String {
    let mut text = head(sheet);
    text.push_str(&values(sheet, &calibration.coefficients, calibration.tested_n()));
    if let Some(shunt) = sheet.shunt_counts {
        let deflection = shunt - calibration.coefficients.zero_counts;
        let uncertainty =
            calibration.coefficients.zero_uncertainty * calibration.figures.sensitivity_counts_per_n.abs();
        text.push_str(&format!("shunt_counts = {deflection}\nshunt_uncertainty_counts = {uncertainty}\n"));
    }
    if let Some(excitation_v) = sheet.excitation_v {
        text.push_str(&format!("excitation_v = {excitation_v}\n"));
    }
    text.push_str(&evidence("loads up and down, curve through no load by least squares", sheet_text));
    text.push_str(&cell_figures(calibration));
    text.push_str(&manners(&calibration.manners));
    text.push_str(&cell_uncertainty(calibration));
    for point in &calibration.points {
        text.push_str(&reading(point));
    }
    text
}

/// Like `key = "1.234 N"`, nothing where it is not known.
fn quantity(text: &mut String, key: &str, value: Option<f64>, unit: &str) {
    if let Some(value) = value.filter(|value| value.is_finite()) {
        let _ = writeln!(text, "{key} = \"{} {unit}\"", significant(value, 5)); // a String takes everything
    }
}

fn cell_figures(calibration: &CellCalibration) -> String {
    let figures = &calibration.figures;
    let mut text = format!("\n[evidence.figures]\ndegree = {}\n", calibration.degree);
    text.push_str(&format!("sensitivity_counts_per_n = {}\n", figures.sensitivity_counts_per_n));
    quantity(&mut text, "non_linearity", Some(figures.non_linearity_n), "N");
    quantity(&mut text, "reversibility", figures.reversibility_n, "N");
    quantity(&mut text, "repeatability", figures.repeatability_n, "N");
    quantity(&mut text, "creep", figures.creep_relative.map(|share| 100.0 * share), "%");
    quantity(&mut text, "zero_return", figures.zero_return_n, "N");
    text
}

fn manners(manners: &Manners) -> String {
    let mut text = String::from("\n[evidence.in_the_manner_of_astm_e74]\n");
    match &manners.e74 {
        Ok(e74) => {
            text.push_str(&format!("degree = {}\nreadings = {}\n", e74.degree, e74.n_readings));
            quantity(&mut text, "standard_deviation", Some(e74.s_n), "N");
            quantity(&mut text, "lower_limit_factor", Some(e74.lower_limit_factor_n), "N");
            if let Some((class_a, class_aa)) = e74.class_lower_limits_n {
                quantity(&mut text, "class_a_from", Some(class_a), "N");
                quantity(&mut text, "class_aa_from", Some(class_aa), "N");
            }
            text.push_str(&format!("no_class_because = [{}]\n", list(&e74.against)));
        }
        Err(why) => text.push_str(&format!("absent_because = {}\n", quoted(why))),
    }
    text.push_str("\n[evidence.in_the_manner_of_iso_376]\n");
    match &manners.iso376 {
        Ok(iso) => {
            let names = ["reproducibility", "repeatability", "interpolation", "zero", "reversibility", "creep"];
            for (name, value) in names.iter().zip(iso.errors.greatest()) {
                quantity(&mut text, name, Some(value), "%");
            }
            if let Some(class) = iso.class {
                text.push_str(&format!("class = {}\n", quoted(class)));
            }
            text.push_str(&format!("no_class_because = [{}]\n", list(&iso.against)));
        }
        Err(why) => text.push_str(&format!("absent_because = {}\n", quoted(why))),
    }
    text
}

fn cell_uncertainty(calibration: &CellCalibration) -> String {
    let mut text = String::new();
    for step in &calibration.steps {
        text.push_str("\n[[evidence.uncertainty]]\n");
        quantity(&mut text, "force", Some(step.force_n), "N");
        quantity(&mut text, "standard", Some(step.standard_n), "N");
        quantity(&mut text, "expanded_95", Some(step.expanded_n), "N");
        if step.degrees_of_freedom.is_finite() {
            text.push_str(&format!("degrees_of_freedom = {:.1}\n", step.degrees_of_freedom));
        }
        for share in step.shares.iter().filter(|share| share.component.standard_uncertainty > 0.0) {
            let key = quoted(share.source);
            quantity(&mut text, &key, Some(share.component.standard_uncertainty), "N");
        }
    }
    text
}

fn reading(point: &Point) -> String {
    let load = &point.load;
    let direction = match load.direction {
        Direction::Up => "up",
        Direction::Down => "down",
        Direction::Creep => "creep",
    };
    let mut text = format!(
        "\n[[evidence.reading]]\nplace = {}\nrun = {}\nrotation_deg = {}\ndirection = \"{direction}\"\ncounts = {}\n",
        quoted(&load.place),
        quoted(&load.run),
        load.rotation_deg,
        load.counts
    );
    quantity(&mut text, "force", Some(load.force_n), "N");
    quantity(&mut text, "residual", Some(point.residual_n), "N");
    for (key, value) in [("sd", load.sd_counts), ("n", load.n), ("held_s", load.held_s)] {
        if let Some(value) = value {
            text.push_str(&format!("{key} = {value}\n"));
        }
    }
    if point.flagged {
        text.push_str("flagged = true # far from what the others say; kept in the fit\n");
    }
    text
}

/// The record of an encoder.
pub fn encoder_record(sheet: &Sheet, calibration: &EncoderCalibration, sheet_text: &str) -> String {
    let mut text = head(sheet);
    text.push_str(&values(sheet, &calibration.coefficients, calibration.tested_m));
    text.push_str(&evidence("marks along the rail, both directions, straight line by least squares", sheet_text));
    text.push_str("\n[evidence.figures]\n");
    quantity(&mut text, "backlash", calibration.backlash_m.map(|(value, _)| 1e3 * value), "mm");
    quantity(&mut text, "backlash_uncertainty", calibration.backlash_m.map(|(_, u)| 1e3 * u), "mm");
    quantity(&mut text, "linearity", Some(1e3 * calibration.linearity_m), "mm");
    quantity(&mut text, "residual_deviation", Some(1e3 * calibration.residual_sd_m), "mm");
    for point in &calibration.points {
        text.push_str(&format!(
            "\n[[evidence.reading]]\nplace = {}\ndirection = \"{}\"\ncounts = {}\nresidual_mm = {}\nflagged = {}\n",
            quoted(&point.place),
            if point.forward { "up" } else { "down" },
            point.counts,
            significant(1e3 * point.residual_m, 5),
            point.flagged
        ));
    }
    text
}

/// The record of an accelerometer.
pub fn accelerometer_record(sheet: &Sheet, calibration: &AccelerometerCalibration, sheet_text: &str) -> String {
    let mut text = head(sheet);
    text.push_str(&values(sheet, &calibration.coefficients, calibration.tested_mps2));
    text.push_str(&evidence("turned in the field of gravity", sheet_text));
    text.push_str("\n[evidence.figures]\n");
    quantity(&mut text, "noise", calibration.noise_mps2, "m/s2");
    quantity(&mut text, "cross_axis", calibration.cross_mps2, "m/s2");
    if let Some(rest) = &calibration.at_rest {
        quantity(&mut text, "at_rest_on_rail", Some(rest.found_mps2), "m/s2");
        quantity(&mut text, "g_sin_incline", Some(rest.expected_mps2), "m/s2");
        text.push_str(&format!("at_rest_agrees = {}\n", rest.agrees));
    }
    text
}
