//! What a calibration found, on the screen.

use serde_json::json;
use tautrail::calibration::accelerometer::AccelerometerCalibration;
use tautrail::calibration::cell::{CellCalibration, Manners};
use tautrail::calibration::encoder::EncoderCalibration;
use tautrail::rig::{Coefficients, Sheet};
use tautrail::units::{brief, significant};

use super::Work;
use crate::cli::CAUTION;
use crate::cli::screen::{Screen, Tone};

pub(super) fn cell(work: &Work, sheet: &Sheet, calibration: &CellCalibration, screen: &Screen) {
    if screen.json {
        return screen.value(&cell_json(work, sheet, calibration));
    }
    head(sheet, &calibration.coefficients, screen);
    let figures = &calibration.figures;
    let greatest_n = calibration.tested_n().1;
    let share =
        |value_n: f64| format!("{} N ({} %)", significant(value_n, 3), significant(100.0 * value_n / greatest_n, 2));
    screen.line(format!(
        "  {} readings over {} loads to {} N, curve of power {}",
        calibration.points.len(),
        calibration.steps.len(),
        brief(greatest_n, 5),
        calibration.degree
    ));
    screen.line(format!("  sensitivity {} counts/N", significant(figures.sensitivity_counts_per_n, 7)));
    screen.line(format!("  non-linearity {}", share(figures.non_linearity_n)));
    let or_absent = |value: Option<f64>| value.map_or_else(|| "not shown by these readings".to_owned(), share);
    screen.line(format!("  reversibility {}", or_absent(figures.reversibility_n)));
    screen.line(format!("  repeatability {}", or_absent(figures.repeatability_n)));
    screen.line(format!("  zero return {}", or_absent(figures.zero_return_n)));
    let creep = figures.creep_relative.map(|share| format!("{} % of the load", significant(100.0 * share, 2)));
    screen.line(format!("  creep {}", creep.unwrap_or_else(|| "not shown by these readings".to_owned())));
    screen.line("  force, N      u, N      95 %, N   greatest share");
    for step in &calibration.steps {
        let most = step
            .shares
            .iter()
            .max_by(|a, b| a.component.standard_uncertainty.total_cmp(&b.component.standard_uncertainty))
            .map_or("", |share| share.source);
        screen.line(format!("  {:9.2} {:9.4} {:9.4}   {most}", step.force_n, step.standard_n, step.expanded_n));
    }
    manners(&calibration.manners, screen);
    for point in calibration.flagged() {
        screen.line(screen.toned(
            &format!(
                "  FLAGGED {}: {} counts at {:.2} N are {:+.2} N off the curve; it stays in the fit, look at it",
                point.load.place, point.load.counts, point.load.force_n, -point.residual_n
            ),
            Tone::Bad,
        ));
    }
    foot(work, screen);
}

fn head(sheet: &Sheet, coefficients: &Coefficients, screen: &Screen) {
    let title = format!("{} {}: {}, {}", sheet.kind.word(), sheet.channel, sheet.sensor, sheet.date);
    screen.line(screen.toned(&title, Tone::Heading));
    let unit = sheet.kind.unit();
    screen.line(format!(
        "  zero {} counts ± {} {unit}, scale ± {} % (standard uncertainties)",
        brief(coefficients.zero_counts, 8),
        significant(coefficients.zero_uncertainty, 2),
        significant(100.0 * coefficients.scale_relative_uncertainty, 2)
    ));
}

fn foot(work: &Work, screen: &Screen) {
    for path in [&work.record, &work.page].into_iter().flatten() {
        screen.line(format!("  written: {}", path.display()));
    }
    screen.line(CAUTION);
}

fn manners(manners: &Manners, screen: &Screen) {
    match &manners.e74 {
        Ok(e74) => {
            screen.line(format!(
                "  in the manner of ASTM E74: power {}, lower limit factor {} N",
                e74.degree,
                significant(e74.lower_limit_factor_n, 3)
            ));
            match e74.class_lower_limits_n {
                Some((a, aa)) => screen.line(format!("    class A from {a:.1} N, AA from {aa:.1} N")),
                None => screen.line(format!("    no class: {}", e74.against.join("; "))),
            }
        }
        Err(why) => screen.line(format!("  in the manner of ASTM E74: absent, {why}")),
    }
    match &manners.iso376 {
        Ok(iso) => {
            let [b, b1, fc, f0, v, c] = iso.errors.greatest();
            screen.line(format!(
                "  in the manner of ISO 376, greatest, %: b {b:.3}, b' {b1:.3}, f_c {fc:.3}, f_0 {f0:.3}, v {v:.3}, c {c:.3}"
            ));
            match iso.class {
                Some(class) => screen.line(format!("    within class {class}")),
                None => screen.line(format!("    no class: {}", iso.against.join("; "))),
            }
        }
        Err(why) => screen.line(format!("  in the manner of ISO 376: absent, {why}")),
    }
}

fn coefficients_json(coefficients: &Coefficients) -> serde_json::Value {
    json!({
        "zero_counts": coefficients.zero_counts, "coefficients": coefficients.coefficients,
        "zero_uncertainty": coefficients.zero_uncertainty,
        "scale_relative_uncertainty": coefficients.scale_relative_uncertainty,
    })
}

fn cell_json(work: &Work, sheet: &Sheet, calibration: &CellCalibration) -> serde_json::Value {
    let steps: Vec<_> = calibration
        .steps
        .iter()
        .map(|s| json!({ "force_n": s.force_n, "standard_n": s.standard_n, "expanded_95_n": s.expanded_n }))
        .collect();
    let flagged: Vec<_> = calibration.flagged().map(|point| point.load.place.clone()).collect();
    let figures = &calibration.figures;
    json!({
        "channel": sheet.channel, "date": sheet.date.to_string(), "degree": calibration.degree,
        "values": coefficients_json(&calibration.coefficients), "uncertainty": steps, "flagged": flagged,
        "sensitivity_counts_per_n": figures.sensitivity_counts_per_n, "non_linearity_n": figures.non_linearity_n,
        "reversibility_n": figures.reversibility_n, "repeatability_n": figures.repeatability_n,
        "creep_relative": figures.creep_relative, "zero_return_n": figures.zero_return_n,
        "record": work.record, "page": work.page, "caution": CAUTION,
    })
}

pub(super) fn encoder(work: &Work, sheet: &Sheet, calibration: &EncoderCalibration, screen: &Screen) {
    if screen.json {
        return screen.value(&json!({
            "channel": sheet.channel, "values": coefficients_json(&calibration.coefficients),
            "backlash_m": calibration.backlash_m.map(|(value, _)| value), "linearity_m": calibration.linearity_m,
            "flagged": calibration.points.iter().filter(|p| p.flagged).map(|p| p.place.clone()).collect::<Vec<_>>(),
            "record": work.record, "page": work.page,
        }));
    }
    head(sheet, &calibration.coefficients, screen);
    screen.line(format!("  scale {} mm a count", significant(1e3 * calibration.coefficients.coefficients[1], 7)));
    match calibration.backlash_m {
        Some((value, u)) => screen.line(format!("  backlash {:.3} mm ± {:.3} mm", 1e3 * value, 1e3 * u)),
        None => screen.line("  backlash not shown: read the marks in both directions"),
    }
    screen.line(format!("  linearity {:.3} mm", 1e3 * calibration.linearity_m));
    for point in calibration.points.iter().filter(|point| point.flagged) {
        let text =
            format!("  FLAGGED {}: {:+.1} mm off the line; it stays in the fit", point.place, -1e3 * point.residual_m);
        screen.line(screen.toned(&text, Tone::Bad));
    }
    foot(work, screen);
}

pub(super) fn accelerometer(work: &Work, sheet: &Sheet, calibration: &AccelerometerCalibration, screen: &Screen) {
    if screen.json {
        return screen.value(&json!({
            "channel": sheet.channel, "values": coefficients_json(&calibration.coefficients),
            "noise_mps2": calibration.noise_mps2, "cross_mps2": calibration.cross_mps2,
            "at_rest_agrees": calibration.at_rest.map(|rest| rest.agrees), "record": work.record, "page": work.page,
        }));
    }
    head(sheet, &calibration.coefficients, screen);
    let shown =
        |value: Option<f64>| value.map_or_else(|| "not shown".to_owned(), |v| format!("{} m/s2", significant(v, 3)));
    screen.line(format!("  noise {}, across {}", shown(calibration.noise_mps2), shown(calibration.cross_mps2)));
    match &calibration.at_rest {
        Some(rest) => {
            let verdict = if rest.agrees {
                screen.toned("agrees", Tone::Good)
            } else {
                screen.toned("DISAGREES: was it tared on the incline, is the incline right?", Tone::Bad)
            };
            screen.line(format!(
                "  at rest on the rail {:.4} m/s2, g sin of the incline is {:.4} m/s2: {verdict}",
                rest.found_mps2, rest.expected_mps2
            ));
        }
        None => screen.line("  not read at rest on the rail: it must read g sin of the incline there"),
    }
    foot(work, screen);
}
