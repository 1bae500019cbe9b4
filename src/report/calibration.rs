//! Pages about calibrations: residuals with the expanded uncertainty over the load, the numbers below.

use crate::calibration::accelerometer::AccelerometerCalibration;
use crate::calibration::cell::{CellCalibration, Direction, Point};
use crate::calibration::encoder::EncoderCalibration;
use crate::rig::{Coefficients, Sheet};
use crate::units::{brief, significant};

use super::decimate::Run;
use super::html::{CAUTION, document, escaped, figures_of, section};
use super::picture::{Ink, Line, Picture, PictureError, Ribbon, Stroke};

/// The page of a cell.
///
/// # Errors
/// [`PictureError`] if a picture can't be drawn.
pub fn cell_page(sheet: &Sheet, calibration: &CellCalibration) -> Result<String, PictureError> {
    let mut body = section("Residuals", &figures_of([Some(cell_residuals(calibration))], "No readings.")?);
    body.push_str(&section("Figures", &table(&cell_figures(sheet, calibration))));
    body.push_str(&section("Uncertainty", &table(&cell_uncertainty(calibration))));
    body.push_str(&section("In the manner of standards (no certificate)", &list(&cell_manners(calibration))));
    body.push_str(&section("Readings", &table(&cell_readings(calibration))));
    Ok(page(sheet, &body))
}

/// The page of an encoder.
///
/// # Errors
/// [`PictureError`] if a picture can't be drawn.
pub fn encoder_page(sheet: &Sheet, calibration: &EncoderCalibration) -> Result<String, PictureError> {
    let of = |forward: bool| {
        let points = calibration.points.iter().filter(|point| point.forward == forward);
        points.map(|point| (point.mark_m, 1e3 * point.residual_m)).collect::<Vec<_>>()
    };
    let picture =
        residuals("Marks minus fitted line", "mark, m", "residual, mm", &[("up", of(true)), ("down", of(false))], &[]);
    let mut body = section("Residuals", &figures_of([Some(picture)], "No readings.")?);
    let mut rows = values(sheet, &calibration.coefficients, calibration.tested_m);
    let backlash = calibration.backlash_m.map_or("not shown: one direction only".to_owned(), |(value, u)| {
        format!("{} mm, u = {} mm", significant(1e3 * value, 3), significant(1e3 * u, 2))
    });
    rows.push(vec!["backlash".into(), backlash]);
    rows.push(vec!["linearity".into(), format!("{:.3} mm", 1e3 * calibration.linearity_m)]);
    body.push_str(&section("Figures", &table(&rows)));
    Ok(page(sheet, &body))
}

/// The page of an accelerometer.
pub fn accelerometer_page(sheet: &Sheet, calibration: &AccelerometerCalibration) -> String {
    let mut rows = values(sheet, &calibration.coefficients, calibration.tested_mps2);
    let shown = |value: Option<f64>| value.map_or("not shown".to_owned(), |v| format!("{} m/s²", significant(v, 3)));
    rows.push(vec!["noise".into(), shown(calibration.noise_mps2)]);
    rows.push(vec!["greatest reading across".into(), shown(calibration.cross_mps2)]);
    let rest = calibration.at_rest.map_or("not read".to_owned(), |rest| {
        format!(
            "{:.4} m/s², g sin of the incline {:.4} m/s²: {}",
            rest.found_mps2,
            rest.expected_mps2,
            if rest.agrees { "agrees" } else { "DISAGREES" }
        )
    });
    rows.push(vec!["at rest on the rail".into(), rest]);
    page(sheet, &section("Figures", &table(&rows)))
}

fn page(sheet: &Sheet, body: &str) -> String {
    let heading = format!("Calibration of channel {} ({})", sheet.channel, sheet.kind.word());
    let invented = if sheet.invented { "<p class=\"invented\">All data on this page are invented</p>\n" } else { "" };
    let facts =
        format!("{} · calibrated {} by {} · valid until {}", sheet.sensor, sheet.date, sheet.person, sheet.valid_until);
    let program = concat!("tautrail ", env!("CARGO_PKG_VERSION"));
    let html = format!(
        "<header>\n{invented}<h1>{}</h1>\n<p class=\"facts\">{}</p>\n</header>\n<main>\n{body}</main>\n\
         <footer><p>{CAUTION}</p><p>{program}</p></footer>\n",
        escaped(&heading),
        escaped(&facts)
    );
    document(&heading, &html)
}

fn table(rows: &[Vec<String>]) -> String {
    let rows = rows.iter().enumerate().map(|(index, row)| {
        let tag = if index == 0 { "th" } else { "td" };
        let cells: String = row.iter().map(|cell| format!("<{tag}>{}</{tag}>", escaped(cell))).collect();
        format!("<tr>{cells}</tr>\n")
    });
    format!("<table>\n{}</table>\n", rows.collect::<String>())
}

fn list(sentences: &[String]) -> String {
    let items: String = sentences.iter().map(|sentence| format!("<li>{}</li>\n", escaped(sentence))).collect();
    format!("<ul>\n{items}</ul>\n")
}

fn values(sheet: &Sheet, coefficients: &Coefficients, (low, high): (f64, f64)) -> Vec<Vec<String>> {
    let unit = sheet.kind.unit();
    let terms: Vec<String> = coefficients.coefficients.iter().skip(1).map(|value| format!("{value:.6e}")).collect();
    vec![
        vec!["figure".into(), "value".into()],
        vec![
            "zero".into(),
            format!(
                "{} counts, u = {} {unit}",
                brief(coefficients.zero_counts, 8),
                significant(coefficients.zero_uncertainty, 2)
            ),
        ],
        vec![format!("{unit} for each power of counts"), terms.join(", ")],
        vec!["scale".into(), format!("u = {} %", significant(100.0 * coefficients.scale_relative_uncertainty, 2))],
        vec!["drift in a year".into(), format!("u = {} %", significant(100.0 * sheet.drift_relative_per_year, 2))],
        vec!["tested range".into(), format!("{} to {} {unit}", brief(low, 5), brief(high, 5))],
    ]
}

fn cell_figures(sheet: &Sheet, calibration: &CellCalibration) -> Vec<Vec<String>> {
    let figures = &calibration.figures;
    let mut rows = values(sheet, &calibration.coefficients, calibration.tested_n());
    let newtons = |value: Option<f64>| value.map_or("not shown".to_owned(), |n| format!("{} N", significant(n, 3)));
    rows.push(vec!["power of the curve".into(), calibration.degree.to_string()]);
    rows.push(vec!["sensitivity".into(), format!("{} counts/N", significant(figures.sensitivity_counts_per_n, 7))]);
    rows.push(vec!["non-linearity".into(), newtons(Some(figures.non_linearity_n))]);
    rows.push(vec!["reversibility".into(), newtons(figures.reversibility_n)]);
    rows.push(vec!["repeatability".into(), newtons(figures.repeatability_n)]);
    rows.push(vec!["zero return".into(), newtons(figures.zero_return_n)]);
    let creep = figures.creep_relative.map(|share| format!("{} % of the load", significant(100.0 * share, 2)));
    rows.push(vec!["creep".into(), creep.unwrap_or_else(|| "not shown".into())]);
    rows
}

fn cell_uncertainty(calibration: &CellCalibration) -> Vec<Vec<String>> {
    // A share that is nothing at every load would only take the room of the others.
    let n_shares = calibration.steps.first().map_or(0, |step| step.shares.len());
    let counts =
        |share: &usize| calibration.steps.iter().any(|step| step.shares[*share].component.standard_uncertainty > 0.0);
    let shown: Vec<usize> = (0..n_shares).filter(counts).collect();
    let mut header = vec!["force, N".to_owned(), "u, N".to_owned(), "95 %, N".to_owned()];
    if let Some(step) = calibration.steps.first() {
        header.extend(shown.iter().map(|share| step.shares[*share].source.to_owned()));
    }
    let mut rows = vec![header];
    for step in &calibration.steps {
        let mut row =
            vec![format!("{:.2}", step.force_n), significant(step.standard_n, 2), significant(step.expanded_n, 2)];
        row.extend(shown.iter().map(|share| significant(step.shares[*share].component.standard_uncertainty, 2)));
        rows.push(row);
    }
    rows
}

fn cell_manners(calibration: &CellCalibration) -> Vec<String> {
    let e74 = match &calibration.manners.e74 {
        Ok(e74) => {
            let class = match e74.class_lower_limits_n {
                Some((a, aa)) => format!("class A from {a:.1} N, class AA from {aa:.1} N"),
                None => format!("no class: {}", e74.against.join("; ")),
            };
            let factor = significant(e74.lower_limit_factor_n, 3);
            format!(
                "ASTM E74: power {}, {} readings, lower limit factor {factor} N; {class}",
                e74.degree, e74.n_readings
            )
        }
        Err(why) => format!("ASTM E74: absent, {why}"),
    };
    let iso = match &calibration.manners.iso376 {
        Ok(iso) => {
            let [b, b1, fc, f0, v, c] = iso.errors.greatest();
            let class = iso
                .class
                .map_or_else(|| format!("no class: {}", iso.against.join("; ")), |c| format!("within class {c}"));
            format!(
                "ISO 376, greatest relative errors in %: reproducibility {b:.3}, repeatability {b1:.3}, interpolation {fc:.3}, \
                 zero {f0:.3}, reversibility {v:.3}, creep {c:.3}; {class}"
            )
        }
        Err(why) => format!("ISO 376: absent, {why}"),
    };
    vec![e74, iso]
}

fn way(point: &Point) -> &'static str {
    match point.load.direction {
        Direction::Up => "up",
        Direction::Down => "down",
        Direction::Creep => "creep",
    }
}

fn cell_readings(calibration: &CellCalibration) -> Vec<Vec<String>> {
    let header = ["run", "way", "force, N", "counts", "residual, N", ""].map(str::to_owned).to_vec();
    let row = |point: &Point| {
        vec![
            point.load.run.clone(),
            way(point).to_owned(),
            format!("{:.3}", point.load.force_n),
            format!("{:.1}", point.load.counts),
            format!("{:+.4}", point.residual_n),
            if point.flagged { "FLAGGED" } else { "" }.to_owned(),
        ]
    };
    std::iter::once(header).chain(calibration.points.iter().map(row)).collect()
}

fn cell_residuals(calibration: &CellCalibration) -> Picture {
    let mut runs: Vec<&str> = calibration.points.iter().map(|point| point.load.run.as_str()).collect();
    runs.dedup();
    let of = |direction: Direction| -> Vec<Vec<(f64, f64)>> {
        let of_run = |run: &&str| {
            let points = calibration.points.iter();
            let here = points.filter(|point| point.load.run == *run && point.load.direction == direction);
            here.map(|point| (point.load.force_n, point.residual_n)).collect::<Vec<_>>()
        };
        runs.iter().map(of_run).filter(|points| points.len() > 1).collect()
    };
    let band: Vec<(f64, f64)> = std::iter::once((0.0, calibration.budget.at_zero().expanded(0.95)))
        .chain(calibration.steps.iter().map(|step| (step.force_n, step.expanded_n)))
        .collect();
    let mut picture = residuals("Applied minus fitted force", "force, N", "residual, N", &[], &band);
    let lines = |name: &str, stroke, ink, runs| Line { name: name.to_owned(), ink, stroke, runs };
    picture.lines = vec![
        lines("loading", Stroke::Solid, Ink::Blue, of(Direction::Up)),
        lines("unloading", Stroke::Dashed, Ink::Vermilion, of(Direction::Down)),
    ];
    fit_ranges(&mut picture);
    picture
}

fn residuals(title: &str, x_label: &str, y_label: &str, ways: &[(&str, Run)], band: &[(f64, f64)]) -> Picture {
    let line = |(index, (name, points)): (usize, &(&str, Run))| Line {
        name: (*name).to_owned(),
        ink: if index == 0 { Ink::Blue } else { Ink::Vermilion },
        stroke: if index == 0 { Stroke::Solid } else { Stroke::Dashed },
        runs: vec![points.clone()],
    };
    let ribbon = || {
        let mut outline: Vec<(f64, f64)> = band.to_vec();
        outline.extend(band.iter().rev().map(|(x, half)| (*x, -half)));
        Ribbon { name: "expanded uncertainty, 95 %".into(), ink: Ink::Black, outline }
    };
    let mut picture = Picture {
        title: title.to_owned(),
        height: 640,
        x_label: x_label.to_owned(),
        y_label: y_label.to_owned(),
        ribbons: if band.is_empty() { Vec::new() } else { vec![ribbon()] },
        lines: ways.iter().enumerate().map(line).collect(),
        ..Picture::default()
    };
    fit_ranges(&mut picture);
    picture
}

/// Ranges and text alternative from what is drawn.
fn fit_ranges(picture: &mut Picture) {
    let drawn = picture.lines.iter().flat_map(|line| line.runs.iter().flatten());
    let all: Vec<(f64, f64)> =
        drawn.chain(picture.ribbons.iter().flat_map(|ribbon| &ribbon.outline)).copied().collect();
    let (x, y) = all.iter().fold((0.0_f64, 1e-12_f64), |(x, y), point| (x.max(point.0), y.max(point.1.abs())));
    let least = all.iter().map(|point| point.0).fold(0.0, f64::min);
    picture.x_range = (least, if x > least { x } else { least + 1.0 });
    picture.y_range = (-1.1 * y, 1.1 * y);
    let lines = picture.lines.iter().flat_map(|line| line.runs.iter().flatten());
    let worst = lines.map(|point| point.1.abs()).fold(0.0, f64::max);
    let unit = |label: &str| label.rsplit(", ").next().unwrap_or_default().to_owned();
    picture.alternative = format!(
        "at most {} {} off the curve, from {} to {} {}",
        significant(worst, 3),
        unit(&picture.y_label),
        brief(least, 4),
        brief(x, 4),
        unit(&picture.x_label)
    );
}
