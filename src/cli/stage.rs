//! `tautrail stage RIG`: the steps of a build-up and what each would do.

use std::path::PathBuf;

use serde_json::{Value, json};
use tautrail::model::{Forecast, ForecastOptions, Known, LAUNCH_SPEED, ModelError, PEAK_G, forecast};
use tautrail::rig::{self, Rig, Stage};

use super::forecast::{GAS_CAUTION, finite};
use super::screen::{Screen, Tone};
use super::{CAUTION, Failure, Verdict, cord};

/// List the stages of a build-up: configuration, gate, what to inspect, and what each would do
#[derive(Debug, clap::Args)]
#[command(after_help = STAGE_HELP)]
pub struct Args {
    /// The rig file (TOML) with its [[stage]] tables
    rig: PathBuf,
    /// Launches to draw for each stage
    #[arg(long, default_value_t = 1000, value_parser = clap::value_parser!(u32).range(100..=1_000_000))]
    draws: u32,
    /// Seed of the draws
    #[arg(long, default_value_t = 1)]
    seed: u64,
    /// Count what each cord has served from the trials of this archive directory, and say which are to come off
    #[arg(long, value_name = "DIR")]
    trials: Option<PathBuf>,
}

const STAGE_HELP: &str = "\
Examples:
  tautrail stage south-mole.toml
  tautrail stage --trials trials/ south-mole.toml   with the cords' cycles and hours
  tautrail stage --json south-mole.toml

Exit code: 0 stages listed, 1 the rig file names none, one can't be computed or a cord is to come off, 2 the rig file can't be used.

The forecasts are planning forecasts. Whether a gate is open and whether to go is for people to decide. Tautrail is no safety
device: it advises and records; interlocks, exclusion zones, local codes and licensed practice decide.";

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let rig = rig::load(&args.rig)?;
    let options = ForecastOptions {
        known: Known::Plan,
        draws: args.draws,
        seed: args.seed,
        threads: std::thread::available_parallelism().map_or(1, usize::from),
    };
    let stages: Vec<(&Stage, Rig)> = rig.details.stages.iter().map(|stage| (stage, configured(&rig, stage))).collect();
    let made: Vec<_> = stages.iter().map(|(_, rig)| forecast(rig, options)).collect();
    let worn = args.trials.as_deref().map(|dir| cord::worn_cords(&rig, dir, screen)).transpose()?;
    if screen.json {
        let rows: Vec<Value> = stages.iter().zip(&made).map(|((stage, rig), made)| as_json(stage, rig, made)).collect();
        screen.value(&json!({
            "rig": rig.name, "stages": rows, "cautions": cautions(&rig), "proof_load": cord::proof_sentence(&rig),
            "take_off": worn,
        }));
    } else {
        print(&rig, &stages, &made, screen);
        for sentence in worn.iter().flatten() {
            screen.line(screen.toned(sentence, Tone::Bad));
        }
    }
    let all = !made.is_empty() && made.iter().all(Result::is_ok);
    Ok(if all && worn.is_none_or(|worn| worn.is_empty()) { Verdict::Done } else { Verdict::CheckFailed })
}

/// The rig as a stage has it.
fn configured(rig: &Rig, stage: &Stage) -> Rig {
    let mut rig = rig.clone();
    if let Some(count) = stage.cord_count {
        rig.cords.count = count;
    }
    if let Some(draw_m) = stage.draw_m {
        rig.plan.draw_m = draw_m;
    }
    if let Some(mass_kg) = stage.payload_mass_kg {
        rig.payload.mass_kg.value = mass_kg;
    }
    rig
}

fn print(rig: &Rig, stages: &[(&Stage, Rig)], made: &[Result<Forecast, ModelError>], screen: &Screen) {
    if stages.is_empty() {
        screen.line(format!(
            "rig {} names no stage, so there is nothing to list: add one [[stage]] table for each step of the build-up (name, cords, draw, \
             payload_mass, gate, inspect) to its rig file",
            rig.name
        ));
    }
    for (number, ((stage, rig), made)) in stages.iter().zip(made).enumerate() {
        let title = format!(
            "stage {}: {}: {} cords, draw {:.2} m, payload {:.2} kg",
            number + 1,
            stage.name,
            rig.cords.count,
            rig.plan.draw_m,
            rig.payload.mass_kg.value
        );
        screen.line(screen.toned(&title, Tone::Heading));
        match made {
            Ok(made) => print_forecast(rig, made, screen),
            Err(error) => screen.line(screen.toned(&format!("  can't be forecast: {error}"), Tone::Bad)),
        }
        screen.line(format!("  gate: {}", stage.gate));
        for item in &stage.inspect {
            screen.line(format!("  inspect: {item}"));
        }
    }
    screen.line("planning forecasts; whether a gate is open, and go or no-go, people decide");
    screen.line(cord::proof_sentence(rig));
    for caution in cautions(rig) {
        screen.line(caution);
    }
}

fn print_forecast(rig: &Rig, made: &Forecast, screen: &Screen) {
    for sentence in made.extrapolations.iter().chain(&made.unfitted) {
        screen.line(screen.toned(&format!("  {sentence}"), Tone::Bad));
    }
    for (index, limit) in [
        (LAUNCH_SPEED, format!("window {:.1} to {:.1}", rig.plan.launch_speed_min_mps, rig.plan.launch_speed_max_mps)),
        (PEAK_G, format!("limit {:.1}", rig.limits.peak_g)),
    ] {
        let entry = &made.quantities[index];
        let (low, high) = entry.monte_carlo.interval_95();
        let (name, unit) = (entry.quantity.meaning(), entry.quantity.unit);
        screen.line(format!("  {name}: {:.2} {unit}, 95 %: {low:.2} to {high:.2} ({limit})", entry.best));
    }
    screen.line(format!("  window met under both limits: {:.1} %", 100.0 * made.probabilities.all_met));
}

fn as_json(stage: &Stage, rig: &Rig, made: &Result<Forecast, ModelError>) -> Value {
    let forecast = match made {
        Ok(made) => {
            let row = |index: usize| {
                let entry = &made.quantities[index];
                let (low, high) = entry.monte_carlo.interval_95();
                json!({ "best": finite(entry.best), "low": finite(low), "high": finite(high), "unit": entry.quantity.unit })
            };
            json!({
                "launch_speed": row(LAUNCH_SPEED), "peak_g_cfc60_specific": row(PEAK_G),
                "all_met": made.probabilities.all_met, "extrapolations": made.extrapolations, "not_fitted_yet": made.unfitted,
            })
        }
        Err(error) => json!({ "error": error.to_string() }),
    };
    json!({
        "name": stage.name, "cords": rig.cords.count, "draw_m": rig.plan.draw_m,
        "payload_mass_kg": rig.payload.mass_kg.value, "gate": stage.gate, "inspect": stage.inspect, "forecast": forecast,
    })
}

fn cautions(rig: &Rig) -> Vec<&'static str> {
    if rig.details.gas.is_empty() { vec![CAUTION] } else { vec![CAUTION, GAS_CAUTION] }
}
