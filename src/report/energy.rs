//! Where the energy went: one bar to scale, each part numbered and hatched, and the same as a table.

use super::html::escaped;
use super::page::{EnergyBar, EnergyPart};
use super::tables::Column::{Number, Words};
use super::tables::table;
use crate::units::rounded;

const WIDTH: f64 = 900.0;
const BAR_HEIGHT: f64 = 46.0;
/// Fills, told apart by hatching as well as by colour (Okabe and Ito's palette).
const FILLS: [(&str, &str); 6] = [
    ("#005a9c", "none"),
    ("#56b4e9", "rise"),
    ("#e69f00", "none"),
    ("#d55e00", "fall"),
    ("#8a9199", "rise"),
    ("#cc79a7", "fall"),
];

pub(super) fn bar(energy: Option<&EnergyBar>) -> String {
    let Some(energy) = energy else { return "<p>No energy audit could be made.</p>\n".into() };
    let sum_j: f64 = energy.parts.iter().map(|part| part.energy_j).sum();
    let mut parts = energy.parts.clone();
    parts.push(EnergyPart {
        name: "unaccounted".into(),
        energy_j: energy.total_j - sum_j,
        standard_uncertainty_j: None,
    });
    let total = format!("{}: <b>{:.0} J</b>", escaped(&energy.total_name), energy.total_j);
    format!(
        "<figure>\n{}\n<figcaption>{total}</figcaption>\n</figure>\n{}",
        drawn(&parts, energy),
        rows(&parts, energy.total_j)
    )
}

/// Positive parts side by side, to the scale of the total or of their sum if that is more.
fn drawn(parts: &[EnergyPart], energy: &EnergyBar) -> String {
    let positive_j: f64 = parts.iter().map(|part| part.energy_j.max(0.0)).sum();
    let scale_j = positive_j.max(energy.total_j).max(f64::MIN_POSITIVE);
    let alternative: Vec<String> = parts.iter().map(|part| format!("{} {:.0} J", part.name, part.energy_j)).collect();
    let mut svg = format!(
        "<svg role=\"img\" aria-label=\"{}: {}\" viewBox=\"0 0 {WIDTH} 78\" xmlns=\"http://www.w3.org/2000/svg\">\n<defs>{}{}</defs>\n",
        escaped(&energy.total_name),
        escaped(&alternative.join(", ")),
        hatching("rise", "M0 8L8 0"),
        hatching("fall", "M0 0L8 8")
    );
    let mut x = 0.0;
    for (index, part) in parts.iter().enumerate() {
        let width = part.energy_j.max(0.0) / scale_j * WIDTH;
        let (colour, hatch) = FILLS[index % FILLS.len()];
        let place = format!("x=\"{x:.1}\" y=\"2\" width=\"{width:.1}\" height=\"{BAR_HEIGHT}\"");
        svg.push_str(&format!("<rect {place} fill=\"{colour}\" stroke=\"#fff\" stroke-width=\"1.5\"/>\n"));
        if hatch != "none" {
            svg.push_str(&format!("<rect {place} fill=\"url(#{hatch})\"/>\n"));
        }
        if width >= 16.0 {
            let middle = x + width / 2.0;
            svg.push_str(&format!(
                "<text x=\"{middle:.1}\" y=\"68\" text-anchor=\"middle\" font-size=\"14\">{}</text>\n",
                index + 1
            ));
        }
        x += width;
    }
    svg.push_str("</svg>");
    svg
}

fn hatching(name: &str, path: &str) -> String {
    format!(
        "<pattern id=\"{name}\" width=\"8\" height=\"8\" patternUnits=\"userSpaceOnUse\">\
         <path d=\"{path}\" stroke=\"#fff\" stroke-width=\"1.6\"/></pattern>"
    )
}

fn rows(parts: &[EnergyPart], total_j: f64) -> String {
    let row = |(index, part): (usize, &EnergyPart)| {
        let (energy, uncertainty) = match part.standard_uncertainty_j {
            Some(uncertainty_j) => rounded(part.energy_j, uncertainty_j),
            None => (format!("{:.0}", part.energy_j), "not stated".to_owned()),
        };
        let share = 100.0 * part.energy_j / total_j;
        format!(
            "<tr><td class=\"n\">{}</td><th scope=\"row\">{}</th><td class=\"n\">{energy}</td><td class=\"n\">{uncertainty}</td>\
             <td class=\"n\">{share:.1} %</td></tr>\n",
            index + 1,
            escaped(&part.name)
        )
    };
    let rows: String = parts.iter().enumerate().map(row).collect();
    let head = [
        Number("no."),
        Words("where it went"),
        Number("energy, J"),
        Number("standard uncertainty, J"),
        Number("share"),
    ];
    table(&head, &rows)
}
