//! A trial as a fit sees it: speeds at places, the hold it started from, what that leaves open.

use serde::Serialize;

use super::error::Refused;
use super::term::Term;
use crate::calibration::Signal;
use crate::model::{LaunchSetup, hold_pull_band_n};
use crate::reading::{Motion, Outcome, Reading};
use crate::rig::{Given, Rig, Role};

/// Places along the stroke that are compared.
const PLACES: usize = 40;
const LEAST_PLACES: usize = 12;
/// Shares of the stroke left out at its ends: the hook's opening, and where a change of the losses may move the parting.
const LEFT_OUT: (f64, f64) = (0.04, 0.05);
/// Room before a brake.
const BEFORE_BRAKE_M: f64 = 0.03;
/// No speed is taken to be known better.
const LEAST_U_MPS: f64 = 1e-3;

#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Kind {
    Launch,
    /// A free pull or a coast-down.
    ShuttleAlone,
}

/// What was launched.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Configuration {
    pub cord_count: f64,
    pub moving_mass_kg: f64,
    pub draw_m: f64,
    /// Of all cords at the hold.
    pub pull_n: f64,
    pub launch_speed_mps: Option<f64>,
}

/// What a trial's own day leaves open, in its standard uncertainty.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Nuisance {
    /// Relative, of the cords' pull over the moving mass.
    PullOverMass {
        u: f64,
    },
    HeadWind {
        u_mps: f64,
    },
}

/// One trial of a fit.
#[derive(Debug, Clone, PartialEq)]
pub struct FitTrial {
    pub id: String,
    /// SHA-256 of the trial's raw data as sealed; empty where it comes from no file.
    pub raw_sha256: String,
    pub rig: Rig,
    pub kind: Kind,
    pub configuration: Configuration,
    pub places_m: Vec<f64>,
    /// In the rail's frame.
    pub v_mps: Vec<f64>,
    pub u_v_mps: Vec<f64>,
    pub nuisances: Vec<Nuisance>,
}

impl FitTrial {
    /// A trial from its signals and their reading.
    ///
    /// # Errors
    /// [`Refused`], with what is missing.
    pub fn of(id: &str, raw_sha256: &str, signals: &[Signal], reading: &Reading, rig: &Rig) -> Result<Self, Refused> {
        let kind = match reading.outcome {
            Outcome::Launched | Outcome::ArrestOverrun => Kind::Launch,
            Outcome::ShuttleAlone => Kind::ShuttleAlone,
            other => return Err(Refused::Outcome { outcome: other.word() }),
        };
        let mut rig = rig.clone();
        if kind == Kind::ShuttleAlone {
            (rig.payload.mass_kg, rig.payload.drag_area_m2) = (Given::exactly(0.0), Given::exactly(0.0));
            rig.details.payload = crate::rig::PayloadDetails::default();
        }
        let row = |what: &'static str, name: &str| {
            reading.result(name).ok_or_else(|| Refused::Lacking { what, reason: absence(reading, name) })
        };
        let draw = row("draw", "draw")?;
        let hold = row("hold tension", "hold_tension")?;
        let motion = reading.motion.as_ref();
        let motion =
            motion.ok_or_else(|| Refused::Lacking { what: "motion", reason: absence(reading, "launch_speed") })?;
        let start_x_m = rig.rail.zero_mark_x_m - draw.value;
        let end_x_m = match kind {
            Kind::Launch => row("place of separation", "separation_x")?.value,
            Kind::ShuttleAlone => rig.rail.brake_x_m,
        };
        let (pull_n, u_pull_n) = held_pull(signals, reading, &rig)
            .unwrap_or_else(|| through_line(&rig, hold.value, hold.standard_uncertainty));
        let rows = speeds(motion, start_x_m, end_x_m.min(rig.rail.brake_x_m - BEFORE_BRAKE_M));
        if rows.len() < LEAST_PLACES {
            return Err(Refused::TooShort { n: rows.len(), needed: LEAST_PLACES });
        }
        let column = |k: usize| rows.iter().map(|row| row[k]).collect();
        let trial = Self {
            id: id.to_owned(),
            raw_sha256: raw_sha256.to_owned(),
            kind,
            configuration: Configuration {
                cord_count: cord_count(&rig),
                moving_mass_kg: rig.moving_mass_kg(),
                draw_m: draw.value,
                pull_n,
                launch_speed_mps: reading.result("launch_speed").map(|speed| speed.value),
            },
            places_m: column(0),
            v_mps: column(1),
            u_v_mps: column(2),
            nuisances: nuisances(&rig, u_pull_n / pull_n),
            rig,
        };
        trial.setup(&[])?;
        Ok(trial)
    }

    /// A trial from speeds at places alone, started from the rig file's planned hold, all speeds known to `u_v_mps`.
    ///
    /// # Errors
    /// The model can't launch the rig as planned.
    pub fn from_speeds(
        id: &str,
        rig: &Rig,
        places_m: &[f64],
        speeds_mps: &[f64],
        u_v_mps: f64,
    ) -> Result<Self, Refused> {
        let setup = LaunchSetup::planned(rig)?;
        let n = places_m.len().min(speeds_mps.len());
        if n < LEAST_PLACES {
            return Err(Refused::TooShort { n, needed: LEAST_PLACES });
        }
        Ok(Self {
            id: id.to_owned(),
            raw_sha256: String::new(),
            kind: Kind::Launch,
            configuration: Configuration {
                cord_count: cord_count(rig),
                moving_mass_kg: rig.moving_mass_kg(),
                draw_m: rig.plan.draw_m,
                pull_n: setup.cord_pull_n(setup.start_x_m),
                launch_speed_mps: speeds_mps.last().copied(),
            },
            places_m: places_m[..n].to_vec(),
            v_mps: speeds_mps[..n].to_vec(),
            u_v_mps: vec![u_v_mps; n],
            nuisances: Vec::new(),
            rig: rig.clone(),
        })
    }

    /// The launch from the trial's hold, with some losses taken out of the rig.
    pub(super) fn setup(&self, without: &[Term]) -> Result<LaunchSetup, crate::model::ModelError> {
        let mut rig = self.rig.clone();
        without.iter().for_each(|term| term.clear(&mut rig));
        // What lags is put in last, on the tension that the hold has.
        let lag = rig.details.losses.cord_lag.take().map_or(0.0, |lag| lag.value);
        let x_m = rig.rail.zero_mark_x_m - self.configuration.draw_m;
        let weight_n = rig.moving_mass_kg() * gravity_along_mps2(&rig);
        let mut setup = LaunchSetup::drawn(&rig, self.configuration.pull_n - weight_n, x_m)?;
        setup.scale_cords(self.configuration.pull_n / setup.cord_pull_n(x_m));
        setup.lag_cords(lag);
        Ok(setup)
    }

    /// Two trials of one configuration, as far as losses can tell: same cords, mass and draw.
    pub(super) fn is_like(&self, other: &Self) -> bool {
        let near = |a: f64, b: f64| (a - b).abs() <= 0.02 * a.abs().max(b.abs());
        let (a, b) = (&self.configuration, &other.configuration);
        a.cord_count == b.cord_count && near(a.moving_mass_kg, b.moving_mass_kg) && near(a.draw_m, b.draw_m)
    }
}

impl Nuisance {
    /// Moves a setup by `z` standard uncertainties.
    pub(super) fn put(self, setup: &mut LaunchSetup, z: f64) {
        match self {
            Self::PullOverMass { u } => setup.scale_cords((1.0 + u * z).max(0.0)),
            Self::HeadWind { u_mps } => setup.head_wind_mps += u_mps * z,
        }
    }

    pub const fn meaning(self) -> &'static str {
        match self {
            Self::PullOverMass { .. } => "pull over mass",
            Self::HeadWind { .. } => "head wind",
        }
    }
}

fn cord_count(rig: &Rig) -> f64 {
    let more: u32 = rig.details.more_cords.iter().map(|group| group.cords.count).sum();
    f64::from(rig.cords.count + more)
}

fn gravity_along_mps2(rig: &Rig) -> f64 {
    crate::rig::local_gravity_mps2(rig.site.latitude_rad, rig.site.altitude_m) * rig.rail.incline_rad.sin()
}

fn absence(reading: &Reading, name: &str) -> String {
    reading.absence(name).map_or_else(|| "the reading does not have it".to_owned(), |absent| absent.reason.clone())
}

fn nuisances(rig: &Rig, u_pull: f64) -> Vec<Nuisance> {
    let u_mass_kg = rig.shuttle.mass_kg.standard_uncertainty.hypot(rig.payload.mass_kg.standard_uncertainty);
    let u = u_pull.hypot(u_mass_kg / rig.moving_mass_kg());
    let u_mps = rig.details.settings.head_wind_mps;
    let wind = (u_mps > 0.0).then_some(Nuisance::HeadWind { u_mps });
    std::iter::once(Nuisance::PullOverMass { u }).chain(wind).collect()
}

/// The cords' pull at the hold from the anchor's cell, which no friction of the rail comes between; none where there is no
/// such cell, or where cords of several ratios share it.
fn held_pull(signals: &[Signal], reading: &Reading, rig: &Rig) -> Option<(f64, f64)> {
    const BEFORE_S: (f64, f64) = (0.12, 0.02);
    let ratio = rig.cords.travel_ratio;
    if rig.details.more_cords.iter().any(|group| group.cords.travel_ratio != ratio) || !rig.details.gas.is_empty() {
        return None;
    }
    let anchor = signals.iter().find(|signal| signal.role == Role::CordAnchorTension)?;
    let release_s = reading.instant("release")?.time_s;
    let from = anchor.time_s.partition_point(|t| *t < release_s - BEFORE_S.0);
    let to = anchor.time_s.partition_point(|t| *t < release_s - BEFORE_S.1);
    let values = anchor.value.get(from..to).filter(|values| values.len() >= 3)?;
    let mean_n = values.iter().sum::<f64>() / values.len() as f64;
    let u_n = anchor.zero_uncertainty.hypot(mean_n * anchor.scale_relative_uncertainty);
    (mean_n > 0.0).then_some((ratio * mean_n, ratio * u_n))
}

/// The pull from the line's tension: weight helps the line, friction may hold either way (rectangular, GUM 4.3.7).
fn through_line(rig: &Rig, tension_n: f64, u_tension_n: f64) -> (f64, f64) {
    let weight_n = rig.moving_mass_kg() * gravity_along_mps2(rig);
    (tension_n + weight_n, u_tension_n.hypot(hold_pull_band_n(rig) / 3_f64.sqrt()))
}

/// Place, speed and its uncertainty, evenly along the stroke; places without samples near are left out.
fn speeds(motion: &Motion, start_x_m: f64, end_x_m: f64) -> Vec<[f64; 3]> {
    const NEAR_M: f64 = 0.1;
    let way_m = end_x_m - start_x_m;
    let (from_m, to_m) = (start_x_m + LEFT_OUT.0 * way_m, end_x_m - LEFT_OUT.1 * way_m);
    let place = |k: usize| from_m + (to_m - from_m) * k as f64 / (PLACES - 1) as f64;
    let mut next = 0;
    let mut rows = Vec::with_capacity(PLACES);
    for place_m in (0..PLACES).map(place) {
        while next < motion.x_m.len() && motion.x_m[next] < place_m {
            next += 1;
        }
        let (Some(before), true) = (next.checked_sub(1), next < motion.x_m.len()) else { continue };
        let step_m = motion.x_m[next] - motion.x_m[before];
        if !(step_m > 0.0 && step_m < NEAR_M) {
            continue;
        }
        let share = (place_m - motion.x_m[before]) / step_m;
        let at = |column: &[f64]| column[before] * (1.0 - share) + column[next] * share;
        let (v_mps, slope_per_s) = (at(&motion.v_mps), at(&motion.a_mps2) / at(&motion.v_mps));
        let u_mps = at(&motion.u_v_mps).hypot(slope_per_s * at(&motion.u_x_m)).max(LEAST_U_MPS);
        if v_mps > 0.0 && u_mps.is_finite() {
            rows.push([place_m, v_mps, u_mps]);
        }
    }
    rows
}
