//! From a rig file to a launch: as planned, or as drawn and measured.

use super::cord::CordSet;
use super::error::ModelError;
use super::gas::{GasPath, GasSource};
use super::relaxation::{held_part, standing_factor};
use super::setup::{ACCURATE, Brake, ForceTable, LaunchSetup, RailLosses, Recoil};
use crate::estimation::Curve;
use crate::rig::{CordDetails, Cords, Gas, Rig, XForce, local_gravity_mps2};

/// Elongation over which tension comes down from the loading to the unloading branch, where the rig file does not say:
/// common practice, no published source.
const USUAL_GAP_WIDTH: f64 = 0.05;

/// A winch stops a little beyond the plan: by this share a measured draw may lie beyond the curve, and is told as extrapolated.
const MEASURED_BEYOND: f64 = 0.01;

impl LaunchSetup {
    /// The launch that the rig file plans, from its planned draw: no tension is known yet.
    ///
    /// # Errors
    /// A curve that is none, a draw beyond the elongation the cord was described for.
    pub fn planned(rig: &Rig) -> Result<Self, ModelError> {
        let setup = Self::at(rig, rig.rail.zero_mark_x_m - rig.plan.draw_m)?;
        setup.refuse_beyond_card(rig, 1e-9)?;
        Ok(setup)
    }

    /// The launch from where the shuttle is held: the cords' force is scaled to the hold tension measured in the release
    /// line, corrected for weight. Friction may hold either way, so the pull is known within its band only
    /// ([`hold_pull_band_n`]).
    ///
    /// # Errors
    /// A curve that is none, a draw more than a hundredth beyond the curve, a tension that leaves no pull.
    pub fn drawn(rig: &Rig, hold_tension_n: f64, x0_m: f64) -> Result<Self, ModelError> {
        let mut setup = Self::at(rig, x0_m)?;
        setup.refuse_beyond_card(rig, MEASURED_BEYOND)?;
        let pull_n = hold_tension_n + setup.hold_weight_n();
        let described_n = setup.cord_pull_n(x0_m);
        if !(pull_n > 0.0 && described_n > 0.0) {
            return Err(ModelError::NoPullAtHold { tension_n: hold_tension_n, x_m: x0_m });
        }
        setup.scale_cords(pull_n / described_n);
        Ok(setup)
    }

    fn at(rig: &Rig, start_x_m: f64) -> Result<Self, ModelError> {
        let mut setup = Self {
            payload_mass_kg: rig.payload.mass_kg.value,
            start_x_m,
            incline_rad: rig.rail.incline_rad,
            gravity_mps2: local_gravity_mps2(rig.site.latitude_rad, rig.site.altitude_m),
            air_density_kg_per_m3: rig.site.air_density_kg_per_m3,
            head_wind_mps: rig.site.head_wind_mps,
            payload_drag_area_m2: rig.payload.drag_area_m2.value,
            shuttle_drag_area_m2: rig.losses.shuttle_drag_area_m2.value,
            cords: cord_sets(rig)?,
            tables: rig.details.force_tables.iter().map(|points| table(points)).collect::<Result<_, _>>()?,
            gas: rig.details.gas.iter().map(gas_source).collect(),
            losses: RailLosses::default(),
            brake: Brake {
                from_x_m: rig.rail.brake_x_m,
                constant_n: rig.rail.brake_force_n,
                per_metre_n_per_m: rig.details.brake.per_metre_n_per_m,
                per_speed_n_per_mps: rig.details.brake.per_speed_n_per_mps,
            },
            recoil: rig.details.rail_support.map(|support| Recoil {
                mass_kg: support.mass_kg.value,
                stiffness_n_per_m: support.stiffness_n_per_m.value,
                damping_n_per_mps: support.damping_n_per_mps,
            }),
            thrust: optional_curve("payload thrust", &rig.details.payload.thrust)?,
            lift_area_m2: rig.details.payload.lift_area_m2,
            uncouple_x_m: rig.details.uncoupling_x_m,
            relative_tolerance: ACCURATE,
            ..Self::bare(rig.shuttle.mass_kg.value, rig.rail.length_m)
        };
        setup.losses = losses(rig, setup.cord_viscous_factor())?;
        setup.hold_at(start_x_m);
        setup.lag_cords(rig.details.losses.cord_lag.map_or(0.0, |lag| lag.value));
        Ok(setup)
    }

    /// Takes from every cord what relaxed in the hold and does not come back within the stroke: of the held tension T₀ the
    /// share s, so that at tension T the cord pulls s (T₀ − T) less. That is a relaxation whose times are long against the
    /// stroke (Y. C. Fung, *Biomechanics*, 1981, section 7.6), seen from the hold; below a few per cent of T₀, where it
    /// would push, it fades with T.
    pub fn lag_cords(&mut self, share: f64) {
        const FADES: f64 = 0.03;
        if share == 0.0 {
            return;
        }
        for set in &mut self.cords {
            let held = set.elongation(self.start_x_m);
            let held_n = set.unloading.value(held);
            if held <= 0.0 || held_n <= 0.0 {
                continue;
            }
            let fresh = set.unloading.clone();
            set.unloading = fresh.reshaped(|elongation| {
                let part = (fresh.value(elongation) / held_n).max(0.0);
                1.0 - share * (1.0 - part) / (part + FADES)
            });
        }
    }

    /// Viscous loss of all cords for each m/s of the shuttle where one cord's is 1 N s/m.
    pub fn cord_viscous_factor(&self) -> f64 {
        self.cords.iter().map(|set| set.count * set.travel_ratio * set.travel_ratio).sum()
    }

    /// Puts the hold at a place: the cords stand there on their loading branch.
    pub fn hold_at(&mut self, x_m: f64) {
        self.start_x_m = x_m;
        for set in &mut self.cords {
            let held = set.elongation(x_m);
            let gap_n = set.loading.as_ref().map(|loading| loading.value(held) - set.unloading.value(held));
            set.held_gap_n = gap_n.filter(|_| held > 0.0).unwrap_or(0.0);
        }
    }

    /// Pull of all cords at rest at a place while held there, N.
    pub fn cord_pull_n(&self, x_m: f64) -> f64 {
        let taut = self.cords.iter().map(|set| (set, set.elongation(x_m))).filter(|(_, elongation)| *elongation > 0.0);
        taut.map(|(set, elongation)| set.pull_n(set.turned(elongation), elongation)).sum()
    }

    /// Weight along the rail that helps the line hold the shuttle against the cords, N.
    pub fn hold_weight_n(&self) -> f64 {
        (self.shuttle_mass_kg + self.payload_mass_kg) * self.gravity_along_mps2()
    }

    /// Multiplies the tension of every cord.
    pub fn scale_cords(&mut self, factor: f64) {
        for set in &mut self.cords {
            set.scale(factor);
        }
    }

    fn refuse_beyond_card(&self, rig: &Rig, beyond: f64) -> Result<(), ModelError> {
        for (s, (set, details)) in self.cords.iter().zip(all_details(rig)).enumerate() {
            let (asked, known) = (set.elongation(self.start_x_m), set.unloading.last());
            if asked > known * (1.0 + beyond) && !details.extrapolate {
                return Err(ModelError::BeyondCard {
                    set: s,
                    asked_percent: 100.0 * asked,
                    known_percent: 100.0 * known,
                });
            }
        }
        Ok(())
    }

    /// Sentences on what of this setup was never measured: cords drawn beyond their curves.
    pub fn extrapolations(&self) -> Vec<String> {
        let beyond = self.cords.iter().enumerate().filter_map(|(s, set)| {
            let (asked, known) = (100.0 * set.elongation(self.start_x_m), 100.0 * set.unloading.last());
            (asked > known * (1.0 + 1e-9)).then(|| {
                format!(
                    "EXTRAPOLATED: cord set {s} is drawn to {asked:.1} %, its curve was measured to {known:.1} % only"
                )
            })
        });
        beyond.collect()
    }
}

fn all_details(rig: &Rig) -> impl Iterator<Item = &CordDetails> {
    let first = (rig.cords.count > 0).then_some(&rig.details.cords);
    first.into_iter().chain(rig.details.more_cords.iter().map(|group| &group.details))
}

fn cord_sets(rig: &Rig) -> Result<Vec<CordSet>, ModelError> {
    let first = (rig.cords.count > 0).then_some((&rig.cords, rig.rail.zero_mark_x_m, &rig.details.cords));
    let more = rig.details.more_cords.iter().map(|group| (&group.cords, group.zero_mark_x_m, &group.details));
    let sets = first.into_iter().chain(more).enumerate();
    sets.map(|(s, (cords, zero_mark_x_m, details))| cord_set(rig, s, cords, zero_mark_x_m, details)).collect()
}

fn cord_set(
    rig: &Rig,
    set: usize,
    cords: &Cords,
    zero_mark_x_m: f64,
    details: &CordDetails,
) -> Result<CordSet, ModelError> {
    let curve = |points: &[crate::rig::CordPoint]| {
        let points: Vec<(f64, f64)> = points.iter().map(|point| (point.elongation, point.tension_n)).collect();
        Curve::through(&points).map_err(|source| ModelError::CordCurve { set, source })
    };
    let mut made = CordSet {
        mass_kg: cords.mass_kg,
        travel_ratio: cords.travel_ratio,
        retension_x_m: details.retension_x_m,
        loading: if details.loading_curve.is_empty() { None } else { Some(curve(&details.loading_curve)?) },
        gap_width: details.gap_width.unwrap_or(USUAL_GAP_WIDTH),
        ..CordSet::simple(f64::from(cords.count), cords.free_length_m, zero_mark_x_m, curve(&cords.curve)?)
    };
    let settings = &rig.details.settings;
    let relaxed = held_part(&details.relaxation, settings.winch_s, settings.hold_s);
    made.scale(standing_factor(details) * relaxed);
    Ok(made)
}

fn table(points: &[XForce]) -> Result<ForceTable, ModelError> {
    let points: Vec<(f64, f64)> = points.iter().map(|point| (point.x_m, point.force_n)).collect();
    let force_n = Curve::through(&points).map_err(|source| ModelError::OtherCurve { what: "force table", source })?;
    Ok(ForceTable { force_n })
}

fn optional_curve(what: &'static str, points: &[(f64, f64)]) -> Result<Option<Curve>, ModelError> {
    let curve = (!points.is_empty()).then(|| Curve::through(points)).transpose();
    curve.map_err(|source| ModelError::OtherCurve { what, source })
}

fn losses(rig: &Rig, cord_viscous_factor: f64) -> Result<RailLosses, ModelError> {
    let more = &rig.details.losses;
    let value = |given: Option<crate::rig::Given>| given.map_or(0.0, |given| given.value);
    let along_x: Vec<(f64, f64)> = more.along_x.iter().map(|point| (point.x_m, point.force_n)).collect();
    Ok(RailLosses {
        friction_n: rig.losses.friction_n.value,
        load_coefficient: value(more.load_coefficient),
        pull_coefficient: value(more.pull_coefficient),
        viscous_n_per_mps: value(more.viscous_n_per_mps) + cord_viscous_factor * value(more.cord_viscous_n_per_mps),
        along_x_n: optional_curve("loss over x", &along_x)?,
        breakaway_n: value(more.breakaway_n),
    })
}

fn gas_source(gas: &Gas) -> GasSource {
    GasSource {
        charged_pressure_pa: gas.charged_pressure_pa.value,
        ambient_pressure_pa: gas.ambient_pressure_pa,
        back_pressure_pa: gas.back_pressure_pa,
        vessel_volume_m3: gas.vessel_volume_m3,
        dead_volume_m3: gas.dead_volume_m3,
        temperature_k: gas.temperature_c + 273.15,
        polytropic_exponent: gas.polytropic_exponent,
        piston_area_m2: gas.piston_area_m2,
        travel_ratio: gas.travel_ratio,
        stroke_m: gas.stroke_m,
        hold_s: gas.hold_s,
        leak_time_s: gas.leak_time_s,
        path: gas.valve.map_or(GasPath::Straight, |valve| GasPath::Valve {
            valve_area_m2: valve.area_m2,
            line_area_m2: valve.line_area_m2,
            opening_s: valve.opening_s,
        }),
    }
}

/// Half-width of the band in which the cords' pull lies at a given hold tension, N: friction can hold either way.
pub fn hold_pull_band_n(rig: &Rig) -> f64 {
    let breakaway_n = rig.details.losses.breakaway_n.map_or(0.0, |given| given.value);
    let load = rig.details.losses.load_coefficient.map_or(0.0, |given| given.value);
    let across_n = rig.moving_mass_kg() * crate::units::STANDARD_GRAVITY_MPS2 * rig.rail.incline_rad.cos();
    (rig.losses.friction_n.value + load * across_n).max(breakaway_n)
}

/// Tension that the release line should show at a draw while winching back, N: pull on the loading branch and friction less
/// weight, never below zero.
///
/// # Errors
/// A cord curve that is none.
pub fn planned_line_tension_n(rig: &Rig, draw_m: f64) -> Result<f64, ModelError> {
    let mut fresh = rig.clone();
    (fresh.details.settings.winch_s, fresh.details.settings.hold_s) = (0.0, 0.0);
    let setup = LaunchSetup::at(&fresh, rig.rail.zero_mark_x_m - draw_m)?;
    let tension_n = setup.cord_pull_n(setup.start_x_m) + setup.losses.friction_n - setup.hold_weight_n();
    Ok(tension_n.max(0.0))
}

/// Energy in the cords at a draw and release-line tension, J: what a release would set free.
///
/// # Errors
/// As [`LaunchSetup::drawn`], except that slack cords hold nothing and that any elongation is taken.
pub fn stored_energy_j(rig: &Rig, line_tension_n: f64, x_m: f64) -> Result<f64, ModelError> {
    let mut setup = LaunchSetup::at(rig, x_m)?;
    let (pull_n, described_n) = (line_tension_n + setup.hold_weight_n(), setup.cord_pull_n(x_m));
    if !(pull_n > 0.0 && described_n > 0.0) {
        return Ok(0.0);
    }
    setup.scale_cords(pull_n / described_n);
    Ok(super::energy::stored_j(&setup))
}
