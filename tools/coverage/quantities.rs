//! Results that have a truth, and how often their intervals hold it.

use tautrail::reading::Reading;
use virtual_rig::cfc;
use virtual_rig::physics::trajectory::Row;

use crate::virtual_trial::VirtualTrial;

const STANDARD_GRAVITY_MPS2: f64 = 9.80665;
/// Grid of the true motion.
const STEP_S: f64 = 20e-6;

pub struct Quantity {
    pub result: &'static str,
    pub unit: &'static str,
    pub truth: fn(&VirtualTrial) -> Option<f64>,
}

const fn quantity(result: &'static str, unit: &'static str, truth: fn(&VirtualTrial) -> Option<f64>) -> Quantity {
    Quantity { result, unit, truth }
}

pub fn quantities() -> Vec<Quantity> {
    vec![
        quantity("launch_speed", "m/s", |t| t.truth.launch.as_ref().map(|l| l.speed_ground_mps)),
        quantity("airspeed_at_separation", "m/s", |t| t.truth.launch.as_ref().map(|l| l.airspeed_mps)),
        quantity("release_time", "s", |t| t.event_s("release")),
        quantity("separation_x", "m", |t| t.truth.launch.as_ref().map(|l| l.separation_x_m)),
        quantity("peak_g_cfc60_specific", "g", |t| peak(t, "cfc60").map(|p| p.0)),
        quantity("peak_g_cfc60_kinematic", "g", |t| peak(t, "cfc60").map(|p| p.1)),
        quantity("peak_g_cfc180_specific", "g", |t| peak(t, "cfc180").map(|p| p.0)),
        quantity("peak_g_cfc600_specific", "g", |t| peak(t, "cfc600").map(|p| p.0)),
        quantity("peak_g_cfc1000_specific", "g", |t| peak(t, "cfc1000").map(|p| p.0)),
        quantity("peak_g_raw_specific", "g", |t| peak(t, "unfiltered").map(|p| p.0)),
        quantity("g_3ms_cfc180_specific", "g", |t| three_ms_g(t, 180.0)),
        quantity("g_3ms_cfc60_specific", "g", |t| three_ms_g(t, 60.0)),
        quantity("onset_rate", "g/s", onset_g_per_s),
        quantity("hold_tension", "N", |t| Some(t.truth.tension.hold_line_n)),
        quantity("max_tension", "N", |t| Some(t.truth.tension.line_n_max)),
        quantity("cord_force", "N", |t| Some(t.truth.tension.hold_cords_n).filter(|n| *n > 0.0)),
        quantity("draw", "m", |t| Some(t.performance.launcher().zero_mark_x_m - t.truth.tension.hold_x_m)),
        quantity("winch_back_work", "J", |t| Some(t.winch_work_j).filter(|work_j| *work_j > 1.0)),
        quantity("moving_mass_by_impulse", "kg", |t| Some(t.truth.rig.shuttle_mass_kg + t.truth.rig.payload_mass_kg)),
        quantity("kinetic_energy", "J", kinetic_j),
        quantity("energy_lost", "J", |t| {
            let split = t.truth.energy.as_ref()?.at_separation.as_ref()?;
            let weight_n = (t.truth.rig.shuttle_mass_kg + t.truth.rig.payload_mass_kg)
                * t.truth.rig.gravity_mps2
                * t.truth.rig.incline_rad.sin();
            let way_m = t.truth.launch.as_ref()?.separation_x_m - t.performance.launcher().zero_mark_x_m;
            Some(t.winch_work_j - split.shuttle_kinetic_j - split.payload_kinetic_j - weight_n * way_m)
                .filter(|_| t.winch_work_j > 1.0)
        }),
    ]
}

fn peak(trial: &VirtualTrial, filter: &str) -> Option<(f64, f64)> {
    trial.truth.peaks.iter().find(|peak| peak.filter == filter).map(|peak| (peak.specific_g, peak.kinematic_g))
}

fn kinetic_j(trial: &VirtualTrial) -> Option<f64> {
    let split = trial.truth.energy.as_ref()?.at_separation.as_ref()?;
    Some(split.shuttle_kinetic_j + split.payload_kinetic_j)
}

/// The shuttle's true specific force from half a second before the release to half a second after the separation, through a
/// class, and the indices of release and separation.
fn stroke(trial: &VirtualTrial, class: f64) -> Option<(Vec<f64>, std::ops::Range<usize>)> {
    const MARGIN_S: f64 = 0.5;
    let from_s = trial.event_s("release")?;
    let to_s = trial.performance.separation()?.t_s;
    let gravity_mps2 = trial.performance.launcher().gravity_along_mps2();
    let felt = |row: &Row| row.shuttle_a_ground_mps2 + gravity_mps2;
    let values = trial.performance.trajectory.sampled(from_s - MARGIN_S, to_s + MARGIN_S, STEP_S, felt);
    let n_margin = (MARGIN_S / STEP_S) as usize;
    let stroke = n_margin..n_margin + ((to_s - from_s) / STEP_S) as usize;
    Some((cfc::filtered(&values, class, 1.0 / STEP_S), stroke))
}

/// Exceeded for 3 ms without a break.
fn three_ms_g(trial: &VirtualTrial, class: f64) -> Option<f64> {
    let (values, stroke) = stroke(trial, class)?;
    let n = (0.003 / STEP_S) as usize;
    let least = |run: &[f64]| run.iter().copied().fold(f64::INFINITY, f64::min);
    Some(values[stroke].windows(n).step_by(5).map(least).fold(f64::NEG_INFINITY, f64::max) / STANDARD_GRAVITY_MPS2)
}

/// Greatest mean slope over 1 ms, CFC 60.
fn onset_g_per_s(trial: &VirtualTrial) -> Option<f64> {
    const OVER_S: f64 = 0.001;
    let (values, stroke) = stroke(trial, 60.0)?;
    let (early, over) = ((0.02 / STEP_S) as usize, (OVER_S / STEP_S) as usize);
    let rise = |from: usize| values[from + over] - values[from];
    let greatest = (stroke.start - early..stroke.end - over).map(rise).fold(f64::NEG_INFINITY, f64::max);
    Some(greatest / OVER_S / STANDARD_GRAVITY_MPS2)
}

#[derive(Default)]
pub struct Tally {
    errors: Vec<f64>,
    half_widths: Vec<f64>,
    n_inside: usize,
    n_absent: usize,
}

impl Tally {
    pub fn take(&mut self, reading: &Reading, quantity: &Quantity, truth: Option<f64>) {
        let Some(truth) = truth else { return };
        let Some(row) = reading.result(quantity.result) else {
            self.n_absent += 1;
            return;
        };
        self.errors.push(row.value - truth);
        self.half_widths.push(0.5 * (row.high - row.low));
        self.n_inside += usize::from((row.low..=row.high).contains(&truth));
    }

    fn quantile(&self, share: f64) -> f64 {
        let mut sorted: Vec<f64> = self.errors.iter().map(|error| error.abs()).collect();
        sorted.sort_by(f64::total_cmp);
        let place = (share * sorted.len() as f64).ceil() as usize;
        sorted.get(place.clamp(1, sorted.len().max(1)) - 1).copied().unwrap_or(f64::NAN)
    }

    /// Mean error, median and 95 % of its size, mean half-width, width over error, inside.
    fn words(&self) -> Option<[String; 6]> {
        let n = self.errors.len();
        if n == 0 {
            return None;
        }
        let width = self.half_widths.iter().sum::<f64>() / n as f64;
        let inside = format!("{:.1} % of {n}", 100.0 * self.n_inside as f64 / n as f64);
        let absent = if self.n_absent > 0 { format!(" ({} absent)", self.n_absent) } else { String::new() };
        Some([
            format!("{:+.1e}", self.errors.iter().sum::<f64>() / n as f64),
            format!("{:.2e}", self.quantile(0.5)),
            format!("{:.2e}", self.quantile(0.95)),
            format!("{width:.2e}"),
            format!("{:.2}", width / self.quantile(0.95)),
            inside + &absent,
        ])
    }

    /// A table's row; `None` where there is no truth at all.
    pub fn row(first: &Self, fresh: &Self, quantity: &Quantity, set: &str) -> Option<String> {
        let Quantity { result, unit, .. } = quantity;
        match (first.words(), fresh.words()) {
            (Some(a), Some(b)) => {
                let cells: Vec<String> = a.iter().zip(&b).map(|(a, b)| format!("{a} / {b}")).collect();
                Some(format!("| {result}, {unit} | {set} | {} |", cells.join(" | ")))
            }
            _ if first.n_absent + fresh.n_absent > 0 => {
                Some(format!("| {result} | {set} | absent in all {} | | | | | |", first.n_absent + fresh.n_absent))
            }
            _ => None,
        }
    }
}
