//! The virtual rig's command line, for its own binary and for programs that carry it inside.

use crate::device::catalogue::SensorSet;
use crate::faults::Fault;
use crate::launcher::{NOMINAL_CORD_FREE_LENGTH_M, nominal_cord};
use crate::performance::{Options, Performance, PrepareError, prepare};
use crate::physics::bench::{BenchPace, cord_on_bench};
use crate::play::pty::{self, PlayError, PtySettings};
use crate::play::virtual_time::{Delivered, VirtualPlay};
use crate::scenario;
use crate::sweep::{SweepError, motion_csv, sweep};
use crate::table;
use clap::{Args, Parser, Subcommand};
use std::ffi::OsString;
use std::io::{BufWriter, Write};
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::atomic::AtomicBool;
use std::time::Duration;

/// A launcher rig that does not exist: its devices, its motion, and the truth about it.
#[derive(Debug, Parser)]
#[command(name = "virtual-rig", version)]
struct Cli {
    #[command(subcommand)]
    command: Command,
}

#[derive(Debug, Subcommand)]
enum Command {
    /// Play on ptys in real time: devices at DIR/ports/NAME, truth in DIR/truth.json.
    Play {
        #[command(flatten)]
        rig: RigArgs,
        #[arg(long)]
        dir: PathBuf,
        /// Give up when no host has started every device after this many seconds.
        #[arg(long, default_value_t = 60.0)]
        wait_s: f64,
    },
    /// Play in virtual time: what a host would have read in OUT/reads.bin, truth in OUT/truth.json.
    Stream {
        #[command(flatten)]
        rig: RigArgs,
        #[arg(long)]
        out: PathBuf,
    },
    /// Play many seeds in virtual time on every core, from --seed on, and say how each went.
    Sweep {
        #[command(flatten)]
        rig: RigArgs,
        #[arg(long, default_value_t = 200)]
        trials: u64,
    },
    /// Print the true motion as CSV.
    Motion {
        #[command(flatten)]
        rig: RigArgs,
        #[arg(long, default_value_t = 0.001)]
        interval_s: f64,
    },
    /// List the scenarios.
    Scenarios,
    /// Put one nominal cord on a bench (drawn in 11.5 s, held 5 s, let back in 0.4 s) and print its forces.
    Cord,
    /// Work every scenario out and print its main truths as a table.
    Table,
}

#[derive(Debug, Args)]
struct RigArgs {
    #[arg(long, default_value = "nominal")]
    scenario: String,
    /// Draws sensor errors, clocks and noise.
    #[arg(long, default_value_t = 1)]
    seed: u64,
    /// Duration of the slow phases against nominal: 0.3 draws in 30 % of the time.
    #[arg(long, default_value_t = 1.0)]
    pace: f64,
    /// The true payload mass, whatever the rig file says.
    #[arg(long)]
    payload_mass_kg: Option<f64>,
    /// Multiplies every cord's true force.
    #[arg(long)]
    cord_force_factor: Option<f64>,
    /// Added to the hidden zero error of both tension cells.
    #[arg(long, allow_negative_numbers = true)]
    cell_offset_n: Option<f64>,
    #[arg(long, allow_negative_numbers = true)]
    cord_temperature_c: Option<f64>,
    /// Trial number in a series (scenario `ageing`).
    #[arg(long, default_value_t = 0)]
    cycle: u32,
    /// Also cells left and right, payload recorder, release pin and beam gates, gas pressure.
    #[arg(long)]
    all_sensors: bool,
    /// Three devices that print lines of text, instead of the two that send frames
    #[arg(long, conflicts_with = "all_sensors")]
    text_sensors: bool,
    /// Draw masses, cord force, friction, drag, wind and draw about their nominal values.
    #[arg(long)]
    vary: bool,
    /// DEVICE:KIND[=VALUE][@START[+DURATION]], such as winch-node:stall@r-3+2; may be repeated.
    #[arg(long = "fault")]
    faults: Vec<Fault>,
}

impl RigArgs {
    fn options(self) -> Options {
        Options {
            scenario: self.scenario,
            seed: self.seed,
            pace: self.pace,
            payload_mass_kg: self.payload_mass_kg,
            cord_force_factor: self.cord_force_factor,
            cell_offset_n: self.cell_offset_n,
            cord_temperature_c: self.cord_temperature_c,
            cycle: self.cycle,
            sensors: match (self.all_sensors, self.text_sensors) {
                (_, true) => SensorSet::Text,
                (true, false) => SensorSet::Full,
                (false, false) => SensorSet::Basic,
            },
            vary: self.vary,
            faults: self.faults,
        }
    }
}

#[derive(Debug, thiserror::Error)]
enum CliError {
    #[error(transparent)]
    Prepare(#[from] PrepareError),
    #[error(transparent)]
    Play(#[from] PlayError),
    #[error(transparent)]
    Sweep(#[from] SweepError),
    #[error("the interval is {found} s, it must be at least 1e-6 s")]
    Interval { found: f64 },
    #[error("cannot write {path}: {source}")]
    Write { path: String, source: std::io::Error },
}

/// Runs the command line `args` (the program's name first). Returns the exit code: 0 done, 2 could not run.
pub fn run(args: impl IntoIterator<Item = impl Into<OsString> + Clone>) -> u8 {
    let cli = match Cli::try_parse_from(args) {
        Ok(cli) => cli,
        Err(refusal) => {
            // Where standard error is closed there is nobody to tell.
            let _ = refusal.print();
            return if refusal.use_stderr() { 2 } else { 0 };
        }
    };
    match carry_out(cli.command) {
        Ok(()) => 0,
        Err(error) => {
            eprintln!("virtual-rig: {error}");
            2
        }
    }
}

fn carry_out(command: Command) -> Result<(), CliError> {
    match command {
        Command::Play { rig, dir, wait_s } => play(&prepare(&rig.options())?, dir, wait_s),
        Command::Stream { rig, out } => stream(&prepare(&rig.options())?, &out),
        Command::Sweep { rig, trials } => print_sweep(&rig.options(), trials),
        Command::Motion { rig, interval_s } => {
            if interval_s.is_nan() || interval_s < 1e-6 {
                return Err(CliError::Interval { found: interval_s });
            }
            print!("{}", motion_csv(&prepare(&rig.options())?, interval_s));
            Ok(())
        }
        Command::Scenarios => {
            for scenario in scenario::all(0, 0) {
                println!("{:24} {}", scenario.name, scenario.about);
            }
            Ok(())
        }
        Command::Cord => {
            let pace = BenchPace { draw_s: 11.5, hold_s: 5.0, return_s: 0.4 };
            println!("| elongation | drawing, N | letting back, N |\n| --- | --- | --- |");
            for point in cord_on_bench(&nominal_cord(), 4.0 / NOMINAL_CORD_FREE_LENGTH_M, 17, pace) {
                println!("| {:.3} | {:.2} | {:.2} |", point.elongation, point.loading_n, point.unloading_n);
            }
            Ok(())
        }
        Command::Table => {
            println!("{}", table::HEAD);
            for scenario in scenario::all(0, 0) {
                let options = Options { scenario: scenario.name.into(), ..Options::default() };
                println!("{}", table::row(&prepare(&options)?));
            }
            Ok(())
        }
    }
}

fn print_sweep(options: &Options, trials: u64) -> Result<(), CliError> {
    let started = std::time::Instant::now();
    let swept = sweep(options, trials)?;
    let elapsed_s = started.elapsed().as_secs_f64();
    println!("seed  outcome                      launch m/s  blocks  bytes");
    for trial in &swept {
        let speed = trial.launch_speed_mps.map_or("–".into(), |speed_mps| format!("{speed_mps:.3}"));
        println!("{:4}  {:27}  {speed:>10}  {:6}  {}", trial.seed, trial.outcome, trial.n_blocks, trial.n_bytes);
    }
    println!("{} trials in {elapsed_s:.1} s", swept.len());
    Ok(())
}

fn play(performance: &Performance, dir: PathBuf, wait_s: f64) -> Result<(), CliError> {
    let stop = Arc::new(AtomicBool::new(false));
    for signal in [signal_hook::consts::SIGTERM, signal_hook::consts::SIGINT] {
        signal_hook::flag::register(signal, Arc::clone(&stop))
            .map_err(|source| PlayError::System { doing: "listen for signals".into(), source })?;
    }
    let wait_for_start = Duration::from_secs_f64(wait_s.clamp(0.0, 86_400.0));
    pty::play(performance, &PtySettings { dir, wait_for_start, stop })?;
    Ok(())
}

/// `reads.bin`: records of host time (i64), device (u16), kind (u8: 0 bytes, 1 time request, 2 port gone,
/// 3 port back), length (u32), payload; all
/// little-endian. The payload of a time request is its token (u32).
fn stream(performance: &Performance, out: &Path) -> Result<(), CliError> {
    let path = out.join("reads.bin");
    let cannot = |source| CliError::Write { path: path.display().to_string(), source };
    std::fs::create_dir_all(out).map_err(cannot)?;
    let mut file = BufWriter::new(std::fs::File::create(&path).map_err(cannot)?);
    let mut play = VirtualPlay::new(performance).map_err(PlayError::Frame)?;
    for delivery in play.by_ref() {
        let delivery = delivery.map_err(PlayError::Frame)?;
        let (kind, payload) = match delivery.what {
            Delivered::Bytes(bytes) => (0, bytes),
            Delivered::TimeRequested { token } => (1, token.to_le_bytes().to_vec()),
            Delivered::Down => (2, Vec::new()),
            Delivered::Up => (3, Vec::new()),
        };
        let mut record = Vec::with_capacity(15 + payload.len());
        record.extend_from_slice(&delivery.host_ns.to_le_bytes());
        record.extend_from_slice(&(delivery.device as u16).to_le_bytes());
        record.push(kind);
        record.extend_from_slice(&(payload.len() as u32).to_le_bytes());
        record.extend_from_slice(&payload);
        file.write_all(&record).map_err(cannot)?;
    }
    file.flush().map_err(cannot)?;
    pty::write_truth(&play.truth(), out)?;
    Ok(())
}
