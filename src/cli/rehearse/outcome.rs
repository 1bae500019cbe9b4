//! What the rehearsal came to: the reading beside the truth, the blocks, the residuals, the report.

use std::path::{Path, PathBuf};

use serde_json::json;
use tautrail::reading::{Reading, read};
use tautrail::replay::{Replay, ReplayError, Residuals, replay};
use tautrail::trial::TrialFile;

use super::beside::{self, Beside, Blocks};
use super::stage::Stage;
use super::truth::Truth;
use super::{CAUTION, Failure, Screen, Verdict};
use crate::cli::measured;
use crate::cli::report::write_page;
use crate::cli::screen::Tone;

/// A launch speed further off than this fails the rehearsal.
const SPEED_RELATIVE_ERROR_MAX: f64 = 0.01;

struct Outcome {
    trial: PathBuf,
    report: PathBuf,
    truth_outcome: String,
    results: Vec<Beside>,
    blocks: Vec<Blocks>,
    reading: Reading,
    replay: Result<Replay, ReplayError>,
}

/// Reads the sealed trial as an analyst would, compares with the truth, writes the report, prints it all.
pub fn show(stage: &Stage, trial: &Path, screen: &Screen) -> Result<Verdict, Failure> {
    let truth = Truth::read(&stage.truth_file())?;
    let measured = measured::open(trial, None)?;
    let reading = read(&measured.signals, &measured.rig);
    let replay = replay(&measured.signals, &reading, &measured.rig);
    let report = write_page(trial, Some(&stage.dir().join("report.html")))?;
    let outcome = Outcome {
        trial: trial.to_owned(),
        report,
        truth_outcome: truth.outcome.clone(),
        results: beside::results(&reading, &truth, measured.header.zero_host_ns),
        blocks: beside::blocks(&TrialFile::open(trial)?, &truth)?,
        reading,
        replay,
    };
    if screen.json {
        outcome.print_json(screen)
    } else {
        outcome.print(screen)
    }
    Ok(if outcome.agrees() { Verdict::Done } else { Verdict::CheckFailed })
}

impl Outcome {
    /// No block lost or altered, and, where there was a launch, its speed within the bound.
    fn agrees(&self) -> bool {
        let whole = self.blocks.iter().all(|blocks| blocks.missing == 0 && blocks.differing == 0 && blocks.in_file > 0);
        let speed = self.results.iter().find(|row| row.name == "launch_speed");
        let near = speed.is_some_and(|row| row.error().abs() <= SPEED_RELATIVE_ERROR_MAX * row.truth);
        whole && (near || self.truth_outcome != "launched") && self.reading.outcome.word() == self.truth_outcome
    }

    fn residuals(&self) -> &[Residuals] {
        self.replay.as_ref().map_or(&[], |replay| &replay.residuals)
    }

    fn print(&self, screen: &Screen) {
        let reading = &self.reading;
        screen.line("");
        screen.line(screen.toned("Reading beside the truth of the virtual rig", Tone::Heading));
        screen.line(format!("  outcome: {} (truth: {})", reading.outcome.word(), self.truth_outcome));
        screen.line(format!(
            "  {:21}{:>9}{:>9}{:>9}  {:24}truth in it",
            "", "truth", "reading", "error", "95 % interval"
        ));
        for row in &self.results {
            let interval = format!("{:.3} to {:.3} {}", row.low, row.high, row.unit);
            let inside = if row.covered() { "yes" } else { "no" };
            let name = row.name.replace('_', " ");
            let (truth, reading, error) = (row.truth, row.reading, row.error());
            screen.line(format!("  {name:21}{truth:>9.3}{reading:>9.3}{error:>+9.4}  {interval:24}{inside}"));
        }
        self.print_blocks(screen);
        self.print_residuals(screen);
        screen.line("");
        screen.line(format!("trial   {}", self.trial.display()));
        screen.line(format!("report  {}", self.report.display()));
        screen.line(CAUTION);
    }

    fn print_blocks(&self, screen: &Screen) {
        screen.line("");
        screen.line(screen.toned("Blocks in the trial's range", Tone::Heading));
        for blocks in &self.blocks {
            let Blocks { device, stream, in_file, missing, differing } = blocks;
            screen.line(format!(
                "  {device} stream {stream}: {in_file} in the file, {missing} missing, {differing} altered"
            ));
        }
    }

    fn print_residuals(&self, screen: &Screen) {
        screen.line("");
        screen.line(screen.toned("Replay: measured minus modelled, power stroke", Tone::Heading));
        let Ok(replay) = &self.replay else {
            let reason = self.replay.as_ref().err().map(ToString::to_string).unwrap_or_default();
            screen.line(format!("  no replay: {reason}"));
            return;
        };
        screen.line(format!("  {:24}{:>10}{:>10}{:>10}  at x", "", "bias", "RMS", "largest"));
        for row in &replay.residuals {
            let quantity = format!("{}, {}", row.quantity, row.unit);
            let (bias, rms, max, x_m) = (row.bias, row.rms, row.max, row.max_at_x_m);
            screen.line(format!("  {quantity:24}{bias:>10.3}{rms:>10.3}{max:>10.3}  {x_m:.2} m"));
        }
        screen.line(format!("  {}", replay.sentence));
    }

    fn print_json(&self, screen: &Screen) {
        let residuals: Vec<_> = self
            .residuals()
            .iter()
            .map(|row| {
                json!({ "quantity": row.quantity, "unit": row.unit, "bias": row.bias, "rms": row.rms, "max": row.max,
                        "max_at_x_m": row.max_at_x_m })
            })
            .collect();
        screen.value(&json!({
            "trial": self.trial, "report": self.report, "agrees": self.agrees(),
            "outcome": self.reading.outcome.word(), "truth_outcome": self.truth_outcome,
            "beside_truth": self.results, "blocks": self.blocks, "residuals": residuals,
            "caution": CAUTION,
        }));
    }
}
