//! The rail strip: the rail to scale, tilted as it stands, with what happened where.

use super::html::escaped;
use super::labels;
use super::page::RailStrip;

const WIDTH: f64 = 900.0;
const LEFT: f64 = 12.0;
/// Room for the last label.
const RIGHT: f64 = 120.0;
/// Height above the rail for labels, in rows.
const ROW: f64 = 19.0;
const LETTER: f64 = 7.4;

/// Inline SVG of the rail with its text alternative.
pub(super) fn svg(rail: &RailStrip) -> String {
    let places = places(rail);
    let spoken: Vec<String> = places.iter().map(|(name, x_m)| format!("{name} at {x_m:.2} m")).collect();
    let alternative =
        format!("rail of {:.2} m, incline {:.1} deg: {}", rail.length_m, rail.incline_deg, spoken.join(", "));
    let span_m = rail.length_m.max(f64::MIN_POSITIVE);
    let at = |x_m: f64| LEFT + (x_m / span_m).clamp(0.0, 1.0) * (WIDTH - LEFT - RIGHT);
    let rise = (WIDTH - LEFT - RIGHT) * rail.incline_deg.to_radians().tan();
    let spans: Vec<_> = places.iter().map(|(name, x_m)| (at(*x_m), at(*x_m) + label_width(name))).collect();
    let rows = labels::rows(&spans);
    let top = labels::n_rows(&rows) as f64 * ROW + 14.0;
    let (low_y, high_y) = (top + rise.max(0.0), top + (-rise).max(0.0));
    let y = |x_m: f64| low_y + (high_y - low_y) * (x_m / span_m).clamp(0.0, 1.0);
    let height = low_y.max(high_y) + 36.0;
    let mut svg = format!(
        "<figure class=\"strip\">\n<svg role=\"img\" aria-label=\"{}\" viewBox=\"0 0 {WIDTH} {height:.0}\" \
         xmlns=\"http://www.w3.org/2000/svg\" font-size=\"13\">\n",
        escaped(&alternative)
    );
    let part = |from_m: f64, to_m: f64, colour: &str, width: f64, dash: &str| {
        format!(
            "<line x1=\"{:.1}\" y1=\"{:.1}\" x2=\"{:.1}\" y2=\"{:.1}\" stroke=\"{colour}\" stroke-width=\"{width}\"{dash}/>\n",
            at(from_m),
            y(from_m),
            at(to_m),
            y(to_m)
        )
    };
    svg.push_str(&part(0.0, rail.zero_mark_x_m, "#005a9c", 9.0, ""));
    svg.push_str(&part(rail.zero_mark_x_m, rail.brake_x_m, "#8a9199", 5.0, ""));
    svg.push_str(&part(rail.brake_x_m, rail.length_m, "#d55e00", 9.0, " stroke-dasharray=\"7 4\""));
    for ((name, x_m), row) in places.iter().zip(rows) {
        let (x, label_y) = (at(*x_m), (row as f64 + 1.0) * ROW);
        svg.push_str(&format!(
            "<line x1=\"{x:.1}\" y1=\"{:.1}\" x2=\"{x:.1}\" y2=\"{:.1}\" stroke=\"#1b1f24\"/>\n\
             <text x=\"{:.1}\" y=\"{label_y:.1}\">{} {x_m:.2} m</text>\n",
            label_y - 12.0,
            y(*x_m) + 8.0,
            x + 6.0,
            escaped(name)
        ));
    }
    svg.push_str(&stretch_names(rail, at, y));
    svg.push_str(&format!("</svg>\n<figcaption>{}</figcaption>\n</figure>\n", escaped(&alternative)));
    svg
}

/// Named places on the rail, from left to right.
fn places(rail: &RailStrip) -> Vec<(&'static str, f64)> {
    let mut places = vec![("zero mark", rail.zero_mark_x_m), ("end stop", rail.length_m)];
    let found = [("release", rail.release_x_m), ("separation", rail.separation_x_m), ("rest", rail.rest_x_m)];
    places.extend(found.into_iter().filter_map(|(name, x_m)| Some((name, x_m?))));
    places.retain(|(_, x_m)| x_m.is_finite());
    places.sort_by(|a, b| a.1.total_cmp(&b.1));
    places
}

/// Of a name with its place, in pixels.
fn label_width(name: &str) -> f64 {
    LETTER * (name.chars().count() + 7) as f64 + 12.0
}

fn stretch_names(rail: &RailStrip, at: impl Fn(f64) -> f64, y: impl Fn(f64) -> f64) -> String {
    let stretches = [
        ("power stroke", 0.0, rail.zero_mark_x_m),
        ("run-out", rail.zero_mark_x_m, rail.brake_x_m),
        ("brake", rail.brake_x_m, rail.length_m),
    ];
    let name = |(name, from_m, to_m): (&str, f64, f64)| {
        let middle_m = (from_m + to_m) / 2.0;
        format!(
            "<text x=\"{:.1}\" y=\"{:.1}\" text-anchor=\"middle\" fill=\"#5a626b\">{name}</text>\n",
            at(middle_m),
            y(middle_m) + 28.0
        )
    };
    stretches.into_iter().map(name).collect()
}
