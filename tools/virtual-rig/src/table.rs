//! The table of scenarios in README.md: one line of main truths each.

use crate::performance::Performance;
use crate::physics::course::Happening;
use crate::truth::Truth;

pub const HEAD: &str = "\
| scenario | what | outcome | hold, N | greatest line, N | launch speed, m/s (ground; rail) | at x, m | peak specific g (CFC 60) | \
shuttle rests at, m | energy closes to |
| --- | --- | --- | --- | --- | --- | --- | --- | --- | --- |";

/// One scenario's line.
pub fn row(performance: &Performance) -> String {
    let truth = Truth::of(performance, "virtual", 0, &[]);
    let launch = truth.launch.as_ref();
    let speed = launch.map(|launch| format!("{:.3}; {:.3}", launch.speed_ground_mps, launch.speed_rail_mps));
    let separation_x = launch.map(|launch| format!("{:.3}", launch.separation_x_m));
    let peak = truth.peaks.iter().find(|peak| peak.filter == "cfc60").map(|peak| format!("{:.2}", peak.specific_g));
    let rest = performance.launch.as_ref().and_then(|course| course.instant(Happening::Rest));
    let rest_x = rest.map(|instant| format!("{:.2}", instant.row.x_m));
    let closes = truth.energy.as_ref().map(|energy| format!("{:.0e}", energy.closure_error));
    let cell = |text: Option<String>| text.unwrap_or_else(|| "–".into());
    format!(
        "| `{}` | {} | {} | {:.1} | {:.1} | {} | {} | {} | {} | {} |",
        truth.scenario,
        performance.scenario.about,
        truth.outcome,
        truth.tension.hold_line_n,
        truth.tension.line_n_max,
        cell(speed),
        cell(separation_x),
        cell(peak),
        cell(rest_x),
        cell(closes),
    )
}
