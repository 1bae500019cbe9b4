//! The page's tables. A number never stands without its unit and its standard uncertainty.

use super::html::escaped;
use super::page::{DeviceHealth, ResidualTrace, TrialPage};
use crate::units::{rounded, significant};

use Column::{Number, Words};

/// Results with uncertainty and method, then what is absent and why.
pub(super) fn results(page: &TrialPage) -> String {
    let mut rows = String::new();
    for row in &page.results {
        let (value, uncertainty) = rounded(row.value, row.standard_uncertainty);
        let decimals = value.split_once('.').map_or(0, |(_, decimals)| decimals.len());
        rows.push_str(&format!(
            "<tr><th scope=\"row\">{}</th><td class=\"n\">{value}</td><td class=\"n\">{uncertainty}</td><td>{}</td>\
             <td class=\"n\">{:.decimals$} to {:.decimals$}</td><td>{}</td></tr>\n",
            in_words(&row.name),
            escaped(&row.unit),
            row.low,
            row.high,
            escaped(&row.method)
        ));
    }
    let head = [
        Words("result"),
        Number("value"),
        Number("standard uncertainty"),
        Words("unit"),
        Number("95 % interval"),
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
    escaped(&name.replace('_', " ").replace("cfc60", "CFC 60").replace("cfc180", "CFC 180"))
}
