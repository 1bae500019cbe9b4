//! A forecast in words and columns, for the screen and the page.

use tautrail::model::{BelongsTo, Forecast, Forecasted, Known, LossState, Quantity, loss_terms};
use tautrail::rig::Rig;
use tautrail::units::rounded;

use super::CAUTION;
use crate::cli::cord::proof_sentence;

/// Said beside every gas rig's numbers.
pub const GAS_CAUTION: &str = "Gas cylinders, valves and lines are subject to pressure-vessel rules, of which this program \
                               knows nothing.";

pub fn kind(made: &Forecast) -> &'static str {
    match made.options.known {
        Known::Plan => "planning",
        Known::HoldTension { .. } => "drawn",
    }
}

pub fn heading(rig: &Rig, made: &Forecast) -> String {
    format!("{} forecast of {} with {}", kind(made), rig.name, rig.payload.name)
}

/// What the forecast rests on.
pub fn basis(made: &Forecast) -> String {
    let known = match made.options.known {
        Known::Plan => format!("from the planned draw, x = {:.3} m; no tension is known yet", made.run.samples[0].x_m),
        Known::HoldTension { tension_n, x_m } => format!("from {tension_n:.1} N in the release line at x = {x_m:.3} m"),
    };
    let (draws, seed) = (made.options.draws, made.options.seed);
    format!("{known}; {draws} launches drawn (seed {seed}), first-order propagation beside them")
}

/// What the labels of [`table`] mean, a line each.
pub fn legend(made: &Forecast) -> Vec<String> {
    let line = |entry: &Forecasted| format!("  {}: {}", entry.quantity.label, entry.quantity.detail);
    made.quantities.iter().map(line).collect()
}

/// Header row first: quantity as `named`, best value, standard deviation, 95 % interval of the draws, first-order uncertainty.
pub fn table(made: &Forecast, named: impl Fn(&Quantity) -> String) -> Vec<Vec<String>> {
    let mut rows = vec![["", "best", "std. dev.", "95 % of draws", "first order"].map(str::to_owned).to_vec()];
    for entry in &made.quantities {
        let (name, unit) = (named(&entry.quantity), entry.quantity.unit);
        if !entry.best.is_finite() && entry.monte_carlo.is_empty() {
            rows.push([&name, "none", "", "", ""].map(str::to_owned).to_vec());
            continue;
        }
        let deviation = entry.monte_carlo.standard_deviation();
        let (best, shown) = rounded(entry.best, deviation);
        let (low, high) = entry.monte_carlo.interval_95();
        let (low, high) = (rounded(low, deviation).0, rounded(high, deviation).0);
        let first = rounded(entry.best, entry.first_order.standard_uncertainty).1;
        rows.push(vec![name, format!("{best} {unit}"), shown, format!("{low} to {high}"), format!("± {first}")]);
    }
    rows
}

/// Cells in columns of these widths; the first one from the left, the others from the right.
pub fn across(row: &[String], widths: &[usize]) -> String {
    let cells = row.iter().zip(widths).enumerate();
    cells.map(|(i, (cell, width))| if i == 0 { format!("{cell:<width$}") } else { format!("{cell:>width$}") }).collect()
}

pub fn probabilities(rig: &Rig, made: &Forecast) -> Vec<String> {
    let p = &made.probabilities;
    let percent = |part: f64| format!("{:.1} %", 100.0 * part);
    let (low, high) = (rig.plan.launch_speed_min_mps, rig.plan.launch_speed_max_mps);
    let mut sentences = vec![
        format!(
            "launch speed in its window, {low:.1} to {high:.1} m/s: {} (below {}, above {})",
            percent(p.speed_in_window),
            percent(p.speed_below_window),
            percent(p.speed_above_window)
        ),
        format!(
            "peak g (specific, CFC 60) over its limit of {:.1} g: {}",
            rig.limits.peak_g,
            percent(p.peak_g_over_limit)
        ),
        format!("release line over its limit of {:.0} N: {}", rig.limits.tension_n, percent(p.tension_over_limit)),
        format!("window met under both limits: {}", percent(p.all_met)),
    ];
    if p.no_launch > 0.0 {
        sentences.push(format!("no launch at all, the shuttle stays or keeps its payload: {}", percent(p.no_launch)));
    }
    if p.end_stop > 0.0 {
        sentences.push(format!("no standstill in the brake before the end stop: {}", percent(p.end_stop)));
    }
    sentences
}

/// Header row first: source or use of energy at separation, best value, standard deviation and 95 % interval of the draws.
pub fn energy(made: &Forecast) -> Vec<Vec<String>> {
    let header = ["energy to separation", "best", "std. dev.", "95 % of draws"];
    let mut rows = vec![header.map(str::to_owned).to_vec()];
    for entry in &made.energy {
        let deviation = entry.monte_carlo.standard_deviation();
        let (best, shown) = rounded(entry.best_j, deviation);
        let (low, high) = entry.monte_carlo.interval_95();
        let (low, high) = (rounded(low, deviation).0, rounded(high, deviation).0);
        let name = if entry.is_source { entry.name.to_owned() } else { format!("to {}", entry.name) };
        rows.push(vec![name, format!("{best} J"), shown, format!("{low} to {high}")]);
    }
    rows
}

/// What every reader of this forecast has to know first: what was never measured, what is still to be fitted.
pub fn flags(made: &Forecast) -> Vec<String> {
    made.extrapolations.iter().chain(&made.unfitted).cloned().collect()
}

/// Each loss that is not off: its state and what it belongs to.
pub fn losses(rig: &Rig) -> Vec<String> {
    let mut sentences = Vec::new();
    for term in loss_terms(rig) {
        let whose = match term.belongs_to {
            BelongsTo::Rail => "of the rail",
            BelongsTo::EachCord => "of each cord",
            BelongsTo::Payload => "of the payload",
        };
        let shown = |given: tautrail::rig::Given| {
            let (value, u) = (given.value, given.standard_uncertainty);
            format!("{value} {}, standard uncertainty {u}", term.unit)
        };
        let state = match term.state {
            LossState::Off => continue,
            LossState::Given(given) => shown(given),
            LossState::ToBeFitted(Some(given)) => format!("to be fitted; until then {}", shown(given)),
            LossState::ToBeFitted(None) => "to be fitted, left out until then".to_owned(),
        };
        sentences.push(format!("{} ({whose}): {state}", term.meaning));
    }
    sentences
}

pub fn cautions(rig: &Rig) -> Vec<String> {
    let gas = (!rig.details.gas.is_empty()).then(|| GAS_CAUTION.to_owned());
    let proof = proof_sentence(rig);
    std::iter::once(CAUTION.to_owned()).chain(gas).chain([proof]).collect()
}
