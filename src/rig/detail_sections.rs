//! The optional tables and keys of a rig file: [`Details`](super::Details).

use super::attached::Attached;
use super::details::*;
use super::document::{Findings, Section};
use super::sections::{self, curve};
use super::{CordPoint, Given};

const FORCE_N: std::ops::RangeInclusive<f64> = 0.0..=200_000.0;

pub(super) fn cord_details(table: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> CordDetails {
    CordDetails {
        loading_curve: loading_curve(table, findings),
        gap_width: table.optional_quantity(findings, "branch_gap_width", "%", 0.1..=100.0),
        relaxation: relaxation(table, findings),
        tension_per_kelvin: table.optional_quantity(findings, "tension_per_kelvin", "%", -5.0..=5.0).unwrap_or(0.0),
        card_temperature_c: table.optional_quantity(findings, "curve_temperature", "degC", -40.0..=80.0),
        loss_per_tenfold_cycles: table
            .optional_quantity(findings, "tension_loss_per_tenfold_cycles", "%", 0.0..=30.0)
            .unwrap_or(0.0),
        ..today(table, findings)
    }
}

/// What changes from trial to trial, whoever states the curves.
pub(super) fn today(table: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> CordDetails {
    CordDetails {
        temperature_c: table.optional_quantity(findings, "temperature", "degC", -40.0..=80.0),
        cycles: table.optional_number(findings, "cycles", 0.0..=1e6).unwrap_or(0.0),
        retension_x_m: table.optional_quantity(findings, "retension_from", "m", 0.05..=200.0),
        extrapolate: table.optional_flag(findings, "extrapolate"),
        ..CordDetails::default()
    }
}

fn loading_curve(table: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Vec<CordPoint> {
    if table.optional(findings, "loading_curve").is_some() {
        curve(table, findings, "loading_curve")
    } else {
        Vec::new()
    }
}

pub(super) fn relaxation(table: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Vec<RelaxationTerm> {
    let mut terms = Vec::new();
    for mut entry in table.optional_sections(findings, "relaxation") {
        terms.push(RelaxationTerm {
            share: entry.quantity(findings, "share", "%", 0.0..=50.0),
            time_s: entry.quantity(findings, "time", "s", 0.01..=1e7),
        });
        entry.finish(findings);
    }
    if terms.iter().map(|term| term.share).sum::<f64>() >= 1.0 {
        findings.error(&table.key("relaxation"), "the shares take the whole tension");
    }
    terms
}

pub(super) fn more_cords(
    root: &mut Section<'_, '_>,
    attached: &[Attached],
    findings: &mut Findings<'_>,
) -> Vec<CordGroup> {
    let mut groups = Vec::new();
    for mut entry in root.optional_sections(findings, "more_cords") {
        let zero_mark_x_m = entry.quantity(findings, "zero_mark", "m", 0.05..=100.0);
        let (cords, details) = sections::cords(entry, attached, findings);
        groups.push(CordGroup { cords, zero_mark_x_m, details });
    }
    groups
}

pub(super) fn gas(root: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Vec<Gas> {
    let mut all = Vec::new();
    for mut entry in root.optional_sections(findings, "gas") {
        all.push(one_gas(&mut entry, findings));
        entry.finish(findings);
    }
    all
}

fn one_gas(entry: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Gas {
    let ambient_pressure_pa = entry.pressure_pa(findings, "ambient_pressure", None);
    let charged_pa = entry.pressure_pa(findings, "charged_pressure", Some(ambient_pressure_pa));
    let uncertainty_pa = entry.optional_quantity(findings, "charged_pressure_uncertainty", "bar", 0.0..=100.0);
    let back_pa = entry.optional_quantity(findings, "back_pressure_over_ambient", "bar", 0.0..=100.0);
    Gas {
        charged_pressure_pa: Given { value: charged_pa, standard_uncertainty: uncertainty_pa.unwrap_or(0.0) },
        ambient_pressure_pa,
        back_pressure_pa: back_pa.unwrap_or(0.0),
        vessel_volume_m3: entry.quantity(findings, "vessel_volume", "L", 0.001..=10_000.0),
        dead_volume_m3: entry.quantity(findings, "dead_volume", "L", 0.0..=1000.0),
        temperature_c: entry.quantity(findings, "temperature", "degC", -40.0..=80.0),
        polytropic_exponent: entry.number(findings, "polytropic_exponent", 1.0..=1.7),
        piston_area_m2: entry.quantity(findings, "piston_area", "cm2", 0.01..=10_000.0),
        travel_ratio: entry.optional_number(findings, "travel_ratio", 0.01..=20.0).unwrap_or(1.0),
        stroke_m: entry.quantity(findings, "stroke", "m", 0.01..=100.0),
        hold_s: entry.optional_quantity(findings, "hold_time", "s", 0.0..=1e6).unwrap_or(0.0),
        leak_time_s: entry.optional_quantity(findings, "leak_time", "s", 0.1..=1e9).unwrap_or(f64::INFINITY),
        valve: valve(entry, findings),
    }
}

fn valve(entry: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Option<Valve> {
    let mut table = entry.optional_section(findings, "valve")?;
    let valve = Valve {
        area_m2: table.quantity(findings, "effective_area", "cm2", 1e-4..=1000.0),
        line_area_m2: table
            .optional_quantity(findings, "line_effective_area", "cm2", 1e-4..=1000.0)
            .unwrap_or(f64::INFINITY),
        opening_s: table.quantity(findings, "opening_time", "s", 0.0..=10.0),
    };
    table.finish(findings);
    Some(valve)
}

/// `[[force_table]]`, each with `points`.
pub(super) fn force_tables(root: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Vec<Vec<XForce>> {
    let mut all = Vec::new();
    for mut entry in root.optional_sections(findings, "force_table") {
        all.push(x_forces(&mut entry, findings, "points"));
        entry.finish(findings);
    }
    all
}

fn x_forces(table: &mut Section<'_, '_>, findings: &mut Findings<'_>, key: &'static str) -> Vec<XForce> {
    let mut points: Vec<XForce> = Vec::new();
    for mut entry in table.optional_sections(findings, key) {
        let x_m = entry.quantity(findings, "x", "m", -10.0..=200.0);
        let force_n = entry.quantity(findings, "force", "N", FORCE_N);
        entry.finish(findings);
        if points.last().is_some_and(|before| x_m <= before.x_m) {
            findings.error(&table.key(key), format!("x must increase, {x_m:.3} m does not"));
        }
        points.push(XForce { x_m, force_n });
    }
    if points.len() == 1 {
        findings.error(&table.key(key), "has 1 point, at least 2 are needed");
    }
    points
}

pub(super) fn more_losses(table: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> MoreLosses {
    let plain = |table: &mut Section<'_, '_>, findings: &mut Findings<'_>, keys: [&'static str; 2]| {
        let value = table.optional_number(findings, keys[0], 0.0..=5.0);
        let uncertainty = table.optional_number(findings, keys[1], 0.0..=5.0);
        value.map(|value| Given { value, standard_uncertainty: uncertainty.unwrap_or(0.0) })
    };
    MoreLosses {
        load_coefficient: plain(table, findings, ["load_friction", "load_friction_uncertainty"]),
        pull_coefficient: plain(table, findings, ["pull_friction", "pull_friction_uncertainty"]),
        viscous_n_per_mps: table.optional_given(findings, ["viscous", "viscous_uncertainty"], "N s/m", 0.0..=1000.0),
        breakaway_n: table.optional_given(findings, ["breakaway", "breakaway_uncertainty"], "N", FORCE_N),
        cord_lag: table.optional_given(findings, ["cord_lag", "cord_lag_uncertainty"], "%", 0.0..=20.0),
        cord_viscous_n_per_mps: table.optional_given(
            findings,
            ["cord_viscous", "cord_viscous_uncertainty"],
            "N s/m",
            0.0..=1000.0,
        ),
        along_x: x_forces(table, findings, "along_x"),
        along_x_relative_uncertainty: table
            .optional_quantity(findings, "along_x_uncertainty", "%", 0.0..=100.0)
            .unwrap_or(0.0),
        fit: to_fit(table, findings),
        card: None,
    }
}

/// Losses that a fit may be asked to find.
const LOSSES: [&str; 12] = [
    "friction",
    "load_friction",
    "pull_friction",
    "viscous",
    "shuttle_drag_area",
    "payload_drag_area",
    "hysteresis",
    "recoil",
    "along_x",
    "breakaway",
    "cord_lag",
    "cord_viscous",
];

fn to_fit(table: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Vec<String> {
    let names = table.texts(findings, "fit");
    for name in names.iter().filter(|name| !LOSSES.contains(&name.as_str())) {
        findings.error(&table.key("fit"), format!("{name:?} is no loss, there are: {}", LOSSES.join(", ")));
    }
    names
}

pub(super) fn rail_support(root: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Option<RailSupport> {
    let mut table = root.optional_section(findings, "rail_support")?;
    let support = RailSupport {
        mass_kg: table.given(findings, ["mass", "mass_uncertainty"], "kg", 1.0..=100_000.0),
        stiffness_n_per_m: table.given(findings, ["stiffness", "stiffness_uncertainty"], "N/m", 0.0..=1e9),
        damping_n_per_mps: table.quantity(findings, "damping", "N s/m", 0.0..=1e7),
    };
    table.finish(findings);
    Some(support)
}

pub(super) fn payload_details(table: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> PayloadDetails {
    let mut thrust: Vec<(f64, f64)> = Vec::new();
    for mut entry in table.optional_sections(findings, "thrust") {
        let point =
            (entry.quantity(findings, "airspeed", "m/s", 0.0..=200.0), entry.quantity(findings, "force", "N", FORCE_N));
        entry.finish(findings);
        if thrust.last().is_some_and(|before| point.0 <= before.0) {
            findings.error(&table.key("thrust"), format!("airspeed must increase, {:.2} m/s does not", point.0));
        }
        thrust.push(point);
    }
    if thrust.len() == 1 {
        findings.error(&table.key("thrust"), "has 1 point, at least 2 are needed");
    }
    let lift_area_m2 = table.optional_quantity(findings, "lift_area", "m2", 0.0..=20.0).unwrap_or(0.0);
    PayloadDetails { thrust, lift_area_m2 }
}

pub(super) fn brake_details(table: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> BrakeDetails {
    BrakeDetails {
        per_metre_n_per_m: table.optional_quantity(findings, "brake_per_metre", "N/m", 0.0..=1e6).unwrap_or(0.0),
        per_speed_n_per_mps: table.optional_quantity(findings, "brake_per_speed", "N s/m", 0.0..=1e5).unwrap_or(0.0),
        relative_uncertainty: table.optional_quantity(findings, "brake_uncertainty", "%", 0.0..=50.0).unwrap_or(0.0),
    }
}

pub(super) fn correlations(root: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Vec<Correlation> {
    let mut all = Vec::new();
    for mut entry in root.optional_sections(findings, "correlation") {
        let names = entry.texts(findings, "between");
        let coefficient = entry.number(findings, "coefficient", -1.0..=1.0);
        match <[String; 2]>::try_from(names) {
            Ok(between) => all.push(Correlation { between, coefficient }),
            Err(names) => {
                findings.error(&entry.key("between"), format!("names {} inputs, it takes 2", names.len()));
            }
        }
        entry.finish(findings);
    }
    all
}

pub(super) fn stages(root: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Vec<Stage> {
    let mut all = Vec::new();
    for mut entry in root.optional_sections(findings, "stage") {
        all.push(Stage {
            name: entry.text(findings, "name"),
            cord_count: entry.optional_number(findings, "cords", 1.0..=200.0).map(|count| count as u32),
            draw_m: entry.optional_quantity(findings, "draw", "m", 0.01..=100.0),
            payload_mass_kg: entry.optional_quantity(findings, "payload_mass", "kg", 0.01..=500.0),
            gate: entry.text(findings, "gate"),
            inspect: entry.texts(findings, "inspect"),
        });
        entry.finish(findings);
    }
    all
}
