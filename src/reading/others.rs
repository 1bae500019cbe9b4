//! Other sources of the launch speed beside the rig's own: beam gates, a payload recorder, a high-speed camera.
//!
//! Each is compared with the smoothed motion by its normalised error Eₙ = difference over the root of the sum of the squared
//! expanded uncertainties (ISO/IEC 17043:2010, B.3.1.3): the two agree where |Eₙ| ≤ 1. None of them is averaged in.

use crate::estimation::savitzky_golay;
use crate::rig::{InputMeaning, Rig};

use super::beside::{Beside, Camera, EdgeSeen, Recorder};
use super::launch::Separation;
use super::motion::Track;
use super::rows::{Book, Budget, COVERAGE_95};

/// Jitter of an edge's tick against another of the same device.
const U_EDGE_S: f64 = 2e-6;
/// Reading frames over which a quadratic is laid.
const CAMERA_REACH: usize = 4;
/// Times are shifted by no more than this share of a table's length when it is laid over the motion.
const N_SHIFTS: usize = 400;

pub(super) fn report(
    beside: &Beside,
    track: &Track,
    release: (f64, f64),
    separation: &Separation,
    rig: &Rig,
    book: &mut Book,
) {
    gates(&beside.edges, track, separation, rig, book);
    if let Some(recorder) = &beside.recorder {
        recorded(recorder, track, release.0, separation, book);
    }
    if let Some(camera) = &beside.camera {
        filmed(camera, track, release, separation, book);
    }
}

/// A speed from elsewhere, with its budget, against the launch speed.
fn compare(name: &str, value: f64, budget: Budget, separation: &Separation, method: String, book: &mut Book) {
    let own = book.results.iter().find(|row| row.name == "launch_speed");
    let u_own = own.map_or(separation.u_speed_mps, |row| row.standard_uncertainty);
    let expanded = COVERAGE_95 * budget.total().hypot(u_own);
    let normalised = (value - separation.speed_mps) / expanded;
    book.result(name, value, "m/s", budget, method);
    book.result(
        &format!("{name}_normalised_error"),
        normalised,
        "1",
        Budget::default().with("by definition", 1.0 / COVERAGE_95),
        "difference from the launch speed over both expanded uncertainties; they agree within 1",
    );
    if normalised.abs() > 1.0 {
        book.findings.push(format!(
            "{} gives {value:.3} m/s where the sensors give {:.3} m/s: {:.1} times both expanded uncertainties apart",
            name.replace('_', " "),
            separation.speed_mps,
            normalised.abs()
        ));
    }
}

/// One passage of the flag through a gate.
#[derive(Debug, Clone, Copy)]
struct Passage {
    x_m: f64,
    u_x_m: f64,
    time_s: f64,
}

/// The first two gates after the release: mean speed between them, carried to the separation by the smoothed motion.
fn gates(edges: &[EdgeSeen], track: &Track, separation: &Separation, rig: &Rig, book: &mut Book) {
    const NAME: &str = "launch_speed_by_gates";
    let mut known = rig.details.inputs.iter().filter_map(|input| match input.meaning {
        InputMeaning::BeamGate { x_m, flag_m } => Some((input, x_m, flag_m)),
        InputMeaning::Release => None,
    });
    if known.clone().next().is_none() {
        return;
    }
    let near = |edge: &&EdgeSeen| (edge.time_s - separation.time_s).abs() < 1.0;
    let passage = |(input, x_m, _): (&crate::rig::Input, crate::rig::Given, crate::rig::Given)| {
        let mine = edges.iter().filter(|edge| edge.device == input.device && edge.input == input.number);
        let front = mine.filter(near).find(|edge| edge.rising)?;
        Some(Passage { x_m: x_m.value, u_x_m: x_m.standard_uncertainty, time_s: front.time_s })
    };
    if let Some(first) = known.clone().next()
        && let Some((mean_mps, at_s, length_s, u)) = flag_speed(first, edges, separation)
    {
        let carried = mean_mps + separation.speed_mps - mean_ground_mps(track, at_s, at_s + length_s);
        compare(
            "launch_speed_by_flag",
            carried,
            u,
            separation,
            "length of the flag over the time it took through the first gate, carried to the separation by the smoothed motion".into(),
            book,
        );
    }
    let mut passages: Vec<Passage> = known.by_ref().filter_map(passage).collect();
    passages.sort_by(|a, b| a.time_s.total_cmp(&b.time_s));
    let [first, .., last] = passages.as_slice() else {
        return book.absent(NAME, "fewer than two beam gates saw the flag about the separation");
    };
    let (way_m, took_s) = (last.x_m - first.x_m, last.time_s - first.time_s);
    if way_m <= 0.0 || took_s <= 0.0 {
        return book.absent(
            NAME,
            "the gates were passed in another order than they stand: look at their places in the rig file",
        );
    }
    let mean_mps = way_m / took_s;
    let carried = mean_mps + separation.speed_mps - mean_ground_mps(track, first.time_s, last.time_s);
    let budget = Budget::default()
        .with("places of the gates", mean_mps * first.u_x_m.hypot(last.u_x_m) / way_m)
        .with("times of the edges", mean_mps * 2f64.sqrt() * U_EDGE_S / took_s);
    let method = format!(
        "{way_m:.3} m between the gates in {:.3} ms, a mean of {mean_mps:.3} m/s, carried to the separation by the smoothed motion",
        1e3 * took_s
    );
    compare(NAME, carried, budget, separation, method, book);
}

/// Mean speed, start and length of the flag's passage through a gate, with its budget.
fn flag_speed(
    (input, _, flag_m): (&crate::rig::Input, crate::rig::Given, crate::rig::Given),
    edges: &[EdgeSeen],
    separation: &Separation,
) -> Option<(f64, f64, f64, Budget)> {
    let mine = || {
        let of_input = edges.iter().filter(|edge| edge.device == input.device && edge.input == input.number);
        of_input.filter(|edge| (edge.time_s - separation.time_s).abs() < 1.0)
    };
    let front = mine().find(|edge| edge.rising)?;
    let rear = mine().find(|edge| !edge.rising && edge.time_s > front.time_s)?;
    let took_s = rear.time_s - front.time_s;
    let mean_mps = flag_m.value / took_s;
    let budget = Budget::default()
        .with("length of the flag", mean_mps * flag_m.standard_uncertainty / flag_m.value)
        .with("times of the edges", mean_mps * 2f64.sqrt() * U_EDGE_S / took_s);
    (took_s > 0.0 && flag_m.value > 0.0).then_some((mean_mps, front.time_s, took_s, budget))
}

/// Mean of the smoothed speed against the ground between two instants.
fn mean_ground_mps(track: &Track, from_s: f64, to_s: f64) -> f64 {
    let (first, last) = (track.index_at(from_s), track.index_at(to_s).max(track.index_at(from_s) + 1));
    let speeds = track.motion.v_mps[first..last].iter().zip(&track.rail_v_mps[first..last]).map(|(v, w)| v + w);
    speeds.sum::<f64>() / (last - first) as f64
}

fn recorded(recorder: &Recorder, track: &Track, release_s: f64, separation: &Separation, book: &mut Book) {
    const NAME: &str = "launch_speed_by_recorder";
    let step_s = (recorder.time_s[recorder.time_s.len() - 1] - recorder.time_s[0]) / recorder.time_s.len() as f64;
    let Some((shift_s, rms_mps)) =
        best_shift(&recorder.time_s, &recorder.speed_mps, track, (release_s, separation.time_s))
    else {
        return book.absent(NAME, "the recorder's table has too few rows within the stroke to be laid over it");
    };
    let Some(value) = interpolated(&recorder.time_s, &recorder.speed_mps, separation.time_s - shift_s) else {
        return book.absent(NAME, "the recorder's table ends before the separation");
    };
    let here = track.index_at(separation.time_s);
    let budget = Budget::default()
        .with("reading of the recorder", recorder.u_speed_mps.max(rms_mps))
        .with("its time against the trial's", track.motion.a_mps2[here].abs() * step_s / 12f64.sqrt());
    let method = format!(
        "the payload recorder's speed at the separation, its clock shifted by {shift_s:+.4} s so that its speeds lie best over the smoothed ones"
    );
    compare(NAME, value, budget, separation, method, book);
}

/// Local quadratics through the frames: position, speed and acceleration at the separation.
fn filmed(camera: &Camera, track: &Track, release: (f64, f64), separation: &Separation, book: &mut Book) {
    const NAMES: [&str; 2] = ["launch_speed_by_camera", "separation_x_by_camera"];
    let interval_s = (camera.time_s[camera.time_s.len() - 1] - camera.time_s[0]) / (camera.time_s.len() - 1) as f64;
    let speeds = even_speeds(camera, interval_s).unwrap_or_else(|| uneven_speeds(camera));
    let (shift_s, u_shift_s, how) = match camera.release_s {
        // The shuttle started somewhere within the frame: rectangular, GUM 4.3.7.
        Some(at_s) => (release.0 - at_s, (interval_s / 12f64.sqrt()).hypot(release.1), "aligned by its release frame"),
        None => match best_shift(&camera.time_s, &speeds, track, (release.0, separation.time_s)) {
            Some((shift_s, rms_mps)) => {
                let steepest = track.motion.a_mps2.iter().copied().fold(1.0, f64::max);
                (shift_s, rms_mps / steepest, "its speeds laid best over the smoothed ones")
            }
            None => {
                return NAMES
                    .iter()
                    .for_each(|name| book.absent(name, "the camera's table has too few frames within the stroke"));
            }
        },
    };
    let Some(local) = Local::at(camera, separation.time_s - shift_s) else {
        return NAMES.iter().for_each(|name| book.absent(name, "the camera's table ends before the separation"));
    };
    let u_a = local.u_a_mps2;
    let budget = Budget::default()
        .with("reading of the marks", local.u_v_mps)
        .with("its time against the trial's", local.a_mps2.abs() * u_shift_s);
    let method = format!(
        "quadratic through {} frames about the separation, {how}; acceleration there {:.1} m/s² (u {u_a:.1} m/s²)",
        2 * CAMERA_REACH + 1,
        local.a_mps2
    );
    compare(NAMES[0], local.v_mps, budget, separation, method, book);
    let budget = Budget::default()
        .with("reading of the marks", local.u_x_m)
        .with("its time against the trial's", local.v_mps * u_shift_s);
    book.result(NAMES[1], local.x_m, "m", budget, format!("place of the mark at the separation, {how}"));
}

/// Slopes of quadratics where the frames are evenly spaced, by one set of weights; NaN at both ends.
fn even_speeds(camera: &Camera, interval_s: f64) -> Option<Vec<f64>> {
    let even = camera.time_s.windows(2).all(|pair| ((pair[1] - pair[0]) / interval_s - 1.0).abs() < 1e-3);
    let n = camera.x_m.len();
    if !even || n < 2 * CAMERA_REACH + 1 {
        return None;
    }
    let weights = savitzky_golay(CAMERA_REACH, 1);
    let slope = |run: &[f64]| run.iter().zip(&weights).map(|(x, weight)| x * weight).sum::<f64>() / interval_s;
    let mut speeds = vec![f64::NAN; n];
    for (idx, run) in camera.x_m.windows(weights.len()).enumerate() {
        speeds[idx + CAMERA_REACH] = slope(run);
    }
    Some(speeds)
}

fn uneven_speeds(camera: &Camera) -> Vec<f64> {
    camera.time_s.iter().map(|time_s| Local::at(camera, *time_s).map_or(f64::NAN, |local| local.v_mps)).collect()
}

/// A quadratic through the frames nearest to an instant, by least squares.
#[derive(Debug, Clone, Copy)]
struct Local {
    x_m: f64,
    v_mps: f64,
    a_mps2: f64,
    u_x_m: f64,
    u_v_mps: f64,
    u_a_mps2: f64,
}

impl Local {
    fn at(camera: &Camera, time_s: f64) -> Option<Self> {
        let n = camera.time_s.len();
        if !(camera.time_s[0]..=camera.time_s[n - 1]).contains(&time_s) || n < 4 {
            return None;
        }
        let middle = camera.time_s.partition_point(|t| *t < time_s);
        let first = middle.saturating_sub(CAMERA_REACH).min(n.saturating_sub(2 * CAMERA_REACH + 1));
        let last = (first + 2 * CAMERA_REACH + 1).min(n);
        let t = &camera.time_s[first..last];
        let design = nalgebra::DMatrix::from_fn(t.len(), 3, |row, column| (t[row] - time_s).powi(column as i32));
        let x = nalgebra::DVector::from_column_slice(&camera.x_m[first..last]);
        let inverse = (design.transpose() * &design).try_inverse()?;
        let fit = &inverse * design.transpose() * &x;
        let residual = &x - &design * &fit;
        let scatter = if t.len() > 3 { (residual.norm_squared() / (t.len() - 3) as f64).sqrt() } else { 0.0 };
        let u = scatter.max(camera.u_x_m);
        let deviation = |i: usize| u * inverse[(i, i)].max(0.0).sqrt();
        Some(Self {
            x_m: fit[0],
            v_mps: fit[1],
            a_mps2: 2.0 * fit[2],
            u_x_m: deviation(0),
            u_v_mps: deviation(1),
            u_a_mps2: 2.0 * deviation(2),
        })
    }
}

/// The shift of a table's clock under which its speeds lie best over the smoothed ones in the stroke, and the root mean
/// square that is left.
fn best_shift(time_s: &[f64], speed_mps: &[f64], track: &Track, stroke_s: (f64, f64)) -> Option<(f64, f64)> {
    const N_INSTANTS: usize = 80;
    let (known_s, known_mps): (Vec<f64>, Vec<f64>) =
        time_s.iter().zip(speed_mps).filter(|(_, v)| v.is_finite()).map(|(t, v)| (*t, *v)).unzip();
    // At even instants of the stroke, four fifths of which the table must cover: a shift that leaves only the start in it
    // would fit anything.
    let instants: Vec<(f64, f64)> = (0..N_INSTANTS)
        .map(|k| stroke_s.0 + (k as f64 + 0.5) / N_INSTANTS as f64 * (stroke_s.1 - stroke_s.0))
        .map(|at_s| (at_s, track.index_at(at_s)))
        .map(|(at_s, idx)| (at_s, track.motion.v_mps[idx] + track.rail_v_mps[idx]))
        .collect();
    let misfit = |shift_s: f64| {
        let seen =
            instants.iter().filter_map(|(at_s, v)| Some(interpolated(&known_s, &known_mps, at_s - shift_s)? - v));
        let (mut sum, mut n) = (0.0, 0_usize);
        for difference in seen {
            sum += difference * difference;
            n += 1;
        }
        (5 * n >= 4 * N_INSTANTS).then(|| (sum / n as f64).sqrt())
    };
    // Coarse over every place that the table may lie, then finer about the best.
    let (first, last) = (time_s.first()?, time_s.last()?);
    let (mut from_s, mut to_s) = (stroke_s.0 - last, stroke_s.1 - first);
    let mut best: Option<(f64, f64)> = None;
    for _ in 0..4 {
        let step_s = (to_s - from_s) / N_SHIFTS as f64;
        let tried = (0..=N_SHIFTS).map(|k| from_s + k as f64 * step_s);
        let scored = tried.filter_map(|shift_s| Some((shift_s, misfit(shift_s)?)));
        let found = scored.min_by(|a, b| a.1.total_cmp(&b.1))?;
        best = Some(found);
        (from_s, to_s) = (found.0 - 2.0 * step_s, found.0 + 2.0 * step_s);
    }
    best
}

fn interpolated(x: &[f64], y: &[f64], at: f64) -> Option<f64> {
    let after = x.partition_point(|known| *known < at);
    let before = after.checked_sub(1)?;
    let (x0, x1) = (x[before], *x.get(after)?);
    Some(y[before] + (at - x0) / (x1 - x0) * (y[after] - y[before]))
}
