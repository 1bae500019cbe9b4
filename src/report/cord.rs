//! One page about the cords of a lot: both branches with readings and band, the joules between, relaxation, evidence.

use super::decimate::Run;
use super::html::{CAUTION, document, escaped, figures_of, section};
use super::picture::{Ink, Line, Mark, Picture, PictureError, Ribbon, Stroke};
use crate::calibration::cord::{BranchFit, Characterised, held_part};
use crate::rig::{CordBranch, CordSheet};

const PARTS: u32 = 120;

/// One HTML page about a lot: self-contained, printable, readable without its pictures.
///
/// # Errors
/// [`PictureError`] if a picture can't be drawn.
pub fn cord_page(sheet: &CordSheet, made: &Characterised) -> Result<String, PictureError> {
    let invented = if sheet.invented { "<p class=\"invented\">All data on this page are invented</p>\n" } else { "" };
    let title = format!("Cords of lot {}", sheet.lot);
    let mut body = format!(
        "<header>\n{invented}<h1>{}</h1>\n<p class=\"facts\">{}</p>\n</header>\n<main>\n",
        escaped(&title),
        escaped(&facts(sheet, made))
    );
    if !made.cautions.is_empty() {
        body.push_str(&section("To look at", &format!("<ul class=\"look\">{}</ul>\n", items(&made.cautions))));
    }
    body.push_str(&section("Branches", &figures_of([branches(sheet, made)], "")?));
    body.push_str(&section("What misses the readings, and by how much", &figures_of([residuals(sheet, made)], "")?));
    body.push_str(&section(
        "Relaxation in the hold",
        &figures_of([relaxation(made)], "No hold at constant length was timed.")?,
    ));
    body.push_str(&section("Numbers", &numbers(made)));
    body.push_str(&section("Laws side by side", &laws(made)));
    body.push_str(&section("Cycles and temperature", &cycles(made)));
    body.push_str("</main>\n");
    let program = concat!("tautrail ", env!("CARGO_PKG_VERSION"));
    body.push_str(&format!("<footer><p>{CAUTION}</p><p>{program}</p></footer>\n"));
    Ok(document(&title, &body))
}

fn facts(sheet: &CordSheet, made: &Characterised) -> String {
    format!(
        "{} cords ({}) · free length {:.3} m between {} · {:.3} kg each · {} conditioning cycles · {:.0} °C · {} by {}",
        made.serials.len(),
        made.serials.join(", "),
        sheet.free_length_m.value,
        sheet.marks,
        sheet.mass_kg,
        sheet.conditioning_cycles,
        sheet.temperature_c,
        sheet.date,
        sheet.person
    )
}

fn items(sentences: &[String]) -> String {
    sentences.iter().map(|sentence| format!("<li>{}</li>\n", escaped(sentence))).collect()
}

fn along(made: &Characterised, of: impl Fn(f64) -> f64) -> Run {
    (0..=PARTS)
        .map(|part| made.tested_to * f64::from(part) / f64::from(PARTS))
        .map(|elongation| (100.0 * elongation, of(elongation)))
        .collect()
}

/// The outline between two curves.
fn between(made: &Characterised, upper: impl Fn(f64) -> f64, lower: impl Fn(f64) -> f64) -> Run {
    let mut outline = along(made, upper);
    outline.extend(along(made, lower).iter().rev());
    outline
}

/// Readings as small crosses.
fn crosses(points: impl Iterator<Item = (f64, f64)>, (width, height): (f64, f64)) -> Vec<Run> {
    points.flat_map(|(x, y)| [vec![(x - width, y), (x + width, y)], vec![(x, y - height), (x, y + height)]]).collect()
}

fn read_on(sheet: &CordSheet, which: CordBranch) -> impl Iterator<Item = (f64, f64)> {
    let cycles = sheet.conditioning_cycles;
    let of = move |one: &&crate::rig::CordReading| one.cycle > cycles && one.branch == which;
    sheet.readings.iter().filter(of).map(|one| (100.0 * one.elongation, one.tension_n))
}

fn branches(sheet: &CordSheet, made: &Characterised) -> Option<Picture> {
    let (loading, unloading) = (&made.loading, &made.unloading);
    let read = || read_on(sheet, CordBranch::Load).chain(read_on(sheet, CordBranch::Unload));
    let end = loading.band(made.tested_to);
    let most_n = read().map(|point| point.1).fold(end.tension_n + end.one_cord.expanded(0.95), f64::max) * 1.02;
    let furthest = read().map(|point| point.0).fold(100.0 * made.tested_to, f64::max) * 1.02;
    let size = (0.004 * furthest, 0.009 * most_n);
    let (lost_j, u_j) = made.hysteresis_j;
    let edge = |branch: &BranchFit, sign: f64, e: f64| {
        let at = branch.band(e);
        (at.tension_n + sign * at.one_cord.expanded(0.95)).clamp(0.0, most_n)
    };
    let line = |name: &str, branch: &BranchFit, stroke| Line {
        name: name.into(),
        ink: Ink::Blue,
        stroke,
        runs: vec![along(made, |e| branch.law.tension_n(e))],
    };
    let alternative = format!(
        "loading from 0 to {:.1} N at {:.0} %, unloading below it; {lost_j:.2} J (u {u_j:.2} J) of one cord's {:.1} J stay in the \
         cord; the band holds 95 % of further cords, ± {:.1} N at the end",
        loading.law.tension_n(made.tested_to),
        100.0 * made.tested_to,
        sheet.free_length_m.value * loading.law.integral_n(made.tested_to),
        unloading.band(made.tested_to).one_cord.expanded(0.95)
    );
    Some(Picture {
        title: "One cord out and back".into(),
        alternative,
        height: 980,
        x_label: "elongation, %".into(),
        y_label: "tension of one cord, N".into(),
        x_range: (0.0, furthest),
        y_range: (0.0, most_n),
        ribbons: vec![
            Ribbon {
                name: format!("{lost_j:.2} J between"),
                ink: Ink::Vermilion,
                outline: between(made, |e| loading.law.tension_n(e), |e| unloading.law.tension_n(e)),
            },
            Ribbon {
                name: "95 % of further cords".into(),
                ink: Ink::Blue,
                outline: between(made, |e| edge(loading, 1.0, e), |e| edge(unloading, -1.0, e)),
            },
        ],
        lines: vec![
            line("loading", loading, Stroke::Dashed),
            line("unloading", unloading, Stroke::Solid),
            Line { name: "readings".into(), ink: Ink::Black, stroke: Stroke::Solid, runs: crosses(read(), size) },
        ],
        marks: vec![Mark { label: format!("tested to {:.0} %", 100.0 * made.tested_to), at: 100.0 * made.tested_to }],
        ..Picture::default()
    })
}

/// Readings less the lot's law, in newtons.
fn residuals(sheet: &CordSheet, made: &Characterised) -> Option<Picture> {
    let less = |which, branch: &BranchFit| -> Vec<(f64, f64)> {
        read_on(sheet, which).map(|(percent, n)| (percent, n - branch.law.tension_n(0.01 * percent))).collect()
    };
    let (out, back) = (less(CordBranch::Load, &made.loading), less(CordBranch::Unload, &made.unloading));
    let half = |e: f64| made.unloading.band(e).one_cord.expanded(0.95);
    let furthest = out.iter().chain(&back).map(|point| point.0).fold(100.0 * made.tested_to, f64::max) * 1.02;
    let widest = (0..=PARTS).map(|part| half(made.tested_to * f64::from(part) / f64::from(PARTS))).fold(0.0, f64::max);
    let most_n = 1.3 * widest.max(1e-6);
    let inside = |points: &[(f64, f64)]| points.iter().filter(|point| point.1.abs() < most_n).count();
    let shown = inside(&out) + inside(&back);
    let size = (0.004 * furthest, 0.03 * most_n);
    let line = |name: &str, ink, points: Vec<(f64, f64)>| {
        let seen = points.into_iter().filter(|point| point.1.abs() < most_n);
        Line { name: name.into(), ink, stroke: Stroke::Solid, runs: crosses(seen, size) }
    };
    let n = out.len() + back.len();
    Some(Picture {
        title: "Readings less the lot's law".into(),
        alternative: format!(
            "{shown} of {n} readings lie within the picture's ± {most_n:.2} N; each cord's own factor is part of it"
        ),
        height: 560,
        x_label: "elongation, %".into(),
        y_label: "N".into(),
        x_range: (0.0, furthest),
        y_range: (-most_n, most_n),
        ribbons: vec![Ribbon {
            name: "95 % of further cords".into(),
            ink: Ink::Blue,
            outline: between(made, half, |e| -half(e)),
        }],
        lines: vec![line("loading", Ink::Vermilion, out), line("unloading", Ink::Black, back)],
        ..Picture::default()
    })
}

fn relaxation(made: &Characterised) -> Option<Picture> {
    let found = made.relaxation.as_ref()?;
    let part = |time_s: f64| 100.0 * held_part(&found.terms, 0.0, time_s);
    let run: Run = (0..=PARTS)
        .map(|step| found.longest_s * f64::from(step) / f64::from(PARTS))
        .map(|time_s| (time_s, part(time_s)))
        .collect();
    let least = part(found.longest_s);
    Some(Picture {
        title: "Tension left while held".into(),
        alternative: format!(
            "{least:.2} % are left after {:.0} s, by {} of Prony's terms; the readings lie {:.3} % about it",
            found.longest_s,
            found.terms.len(),
            100.0 * found.relative_rms
        ),
        height: 480,
        x_label: "time since drawn at once, s".into(),
        y_label: "% of the tension".into(),
        x_range: (0.0, found.longest_s),
        y_range: (least - 0.1 * (100.0 - least), 100.0 + 0.1 * (100.0 - least)),
        lines: vec![Line { name: "Prony series".into(), ink: Ink::Blue, stroke: Stroke::Solid, runs: vec![run] }],
        ..Picture::default()
    })
}

fn table(head: &[&str], rows: &[Vec<String>]) -> String {
    let cells = |all: &[String], tag: &str| {
        all.iter().map(|cell| format!("<{tag}>{}</{tag}>", escaped(cell))).collect::<String>()
    };
    let head: Vec<String> = head.iter().map(|cell| (*cell).to_owned()).collect();
    let rows: String = rows.iter().map(|row| format!("<tr>{}</tr>\n", cells(row, "td"))).collect();
    format!(
        "<div class=\"wide\"><table>\n<thead><tr>{}</tr></thead>\n<tbody>\n{rows}</tbody></table></div>\n",
        cells(&head, "th")
    )
}

fn numbers(made: &Characterised) -> String {
    let row = |name: &str, value: String| vec![name.to_owned(), value];
    let share = |part: f64| format!("{:.2} %", 100.0 * part);
    let width = made.turning.width;
    let mut rows = vec![
        row("tested to", share(made.tested_to)),
        row("lost in a cycle, one cord", format!("{:.2} J, u = {:.2} J", made.hysteresis_j.0, made.hysteresis_j.1)),
        row("standard uncertainty of the lot's mean", share(made.mean_uncertainty())),
        row(
            if made.relative_scatter.is_some() { "between cords" } else { "between cords (assumed)" },
            share(made.between_cords()),
        ),
        row("turning-point rule: width", format!("{}, u = {}", share(width.value), share(width.standard_uncertainty))),
        row("turning-point rule: uncertainty of the energy", share(made.turning_uncertainty())),
    ];
    if let Some(found) = &made.relaxation {
        for (term, u) in found.terms.iter().zip(&found.share_uncertainties) {
            rows.push(row("relaxes", format!("{}, u = {}, in {:.1} s", share(term.share), share(*u), term.time_s)));
        }
        let removed = found.cell_creep_removed;
        let said = if removed == 0.0 { "nothing, none is given".to_owned() } else { share(removed) };
        rows.push(row("taken off as the cell's own creep", said));
    }
    for creep in &made.creep {
        let text = format!(
            "{} for each tenfold of time at {:.1} N, seen for {:.0} s",
            share(creep.per_tenfold),
            creep.tension_n,
            creep.longest_s
        );
        rows.push(row(&format!("cord {} lengthens", creep.serial), text));
    }
    table(&["what", "value"], &rows)
}

fn laws(made: &Characterised) -> String {
    let mut rows = Vec::new();
    for (name, branch) in [("loading", &made.loading), ("unloading", &made.unloading)] {
        for one in &branch.comparisons {
            let taken = if one.law == branch.law.kind.words() {
                "taken"
            } else if one.falls {
                "falls somewhere"
            } else {
                ""
            };
            let error = one.left_out_rms_n.as_ref().map_or_else(Clone::clone, |n| format!("{n:.3} N"));
            let residual = format!("{:.3} N", one.residual_rms_n);
            rows.push(vec![name.to_owned(), one.law.clone(), error, residual, taken.to_owned()]);
        }
    }
    table(&["branch", "law", "at steps left out", "residual", ""], &rows)
}

fn cycles(made: &Characterised) -> String {
    let given = |what: Option<crate::rig::Given>, name: &str| match what {
        Some(found) => {
            format!("<p>{name}: {:.3} %, u = {:.3} %</p>\n", 100.0 * found.value, 100.0 * found.standard_uncertainty)
        }
        None => format!("<p>{name}: not measured</p>\n"),
    };
    let rows: Vec<Vec<String>> = made
        .factors
        .data
        .iter()
        .map(|one| {
            vec![
                one.serial.clone(),
                one.cycle.to_string(),
                format!("{:.1}", one.temperature_c),
                format!("{:.4}", one.factor),
            ]
        })
        .collect();
    format!(
        "{}{}{}",
        given(made.factors.loss_per_tenfold_cycles, "Tension lost for each tenfold of cycles"),
        given(made.factors.per_kelvin, "Change of tension for each kelvin"),
        table(&["cord", "cycle", "°C", "tension against the law"], &rows)
    )
}
