//! The page: sections in order, texts escaped, style and pictures inside, nothing fetched from anywhere.

use super::energy;
use super::figures;
use super::figures_over_time;
use super::page::{Heading, PageLimits, TrialPage};
use super::picture::{Picture, PictureError};
use super::strip;
use super::tables;
use crate::units::shown_unit;

const STYLE: &str = include_str!("style.css");

pub(super) const CAUTION: &str = "Tautrail is no safety device: it advises and records. Limits on this page are for advice only; \
                       interlocks, exclusion zones, local codes and licensed practice decide.";

/// One HTML page about one trial: self-contained, printable, readable without its pictures.
///
/// # Errors
/// [`PictureError`] if a picture can't be drawn.
pub fn trial_page(page: &TrialPage) -> Result<String, PictureError> {
    let Heading { trial_id, .. } = &page.heading;
    let mut html = String::new();
    html.push_str(&header(&page.heading));
    html.push_str("<main>\n");
    html.push_str(&at_a_glance(page));
    html.push_str(&section("Verdicts", &tables::verdicts(page)));
    html.push_str(&section(
        "Tension",
        &figures_of(
            [figures::tension_over_trial(page), figures_over_time::hold(page), figures::tension_about_release(page)],
            "No tension was recorded.",
        )?,
    ));
    html.push_str(&section("Motion", &motion(page)?));
    html.push_str(&section("Replay: measured minus modelled", &residuals(page)?));
    html.push_str(&section("Results", &tables::results(page)));
    html.push_str(&section("Energy", &energy::bar(page.energy.as_ref())));
    if !page.inspections.is_empty() {
        html.push_str(&section("Inspection items", &tables::inspections(&page.inspections)));
    }
    if !page.said.is_empty() {
        html.push_str(&section("Conditions, notes and amendments", &tables::said(&page.said)));
    }
    html.push_str(&section("What was received", &tables::health(&page.health)));
    html.push_str(&section("Raw data, SHA-256", &tables::hashes(&page.hashes)));
    html.push_str("</main>\n");
    html.push_str(&format!("<footer><p>{CAUTION}</p><p>{}</p></footer>\n", escaped(&page.heading.program)));
    Ok(document(&format!("Trial {trial_id}"), &html))
}

/// A whole page about a body.
pub(super) fn document(title: &str, body: &str) -> String {
    let title = escaped(title);
    format!(
        "<!DOCTYPE html>\n<html lang=\"en\">\n<head>\n<meta charset=\"utf-8\">\n\
         <meta name=\"viewport\" content=\"width=device-width, initial-scale=1\">\n\
         <title>{title}</title>\n<style>\n{STYLE}</style>\n</head>\n<body>\n{body}</body>\n</html>\n"
    )
}

fn header(heading: &Heading) -> String {
    let Heading { trial_id, rig, payload, started, started_quality, outcome, outcome_evidence, .. } = heading;
    let invented = if heading.invented {
        "<p class=\"invented\">Rehearsal: all data on this page are invented, no such trial took place</p>\n"
    } else {
        ""
    };
    let evidence: String = outcome_evidence.iter().map(|sentence| format!("<li>{}</li>", escaped(sentence))).collect();
    let evidence =
        if evidence.is_empty() { String::new() } else { format!("<ul class=\"evidence\">{evidence}</ul>\n") };
    format!(
        "<header>\n{invented}<p class=\"trial\">Trial {}</p>\n<h1>{}</h1>\n{evidence}\
         <p class=\"facts\">rig <b>{}</b> · payload <b>{}</b> · started <b>{}</b> ({})</p>\n\
         <p class=\"caution\">{CAUTION}</p>\n</header>\n",
        escaped(trial_id),
        escaped(outcome),
        escaped(rig),
        escaped(payload),
        escaped(started),
        escaped(started_quality)
    )
}

/// The rail to scale, the numbers a crew asks for first, and what to look at.
fn at_a_glance(page: &TrialPage) -> String {
    let mut body = page.rail.as_ref().map(strip::svg).unwrap_or_default();
    body.push_str("<div class=\"glance\">\n");
    let PageLimits { tension_n, peak_g, launch_speed_mps } = page.limits;
    body.push_str(&tile(page, "launch_speed", "Launch speed", |value| {
        let (min, max) = launch_speed_mps?;
        let word = if value < min {
            "below"
        } else if value > max {
            "above"
        } else {
            "inside"
        };
        Some(format!("{word} the window, {min:.1} to {max:.1} m/s"))
    }));
    body.push_str(&tile(page, "peak_g_cfc60_specific", "Peak g, CFC 60, specific force", |value| {
        against_limit(value, peak_g?, "g")
    }));
    body.push_str(&tile(page, "max_tension", "Peak tension", |value| against_limit(value, tension_n?, "N")));
    body.push_str("</div>\n");
    if !page.proof_load.is_empty() {
        body.push_str(&format!("<p>{}</p>\n", escaped(&page.proof_load)));
    }
    if !page.cautions.is_empty() {
        let items: String = page.cautions.iter().map(|caution| format!("<li>{}</li>", escaped(caution))).collect();
        body.push_str(&format!("<h3>To look at</h3>\n<ul class=\"look\">{items}</ul>\n"));
    }
    section("At a glance", &body)
}

fn against_limit(value: f64, limit: f64, unit: &str) -> Option<String> {
    let word = if value > limit { "ABOVE" } else { "below" };
    Some(format!("{word} the limit of {limit:.1} {unit} (advice only)"))
}

fn tile(page: &TrialPage, name: &str, label: &str, verdict: impl Fn(f64) -> Option<String>) -> String {
    let (value, note) = match page.results.iter().find(|row| row.name == name) {
        Some(row) => {
            let (value, uncertainty) = crate::units::rounded(row.value, row.standard_uncertainty);
            let verdict = verdict(row.value).map_or_else(String::new, |verdict| format!(" · {verdict}"));
            (
                format!("{value} <small>{}</small>", escaped(shown_unit(&row.unit))),
                format!("u = {uncertainty} {}{verdict}", shown_unit(&row.unit)),
            )
        }
        None => {
            let absent = page.absent.iter().find(|absent| absent.name == name);
            let reason = absent.map_or_else(|| "not derived".to_owned(), |absent| absent.reason.clone());
            ("absent".to_owned(), reason)
        }
    };
    format!(
        "<div class=\"tile\"><p class=\"label\">{label}</p><p class=\"value\">{value}</p><p class=\"note\">{}</p></div>\n",
        escaped(&note)
    )
}

fn motion(page: &TrialPage) -> Result<String, PictureError> {
    let Some(motion) = &page.motion else { return Ok("<p>No motion could be derived.</p>\n".into()) };
    let along = [figures::speed(motion), figures::acceleration_of_stroke(motion), figures::acceleration(motion)];
    let pictures = along.into_iter().chain(figures_over_time::motion(page));
    let pictures = figures_of(pictures, "No motion could be derived.")?;
    let model = if motion.modelled.is_some() { "" } else { " No replay was made, so no modelled line is shown." };
    Ok(format!("{pictures}<p>Measured motion rests on: {}.{model}</p>\n", escaped(&motion.sensors)))
}

fn residuals(page: &TrialPage) -> Result<String, PictureError> {
    if page.residuals.is_empty() {
        let reason = escaped(&page.residual_sentence);
        return Ok(format!("<p>No replay was made{}{reason}.</p>\n", if reason.is_empty() { "" } else { ": " }));
    }
    let pictures = figures_of(page.residuals.iter().map(figures::residual), "")?;
    let sentence = format!("<p class=\"sentence\">{}</p>\n", escaped(&page.residual_sentence));
    Ok(format!("{sentence}{}{pictures}", tables::residuals(&page.residuals)))
}

/// Pictures one below the other with their text alternatives as captions.
pub(super) fn figures_of(
    pictures: impl IntoIterator<Item = Option<Picture>>,
    none: &str,
) -> Result<String, PictureError> {
    let mut html = String::new();
    for picture in pictures.into_iter().flatten() {
        let caption = format!("<b>{}</b>: {}", escaped(&picture.title), escaped(&picture.alternative));
        html.push_str(&format!("<figure>\n{}\n<figcaption>{caption}</figcaption>\n</figure>\n", picture.svg()?));
    }
    Ok(if html.is_empty() && !none.is_empty() { format!("<p>{none}</p>\n") } else { html })
}

pub(super) fn section(heading: &str, body: &str) -> String {
    format!("<section>\n<h2>{heading}</h2>\n{body}</section>\n")
}

/// Text made safe between tags and inside quoted attributes.
pub(super) fn escaped(text: &str) -> String {
    let mut safe = String::with_capacity(text.len());
    for letter in text.chars() {
        match letter {
            '&' => safe.push_str("&amp;"),
            '<' => safe.push_str("&lt;"),
            '>' => safe.push_str("&gt;"),
            '"' => safe.push_str("&quot;"),
            '\'' => safe.push_str("&#39;"),
            other => safe.push(other),
        }
    }
    safe
}
