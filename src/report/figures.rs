//! From a page's data to its pictures, each with a text alternative that carries the numbers.

use super::decimate::{Run, runs};
use super::page::{MotionCurve, MotionOverRail, ResidualTrace, Trace, TrialPage};
use super::picture::{Ink, Line, Mark, Picture, Ribbon, Stretch, Stroke};

/// Share of the y range left free above and below.
const HEADROOM: f64 = 0.08;

/// Tension over the whole trial, with phases and limit. `None` where no tension was recorded.
pub(super) fn tension_over_trial(page: &TrialPage) -> Option<Picture> {
    let range = time_range(&page.tension)?;
    let limit_n = page.limits.tension_n;
    let stretches = page.phases.iter();
    let stretches =
        stretches.map(|phase| Stretch { name: phase.name.clone(), from: phase.from_s, to: phase.to_s }).collect();
    let (peak, at_s) = peak(&page.tension[0]);
    let phases: Vec<String> =
        page.phases.iter().map(|phase| format!("{} until {:.2} s", phase.name, phase.to_s)).collect();
    let phases = if phases.is_empty() { String::new() } else { format!("; {}", phases.join(", ")) };
    let limit_words = limit_n.map_or_else(String::new, |limit| format!("; limit {limit:.0} N, for advice only"));
    Some(Picture {
        title: "Tension over the whole trial".into(),
        alternative: format!(
            "{} over {:.2} s, greatest {peak:.1} N at {at_s:.3} s{limit_words}{phases}",
            page.tension[0].name,
            range.1 - range.0
        ),
        height: 720,
        x_label: "trial time, s".into(),
        y_label: "tension of the whole launcher, N".into(),
        x_range: range,
        y_range: spread(page.tension.iter().flat_map(|trace| trace.value.iter().copied()).chain(limit_n).chain([0.0])),
        stretches,
        lines: tension_lines(page, range),
        levels: limit_n.map(|at| Mark { label: format!("limit {at:.0} N (advice only)"), at }).into_iter().collect(),
        ..Picture::default()
    })
}

/// Tension from just before the release to just after the brake, with the instants that were found.
pub(super) fn tension_about_release(page: &TrialPage) -> Option<Picture> {
    let whole = time_range(&page.tension)?;
    let at = |name: &str| page.instants.iter().find(|instant| instant.name == name).map(|instant| instant.time_s);
    let release_s = at("release")?;
    let end_s = at("rest").or(at("brake_contact")).or(at("separation")).unwrap_or(release_s + 0.5);
    let range = ((release_s - 0.1).max(whole.0), (end_s + 0.15).clamp(release_s + 0.2, release_s + 1.5).min(whole.1));
    let inside = |time_s: f64| (range.0..=range.1).contains(&time_s);
    let values = page.tension.iter().flat_map(|trace| {
        trace.time_s.iter().zip(&trace.value).filter(|(time_s, _)| inside(**time_s)).map(|(_, value)| *value)
    });
    let marks: Vec<Mark> = page.instants.iter().filter(|instant| inside(instant.time_s)).map(instant_mark).collect();
    let found: Vec<&str> = marks.iter().map(|mark| mark.label.as_str()).collect();
    Some(Picture {
        title: "Tension about the release".into(),
        alternative: format!("from {:.3} s to {:.3} s; {}", range.0, range.1, found.join("; ")),
        height: 720,
        x_label: "trial time, s".into(),
        y_label: "tension of the whole launcher, N".into(),
        x_range: range,
        y_range: spread(values.chain([0.0])),
        lines: tension_lines(page, range),
        marks,
        ..Picture::default()
    })
}

pub(super) fn instant_mark(instant: &crate::reading::Instant) -> Mark {
    Mark { label: format!("{} {:.4} s", instant.name.replace('_', " "), instant.time_s), at: instant.time_s }
}

pub(super) fn tension_lines(page: &TrialPage, range: (f64, f64)) -> Vec<Line> {
    let styles = [(Ink::Blue, Stroke::Solid), (Ink::Vermilion, Stroke::Dashed), (Ink::Black, Stroke::Dashed)];
    let traces = page.tension.iter().zip(styles.into_iter().cycle());
    traces
        .map(|(trace, (ink, stroke))| Line {
            name: trace.name.clone(),
            ink,
            stroke,
            runs: runs(&trace.time_s, &trace.value, trace.step_s, range, Picture::n_columns()),
        })
        .collect()
}

/// Speed over the rail coordinate, measured and modelled.
pub(super) fn speed(motion: &MotionOverRail) -> Option<Picture> {
    over_rail(motion, "Speed along the rail", "speed, m/s", |curve| (&curve.v_mps, &curve.u_v_mps))
}

/// Kinematic acceleration over the rail coordinate, measured and modelled.
pub(super) fn acceleration(motion: &MotionOverRail) -> Option<Picture> {
    let title = "Acceleration along the rail (kinematic)";
    over_rail(motion, title, "acceleration, m/s²", |curve| (&curve.a_mps2, &curve.u_a_mps2))
}

/// The same up to the separation: the brake's spike, ten times as large, would flatten it.
pub(super) fn acceleration_of_stroke(motion: &MotionOverRail) -> Option<Picture> {
    const BEYOND_M: f64 = 0.2;
    let until_m = motion.separation_x_m? + BEYOND_M;
    let stroke = MotionOverRail {
        measured: up_to(&motion.measured, until_m),
        modelled: motion.modelled.as_ref().map(|curve| up_to(curve, until_m)),
        ..motion.clone()
    };
    let title = "Acceleration in the power stroke (kinematic)";
    over_rail(&stroke, title, "acceleration, m/s²", |curve| (&curve.a_mps2, &curve.u_a_mps2))
}

/// A curve until it first passes a place.
fn up_to(curve: &MotionCurve, until_m: f64) -> MotionCurve {
    let n = curve.x_m.iter().position(|x_m| *x_m > until_m).unwrap_or(curve.x_m.len());
    let part = |column: &[f64]| column.get(..n).unwrap_or(column).to_vec();
    MotionCurve {
        x_m: part(&curve.x_m),
        v_mps: part(&curve.v_mps),
        a_mps2: part(&curve.a_mps2),
        u_v_mps: part(&curve.u_v_mps),
        u_a_mps2: part(&curve.u_a_mps2),
    }
}

type Column = fn(&MotionCurve) -> (&Vec<f64>, &Vec<f64>);

fn over_rail(motion: &MotionOverRail, title: &str, y_label: &str, column: Column) -> Option<Picture> {
    let measured = &motion.measured;
    let modelled = motion.modelled.as_ref();
    let x_range = extent(measured.x_m.iter().chain(modelled.into_iter().flat_map(|m| &m.x_m)).copied())?;
    let (value, uncertainty) = column(measured);
    let model_value = modelled.map(|curve| column(curve).0);
    let values = value.iter().chain(model_value.into_iter().flatten()).copied();
    let mut lines = vec![curve_line("measured", Ink::Blue, Stroke::Solid, &measured.x_m, value, x_range)];
    if let (Some(curve), Some(value)) = (modelled, model_value) {
        lines.push(curve_line("modelled", Ink::Vermilion, Stroke::Dashed, &curve.x_m, value, x_range));
    }
    let at_separation = |x_m: &[f64], value: &[f64]| motion.separation_x_m.and_then(|at| interpolated(x_m, value, at));
    let mut alternative = format!("from x = {:.2} m to {:.2} m", x_range.0, x_range.1);
    if let Some(measured) = at_separation(&measured.x_m, value) {
        alternative.push_str(&format!("; measured {measured:.2} at separation"));
    }
    if let (Some(curve), Some(value)) = (modelled, model_value)
        && let Some(modelled) = at_separation(&curve.x_m, value)
    {
        alternative.push_str(&format!(", modelled {modelled:.2}"));
    }
    if motion.separation_x_m.is_some() {
        alternative.push_str(&format!(" ({y_label})"));
    }
    let mark = |at: f64| Mark { label: format!("separation x = {at:.2} m"), at };
    Some(Picture {
        title: title.into(),
        alternative,
        height: 640,
        x_label: "x along the rail, m".into(),
        y_label: y_label.into(),
        x_range,
        y_range: spread(values.chain([0.0])),
        ribbons: ribbon("measured ± 2 u", Ink::Blue, &measured.x_m, value, uncertainty, x_range),
        lines,
        marks: motion.separation_x_m.into_iter().map(mark).collect(),
        ..Picture::default()
    })
}

/// A line over x. The shuttle may rebound, so x is followed as it comes, thinned evenly where there is too much of it.
pub(super) fn curve_line(name: &str, ink: Ink, stroke: Stroke, x: &[f64], y: &[f64], range: (f64, f64)) -> Line {
    let rises = x.windows(2).all(|pair| pair[1] >= pair[0]);
    let runs = if rises {
        runs(x, y, f64::INFINITY, range, Picture::n_columns())
    } else {
        let every = x.len().div_ceil(4 * Picture::n_columns()).max(1);
        let points = x.iter().copied().zip(y.iter().copied());
        vec![points.filter(|point| point.0.is_finite() && point.1.is_finite()).step_by(every).collect()]
    };
    Line { name: name.into(), ink, stroke, runs }
}

/// The band of two standard uncertainties about a curve; none where there are no uncertainties.
pub(super) fn ribbon(name: &str, ink: Ink, x: &[f64], y: &[f64], u: &[f64], range: (f64, f64)) -> Vec<Ribbon> {
    if u.len() != y.len() || u.is_empty() {
        return Vec::new();
    }
    let edge = |sign: f64| {
        let edge: Vec<f64> = y.iter().zip(u).map(|(y, u)| y + sign * 2.0 * u).collect();
        curve_line(name, ink, Stroke::Solid, x, &edge, range).runs.concat()
    };
    let mut outline: Run = edge(1.0);
    outline.extend(edge(-1.0).into_iter().rev());
    vec![Ribbon { name: name.into(), ink, outline }]
}

/// Residual over trial time with its band of two standard uncertainties about zero.
pub(super) fn residual(trace: &ResidualTrace) -> Option<Picture> {
    let x_range = extent(trace.time_s.iter().copied())?;
    let unit = &trace.unit;
    let zero = vec![0.0; trace.time_s.len()];
    let line = Line {
        name: format!("{}, measured minus modelled", trace.quantity),
        ink: Ink::Blue,
        stroke: Stroke::Solid,
        runs: runs(&trace.time_s, &trace.residual, trace.step_s, x_range, Picture::n_columns()),
    };
    let bounds = trace.uncertainty.iter().flat_map(|u| [2.0 * u, -2.0 * u]);
    Some(Picture {
        title: format!("Residual of {}", trace.quantity),
        alternative: format!(
            "measured minus modelled from {:.3} s to {:.3} s: bias {:.3} {unit}, RMS {:.3} {unit}, largest {:.3} {unit} at {:.3} s",
            x_range.0, x_range.1, trace.bias, trace.rms, trace.largest, trace.largest_at_s
        ),
        height: 480,
        x_label: "trial time, s".into(),
        y_label: format!("residual, {unit}"),
        x_range,
        y_range: spread(trace.residual.iter().copied().chain(bounds).chain([0.0])),
        ribbons: ribbon("± 2 u", Ink::Black, &trace.time_s, &zero, &trace.uncertainty, x_range),
        lines: vec![line],
        ..Picture::default()
    })
}

fn time_range(traces: &[Trace]) -> Option<(f64, f64)> {
    extent(traces.iter().flat_map(|trace| trace.time_s.iter().copied()))
}

fn peak(trace: &Trace) -> (f64, f64) {
    let points = trace.value.iter().zip(&trace.time_s).filter(|(value, _)| value.is_finite());
    points.max_by(|a, b| a.0.total_cmp(b.0)).map_or((f64::NAN, f64::NAN), |(value, time_s)| (*value, *time_s))
}

/// Least and greatest of what is a number; `None` when they do not span a range.
pub(super) fn extent(values: impl Iterator<Item = f64>) -> Option<(f64, f64)> {
    let finite = values.filter(|value| value.is_finite());
    let (low, high) = finite.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), v| (low.min(v), high.max(v)));
    (high > low).then_some((low, high))
}

/// [`extent`] with some headroom, a unit range where all values are equal.
pub(super) fn spread(values: impl Iterator<Item = f64>) -> (f64, f64) {
    let (low, high) = extent(values).unwrap_or((0.0, 1.0));
    let margin = HEADROOM * (high - low);
    (if low == 0.0 { 0.0 } else { low - margin }, high + margin)
}

/// The value at x, linear between the first two points that enclose it.
fn interpolated(x: &[f64], y: &[f64], at: f64) -> Option<f64> {
    let index = x.windows(2).position(|pair| pair[0] <= at && at <= pair[1])?;
    let (x0, x1, y0, y1) = (x[index], x[index + 1], *y.get(index)?, *y.get(index + 1)?);
    Some(if x1 > x0 { y0 + (at - x0) / (x1 - x0) * (y1 - y0) } else { y0 })
}
