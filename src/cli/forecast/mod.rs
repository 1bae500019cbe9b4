//! `tautrail forecast RIG`: what this configuration would do, with interval; settings that meet the window.

mod page;
mod settings;
mod words;

use std::path::{Path, PathBuf};

use serde_json::{Value, json};
use tautrail::model::{Forecast, ForecastOptions, ForecastedEnergy, Known, forecast};
use tautrail::rig::{self, Rig};
use tautrail::units::{self, Dimension, QuantityError};

use super::losses_file::put_losses;
use super::screen::{Screen, Tone};
use super::{CAUTION, Failure, Verdict};
use settings::Sweep;
pub(super) use words::GAS_CAUTION;
use words::{across, cautions};

/// Say what a configuration would do: launch speed, peak g and more as distributions, and what they hang on
#[derive(Debug, clap::Args)]
#[command(after_help = FORECAST_HELP)]
pub struct Args {
    /// The rig file (TOML)
    rig: PathBuf,
    /// Forecast from a measured hold tension of the release line, such as "690 N", instead of from the plan alone
    #[arg(long, value_name = "TENSION", value_parser = force_n)]
    held_at: Option<f64>,
    /// Draw of that hold, such as "3.9 m" [default: the planned draw]
    #[arg(long, value_name = "DRAW", value_parser = length_m, requires = "held_at")]
    drawn: Option<f64>,
    /// A loss card (`tautrail fit --out`) in the place of what the rig file says of its losses
    #[arg(long, value_name = "FILE")]
    losses: Option<PathBuf>,
    /// Launches to draw
    #[arg(long, default_value_t = 4000, value_parser = clap::value_parser!(u32).range(100..=1_000_000))]
    draws: u32,
    /// Seed of the draws: the same seed gives the same numbers
    #[arg(long, default_value_t = 1)]
    seed: u64,
    /// Write a page with speed and acceleration over x and their 95 % band
    #[arg(long, value_name = "FILE")]
    page: Option<PathBuf>,
    /// Find the setting that meets the window under the limits
    #[arg(long, value_name = "SETTING", value_parser = ["draw", "cords", "mass"], conflicts_with_all = ["held_at", "page"])]
    solve: Option<String>,
    /// Table over a setting: draw, cords or mass from, to, in how many rows
    #[arg(long, value_name = "SETTING=FROM:TO:N", conflicts_with_all = ["held_at", "page", "solve"])]
    sweep: Option<Sweep>,
}

const FORECAST_HELP: &str = "\
Examples:
  tautrail forecast north-pier.toml                          planning forecast: no tension known yet
  tautrail forecast --held-at \"690 N\" north-pier.toml        drawn forecast: from the measured hold
  tautrail forecast --solve draw north-pier.toml             which draw meets the window under the limits
  tautrail forecast --sweep draw=2:4:9 north-pier.toml       a table over the draw, in m
  tautrail forecast --page forecast.html north-pier.toml     with a page of plots
  tautrail forecast --losses losses.toml north-pier.toml     with the losses that `tautrail fit` found

Exit code: 0 forecast made, 1 --solve found no setting, 2 the rig can't be computed.

A forecast advises; it decides nothing. Tautrail is no safety device: interlocks, exclusion zones, local codes and licensed
practice decide.";

fn force_n(text: &str) -> Result<f64, QuantityError> {
    units::parse(text, Dimension::Force)
}

fn length_m(text: &str) -> Result<f64, QuantityError> {
    units::parse(text, Dimension::Length)
}

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let mut rig = rig::load(&args.rig)?;
    put_losses(&mut rig, args.losses.as_ref())?;
    if let Some(setting) = &args.solve {
        return settings::solve(&rig, setting, screen);
    }
    if let Some(sweep) = &args.sweep {
        return settings::sweep(&rig, sweep, screen);
    }
    let made = forecast(&rig, options(args, &rig))?;
    if let Some(path) = &args.page {
        page::write(path, &rig, &made)?;
    }
    if screen.json {
        screen.value(&as_json(&rig, &made, args.page.as_deref()));
    } else {
        print(&rig, &made, args.page.as_deref(), screen);
    }
    Ok(Verdict::Done)
}

fn options(args: &Args, rig: &Rig) -> ForecastOptions {
    let x_m = rig.rail.zero_mark_x_m - args.drawn.unwrap_or(rig.plan.draw_m);
    ForecastOptions {
        known: args.held_at.map_or(Known::Plan, |tension_n| Known::HoldTension { tension_n, x_m }),
        draws: args.draws,
        seed: args.seed,
        threads: std::thread::available_parallelism().map_or(1, usize::from),
    }
}

fn print(rig: &Rig, made: &Forecast, page: Option<&Path>, screen: &Screen) {
    screen.line(screen.toned(&words::heading(rig, made), Tone::Heading));
    for sentence in words::flags(made) {
        screen.line(screen.toned(&sentence, Tone::Bad));
    }
    screen.line(words::basis(made));
    screen.line("");
    for row in words::table(made, |quantity| quantity.label.to_owned()) {
        screen.line(across(&row, &[24, 12, 11, 20, 13]));
    }
    screen.line("");
    for line in words::legend(made) {
        screen.line(line);
    }
    screen.line("");
    for sentence in words::probabilities(rig, made) {
        screen.line(sentence);
    }
    screen.line("");
    for row in words::energy(made) {
        screen.line(across(&row, &[24, 12, 11, 20]));
    }
    screen.line("");
    screen.line("Losses:");
    for sentence in words::losses(rig) {
        screen.line(format!("  {sentence}"));
    }
    screen.line("");
    screen.line("What it hangs on most:");
    for sentence in made.sensitivities().iter().take(8) {
        screen.line(format!("  {sentence}"));
    }
    if let Some(path) = page {
        screen.line(format!("page written to {}", path.display()));
    }
    for caution in cautions(rig) {
        screen.line(caution);
    }
}

fn as_json(rig: &Rig, made: &Forecast, page: Option<&Path>) -> Value {
    let quantity = |entry: &tautrail::model::Forecasted| {
        let (low, high) = entry.monte_carlo.interval_95();
        json!({
            "name": entry.quantity.name, "meaning": entry.quantity.meaning(), "unit": entry.quantity.unit,
            "best": finite(entry.best),
            "monte_carlo": {
                "mean": finite(entry.monte_carlo.mean()), "standard_deviation": finite(entry.monte_carlo.standard_deviation()),
                "low": finite(low), "high": finite(high), "n": entry.monte_carlo.len(),
            },
            "first_order": {
                "standard_uncertainty": finite(entry.first_order.standard_uncertainty),
                "low": finite(entry.first_order.low), "high": finite(entry.first_order.high),
            },
            "change_per_standard_uncertainty": made.inputs.all.iter().zip(&entry.shares)
                .map(|(input, share)| (input.name.clone(), finite(*share))).collect::<serde_json::Map<_, _>>(),
        })
    };
    let energy = |entry: &ForecastedEnergy| {
        let (low, high) = entry.monte_carlo.interval_95();
        json!({
            "name": entry.name, "is_source": entry.is_source, "unit": "J", "best": finite(entry.best_j),
            "mean": finite(entry.monte_carlo.mean()),
            "standard_deviation": finite(entry.monte_carlo.standard_deviation()),
            "low": finite(low), "high": finite(high), "n": entry.monte_carlo.len(),
        })
    };
    let p = &made.probabilities;
    json!({
        "rig": rig.name, "payload": rig.payload.name,
        "kind": words::kind(made), "draws": made.options.draws, "seed": made.options.seed,
        "quantities": made.quantities.iter().map(quantity).collect::<Vec<_>>(),
        "probabilities": {
            "speed_below_window": p.speed_below_window, "speed_in_window": p.speed_in_window,
            "speed_above_window": p.speed_above_window, "peak_g_over_limit": p.peak_g_over_limit,
            "tension_over_limit": p.tension_over_limit, "all_met": p.all_met, "no_launch": p.no_launch,
            "no_standstill_before_the_end_stop": p.end_stop,
        },
        "energy_at_separation": made.energy.iter().map(energy).collect::<Vec<_>>(),
        "inputs": made.inputs.all.iter().map(|input| json!({
            "name": input.name, "meaning": input.meaning, "unit": input.unit,
            "standard_uncertainty": input.standard_uncertainty,
        })).collect::<Vec<_>>(),
        "losses": words::losses(rig), "sensitivities": made.sensitivities(), "extrapolations": made.extrapolations,
        "not_fitted_yet": made.unfitted, "page": page, "cautions": cautions(rig),
    })
}

/// JSON has no NaN: what a launch does not have is null.
pub(super) fn finite(value: f64) -> Value {
    if value.is_finite() { json!(value) } else { Value::Null }
}
