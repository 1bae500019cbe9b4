//! The tables of a rig file, one function each: which keys there are, in which unit, within which range.
//!
//! The ranges only catch slips of the pen and the unit (a 7 mm rail, a 60 deg incline); they are no engineering limits.

use super::document::{Findings, Section, quantity_of};
use super::{CordPoint, Cords, Given, Limits, Losses, Payload, Plan, Rail, Shuttle, Site};
use crate::units::STANDARD_GRAVITY_MPS2;

const MASS_KG: std::ops::RangeInclusive<f64> = 0.01..=500.0;
const FORCE_N: std::ops::RangeInclusive<f64> = 0.0..=200_000.0;
const DRAG_AREA_M2: std::ops::RangeInclusive<f64> = 0.0..=5.0;

pub(super) fn site(mut table: Section<'_, '_>, findings: &mut Findings<'_>) -> Site {
    let site = Site {
        latitude_rad: table.quantity(findings, "latitude", "deg", -90.0..=90.0),
        altitude_m: table.quantity(findings, "altitude", "m", -450.0..=6000.0),
        air_density_kg_per_m3: table.quantity(findings, "air_density", "kg/m3", 0.5..=1.6),
        head_wind_mps: table.quantity(findings, "head_wind", "m/s", -40.0..=40.0),
    };
    table.finish(findings);
    site
}

pub(super) fn rail(mut table: Section<'_, '_>, findings: &mut Findings<'_>) -> Rail {
    let rail = Rail {
        length_m: table.quantity(findings, "length", "m", 0.2..=100.0),
        incline_rad: table.quantity(findings, "incline", "deg", -10.0..=45.0),
        zero_mark_x_m: table.quantity(findings, "zero_mark", "m", 0.05..=100.0),
        brake_x_m: table.quantity(findings, "brake_from", "m", 0.05..=100.0),
        brake_force_n: table.quantity(findings, "brake_force", "N", FORCE_N),
    };
    table.finish(findings);
    rail
}

pub(super) fn shuttle(mut table: Section<'_, '_>, findings: &mut Findings<'_>) -> Shuttle {
    let shuttle = Shuttle { mass_kg: table.given(findings, ["mass", "mass_uncertainty"], "kg", MASS_KG) };
    table.finish(findings);
    shuttle
}

pub(super) fn payload(mut table: Section<'_, '_>, findings: &mut Findings<'_>) -> Payload {
    let payload = Payload {
        name: table.text(findings, "name"),
        mass_kg: table.given(findings, ["mass", "mass_uncertainty"], "kg", MASS_KG),
        drag_area_m2: table.given(findings, ["drag_area", "drag_area_uncertainty"], "m2", DRAG_AREA_M2),
    };
    table.finish(findings);
    payload
}

pub(super) fn cords(mut table: Section<'_, '_>, findings: &mut Findings<'_>) -> Cords {
    let count = table.number(findings, "count", 1.0..=200.0);
    if count.fract() > 0.0 {
        findings.error("cords.count", format!("is {count}, cords come in whole numbers"));
    }
    let cords = Cords {
        count: count as u32,
        free_length_m: table.quantity(findings, "free_length", "m", 0.05..=100.0),
        mass_kg: table.quantity(findings, "mass", "kg", 0.001..=50.0),
        travel_ratio: table.number(findings, "travel_ratio", 0.05..=20.0),
        curve: curve(&mut table, findings),
        force_relative_uncertainty: table.quantity(findings, "force_uncertainty", "%", 0.0..=50.0),
    };
    table.finish(findings);
    cords
}

/// Points of one cord, checked to begin at (0, 0) and to rise; none if they do not, so that nothing is built on them.
fn curve(table: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Vec<CordPoint> {
    let mut points: Vec<CordPoint> = Vec::new();
    let mut in_order = true;
    for (index, mut entry) in table.sections(findings, "curve").into_iter().enumerate() {
        let point = CordPoint {
            elongation: entry.quantity(findings, "elongation", "%", 0.0..=1000.0),
            tension_n: entry.quantity(findings, "tension", "N", FORCE_N),
        };
        entry.finish(findings);
        let key = format!("cords.curve[{index}]");
        let wrong = disorder(points.last(), &point);
        if let Some(message) = wrong {
            findings.error(&key, message);
            in_order = false;
        }
        points.push(point);
    }
    if points.len() == 1 {
        findings.error("cords.curve", "has 1 point, at least 2 are needed");
    }
    if in_order { points } else { Vec::new() }
}

/// Why this point can't follow the one before; NaN is never out of order.
fn disorder(before: Option<&CordPoint>, point: &CordPoint) -> Option<String> {
    match before {
        None if point.elongation > 0.0 || point.tension_n > 0.0 => {
            Some("the curve must begin at \"0 %\" and \"0 N\": a slack cord carries no force".to_owned())
        }
        Some(before) if point.elongation <= before.elongation => {
            let (before, this) = (100.0 * before.elongation, 100.0 * point.elongation);
            Some(format!("elongation must increase, {this:.1} % follows {before:.1} %"))
        }
        Some(before) if point.tension_n < before.tension_n => {
            let (before, this) = (before.tension_n, point.tension_n);
            Some(format!("tension must not fall, {this:.1} N follows {before:.1} N"))
        }
        _ => None,
    }
}

pub(super) fn losses(mut table: Section<'_, '_>, findings: &mut Findings<'_>) -> Losses {
    let losses = Losses {
        friction_n: table.given(findings, ["friction", "friction_uncertainty"], "N", FORCE_N),
        shuttle_drag_area_m2: shuttle_drag_area(&mut table, findings),
    };
    table.finish(findings);
    losses
}

fn shuttle_drag_area(table: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Given {
    let keys = ["shuttle_drag_area", "shuttle_drag_area_uncertainty"];
    table.given(findings, keys, "m2", DRAG_AREA_M2)
}

pub(super) fn limits(mut table: Section<'_, '_>, findings: &mut Findings<'_>) -> Limits {
    let limits = Limits {
        tension_n: table.quantity(findings, "tension", "N", 1.0..=200_000.0),
        peak_g: table.quantity(findings, "peak_g", "g", 0.1..=500.0) / STANDARD_GRAVITY_MPS2,
    };
    table.finish(findings);
    limits
}

pub(super) fn plan(mut table: Section<'_, '_>, findings: &mut Findings<'_>) -> Plan {
    let plan = Plan {
        draw_m: table.quantity(findings, "draw", "m", 0.01..=100.0),
        launch_speed_min_mps: table.quantity(findings, "launch_speed_min", "m/s", 0.0..=150.0),
        launch_speed_max_mps: table.quantity(findings, "launch_speed_max", "m/s", 0.0..=150.0),
        slack_tension_n: table.quantity(findings, "slack_tension", "N", 0.1..=10_000.0),
        tension_band_relative: table.quantity(findings, "tension_band", "%", 0.1..=50.0),
    };
    table.finish(findings);
    plan
}

/// Σ of coefficients over counts, each with the unit of what is measured: `["0 N", "0.238 mN"]`.
pub(super) fn coefficients(table: &mut Section<'_, '_>, findings: &mut Findings<'_>, unit: &str) -> Vec<f64> {
    let key = table.key("coefficients");
    let Some(value) = table.required(findings, "coefficients") else { return Vec::new() };
    let Some(entries) = value.get_ref().as_array() else {
        findings.error(&key, format!("must be a list such as [\"0 {unit}\", \"0.001 {unit}\"]"));
        return Vec::new();
    };
    let mut list = Vec::new();
    for (index, entry) in entries.iter().enumerate() {
        list.push(quantity_of(findings, &format!("{key}[{index}]"), entry, unit, f64::MIN..=f64::MAX));
    }
    if !(2..=4).contains(&list.len()) {
        let n = list.len();
        findings.error(&key, format!("has {n} entries, 2 (straight line) to 4 (cubic) are understood"));
    } else if list[1..].iter().all(|&coefficient| coefficient == 0.0) {
        findings.error(&key, "gives the same value for all counts");
    }
    list
}
