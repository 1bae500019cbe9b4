//! Where the energy went, and whether force and mass × acceleration agree.
//!
//! The weight helps the winch as much as it later hinders the launch, so only the height of the separation over the zero
//! mark, where the drawing began, counts as potential energy.

use crate::rig::Rig;

use super::cords::impedance_n_s_per_m;
use super::launch::Separation;
use super::motion::Track;
use super::release::{LEVEL_FROM_S, LEVEL_TO_S, Release};
use super::result::EnergyAudit;
use super::rows::{Book, Budget};
use super::tension::Hold;

/// How well the cords' inertia is known, as a share of it.
const INERTIA_SHARE: f64 = 0.3;

pub(super) fn report(
    hold: &Hold,
    separation: Result<&Separation, &str>,
    gravity_along_mps2: f64,
    rig: &Rig,
    book: &mut Book,
) -> Option<EnergyAudit> {
    let separation = match separation {
        Ok(separation) => separation,
        Err(reason) => {
            for name in ["kinetic_energy", "potential_energy", "energy_lost", "energy_share_kinetic"] {
                book.absent(name, reason);
            }
            return None;
        }
    };
    let mass_kg = rig.moving_mass_kg();
    let u_mass_kg = rig.shuttle.mass_kg.standard_uncertainty.hypot(rig.payload.mass_kg.standard_uncertainty);
    let v = separation.speed_mps;
    // With the place of separation in it, as the launch speed's own row has it.
    let row = book.results.iter().find(|row| row.name == "launch_speed");
    let u_speed_mps = row.map_or(separation.u_speed_mps, |row| row.standard_uncertainty);
    let kinetic_j = 0.5 * mass_kg * v * v;
    let kinetic = |sign: f64| {
        Budget::default()
            .with("masses of the rig file", sign * 0.5 * u_mass_kg * v * v)
            .with("launch speed", mass_kg * v * u_speed_mps)
    };
    book.result(
        "kinetic_energy",
        kinetic_j,
        "J",
        kinetic(1.0),
        "½·m·v² of shuttle and payload at separation, masses of the rig file",
    );
    let weight_n = mass_kg * gravity_along_mps2;
    let potential_j = weight_n * (separation.x_m - rig.rail.zero_mark_x_m);
    let height = Budget::default()
        .with("masses of the rig file", u_mass_kg * gravity_along_mps2 * (separation.x_m - rig.rail.zero_mark_x_m))
        .with("place", weight_n * separation.u_x_m);
    book.result(
        "potential_energy",
        potential_j,
        "J",
        height,
        "weight along the rail times the way from the zero mark to the separation",
    );
    let Some((stored_j, u_stored_j)) = hold.work_j else {
        for name in ["energy_lost", "energy_share_kinetic"] {
            book.absent(name, "the work of the winch-back is not known");
        }
        return None;
    };
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

/// At the release the line's tension turns into acceleration: T + m·g·sin θ = m·f + friction + Z·v, within the stiction
/// band. The cords' ends differ by the cords' own inertia: until a strain wave has run to the anchor and back, a cord whose
/// end moves at v pulls with F₀ − Z·v, Z = √(k·m) of the cord (wave impedance of a rod: K. F. Graff, "Wave Motion in
/// Elastic Solids", 1975, section 2.1).
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
    let speed_mps = track.mean_speed_mps(release.time_s + LEVEL_FROM_S, release.time_s + LEVEL_TO_S);
    let draw_m = hold.x_m.map_or(rig.plan.draw_m, |(x_m, _)| rig.draw_m(x_m));
    let inertia_n = impedance_n_s_per_m(rig, draw_m) * speed_mps;
    let difference_n = tension_n + weight_n - mass_kg * started - friction_n.value - inertia_n;
    let budget = Budget::default()
        .with("hold tension", u_tension_n)
        .with("masses of the rig file", u_mass_kg * (started - track.gravity_along_mps2))
        .with("accelerometer", mass_kg * (started * track.u_scale).hypot(track.u_bias_mps2))
        .with("friction", friction_n.standard_uncertainty)
        // Anywhere in ± friction: rectangular, GUM 4.3.7.
        .with("stiction band of the hold", friction_n.value / 3f64.sqrt())
        // The wave starts with the hook's own opening, and the curve's slope is the card's, not the strained cord's.
        .with("the cords' own inertia", INERTIA_SHARE * inertia_n);
    let u_n = budget.total();
    if difference_n.abs() > 3.0 * u_n {
        book.findings.push(format!(
            "hold tension and mass × acceleration at the release differ by {difference_n:+.0} N, {:.1} times their uncertainty: a mass, a cell or the friction of the rig file is not what was there",
            difference_n.abs() / u_n
        ));
    }
    book.result(NAME, difference_n, "N", budget, format!("hold tension + weight along the rail − mass × specific force just after the release − friction − {inertia_n:.1} N of the cords' own inertia; zero when they agree"));
}
