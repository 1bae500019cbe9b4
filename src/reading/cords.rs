//! What the hold says of the cords: their force, how it relaxes, how evenly both sides pull.
//!
//! The line holds the shuttle against the cords; weight along the rail helps it and static friction may act either way, so
//! the cords' force is the line's tension plus the weight, known to ± that friction.

use crate::calibration::Signal;
use crate::rig::{Rig, Role};

use super::phases::Phases;
use super::rows::{Book, Budget};
use super::sensors::Sensors;
use super::series::{Binned, stats_between};
use super::tension::Hold;

/// Distance from both ends of the hold.
const CLEAR_S: f64 = 0.05;
/// Length of the mean for the asymmetry.
const MEAN_S: f64 = 0.1;
/// Relaxation times that are tried, over the hold's length: less is the winch's stop, more is no curve in this hold.
const LEAST_TIME_SHARE: f64 = 0.05;
const GREATEST_TIME_SHARE: f64 = 1.0;
const N_TIMES: usize = 60;
/// A time less well known than this share of itself is no constant.
const LEAST_KNOWN: f64 = 0.3;

pub(super) fn report(
    sensors: &Sensors<'_>,
    phases: &Phases,
    hold: &Hold,
    gravity_along_mps2: f64,
    rig: &Rig,
    book: &mut Book,
) {
    cord_force(hold, sensors, gravity_along_mps2, rig, book);
    relaxation(sensors, phases, book);
    asymmetry(sensors, phases, book);
}

/// Half-width of the band in which static friction may hide force.
pub(super) fn stiction_n(rig: &Rig) -> f64 {
    let given = rig.details.losses.breakaway_n.unwrap_or(rig.losses.friction_n);
    given.value + given.standard_uncertainty
}

/// Force that the cords lose per speed of the shuttle while a strain wave is on its way: √(k·m) of each cord, k being the
/// slope of its curve where it is drawn. Zero without cords.
pub(super) fn impedance_n_s_per_m(rig: &Rig, draw_m: f64) -> f64 {
    let cords = &rig.cords;
    let elongation = draw_m * cords.travel_ratio / cords.free_length_m;
    let segment =
        cords.curve.windows(2).find(|pair| elongation <= pair[1].elongation).or(cords.curve.windows(2).last());
    let Some([from, to]) = segment else { return 0.0 };
    let k_n_per_m = (to.tension_n - from.tension_n) / (to.elongation - from.elongation) / cords.free_length_m;
    f64::from(cords.count) * cords.travel_ratio * cords.travel_ratio * (k_n_per_m * cords.mass_kg).max(0.0).sqrt()
}

fn cord_force(hold: &Hold, sensors: &Sensors<'_>, gravity_along_mps2: f64, rig: &Rig, book: &mut Book) {
    const NAME: &str = "cord_force";
    let Some((tension_n, u_tension_n)) = hold.tension_n else {
        let reason = if sensors.line.is_none() {
            sensors.why_not(Role::ReleaseLineTension)
        } else {
            "no hold was found: the tension never stood".to_owned()
        };
        return book.absent(NAME, reason);
    };
    let mass_kg = rig.moving_mass_kg();
    let u_mass_kg = rig.shuttle.mass_kg.standard_uncertainty.hypot(rig.payload.mass_kg.standard_uncertainty);
    let stiction_n = stiction_n(rig);
    let budget = Budget::default()
        .with("hold tension", u_tension_n)
        .with("masses of the rig file", u_mass_kg * gravity_along_mps2)
        // Anywhere in ± static friction: rectangular, GUM 4.3.7.
        .with("static friction may act either way", stiction_n / 3f64.sqrt());
    let method = format!(
        "hold tension plus the weight along the rail, whole launcher; static friction of {stiction_n:.0} N may act either way"
    );
    book.result(NAME, tension_n + mass_kg * gravity_along_mps2, "N", budget, method);
}

/// T(t) = T∞·(1 + share·e^(−t/τ)) over the hold, at the cords' anchor where there is a cell.
fn relaxation(sensors: &Sensors<'_>, phases: &Phases, book: &mut Book) {
    const NAMES: [&str; 2] = ["relaxation_share", "relaxation_time"];
    let found = relaxing_channel(sensors, phases).and_then(|(signal, from_s, to_s)| {
        let fit = Relaxation::fit(signal, from_s, to_s)?;
        Ok((signal, fit))
    });
    match found {
        Ok((signal, fit)) => {
            let place = if signal.role == Role::CordAnchorTension {
                "at the cords' anchor"
            } else {
                "at the release line, where static friction hides part of it"
            };
            let method =
                format!("share·exp(−t/time) over a constant, least squares over 10 ms means of the hold, {place}");
            let budget = Budget::default().with("scatter about the curve", fit.u_share);
            book.result(NAMES[0], fit.share, "1", budget, method.clone());
            let budget = Budget::default().with("scatter about the curve", fit.u_time_s);
            book.result(NAMES[1], fit.time_s, "s", budget, method);
        }
        Err(reason) => NAMES.iter().for_each(|name| book.absent(name, reason.clone())),
    }
}

fn relaxing_channel<'a>(sensors: &Sensors<'a>, phases: &Phases) -> Result<(&'a Signal, f64, f64), String> {
    let signal = sensors.anchor.or(sensors.line).ok_or_else(|| sensors.why_not(Role::CordAnchorTension))?;
    let (from_s, to_s) =
        phases.hold_start_s.zip(phases.hold_end_s).ok_or("no hold was found: the tension never stood")?;
    Ok((signal, from_s + CLEAR_S, to_s - CLEAR_S))
}

#[derive(Debug, Clone, Copy, PartialEq)]
struct Relaxation {
    share: f64,
    u_share: f64,
    time_s: f64,
    u_time_s: f64,
}

impl Relaxation {
    fn fit(signal: &Signal, from_s: f64, to_s: f64) -> Result<Self, String> {
        const LEAST_S: f64 = 1.0;
        let length_s = to_s - from_s;
        if length_s < LEAST_S {
            return Err(format!("the hold of {length_s:.1} s is too short to see a relaxation"));
        }
        let binned = Binned::new(signal, from_s, to_s);
        if binned.filled().count() < binned.bins.len() * 9 / 10 {
            return Err("a tenth of the hold or more is missing: no curve is laid over that".to_owned());
        }
        let points: Vec<(f64, f64)> =
            binned.filled().map(|(idx, bin)| (binned.time_s(idx) - from_s, bin.mean)).collect();
        let step = (GREATEST_TIME_SHARE / LEAST_TIME_SHARE).powf(1.0 / (N_TIMES - 1) as f64);
        let times: Vec<f64> = (0..N_TIMES).map(|k| LEAST_TIME_SHARE * length_s * step.powi(k as i32)).collect();
        let curves: Vec<Curve> = times.iter().filter_map(|&time_s| Curve::through(&points, time_s)).collect();
        let best = curves.iter().min_by(|a, b| a.squares.total_cmp(&b.squares)).ok_or("the hold has no samples")?;
        if best.drop_n < 4.0 * best.u_drop_n {
            return Err(format!(
                "the tension's fall in the hold ({:.2} N) is not told from its scatter ({:.2} N)",
                best.drop_n, best.u_drop_n
            ));
        }
        let best = Curve::refined(&points, best.time_s / step, best.time_s * step).unwrap_or(*best);
        let [u_share, u_time_s] = best.uncertainties(&points);
        let known = u_time_s < LEAST_KNOWN * best.time_s;
        if !known
            || best.time_s > 0.98 * GREATEST_TIME_SHARE * length_s
            || best.time_s < 1.02 * LEAST_TIME_SHARE * length_s
        {
            return Err(format!(
                "the tension's fall of {:.2} N has no time of its own within a hold of {length_s:.1} s: hold longer",
                best.drop_n
            ));
        }
        Ok(Self { share: best.drop_n / best.level_n, u_share, time_s: best.time_s, u_time_s })
    }
}

/// A constant and an exponential of given time, by linear least squares.
#[derive(Debug, Clone, Copy)]
struct Curve {
    time_s: f64,
    level_n: f64,
    drop_n: f64,
    u_drop_n: f64,
    squares: f64,
}

impl Curve {
    fn through(points: &[(f64, f64)], time_s: f64) -> Option<Self> {
        let n = points.len() as f64;
        let shape = |t: f64| (-t / time_s).exp();
        let (e_mean, y_mean) =
            (points.iter().map(|p| shape(p.0)).sum::<f64>() / n, points.iter().map(|p| p.1).sum::<f64>() / n);
        let spread: f64 = points.iter().map(|p| (shape(p.0) - e_mean).powi(2)).sum();
        let along: f64 = points.iter().map(|p| (shape(p.0) - e_mean) * (p.1 - y_mean)).sum();
        let drop_n = along / spread;
        let level_n = y_mean - drop_n * e_mean;
        let squares: f64 = points.iter().map(|p| (p.1 - level_n - drop_n * shape(p.0)).powi(2)).sum();
        let u_drop_n = (squares / (n - 3.0) / spread).sqrt();
        (drop_n.is_finite() && level_n > 0.0).then_some(Self { time_s, level_n, drop_n, u_drop_n, squares })
    }

    /// The time of least squares between two, by golden section (R. P. Brent, "Algorithms for Minimization without
    /// Derivatives", 1973, section 5.1).
    fn refined(points: &[(f64, f64)], mut low_s: f64, mut high_s: f64) -> Option<Self> {
        const GOLDEN: f64 = 0.618_033_988_749_894_8;
        const N_STEPS: usize = 40;
        let squares = |time_s: f64| Self::through(points, time_s).map_or(f64::INFINITY, |curve| curve.squares);
        for _ in 0..N_STEPS {
            let (a, b) = (high_s - GOLDEN * (high_s - low_s), low_s + GOLDEN * (high_s - low_s));
            if squares(a) < squares(b) { high_s = b } else { low_s = a }
        }
        Self::through(points, 0.5 * (low_s + high_s))
    }

    /// Of share and time, all three parameters free: σ²·(JᵀJ)⁻¹ (JCGM 100:2008, H.3, for a curve linearised about its fit).
    fn uncertainties(&self, points: &[(f64, f64)]) -> [f64; 2] {
        let mut normal = nalgebra::Matrix3::<f64>::zeros();
        for (t, _) in points {
            let shape = (-t / self.time_s).exp();
            let row = nalgebra::Vector3::new(1.0, shape, self.drop_n * t / (self.time_s * self.time_s) * shape);
            normal += row * row.transpose();
        }
        let variance = self.squares / (points.len() as f64 - 3.0);
        let Some(inverse) = normal.try_inverse() else { return [f64::INFINITY; 2] };
        let share = self.drop_n / self.level_n;
        let along = nalgebra::Vector3::new(-share / self.level_n, 1.0 / self.level_n, 0.0);
        let u_share = (variance * along.dot(&(inverse * along))).max(0.0).sqrt();
        [u_share, (variance * inverse[(2, 2)]).max(0.0).sqrt()]
    }
}

/// (left − right) / (left + right) at the end of the hold.
fn asymmetry(sensors: &Sensors<'_>, phases: &Phases, book: &mut Book) {
    const NAME: &str = "anchor_asymmetry";
    let (Some(left), Some(right)) = (sensors.left, sensors.right) else {
        // A rig without these cells asks for no result of them.
        let refused = [Role::LeftAnchorTension, Role::RightAnchorTension];
        if sensors.left.is_some() || sensors.right.is_some() || sensors.refused.iter().any(|(r, _)| refused.contains(r))
        {
            let missing = if sensors.left.is_none() { Role::LeftAnchorTension } else { Role::RightAnchorTension };
            book.absent(NAME, sensors.why_not(missing));
        }
        return;
    };
    let Some(end_s) = phases.hold_end_s.map(|end_s| end_s - CLEAR_S) else {
        return book.absent(NAME, "no hold was found: the tension never stood");
    };
    let level = |signal: &Signal| stats_between(signal, end_s - MEAN_S, end_s);
    let (Some(at_left), Some(at_right)) = (level(left), level(right)) else {
        return book.absent(NAME, "an anchor cell has no samples in the last 0.1 s of the hold");
    };
    let sum_n = at_left.mean + at_right.mean;
    if sum_n < 1.0 {
        return book.absent(NAME, format!("the anchors carry {sum_n:.1} N together: no share of that can be told"));
    }
    // d((l − r)/(l + r)) = 2·(r·dl − l·dr)/(l + r)².
    let share = |other_n: f64, u_n: f64| 2.0 * other_n * u_n / (sum_n * sum_n);
    let u =
        |signal: &Signal, level_n: f64| (level_n * signal.scale_relative_uncertainty).hypot(signal.zero_uncertainty);
    let budget = Budget::default()
        .with("calibration of the left cell", share(at_right.mean, u(left, at_left.mean)))
        .with("calibration of the right cell", share(at_left.mean, u(right, at_right.mean)))
        .with(
            "noise",
            share(at_right.mean, at_left.deviation / (at_left.n as f64).sqrt())
                .hypot(share(at_left.mean, at_right.deviation / (at_right.n as f64).sqrt())),
        );
    let value = (at_left.mean - at_right.mean) / sum_n;
    book.result(NAME, value, "1", budget, "left less right anchor over their sum, last 0.1 s of the hold");
}

#[cfg(test)]
mod tests {
    use super::*;

    fn relaxing(noise: f64) -> Signal {
        let time_s: Vec<f64> = (0..40_000).map(|k| k as f64 * 1e-4).collect();
        let mut random = crate::estimation::Random::new(3, 0);
        let value = time_s.iter().map(|t| 600.0 * (1.0 + 0.02 * (-t / 0.8).exp()) + noise * random.normal()).collect();
        Signal {
            name: "anchor".into(),
            role: Role::CordAnchorTension,
            time_s,
            value,
            zero_uncertainty: 0.5,
            scale_relative_uncertainty: 1e-3,
            time_uncertainty_s: 1e-5,
            nominal_rate_hz: 1e4,
            bandwidth_hz: None,
            resolution: 5e-4,
            range: None,
        }
    }

    // Closed form: the signal is the very curve.
    #[test]
    fn a_relaxing_tension_gives_back_its_share_and_time() {
        let fit = Relaxation::fit(&relaxing(0.25), 0.0, 4.0).unwrap();
        assert!((fit.time_s - 0.8).abs() < 2.0 * fit.u_time_s && fit.u_time_s < 0.05, "{fit:?}");
        assert!((fit.share - 0.02).abs() < 3.0 * fit.u_share && fit.u_share < 5e-4, "{fit:?}");
    }

    #[test]
    fn a_hold_shorter_than_the_relaxation_names_no_time() {
        assert!(Relaxation::fit(&relaxing(0.25), 0.0, 0.5).unwrap_err().contains("too short"));
        let steady = Signal { value: vec![600.0; 40_000], ..relaxing(0.0) };
        assert!(Relaxation::fit(&steady, 0.0, 4.0).is_err());
    }
}
