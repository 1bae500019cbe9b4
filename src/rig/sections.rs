//! The tables of a rig file, one function each: which keys there are, in which unit, within which range.
//!
//! The ranges only catch slips of the pen and the unit (a 7 mm rail, a 60 deg incline); they are no engineering limits.

use super::attached::Attached;
use super::details::{BrakeDetails, CordDetails, MoreLosses, PayloadDetails, SettingUncertainties};
use super::document::{Findings, Section, quantity_of};
use super::finding::Severity;
use super::surroundings::{moist_air_density_kg_per_m3, standard_air_density_kg_per_m3};
use super::{
    CordCard, CordPoint, Cords, Given, Limits, LossCard, Losses, Payload, Plan, Rail, Rig, Shuttle, Site,
    detail_sections,
};
use crate::units::STANDARD_GRAVITY_MPS2;

const MASS_KG: std::ops::RangeInclusive<f64> = 0.01..=500.0;
const FORCE_N: std::ops::RangeInclusive<f64> = 0.0..=200_000.0;
const DRAG_AREA_M2: std::ops::RangeInclusive<f64> = 0.0..=5.0;

pub(super) fn site(mut table: Section<'_, '_>, findings: &mut Findings<'_>) -> (Site, SettingUncertainties) {
    let altitude_m = table.quantity(findings, "altitude", "m", -450.0..=6000.0);
    let site = Site {
        latitude_rad: table.quantity(findings, "latitude", "deg", -90.0..=90.0),
        altitude_m,
        air_density_kg_per_m3: air_density(&mut table, findings, altitude_m),
        head_wind_mps: table.quantity(findings, "head_wind", "m/s", -40.0..=40.0),
    };
    let uncertainties = SettingUncertainties {
        head_wind_mps: table.optional_quantity(findings, "head_wind_uncertainty", "m/s", 0.0..=20.0).unwrap_or(0.0),
        air_density_relative: table
            .optional_quantity(findings, "air_density_uncertainty", "%", 0.0..=20.0)
            .unwrap_or(0.0),
        ..SettingUncertainties::default()
    };
    table.finish(findings);
    (site, uncertainties)
}

/// The density itself, or from temperature, pressure and humidity, or that of the standard atmosphere with a caution.
fn air_density(table: &mut Section<'_, '_>, findings: &mut Findings<'_>, altitude_m: f64) -> f64 {
    let given = table.optional_quantity(findings, "air_density", "kg/m3", 0.5..=1.6);
    let temperature_c = table.optional_quantity(findings, "air_temperature", "degC", -20.0..=45.0);
    let humidity = table.optional_quantity(findings, "air_humidity", "%", 0.0..=100.0);
    let pressure_pa = if table.optional(findings, "air_pressure").is_some() {
        Some(table.pressure_pa(findings, "air_pressure", None))
    } else {
        None
    };
    if let Some(density) = given {
        return density;
    }
    let density = match (temperature_c, pressure_pa, humidity) {
        (Some(temperature_c), Some(pressure_pa), Some(humidity)) => {
            moist_air_density_kg_per_m3(temperature_c, pressure_pa, humidity)
        }
        _ => {
            let message = "neither air_density nor air_temperature, air_pressure and air_humidity are given: \
                           the standard atmosphere at this altitude is taken";
            findings.caution("site", message);
            standard_air_density_kg_per_m3(altitude_m)
        }
    };
    density.unwrap_or_else(|error| {
        if ![temperature_c, pressure_pa, humidity, Some(altitude_m)].into_iter().flatten().any(f64::is_nan) {
            findings.error("site", error.to_string());
        }
        f64::NAN
    })
}

pub(super) fn rail(mut table: Section<'_, '_>, findings: &mut Findings<'_>) -> (Rail, BrakeDetails, Option<f64>) {
    let rail = Rail {
        length_m: table.quantity(findings, "length", "m", 0.2..=100.0),
        incline_rad: table.quantity(findings, "incline", "deg", -10.0..=45.0),
        zero_mark_x_m: table.quantity(findings, "zero_mark", "m", 0.05..=100.0),
        brake_x_m: table.quantity(findings, "brake_from", "m", 0.05..=100.0),
        brake_force_n: table.quantity(findings, "brake_force", "N", FORCE_N),
    };
    let brake = detail_sections::brake_details(&mut table, findings);
    let uncoupling_x_m = table.optional_quantity(findings, "uncoupling_at", "m", 0.05..=100.0);
    table.finish(findings);
    (rail, brake, uncoupling_x_m)
}

pub(super) fn shuttle(mut table: Section<'_, '_>, findings: &mut Findings<'_>) -> Shuttle {
    let shuttle = Shuttle { mass_kg: table.given(findings, ["mass", "mass_uncertainty"], "kg", MASS_KG) };
    table.finish(findings);
    shuttle
}

pub(super) fn payload(mut table: Section<'_, '_>, findings: &mut Findings<'_>) -> (Payload, PayloadDetails) {
    let payload = Payload {
        name: table.text(findings, "name"),
        mass_kg: table.given(findings, ["mass", "mass_uncertainty"], "kg", MASS_KG),
        drag_area_m2: table.given(findings, ["drag_area", "drag_area_uncertainty"], "m2", DRAG_AREA_M2),
    };
    let details = detail_sections::payload_details(&mut table, findings);
    table.finish(findings);
    (payload, details)
}

pub(super) fn cords(
    mut table: Section<'_, '_>,
    attached: &[Attached],
    findings: &mut Findings<'_>,
) -> (Cords, CordDetails) {
    let count = table.number(findings, "count", 1.0..=200.0);
    if count.fract() > 0.0 {
        findings.error(&table.key("count"), format!("is {count}, cords come in whole numbers"));
    }
    let travel_ratio = table.number(findings, "travel_ratio", 0.05..=20.0);
    let bare = Cords { count: count as u32, travel_ratio, ..Cords::none() };
    if table.optional(findings, "card").is_some() {
        return cords_of_card(table, bare, attached, findings);
    }
    let cords = Cords {
        free_length_m: table.quantity(findings, "free_length", "m", 0.05..=100.0),
        mass_kg: table.quantity(findings, "mass", "kg", 0.001..=50.0),
        curve: curve(&mut table, findings, "curve"),
        force_relative_uncertainty: table.quantity(findings, "force_uncertainty", "%", 0.0..=50.0),
        ..bare
    };
    let details = detail_sections::cord_details(&mut table, findings);
    table.finish(findings);
    (cords, details)
}

/// Cords that a card describes: the rig file adds how many there are and what is so today.
fn cords_of_card(
    mut table: Section<'_, '_>,
    mut cords: Cords,
    attached: &[Attached],
    findings: &mut Findings<'_>,
) -> (Cords, CordDetails) {
    let pointer = table.text(findings, "card");
    let key = table.key("card");
    let mut details = detail_sections::today(&mut table, findings);
    for of_card in OF_CARD {
        if table.optional(findings, of_card).is_some() {
            findings.error(&table.key(of_card), "stands beside card: keep the card, what it says counts");
        }
    }
    table.finish(findings);
    let Some(found) = attached.iter().find(|text| text.name == pointer) else {
        if !pointer.is_empty() {
            findings.error(&key, format!("{pointer} can't be read: is it there, beside the rig file?"));
        }
        return (cords, details);
    };
    let (card, wrong) = CordCard::read(&pointer, &found.text);
    for finding in wrong.iter().filter(|finding| finding.severity == Severity::Error) {
        findings.error(&key, format!("{pointer}:{finding}"));
    }
    if let Some(card) = card {
        card.put_into(&mut cords, &mut details);
        details.card = Some(card);
    }
    (cords, details)
}

/// Keys that a card takes the place of.
const OF_CARD: [&str; 10] = [
    "free_length",
    "mass",
    "curve",
    "loading_curve",
    "force_uncertainty",
    "branch_gap_width",
    "relaxation",
    "curve_temperature",
    "tension_per_kelvin",
    "tension_loss_per_tenfold_cycles",
];

/// Points of one cord, checked to begin at (0, 0) and to rise; none if they do not, so that nothing is built on them.
pub(super) fn curve(table: &mut Section<'_, '_>, findings: &mut Findings<'_>, name: &'static str) -> Vec<CordPoint> {
    let path = table.key(name);
    let mut points: Vec<CordPoint> = Vec::new();
    let mut in_order = true;
    for (index, mut entry) in table.sections(findings, name).into_iter().enumerate() {
        let point = CordPoint {
            elongation: entry.quantity(findings, "elongation", "%", 0.0..=1000.0),
            tension_n: entry.quantity(findings, "tension", "N", FORCE_N),
        };
        entry.finish(findings);
        let key = format!("{path}[{index}]");
        let wrong = disorder(points.last(), &point);
        if let Some(message) = wrong {
            findings.error(&key, message);
            in_order = false;
        }
        points.push(point);
    }
    if points.len() == 1 {
        findings.error(&path, "has 1 point, at least 2 are needed");
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

/// Losses, and where the loss card is whose values take their place.
pub(super) fn losses(mut table: Section<'_, '_>, findings: &mut Findings<'_>) -> (Losses, MoreLosses, Option<String>) {
    let losses = Losses {
        friction_n: table.given(findings, ["friction", "friction_uncertainty"], "N", FORCE_N),
        shuttle_drag_area_m2: shuttle_drag_area(&mut table, findings),
    };
    let more = detail_sections::more_losses(&mut table, findings);
    let card = table.optional_text(findings, "card");
    table.finish(findings);
    (losses, more, card)
}

/// Puts the attached loss card into the rig.
pub(super) fn put_loss_card(rig: &mut Rig, pointer: &str, findings: &mut Findings<'_>) {
    const KEY: &str = "losses.card";
    let Some(found) = rig.attached.iter().find(|text| text.name == pointer) else {
        findings.error(KEY, format!("{pointer} can't be read: is it there, beside the rig file?"));
        return;
    };
    let (card, wrong) = LossCard::read(pointer, &found.text);
    for finding in wrong.iter().filter(|finding| finding.severity == Severity::Error) {
        findings.error(KEY, format!("{pointer}:{finding}"));
    }
    let Some(card) = card else { return };
    if card.rig != rig.name {
        findings.caution(KEY, format!("{pointer} is of rig {:?}, this is {:?}", card.rig, rig.name));
    }
    card.put_into(rig);
}

fn shuttle_drag_area(table: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Given {
    let keys = ["shuttle_drag_area", "shuttle_drag_area_uncertainty"];
    table.given(findings, keys, "m2", DRAG_AREA_M2)
}

/// Limits, and the greatest asymmetry of the anchors where one is set.
pub(super) fn limits(mut table: Section<'_, '_>, findings: &mut Findings<'_>) -> (Limits, Option<f64>) {
    let limits = Limits {
        tension_n: table.quantity(findings, "tension", "N", 1.0..=200_000.0),
        peak_g: table.quantity(findings, "peak_g", "g", 0.1..=500.0) / STANDARD_GRAVITY_MPS2,
    };
    let asymmetry = table.optional_quantity(findings, "asymmetry", "%", 0.0..=100.0);
    table.finish(findings);
    (limits, asymmetry)
}

pub(super) fn plan(mut table: Section<'_, '_>, findings: &mut Findings<'_>) -> (Plan, SettingUncertainties) {
    let plan = Plan {
        draw_m: table.quantity(findings, "draw", "m", 0.01..=100.0),
        launch_speed_min_mps: table.quantity(findings, "launch_speed_min", "m/s", 0.0..=150.0),
        launch_speed_max_mps: table.quantity(findings, "launch_speed_max", "m/s", 0.0..=150.0),
        slack_tension_n: table.quantity(findings, "slack_tension", "N", 0.1..=10_000.0),
        tension_band_relative: table.quantity(findings, "tension_band", "%", 0.1..=50.0),
    };
    let settings = SettingUncertainties {
        draw_m: table.optional_quantity(findings, "draw_uncertainty", "mm", 0.0..=500.0).unwrap_or(0.0),
        winch_s: table.optional_quantity(findings, "winch_time", "s", 0.0..=3600.0).unwrap_or(0.0),
        hold_s: table.optional_quantity(findings, "hold_time", "s", 0.0..=1e6).unwrap_or(0.0),
        ..SettingUncertainties::default()
    };
    table.finish(findings);
    (plan, settings)
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
