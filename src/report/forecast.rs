//! One page about a forecast: speed and acceleration over x with their 95 % band, the numbers below.

use super::html::{CAUTION, document, escaped, figures_of, section};
use super::picture::{Ink, Line, Mark, Picture, PictureError, Ribbon, Stroke};

/// A curve over x with the band that holds 95 % of the draws.
#[derive(Debug, Clone, PartialEq)]
pub struct ForecastCurve {
    pub title: String,
    pub y_label: String,
    pub best: Vec<f64>,
    pub low: Vec<f64>,
    pub high: Vec<f64>,
}

/// Everything the page shows.
#[derive(Debug, Clone, PartialEq)]
pub struct ForecastPage {
    pub heading: String,
    /// Planning or drawn, how many draws, which seed.
    pub basis: String,
    pub x_m: Vec<f64>,
    pub curves: Vec<ForecastCurve>,
    pub separation_x_m: Option<f64>,
    /// Header row first.
    pub table: Vec<Vec<String>>,
    /// Header row first.
    pub energy: Vec<Vec<String>>,
    pub sentences: Vec<String>,
    pub cautions: Vec<String>,
    pub invented: bool,
    pub program: String,
}

/// One HTML page about a forecast: self-contained, readable without its pictures.
///
/// # Errors
/// [`PictureError`] if a picture can't be drawn.
pub fn forecast_page(page: &ForecastPage) -> Result<String, PictureError> {
    let invented = if page.invented { "<p class=\"invented\">All data on this page are invented</p>\n" } else { "" };
    let mut body = format!(
        "<header>\n{invented}<h1>{}</h1>\n<p class=\"facts\">{}</p>\n</header>\n<main>\n",
        escaped(&page.heading),
        escaped(&page.basis)
    );
    let pictures = page.curves.iter().map(|curve| picture(page, curve));
    body.push_str(&section("Motion over the rail", &figures_of(pictures, "There is no launch to draw.")?));
    body.push_str(&section("Numbers", &table(&page.table)));
    body.push_str(&section("Energy", &table(&page.energy)));
    body.push_str(&section("What it hangs on", &list(&page.sentences)));
    body.push_str("</main>\n");
    let cautions: String = page.cautions.iter().map(|caution| format!("<p>{}</p>", escaped(caution))).collect();
    body.push_str(&format!("<footer><p>{CAUTION}</p>{cautions}<p>{}</p></footer>\n", escaped(&page.program)));
    Ok(document(&page.heading, &body))
}

fn table(rows: &[Vec<String>]) -> String {
    let cells = |row: &Vec<String>, tag: &str| {
        row.iter().map(|cell| format!("<{tag}>{}</{tag}>", escaped(cell))).collect::<String>()
    };
    let mut html = String::from("<table>\n");
    for (index, row) in rows.iter().enumerate() {
        html.push_str(&format!("<tr>{}</tr>\n", cells(row, if index == 0 { "th" } else { "td" })));
    }
    html.push_str("</table>\n");
    html
}

fn list(sentences: &[String]) -> String {
    let items: String = sentences.iter().map(|sentence| format!("<li>{}</li>\n", escaped(sentence))).collect();
    format!("<ul>\n{items}</ul>\n")
}

fn picture(page: &ForecastPage, curve: &ForecastCurve) -> Option<Picture> {
    let points = |values: &[f64]| -> Vec<(f64, f64)> {
        let all = page.x_m.iter().copied().zip(values.iter().copied());
        all.filter(|point| point.1.is_finite()).collect()
    };
    let (best, low, high) = (points(&curve.best), points(&curve.low), points(&curve.high));
    let (first, last) = (best.first()?, best.last()?);
    let values = || best.iter().chain(&low).chain(&high).map(|point| point.1);
    let (least, most) = (values().fold(0.0, f64::min), values().fold(f64::NEG_INFINITY, f64::max));
    let mut outline = high;
    outline.extend(low.iter().rev());
    let alternative = format!(
        "from x = {:.2} m to {:.2} m; {:.2} at release, {:.2} at the end ({})",
        first.0, last.0, first.1, last.1, curve.y_label
    );
    let (x_range, y_room) = ((first.0, last.0), 0.05 * (most - least).max(1e-9));
    let mark = |at: f64| Mark { label: format!("separation x = {at:.2} m"), at };
    Some(Picture {
        title: curve.title.clone(),
        alternative,
        height: 640,
        x_label: "x along the rail, m".into(),
        y_label: curve.y_label.clone(),
        x_range,
        y_range: (least - y_room, most + y_room),
        ribbons: vec![Ribbon { name: "95 % of the draws".into(), ink: Ink::Blue, outline }],
        lines: vec![Line { name: "best values".into(), ink: Ink::Blue, stroke: Stroke::Solid, runs: vec![best] }],
        marks: page.separation_x_m.into_iter().map(mark).collect(),
        ..Picture::default()
    })
}
