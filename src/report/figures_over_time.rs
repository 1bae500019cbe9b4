//! The hold and the motion over trial time.

use super::figures::{curve_line, extent, instant_mark, ribbon, spread, tension_lines};
use super::page::TrialPage;
use super::picture::{Ink, Mark, Picture, Stroke};

/// Kept away from the release, whose fall would flatten the decay.
const CLEAR_S: f64 = 0.02;
/// Before the release and after the stop.
const MARGIN_S: f64 = 0.05;

fn instant_s(page: &TrialPage, name: &str) -> Option<f64> {
    page.instants.iter().find(|instant| instant.name == name).map(|instant| instant.time_s)
}

/// Tension while the shuttle stood drawn, on a scale of its own. `None` without a hold.
pub(super) fn hold(page: &TrialPage) -> Option<Picture> {
    let from_s = instant_s(page, "hold_start")?;
    let to_s = instant_s(page, "release").or_else(|| instant_s(page, "let_down_start"))? - CLEAR_S;
    let range = (to_s > from_s + CLEAR_S).then_some((from_s, to_s))?;
    let inside = |time_s: f64| (range.0..=range.1).contains(&time_s);
    let values = page.tension.iter().flat_map(|trace| {
        trace.time_s.iter().zip(&trace.value).filter(|(time_s, _)| inside(**time_s)).map(|(_, value)| *value)
    });
    let number = |name: &str| page.results.iter().find(|row| row.name == name);
    let mut alternative = format!("from {:.2} s to {:.2} s", range.0, range.1);
    for (name, words) in [("hold_tension", "at its end"), ("hold_decay", "lost in the hold")] {
        if let Some(row) = number(name) {
            let (value, uncertainty) = crate::units::rounded(row.value, row.standard_uncertainty);
            alternative.push_str(&format!("; {value} N (u {uncertainty} N) {words}"));
        }
    }
    let values: Vec<f64> = values.collect();
    extent(values.iter().copied())?;
    Some(Picture {
        title: "Tension in the hold".into(),
        alternative,
        height: 480,
        x_label: "trial time, s".into(),
        y_label: "tension, N".into(),
        x_range: range,
        y_range: spread(values.into_iter()),
        lines: tension_lines(page, range),
        ..Picture::default()
    })
}

/// Position, speed and acceleration from the release to rest, each with its band.
pub(super) fn motion(page: &TrialPage) -> Vec<Option<Picture>> {
    let Some(motion) = &page.over_time else { return Vec::new() };
    let columns = [
        ("Position over time", "x, m", &motion.x_m, &motion.u_x_m),
        ("Speed over time", "speed, m/s", &motion.v_mps, &motion.u_v_mps),
        ("Acceleration over time (kinematic)", "acceleration, m/s²", &motion.a_mps2, &motion.u_a_mps2),
    ];
    columns.map(|(title, label, value, u)| over_time(page, title, label, (&motion.time_s, value, u))).into()
}

fn over_time(page: &TrialPage, title: &str, label: &str, columns: (&[f64], &[f64], &[f64])) -> Option<Picture> {
    let (time_s, value, u) = columns;
    let from_s = instant_s(page, "release").map_or(f64::NEG_INFINITY, |time_s| time_s - MARGIN_S);
    let to_s = instant_s(page, "rest").map_or(f64::INFINITY, |time_s| time_s + MARGIN_S);
    let first = time_s.partition_point(|time_s| *time_s < from_s);
    let last = time_s.partition_point(|time_s| *time_s < to_s);
    let (time_s, value, u) = (time_s.get(first..last)?, value.get(first..last)?, u.get(first..last)?);
    let x_range = extent(time_s.iter().copied())?;
    let (low, high) = extent(value.iter().copied())?;
    let marks: Vec<Mark> = page
        .instants
        .iter()
        .filter(|instant| (x_range.0..=x_range.1).contains(&instant.time_s))
        .map(instant_mark)
        .collect();
    let found: Vec<&str> = marks.iter().map(|mark| mark.label.as_str()).collect();
    let alternative =
        format!("from {:.3} s to {:.3} s, {low:.2} to {high:.2} ({label}); {}", x_range.0, x_range.1, found.join("; "));
    Some(Picture {
        title: title.into(),
        alternative,
        height: 560,
        x_label: "trial time, s".into(),
        y_label: label.into(),
        x_range,
        y_range: spread(value.iter().copied().chain([0.0])),
        ribbons: ribbon("measured ± 2 u", Ink::Blue, time_s, value, u, x_range),
        lines: vec![curve_line("measured", Ink::Blue, Stroke::Solid, time_s, value, x_range)],
        marks,
        ..Picture::default()
    })
}
