//! `tautrail replay TRIAL…`: the launch model beside each trial.

use std::path::{Path, PathBuf};

use serde_json::{Value, json};
use tautrail::reading::read;
use tautrail::replay::{Replay, ReplayError, Residuals, replay};

use super::losses_file::put_losses;
use super::measured::open;
use super::screen::{Screen, Tone, with_causes};
use super::{CAUTION, Failure, Verdict};

/// Replay trials through the launch model and show where they differ
///
/// The model starts from each trial's own hold tension and draw; a residual is measured minus modelled.
#[derive(Debug, clap::Args)]
#[command(after_help = REPLAY_HELP)]
pub struct Args {
    /// The trial files
    #[arg(required = true)]
    trials: Vec<PathBuf>,
    /// Use this rig file in place of the one each trial carries (calibrations stay as sealed)
    #[arg(long)]
    rig: Option<PathBuf>,
    /// A loss card (`tautrail fit --out`) in the place of what the rig file says of its losses
    #[arg(long, value_name = "FILE")]
    losses: Option<PathBuf>,
    /// With --json: every residual, not only the summary
    #[arg(long)]
    series: bool,
}

const REPLAY_HELP: &str = "\
Examples:
  tautrail replay trials/trial-000012-7f3a9c.h5
  tautrail replay trials/*.h5                                 one after the other; a bad file stops none of the others
  tautrail replay --losses losses.toml trials/*.h5            with the losses that `tautrail fit` found
  tautrail replay --json --series trials/trial-000012-7f3a9c.h5 | jq '.[0].residuals[0].residual'

bias and rms are over the power stroke; \"over u\" is the greatest residual over its own standard uncertainty, which need not be the largest: 2 or less is
agreement. Exit code: 0 all replayed, 1 at least one can't be replayed (the reason is shown), 2 nothing could be read.

Tautrail is no safety device: it advises and records; interlocks, exclusion zones, local codes and licensed practice
decide.";

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let outcomes: Vec<Outcome> = args.trials.iter().map(|path| replayed(path, args)).collect();
    if let [Outcome { result: Err(failure), could_read: false, .. }] = &outcomes[..] {
        return Err(failure.clone().into());
    }
    if screen.json {
        screen.value(&Value::Array(outcomes.iter().map(|outcome| as_json(outcome, args.series)).collect()));
    } else {
        outcomes.iter().for_each(|outcome| print(outcome, screen));
        print_together(&outcomes, screen);
        screen.line(CAUTION);
    }
    let n_read = outcomes.iter().filter(|outcome| outcome.could_read).count();
    if n_read == 0 {
        return Err("none of the trials could be read".into());
    }
    let all = outcomes.iter().all(|outcome| outcome.result.is_ok());
    Ok(if all { Verdict::Done } else { Verdict::CheckFailed })
}

struct Outcome {
    path: PathBuf,
    title: String,
    launch_speed: Option<(f64, f64)>,
    could_read: bool,
    result: Result<Replay, String>,
}

fn replayed(path: &Path, args: &Args) -> Outcome {
    let mut outcome = Outcome {
        path: path.to_owned(),
        title: path.display().to_string(),
        launch_speed: None,
        could_read: false,
        result: Err(String::new()),
    };
    let opened = open(path, args.rig.as_ref()).map_err(Failure::from).and_then(|mut measured| {
        put_losses(&mut measured.rig, args.losses.as_ref())?;
        Ok(measured)
    });
    let measured = match opened {
        Ok(measured) => measured,
        Err(failure) => {
            outcome.result = Err(with_causes(failure.as_ref()));
            return outcome;
        }
    };
    outcome.could_read = true;
    outcome.title = format!("trial {} on rig {}", measured.header.trial_id, measured.rig.name);
    let reading = read(&measured.signals, &measured.rig);
    outcome.launch_speed = reading.result("launch_speed").map(|row| (row.value, row.standard_uncertainty));
    outcome.result =
        replay(&measured.signals, &reading, &measured.rig).map_err(|error: ReplayError| with_causes(&error));
    outcome
}

fn print(outcome: &Outcome, screen: &Screen) {
    screen.line(screen.toned(&outcome.title, Tone::Heading));
    let replay = match &outcome.result {
        Ok(replay) => replay,
        Err(reason) => {
            screen.line(format!("  {} {reason}", screen.toned("no replay:", Tone::Caution)));
            return;
        }
    };
    let start = &replay.start;
    screen.line(format!(
        "  model started from {:.1} ± {:.1} N in the release line at x = {:.4} ± {:.4} m (standard uncertainties)",
        start.hold_tension_n, start.u_hold_tension_n, start.x_m, start.u_x_m
    ));
    if let (Some((measured, u_measured)), Some(modelled)) = (outcome.launch_speed, replay.modelled_launch_speed_mps) {
        let u_modelled = replay.u_modelled_launch_speed_mps.unwrap_or(f64::NAN);
        screen.line(format!(
            "  launch speed measured {measured:.3} ± {u_measured:.3} m/s, modelled {modelled:.3} ± {u_modelled:.3} m/s"
        ));
    }
    screen.line("  residuals          bias         rms         largest   at x m   at s       over u   unit");
    for residuals in &replay.residuals {
        let Residuals { quantity, unit, bias, rms, max, max_at_s, max_at_x_m, .. } = residuals;
        let over_u = residuals.max_over_u();
        screen.line(format!(
            "  {quantity:<15} {bias:>11.4} {rms:>11.4} {max:>13.4} {max_at_x_m:>8.3} {max_at_s:>10.4} {over_u:>8.1}   {unit}"
        ));
        let [first, middle, last] = residuals.by_third.map(|third| third.bias);
        let chi = residuals.mean_normalised_square;
        screen.line(format!(
            "    bias by third of the stroke {first:+.4}, {middle:+.4}, {last:+.4} {unit}; chi-square per point {chi:.2}, \
             autocorrelation {:.2}",
            residuals.autocorrelation
        ));
    }
    screen.line(format!("  {}", replay.sentence));
}

/// One line a trial, where there are several.
fn print_together(outcomes: &[Outcome], screen: &Screen) {
    if outcomes.len() < 2 {
        return;
    }
    screen.line(screen.toned("all trials: launch speed, measured minus modelled", Tone::Heading));
    for outcome in outcomes {
        let line = match (&outcome.result, outcome.launch_speed) {
            (Ok(replay), Some((measured, u_measured))) => {
                let modelled = replay.modelled_launch_speed_mps.unwrap_or(f64::NAN);
                let u = u_measured.hypot(replay.u_modelled_launch_speed_mps.unwrap_or(f64::NAN));
                let off = measured - modelled;
                format!("{measured:>9.3} m/s {off:>+8.3} ± {u:.3} m/s, {:>5.1} u", off.abs() / u)
            }
            (Ok(_), None) => "replayed, no launch speed".to_owned(),
            (Err(_), _) => "not replayed".to_owned(),
        };
        screen.line(format!("  {:<44} {line}", outcome.title));
    }
}

fn as_json(outcome: &Outcome, series: bool) -> Value {
    let replay = match &outcome.result {
        Ok(replay) => replay,
        Err(reason) => return json!({ "path": outcome.path, "trial": outcome.title, "no_replay": reason }),
    };
    let residuals: Vec<Value> = replay.residuals.iter().map(|residuals| summary(residuals, series)).collect();
    json!({
        "path": outcome.path, "trial": outcome.title, "start": replay.start,
        "launch_speed_mps": outcome.launch_speed.map(|speed| speed.0),
        "launch_speed_standard_uncertainty_mps": outcome.launch_speed.map(|speed| speed.1),
        "modelled_launch_speed_mps": replay.modelled_launch_speed_mps,
        "modelled_launch_speed_standard_uncertainty_mps": replay.u_modelled_launch_speed_mps,
        "residuals": residuals, "shape": replay.shape, "sentence": replay.sentence, "caution": CAUTION,
    })
}

fn summary(residuals: &Residuals, series: bool) -> Value {
    if series {
        return json!(residuals);
    }
    json!({
        "quantity": residuals.quantity, "unit": residuals.unit, "n": residuals.residual.len(), "bias": residuals.bias,
        "rms": residuals.rms, "max": residuals.max, "max_at_s": residuals.max_at_s, "max_at_x_m": residuals.max_at_x_m,
        "max_over_u": residuals.max_over_u(), "mean_normalised_square": residuals.mean_normalised_square,
        "autocorrelation": residuals.autocorrelation, "by_third": residuals.by_third,
    })
}
