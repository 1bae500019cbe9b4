//! Checks that need more than one key: numbers that are fine alone and impossible together.
//!
//! A value that could not be read is NaN, a count 0; every comparison is written so that these raise no finding.

use super::channels::Channels;
use super::document::Findings;
use super::instrument::{LONGEST_INTERVAL_S, SILENT_INTERVALS, TextColumn};
use super::proof;
use super::{Channel, Cords, Device, Input, Protocol, Rig, Role};
use crate::units::STANDARD_GRAVITY_MPS2;

pub(super) fn rig(rig: &Rig, findings: &mut Findings<'_>) {
    rail(rig, findings);
    plan(rig, findings);
    planned_tension(rig, findings);
    slow_instruments(rig, findings);
    if let Some(proof) = &rig.details.proof_load {
        proof::against_limit(proof, rig.limits.peak_g, findings);
    }
    cord_items(rig, findings);
}

/// As many cords listed as there are, of the lot that the card is of.
fn cord_items(rig: &Rig, findings: &mut Findings<'_>) {
    let items = &rig.details.cord_items;
    let sets = rig.details.more_cords.iter().map(|group| group.cords.count);
    let count = rig.cords.count + sets.sum::<u32>();
    if !items.is_empty() && items.len() != count as usize {
        findings.caution("cord", format!("lists {} cords, the rig has {count}", items.len()));
    }
    let cards: Vec<&str> = rig.details.cards().map(|card| card.lot.as_str()).collect();
    for (index, item) in items.iter().enumerate() {
        if !cards.is_empty() && !cards.contains(&item.lot.as_str()) {
            let message =
                format!("cord {} is of lot {:?}, the cards are of {}", item.serial, item.lot, cards.join(", "));
            findings.caution(&format!("cord[{index}].lot"), message);
        }
    }
}

fn rail(rig: &Rig, findings: &mut Findings<'_>) {
    let rail = &rig.rail;
    if rail.zero_mark_x_m >= rail.length_m {
        let (mark, length) = (rail.zero_mark_x_m, rail.length_m);
        findings
            .error("rail.zero_mark", format!("at x = {mark:.3} m lies beyond the rail, which ends at {length:.3} m"));
    }
    if rail.brake_x_m >= rail.length_m {
        let (brake, length) = (rail.brake_x_m, rail.length_m);
        findings
            .error("rail.brake_from", format!("at x = {brake:.3} m lies beyond the rail, which ends at {length:.3} m"));
    }
    if rail.brake_x_m < rail.zero_mark_x_m {
        let (brake, mark) = (rail.brake_x_m, rail.zero_mark_x_m);
        let message = format!("at x = {brake:.3} m would brake under power, the cords pull up to x = {mark:.3} m");
        findings.error("rail.brake_from", message);
    }
    let speed_mps = rig.plan.launch_speed_max_mps;
    let stop_m = 0.5 * rig.shuttle.mass_kg.value * speed_mps * speed_mps / rail.brake_force_n;
    let room_m = rail.length_m - rail.brake_x_m;
    if stop_m > room_m {
        let message = format!(
            "the shuttle alone at {speed_mps:.1} m/s needs {stop_m:.2} m to stop, {room_m:.2} m are left before the end stop"
        );
        findings.caution("rail.brake_force", message);
    }
}

fn plan(rig: &Rig, findings: &mut Findings<'_>) {
    let plan = &rig.plan;
    if plan.draw_m > rig.rail.zero_mark_x_m {
        let (draw, mark) = (plan.draw_m, rig.rail.zero_mark_x_m);
        let message =
            format!("{draw:.3} m from the zero mark at x = {mark:.3} m would end before the rail's start at x = 0");
        findings.error("plan.draw", message);
    }
    if plan.launch_speed_min_mps >= plan.launch_speed_max_mps {
        let (min, max) = (plan.launch_speed_min_mps, plan.launch_speed_max_mps);
        let message = format!("{max:.2} m/s is not above launch_speed_min, {min:.2} m/s: the window is empty");
        findings.error("plan.launch_speed_max", message);
    }
}

/// What the whole launcher pulls at the planned draw, by the cord curve, against limits, friction and slack threshold.
fn planned_tension(rig: &Rig, findings: &mut Findings<'_>) {
    let (cords, limits) = (&rig.cords, &rig.limits);
    let elongation = rig.plan.draw_m * cords.travel_ratio / cords.free_length_m;
    let Some(last) = cords.curve.last().filter(|_| cords.count > 0) else { return };
    if elongation > last.elongation {
        let (needed, known) = (100.0 * elongation, 100.0 * last.elongation);
        let message = format!(
            "stretches the cords by {needed:.1} %, the curve ends at {known:.1} %: measure further or draw less"
        );
        if rig.details.cords.extrapolate {
            findings.caution("plan.draw", format!("{message} (taken, as cords.extrapolate asks for it)"));
        } else {
            findings.error("plan.draw", message);
        }
        return;
    }
    let tension_n = launcher_tension_n(cords, elongation);
    if tension_n > limits.tension_n {
        let limit_n = limits.tension_n;
        let message = format!("{limit_n:.0} N is below the plan, the planned draw pulls {tension_n:.0} N");
        findings.error("limits.tension", message);
    }
    let line = rig.channel_with_role(Role::ReleaseLineTension).and_then(|channel| channel.record.as_ref());
    if let Some(record) = line.filter(|record| tension_n > record.tested.1) {
        let message = format!(
            "pulls {tension_n:.0} N, the release line's cell was tested to {:.0} N only ({}): beyond it its values are extrapolated",
            record.tested.1, record.name
        );
        findings.caution("plan.draw", message);
    }
    let release_g = (tension_n - rig.losses.friction_n.value) / rig.moving_mass_kg() / STANDARD_GRAVITY_MPS2;
    if release_g > limits.peak_g {
        let limit_g = limits.peak_g;
        let message = format!("{limit_g:.2} g is below the plan, the planned draw releases at about {release_g:.2} g");
        findings.error("limits.peak_g", message);
    }
    if rig.losses.friction_n.value >= tension_n {
        let friction_n = rig.losses.friction_n.value;
        let message =
            format!("{friction_n:.0} N holds the shuttle against the planned {tension_n:.0} N: it would not move");
        findings.error("losses.friction", message);
    }
    if rig.plan.slack_tension_n >= 0.2 * tension_n {
        let slack_n = rig.plan.slack_tension_n;
        let message =
            format!("{slack_n:.1} N is a fifth or more of the planned {tension_n:.0} N: loaded cords would read slack");
        findings.error("plan.slack_tension", message);
    }
}

/// A tension that is shown late is a tension that the winch has left behind.
fn slow_instruments(rig: &Rig, findings: &mut Findings<'_>) {
    let winch_s = rig.details.settings.winch_s;
    let allowed_s = rig.plan.tension_band_relative * winch_s;
    for (index, device) in rig.devices.iter().enumerate() {
        let Protocol::Text(instrument) = &device.protocol else { continue };
        let of_tension = |column: &&TextColumn| {
            let read = |channel: &&Channel| channel.device == device.name && channel.device_channel == column.name;
            rig.channels.iter().find(read).is_some_and(|channel| channel.role.is_tension())
        };
        let Some(column) = instrument.columns.iter().find(of_tension) else { continue };
        let key = format!("device[{index}].text.interval");
        let (interval_s, longest_s) = (instrument.interval_s, LONGEST_INTERVAL_S);
        if interval_s > longest_s {
            let message = format!(
                "a tension every {interval_s:.2} s is too slow to watch a winch: {:.0} s without a reading are silence, so the display will call it unknown between readings; {:.0} ms is the limit",
                longest_s * SILENT_INTERVALS,
                1e3 * longest_s
            );
            findings.caution(&key, message);
            continue;
        }
        let late_s = interval_s + column.delay_s.unwrap_or(instrument.delay_s);
        if winch_s > 0.0 && late_s > allowed_s {
            let message = format!(
                "with its delay a tension is up to {:.0} ms old when the next comes: at plan.winch_time the winch goes on by more than plan.tension_band in that; {:.0} ms is the limit, winch more slowly or take a faster instrument",
                1e3 * late_s,
                1e3 * allowed_s
            );
            findings.caution(&key, message);
        }
    }
}

/// Force of all cords on the shuttle, linear between the curve's points; NaN where the curve is.
fn launcher_tension_n(cords: &Cords, elongation: f64) -> f64 {
    let segment = cords.curve.windows(2).find(|pair| elongation <= pair[1].elongation);
    let Some(&[from, to]) = segment else { return f64::NAN };
    let share = (elongation - from.elongation) / (to.elongation - from.elongation);
    let one_n = from.tension_n + share * (to.tension_n - from.tension_n);
    f64::from(cords.count) * cords.travel_ratio * one_n
}

/// Each role once, the release line at least; each device used; no device channel read twice.
pub(super) fn channels(channels: &Channels, devices: &[Device], inputs: &[Input], findings: &mut Findings<'_>) {
    let all = || {
        let calibrated = channels.calibrated.iter().map(|c| (c.role, &c.name, &c.device, &c.device_channel));
        calibrated.chain(channels.uncalibrated.iter().map(|c| (c.role, &c.name, &c.device, &c.device_channel)))
    };
    for role in Role::ALL {
        let names: Vec<_> = all().filter(|channel| channel.0 == role).map(|channel| channel.1.as_str()).collect();
        let word = role.word();
        match names.len() {
            0 if channels.unclear => {}
            0 if role == Role::ReleaseLineTension => {
                findings
                    .error("channel", format!("none has the role {word}: without it no tension and no phase is known"));
            }
            0 if role.is_extra() => {}
            0 => findings.caution("channel", format!("none has the role {word}: results that need it will be absent")),
            1 => {}
            _ => findings.error("channel", format!("several have the role {word}: {}", names.join(", "))),
        }
    }
    for (index, device) in devices.iter().enumerate() {
        let used =
            all().any(|channel| *channel.2 == device.name) || inputs.iter().any(|input| input.device == device.name);
        if !channels.unclear && !device.name.is_empty() && !used {
            findings.caution(&format!("device[{index}]"), format!("no channel uses device {:?}", device.name));
        }
    }
    let sources: Vec<_> = all().collect();
    for (index, source) in sources.iter().enumerate() {
        if let Some(earlier) = sources[..index].iter().find(|other| (other.2, other.3) == (source.2, source.3)) {
            let (first, second, device, channel) = (earlier.1, source.1, source.2, source.3);
            findings.error("channel", format!("{first} and {second} both read {channel:?} of device {device:?}"));
        }
    }
}
