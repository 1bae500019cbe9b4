//! Closure over the whole power stroke: the impulse of the cords at their anchor against the momentum it made.
//!
//! What the anchor gives from release to separation is in the momentum of shuttle and payload, in that of the cords, in the
//! weight and in the losses (the impulse theorem, any mechanics text). Strain waves run between anchor and shuttle all the
//! while and need no model here: only what the cords still carry at separation does. Solved for the mass it finds a payload
//! that is not the one the rig file describes.

use crate::rig::{Cords, Rig, Role};

use super::launch::Separation;
use super::motion::Track;
use super::release::Release;
use super::rows::{Book, Budget};
use super::sensors::{Sensors, limits};
use super::series::{longest_gap_s, span};

/// How well the cords' momentum at separation is known, as a share of it: strain waves still run in them.
const CORD_MOMENTUM_SHARE: f64 = 0.1;
/// Longest hole of the anchor's channel that is bridged by a straight line.
const LONGEST_HOLE_S: f64 = 0.005;
/// Difference between the masses, over its uncertainty, that is worth a word.
const WORTH_A_WORD: f64 = 3.0;

/// Results that rest on the rig file's masses, kept back where those are in doubt.
const MASS_IN_DOUBT: &str =
    "the masses of the rig file are in doubt: the cords' impulse over the stroke speaks for others (see the findings)";

const IMPULSE: &str = "cord_impulse";
const MASS: &str = "moving_mass_by_impulse";

/// An amount with its standard uncertainty.
#[derive(Debug, Clone, Copy, Default)]
struct Known {
    value: f64,
    u: f64,
}

/// Writes both rows; gives the reason to keep energies back where the masses are contradicted.
pub(super) fn report(
    sensors: &Sensors<'_>,
    release: &Release,
    track: &Track,
    separation: &Separation,
    rig: &Rig,
    book: &mut Book,
) -> Option<&'static str> {
    let impulse = match at_shuttle_ns(sensors, release, separation, rig) {
        Ok(impulse) => impulse,
        Err(reason) => {
            for name in [IMPULSE, MASS] {
                book.absent(name, reason.clone());
            }
            return None;
        }
    };
    let (impulse_ns, budget) = impulse;
    let u_impulse_ns = budget.total();
    let method = "tension at the cords' anchor, whole launcher, from release to separation, times the travel ratio";
    book.result(IMPULSE, impulse_ns, "N s", budget, method);

    let lasted_s = separation.time_s - release.time_s;
    let cords_kg: f64 =
        all_cords(rig).map(|cords| f64::from(cords.count) * cords.mass_kg * cords.travel_ratio.powi(2)).sum();
    // Speed grows evenly from the anchor to the shuttle's end.
    let cords_ns = 0.5 * cords_kg * separation.speed_mps;
    let losses = losses_ns(track, release, separation, rig);
    let gained_mps = separation.speed_mps + track.gravity_along_mps2 * lasted_s;
    let mass_kg = (impulse_ns - cords_ns - losses.value) / gained_mps;
    let budget = Budget::default()
        .with("impulse of the cords", u_impulse_ns / gained_mps)
        .with("the cords' own momentum", CORD_MOMENTUM_SHARE * cords_ns / gained_mps)
        .with("losses of the rig file", losses.u / gained_mps)
        .with("launch speed", mass_kg * separation.u_speed_mps / gained_mps);
    let u_rig_kg = rig.shuttle.mass_kg.standard_uncertainty.hypot(rig.payload.mass_kg.standard_uncertainty);
    let u_kg = budget.total().hypot(u_rig_kg);
    let off_kg = mass_kg - rig.moving_mass_kg();
    let in_doubt = off_kg.abs() > WORTH_A_WORD * u_kg;
    if in_doubt {
        book.findings.push(format!(
            "the cords' impulse over the stroke and the speed it made speak for {mass_kg:.2} kg of shuttle and payload; the rig file says {:.2} kg, {:.1} times the uncertainty away: weigh the payload, look at the anchor's cell and the losses",
            rig.moving_mass_kg(),
            off_kg.abs() / u_kg
        ));
    }
    let method = format!(
        "impulse at the anchor less {cords_ns:.1} N s left in the cords and {:.1} N s of losses of the rig file, over the speed at separation and that lost to the incline",
        losses.value
    );
    book.result(MASS, mass_kg, "kg", budget, method);
    in_doubt.then_some(MASS_IN_DOUBT)
}

fn all_cords(rig: &Rig) -> impl Iterator<Item = &Cords> {
    std::iter::once(&rig.cords).chain(rig.details.more_cords.iter().map(|group| &group.cords))
}

/// Of the anchor's tension on the shuttle from release to separation, N·s, with its budget.
fn at_shuttle_ns(
    sensors: &Sensors<'_>,
    release: &Release,
    separation: &Separation,
    rig: &Rig,
) -> Result<(f64, Budget), String> {
    let anchor = sensors.anchor.ok_or_else(|| sensors.why_not(Role::CordAnchorTension))?;
    if all_cords(rig).all(|cords| cords.count == 0) {
        return Err("the rig file has no cords".to_owned());
    }
    let other_sources = !rig.details.gas.is_empty() || !rig.details.force_tables.is_empty();
    if other_sources || !rig.details.payload.thrust.is_empty() {
        return Err("other sources than cords pull too, and no channel measures them".to_owned());
    }
    let ratio = rig.cords.travel_ratio;
    if all_cords(rig).any(|cords| cords.count > 0 && cords.travel_ratio != ratio) {
        return Err("cords of different travel ratios share the anchor's cell".to_owned());
    }
    let (from_s, to_s) = (release.time_s, separation.time_s);
    let gap_s = longest_gap_s(anchor, from_s - LONGEST_HOLE_S, to_s + LONGEST_HOLE_S);
    if gap_s > LONGEST_HOLE_S.max(2.0 / anchor.nominal_rate_hz) {
        return Err(format!("channel {} has a hole of {:.0} ms in the stroke", anchor.name, 1e3 * gap_s));
    }
    let window = span(anchor, from_s - LONGEST_HOLE_S, to_s + LONGEST_HOLE_S);
    let (times_s, values_n) = (&anchor.time_s[window.clone()], &anchor.value[window]);
    let (_, top_n) = limits(anchor);
    if values_n.iter().any(|value_n| *value_n >= top_n) {
        return Err(format!("channel {} saturates at {top_n:.0} N in the stroke", anchor.name));
    }
    let (Some(first_n), Some(last_n)) = (value_at(times_s, values_n, from_s), value_at(times_s, values_n, to_s)) else {
        return Err(format!("channel {} does not cover the stroke", anchor.name));
    };
    let inside = times_s.iter().zip(values_n).map(|(t, n)| (*t, *n)).filter(|(t, _)| *t > from_s && *t < to_s);
    let points: Vec<(f64, f64)> = std::iter::once((from_s, first_n)).chain(inside).chain([(to_s, last_n)]).collect();
    let along = |pair: &[(f64, f64)]| 0.5 * (pair[0].1 + pair[1].1) * (pair[1].0 - pair[0].0);
    let impulse_ns = ratio * points.windows(2).map(along).sum::<f64>();
    let budget = Budget::default()
        .with("calibration of the scale", impulse_ns * anchor.scale_relative_uncertainty)
        .with("zero", ratio * anchor.zero_uncertainty * (to_s - from_s))
        .with("release instant", ratio * first_n * release.u_s)
        .with("time axis", ratio * (first_n - last_n) * anchor.time_uncertainty_s)
        .with("place of separation", ratio * last_n * separation.u_time_s);
    Ok((impulse_ns, budget))
}

/// Straight between the samples about an instant.
fn value_at(times_s: &[f64], values: &[f64], at_s: f64) -> Option<f64> {
    let after = times_s.partition_point(|&t| t < at_s);
    let (before, after) = (after.checked_sub(1)?, (after < times_s.len()).then_some(after)?);
    let share = (at_s - times_s[before]) / (times_s[after] - times_s[before]);
    Some(values[before] + share * (values[after] - values[before]))
}

/// What friction and drag took, as the rig file has them, N·s.
fn losses_ns(track: &Track, release: &Release, separation: &Separation, rig: &Rig) -> Known {
    let (losses, more) = (&rig.losses, &rig.details.losses);
    let lasted_s = separation.time_s - release.time_s;
    let way_m = separation.x_m - track.motion.x_m[track.index_at(release.time_s)];
    let across_n = rig.moving_mass_kg() * crate::units::STANDARD_GRAVITY_MPS2 * rig.rail.incline_rad.cos();
    let motion = &track.motion;
    let stroke = track.index_at(release.time_s)..track.index_at(separation.time_s);
    let pressure_ns: f64 = stroke
        .clone()
        .zip(stroke.skip(1))
        .map(|(a, b)| {
            let wind_mps = 0.5 * (motion.v_mps[a] + motion.v_mps[b]) + rig.site.head_wind_mps;
            let pressure_pa = 0.5 * rig.site.air_density_kg_per_m3 * wind_mps * wind_mps.abs();
            pressure_pa * (motion.time_s[b] - motion.time_s[a])
        })
        .sum();
    let terms = [
        (Some(losses.friction_n), lasted_s),
        (more.load_coefficient, across_n * lasted_s),
        (more.viscous_n_per_mps, way_m),
        (Some(rig.payload.drag_area_m2), pressure_ns),
        (Some(losses.shuttle_drag_area_m2), pressure_ns),
    ];
    terms.into_iter().fold(Known::default(), |sum, (given, times)| {
        let given = given.map_or((0.0, 0.0), |given| (given.value, given.standard_uncertainty));
        Known { value: sum.value + given.0 * times, u: sum.u.hypot(given.1 * times) }
    })
}
