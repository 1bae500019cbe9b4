//! Where the energy went, and whether force and mass × acceleration agree.
//!
//! The weight helps the winch as much as it later hinders the launch, so only the height of the separation over the zero
//! mark, where the drawing began, counts as potential energy.

use crate::rig::Rig;

use super::launch::Separation;
use super::motion::Track;
use super::release::Release;
use super::result::EnergyAudit;
use super::rows::{Book, Budget};
use super::tension::Hold;

pub(super) fn report(
    hold: &Hold,
    separation: Option<&Separation>,
    gravity_along_mps2: f64,
    rig: &Rig,
    book: &mut Book,
) -> Option<EnergyAudit> {
    let Some(separation) = separation else {
        for name in ["kinetic_energy", "energy_lost", "energy_share_kinetic"] {
            book.absent(name, "no separation was found");
        }
        return None;
    };
    let mass_kg = rig.moving_mass_kg();
    let u_mass_kg = rig.shuttle.mass_kg.standard_uncertainty.hypot(rig.payload.mass_kg.standard_uncertainty);
    let v = separation.speed_mps;
    let kinetic_j = 0.5 * mass_kg * v * v;
    let kinetic = |sign: f64| {
        Budget::default()
            .with("masses of the rig file", sign * 0.5 * u_mass_kg * v * v)
            .with("launch speed", mass_kg * v * separation.u_speed_mps)
    };
    book.result(
        "kinetic_energy",
        kinetic_j,
        "J",
        kinetic(1.0),
        "½·m·v² of shuttle and payload at separation, masses of the rig file",
    );
    let Some((stored_j, u_stored_j)) = hold.work_j else {
        for name in ["energy_lost", "energy_share_kinetic"] {
            book.absent(name, "the work of the winch-back is not known");
        }
        return None;
    };
    let weight_n = mass_kg * gravity_along_mps2;
    let potential_j = weight_n * (separation.x_m - rig.rail.zero_mark_x_m);
    let lost_j = stored_j - kinetic_j - potential_j;
    let u_kinetic_j = kinetic(1.0).total();
    let budget = Budget::default()
        .with("stored", u_stored_j)
        .with("kinetic", u_kinetic_j)
        .with("place", weight_n * separation.u_x_m);
    let method = "winch-back work less kinetic and potential energy at separation: friction both ways, hysteresis, relaxation, drag, motion left in the cords";
    book.result("energy_lost", lost_j, "J", budget, method);
    if stored_j > 0.0 {
        let share = kinetic_j / stored_j;
        let budget =
            Budget::default().with("stored", share * u_stored_j / stored_j).with("kinetic", u_kinetic_j / stored_j);
        book.result("energy_share_kinetic", share, "1", budget, "kinetic energy at separation over winch-back work");
    }
    Some(EnergyAudit { stored_j, kinetic_j, potential_j, lost_j })
}

/// At the release the line's tension turns into acceleration: T + m·g·sin θ = m·f + friction, within the stiction band.
///
/// The hold hides ± friction (the shuttle may hang on either side of it), so the difference is zero within it.
pub(super) fn closure(hold: &Hold, release: &Release, track: &Track, rig: &Rig, book: &mut Book) {
    const NAME: &str = "closure_force";
    let (Some((tension_n, u_tension_n)), Some(indicated)) = (hold.tension_n, release.started_force_mps2) else {
        return book.absent(NAME, "needs the release line and an accelerometer that saw the release");
    };
    let mass_kg = rig.moving_mass_kg();
    let u_mass_kg = rig.shuttle.mass_kg.standard_uncertainty.hypot(rig.payload.mass_kg.standard_uncertainty);
    let started = (indicated - track.bias_mps2) / (1.0 + track.scale);
    let friction_n = rig.losses.friction_n;
    let weight_n = mass_kg * track.gravity_along_mps2;
    let difference_n = tension_n + weight_n - mass_kg * started - friction_n.value;
    let budget = Budget::default()
        .with("hold tension", u_tension_n)
        .with("masses of the rig file", u_mass_kg * (started - track.gravity_along_mps2))
        .with("accelerometer", mass_kg * (started * track.u_scale).hypot(track.u_bias_mps2))
        .with("friction", friction_n.standard_uncertainty)
        // Anywhere in ± friction: rectangular, GUM 4.3.7.
        .with("stiction band of the hold", friction_n.value / 3f64.sqrt())
        // 3 to 10 ms after the release cords already move, and waves run in them.
        .with("cord force lost in the first 10 ms", 0.02 * mass_kg * started);
    let u_n = budget.total();
    if difference_n.abs() > 3.0 * u_n {
        book.findings.push(format!(
            "hold tension and mass × acceleration at the release differ by {difference_n:+.0} N, {:.1} times their uncertainty: a mass, a cell or the friction of the rig file is not what was there",
            difference_n.abs() / u_n
        ));
    }
    book.result(NAME, difference_n, "N", budget, "hold tension + weight along the rail − mass × specific force just after the release − friction; zero when they agree");
}
