//! The page's tables. A number never stands without its unit and its standard uncertainty.

use super::html::escaped;
use super::page::{DeviceHealth, Inspection, ResidualTrace, TrialPage};
use crate::reading::{Decision, ResultRow};
use crate::units::{rounded, shown_unit, significant};

use Column::{Number, Words};

/// Results with uncertainty and method, then what is absent and why.
pub(super) fn results(page: &TrialPage) -> String {
    let mut rows = String::new();
    for row in &page.results {
        let (value, uncertainty) = rounded(row.value, row.standard_uncertainty);
        let decimals = value.split_once('.').map_or(0, |(_, decimals)| decimals.len());
        rows.push_str(&format!(
            "<tr><th scope=\"row\">{}</th><td class=\"n\">{value}</td><td class=\"n\">{uncertainty}</td><td>{}</td>\
             <td class=\"n\">{:.decimals$} to {:.decimals$}</td><td>{}</td><td>{}</td></tr>\n",
            in_words(&row.name),
            escaped(shown_unit(&row.unit)),
            row.low,
            row.high,
            escaped(&mostly(row)),
            escaped(&row.method)
        ));
    }
    let head = [
        Words("result"),
        Number("value"),
        Number("standard uncertainty"),
        Words("unit"),
        Number("95 % interval"),
        Words("what dominates it"),
        Words("method"),
    ];
    let mut html =
        if rows.is_empty() { "<p>No result could be derived.</p>\n".to_owned() } else { table(&head, &rows) };
    if !page.absent.is_empty() {
        let rows: String = page
            .absent
            .iter()
            .map(|absent| {
                format!(
                    "<tr><th scope=\"row\">{}</th><td>{}</td></tr>\n",
                    in_words(&absent.name),
                    escaped(&absent.reason)
                )
            })
            .collect();
        html.push_str(&format!("<h3>Absent, and why</h3>\n{}", table(&[Words("result"), Words("reason")], &rows)));
    }
    html
}

/// The largest share of the variance.
fn mostly(row: &ResultRow) -> String {
    row.dominant().map_or_else(String::new, |(source, part)| format!("{:.0} %: {source}", 100.0 * part))
}

/// Whether the plan and the limits were kept.
pub(super) fn verdicts(page: &TrialPage) -> String {
    if page.verdicts.is_empty() {
        return "<p>Nothing was asked of this trial.</p>\n".into();
    }
    let row = |verdict: &crate::reading::Verdict| {
        let class = match verdict.decision {
            Decision::Met => "met",
            Decision::Missed => "missed",
            Decision::NotDecidable => "open",
        };
        let probability = verdict.probability.map_or_else(|| "unknown".to_owned(), |p| format!("{:.1} %", 100.0 * p));
        format!(
            "<tr><th scope=\"row\">{}</th><td class=\"{class}\">{}</td><td class=\"n\">{probability}</td><td>{}</td></tr>\n",
            escaped(&verdict.asked),
            verdict.decision.word(),
            escaped(&verdict.why)
        )
    };
    let rows: String = page.verdicts.iter().map(row).collect();
    let head = [Words("asked (advice only)"), Words("verdict"), Number("probability that it was kept"), Words("found")];
    table(&head, &rows)
}

/// What the rig file's stages ask to be looked at; unanswered items first.
pub(super) fn inspections(inspections: &[Inspection]) -> String {
    let mut sorted: Vec<&Inspection> = inspections.iter().collect();
    sorted.sort_by_key(|inspection| inspection.answer.is_some());
    let row = |inspection: &&Inspection| {
        let answer = inspection.answer.as_deref().unwrap_or("NOT ANSWERED");
        format!(
            "<tr><th scope=\"row\">{}</th><td>{}</td><td>{}</td></tr>\n",
            escaped(&inspection.item),
            escaped(&inspection.stage),
            escaped(answer)
        )
    };
    let n_open = inspections.iter().filter(|inspection| inspection.answer.is_none()).count();
    let sentence = format!(
        "<p>{n_open} of {} items are not answered. An item is answered by a mark or a note that begins with it and a colon.</p>\n",
        inspections.len()
    );
    sentence + &table(&[Words("item"), Words("stage"), Words("answer")], &sorted.iter().map(row).collect::<String>())
}

/// Bias, RMS and largest residual of each quantity.
pub(super) fn residuals(traces: &[ResidualTrace]) -> String {
    let rows: String = traces.iter().map(residual_row).collect();
    table(
        &[
            Words("quantity"),
            Number("bias"),
            Number("RMS"),
            Number("largest"),
            Words("unit"),
            Number("at time"),
            Number("at x"),
        ],
        &rows,
    )
}

fn residual_row(trace: &ResidualTrace) -> String {
    let at_x = trace.largest_at_x_m.map_or_else(|| "unknown".to_owned(), |x_m| format!("{x_m:.3} m"));
    format!(
        "<tr><th scope=\"row\">{}</th><td class=\"n\">{}</td><td class=\"n\">{}</td><td class=\"n\">{}</td><td>{}</td>\
         <td class=\"n\">{:.3} s</td><td class=\"n\">{at_x}</td></tr>\n",
        escaped(&trace.quantity),
        significant(trace.bias, 3),
        significant(trace.rms, 3),
        significant(trace.largest, 3),
        escaped(&trace.unit),
        trace.largest_at_s
    )
}

/// What each device delivered and what is missing.
pub(super) fn health(devices: &[DeviceHealth]) -> String {
    if devices.is_empty() {
        return "<p>Nothing is known about the devices.</p>\n".into();
    }
    let rows: String = devices.iter().map(health_row).collect();
    let head = [
        Words("device"),
        Words("firmware"),
        Number("blocks"),
        Number("samples"),
        Number("gaps"),
        Number("missing samples"),
        Words("refused"),
        Words("clock"),
    ];
    table(&head, &rows)
}

fn health_row(device: &DeviceHealth) -> String {
    let refused: Vec<String> = device.refused.iter().map(|(reason, n)| format!("{n} × {}", escaped(reason))).collect();
    let refused = if refused.is_empty() { "none".to_owned() } else { refused.join(", ") };
    format!(
        "<tr><th scope=\"row\">{}</th><td>{}</td><td class=\"n\">{}</td><td class=\"n\">{}</td><td class=\"n\">{}</td>\
         <td class=\"n\">{}</td><td>{refused}</td><td>{}</td></tr>\n",
        escaped(&device.device),
        escaped(&device.firmware),
        device.n_blocks,
        device.n_samples,
        device.n_gaps,
        device.n_missing,
        escaped(&device.clock)
    )
}

/// What was said of the trial, and who said it.
pub(super) fn said(said: &[(String, String)]) -> String {
    let row = |(what, words): &(String, String)| {
        format!("<tr><th scope=\"row\">{}</th><td>{}</td></tr>\n", escaped(what), escaped(words))
    };
    table(&[Words("what, and who says so"), Words("words")], &said.iter().map(row).collect::<String>())
}

/// Names and SHA-256.
pub(super) fn hashes(hashes: &[(String, String)]) -> String {
    if hashes.is_empty() {
        return "<p>No hashes were given.</p>\n".into();
    }
    let row = |(name, hash): &(String, String)| {
        format!("<tr><th scope=\"row\">{}</th><td class=\"hash\">{}</td></tr>\n", escaped(name), escaped(hash))
    };
    table(&[Words("group or text"), Words("SHA-256")], &hashes.iter().map(row).collect::<String>())
}

/// A column's heading; numbers are set to the right, as their cells are.
pub(super) enum Column {
    Words(&'static str),
    Number(&'static str),
}

pub(super) fn table(head: &[Column], rows: &str) -> String {
    let cell = |column: &Column| match column {
        Column::Words(name) => format!("<th scope=\"col\">{name}</th>"),
        Column::Number(name) => format!("<th scope=\"col\" class=\"n\">{name}</th>"),
    };
    let head: String = head.iter().map(cell).collect();
    format!("<div class=\"wide\"><table>\n<thead><tr>{head}</tr></thead>\n<tbody>\n{rows}</tbody>\n</table></div>\n")
}

/// A result's name as words: `launch_speed` is "launch speed".
fn in_words(name: &str) -> String {
    escaped(&name.replace('_', " ").replace("cfc", "CFC ").replace("3ms", "3 ms"))
}
