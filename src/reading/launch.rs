//! Separation and what the payload has then.
//!
//! A pushed payload is left when the contact force reaches zero. Along the rail m_p·(a + g sin θ) = N − D, so N = 0
//! where the specific force falls to −D/m_p, D being the payload's drag (½·ρ·C_dA·(v + head wind)²). The cords' pull
//! dies there, so the speed hardly changes with the place: what a wrong place costs is still in the budget.

use crate::rig::{Rig, Role};

use super::dynamics::RailModel;
use super::motion::Track;
use super::rows::{Book, Budget};
use super::sensors::Sensors;

/// The start of the stroke in which no separation is looked for: the specific force has to rise first.
const AFTER_RELEASE_S: f64 = 0.01;
/// The specific force must stay under the crossing this long.
const STAYS_S: f64 = 0.001;
/// Over which a straight line is laid through it before the crossing.
const SLOPE_S: f64 = 0.005;
/// Least slope that makes a crossing.
const LEAST_SLOPE_MPS3: f64 = 20.0;
/// Over which the smoother makes neighbours alike.
const SMOOTHED_S: f64 = 0.0005;

/// Rails recoil at 0.1 to 0.4 m/s (common practice, no published source); faster than this none does.
const RAIL_FASTEST_MPS: f64 = 1.0;
/// Times the speed that a rail on the rig file's feet would reach.
const RAIL_BEYOND_MODEL: f64 = 3.0;

#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Separation {
    pub time_s: f64,
    pub u_time_s: f64,
    pub x_m: f64,
    pub u_x_m: f64,
    pub speed_mps: f64,
    pub u_speed_mps: f64,
}

/// Specific force at which the payload is no longer pushed.
fn contact_lost_mps2(rig: &Rig, speed_mps: f64) -> f64 {
    let air_speed_mps = speed_mps + rig.site.head_wind_mps;
    let drag_n =
        0.5 * rig.site.air_density_kg_per_m3 * rig.payload.drag_area_m2.value * air_speed_mps * air_speed_mps.abs();
    -drag_n / rig.payload.mass_kg.value
}

pub(super) fn find(track: &Track, release_s: f64, rig: &Rig) -> Result<Separation, String> {
    let motion = &track.motion;
    let first = track.index_at(release_s + AFTER_RELEASE_S);
    let n = motion.time_s.len();
    let under = |idx: usize| track.specific_force_mps2[idx] < contact_lost_mps2(rig, motion.v_mps[idx]);
    let pushed = (first..n).find(|&idx| !under(idx)).ok_or("the payload was never pushed")?;
    let stays = |idx: usize| {
        let until = track.index_at(motion.time_s[idx] + STAYS_S);
        (idx..=until).all(under)
    };
    let found = (pushed..n).find(|&idx| under(idx) && stays(idx));
    let idx = found.ok_or("the specific force never fell to the payload's drag: no loss of contact was seen")?;
    Ok(at_crossing(track, idx, rig))
}

fn at_crossing(track: &Track, idx: usize, rig: &Rig) -> Separation {
    let (time_s, u_time_s) = refined(track, idx, rig);
    at(track, time_s, u_time_s)
}

/// The payload's state when it leaves at a given instant.
pub(super) fn at(track: &Track, time_s: f64, u_time_s: f64) -> Separation {
    let motion = &track.motion;
    let idx = track.index_at(time_s).max(1);
    let share = (time_s - motion.time_s[idx - 1]) / (motion.time_s[idx] - motion.time_s[idx - 1]);
    let between = |column: &[f64]| column[idx - 1] * (1.0 - share) + column[idx] * share;
    let rail_mps = between(&motion.v_mps);
    Separation {
        time_s,
        u_time_s,
        x_m: between(&motion.x_m),
        u_x_m: between(&motion.u_x_m).hypot(rail_mps * u_time_s),
        speed_mps: rail_mps + between(&track.rail_v_mps),
        u_speed_mps: between(&track.u_ground_v_mps),
    }
}

/// Crossing of a straight line through the last milliseconds before it: single smoothed values are noisier, and after
/// it the shuttle alone is lighter and the slope another. Found again twice, for the line moves the crossing.
fn refined(track: &Track, idx: usize, rig: &Rig) -> (f64, f64) {
    let motion = &track.motion;
    let over = |idx: usize| track.specific_force_mps2[idx] - contact_lost_mps2(rig, motion.v_mps[idx]);
    let mut time_s = motion.time_s[idx];
    let mut u_time_s = SLOPE_S;
    let u_drag_mps2 = contact_lost_mps2(rig, motion.v_mps[idx]).abs() * relative_u_drag(rig);
    let u_common_mps2 = track.u_bias_mps2.hypot(u_drag_mps2);
    for _ in 0..3 {
        let (first, last) = (track.index_at(time_s - SLOPE_S), track.index_at(time_s));
        let points: Vec<(f64, f64)> = (first..last).map(|k| (motion.time_s[k] - time_s, over(k))).collect();
        let Some((level, slope)) = straight_line(&points) else { break };
        if slope > -LEAST_SLOPE_MPS3 {
            break;
        }
        let step_s = (-level / slope).clamp(-SLOPE_S, SLOPE_S);
        // Twice the mean's scatter at the end of a line; neighbours within the smoother's reach count as one.
        let n_free = (SLOPE_S / SMOOTHED_S).max(1.0);
        let noise_mps2 = 2.0 * track.u_specific_force_mps2[last] / n_free.sqrt();
        u_time_s = noise_mps2.hypot(u_common_mps2) / slope.abs();
        time_s += step_s;
    }
    (time_s, u_time_s)
}

/// Value at zero and slope, by least squares.
fn straight_line(points: &[(f64, f64)]) -> Option<(f64, f64)> {
    let n = points.len() as f64;
    if points.len() < 3 {
        return None;
    }
    let (t_mean, y_mean) = (points.iter().map(|p| p.0).sum::<f64>() / n, points.iter().map(|p| p.1).sum::<f64>() / n);
    let along: f64 = points.iter().map(|p| (p.0 - t_mean) * (p.1 - y_mean)).sum();
    let spread: f64 = points.iter().map(|p| (p.0 - t_mean).powi(2)).sum();
    let slope = along / spread;
    slope.is_finite().then_some((y_mean - slope * t_mean, slope))
}

fn relative_u_drag(rig: &Rig) -> f64 {
    let relative =
        |given: crate::rig::Given| if given.value == 0.0 { 0.0 } else { given.standard_uncertainty / given.value };
    relative(rig.payload.drag_area_m2).hypot(relative(rig.payload.mass_kg))
}

/// A sentence where encoder and accelerometer differ by a speed that no rail has: one of them is wrong, and nobody can say
/// which.
pub(super) fn contradiction(found: &Separation, track: &Track, rail: Option<RailModel>) -> Option<String> {
    let allowed_mps = RAIL_FASTEST_MPS.max(RAIL_BEYOND_MODEL * rail.map_or(0.0, |rail| rail.speed_mps));
    let rail_mps = track.rail_v_mps[track.index_at(found.time_s)];
    (track.has_position && track.has_specific_force && rail_mps.abs() > allowed_mps).then(|| {
        format!(
            "the encoder says {:.1} m/s along the rail, the accelerometer {:.1} m/s against the ground: a rail moves at {allowed_mps:.1} m/s at most, so one of them is wrong; look at the accelerometer's range and calibration, and whether the encoder slips",
            found.speed_mps - rail_mps,
            found.speed_mps
        )
    })
}

/// How the loss of contact was seen, in words.
pub(super) fn evidence(found: &Separation, rig: &Rig) -> String {
    let level = contact_lost_mps2(rig, found.speed_mps);
    format!("specific force of the shuttle fell to {level:.2} m/s², where the contact force on the payload is zero")
}

/// Writes instants and results of the separation.
pub(super) fn report(
    found: &Separation,
    evidence: &str,
    track: &Track,
    sensors: &Sensors<'_>,
    rig: &Rig,
    book: &mut Book,
) {
    let by = &track.motion.sensors;
    book.instant("separation", found.time_s, found.u_time_s, format!("{evidence} ({by})"));
    let place = Budget::default().with("encoder and smoother", found.u_x_m);
    if track.has_position {
        book.result(
            "separation_x",
            found.x_m,
            "m",
            place,
            format!("smoothed position at separation, rail frame ({by})"),
        );
    } else {
        book.absent("separation_x", format!("the place needs an encoder: {}", sensors.why_not(Role::ShuttlePosition)));
    }
    let budget = speed_budget(found, track, sensors);
    let airspeed = budget.clone().with("head wind", rig.details.settings.head_wind_mps);
    let rail = match (sensors.position, sensors.specific_force) {
        (Some(_), Some(_)) => "ground frame, the rail's own movement is part of the smoothing",
        (None, _) => "ground frame, as the accelerometer is",
        (Some(_), None) if track.unseen_rail_mps > 0.0 => {
            "an encoder does not see the rail's own movement, so that of the rig file's rail_support is in the uncertainty"
        }
        (Some(_), None) => {
            "the rail is taken to stand firm, as the rig file has it: an encoder does not see its movement"
        }
    };
    let method = format!("speed along the rail at the loss of contact, smoothed from {by}; {rail}");
    book.result("launch_speed", found.speed_mps, "m/s", budget, method);
    book.result(
        "airspeed_at_separation",
        found.speed_mps + rig.site.head_wind_mps,
        "m/s",
        airspeed,
        if rig.details.settings.head_wind_mps > 0.0 {
            "launch speed plus the rig file's head wind with its uncertainty"
        } else {
            "launch speed plus the rig file's head wind, whose own uncertainty is not stated there"
        },
    );
}

fn speed_budget(found: &Separation, track: &Track, sensors: &Sensors<'_>) -> Budget {
    let idx = track.index_at(found.time_s);
    let later = track.index_at(found.time_s + 0.002);
    let (here_mps2, later_mps2) = (track.motion.a_mps2[idx], track.motion.a_mps2[later]);
    let a_mps2 = here_mps2.abs() + 0.5 * (later_mps2 - here_mps2).abs() * (found.u_time_s / 0.002).min(1.0);
    let calibration = (found.speed_mps * track.u_encoder_scale).min(found.u_speed_mps);
    let noise = (found.u_speed_mps.powi(2) - calibration.powi(2)).max(0.0).sqrt();
    let time_s = sensors.position.or(sensors.specific_force).map_or(0.0, |signal| signal.time_uncertainty_s);
    Budget::default()
        .with(
            if track.has_position { "calibration of the encoder" } else { "calibration of the accelerometer" },
            calibration,
        )
        .with("noise", noise)
        .with("place of separation", a_mps2 * found.u_time_s)
        .with("time axis", a_mps2 * time_s)
        .with("movement of the rail, unseen", track.unseen_rail_mps)
}
