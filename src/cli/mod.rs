//! The command line. One file a command: parses, calls the library, prints.
//!
//! A command's file has `Args` (clap derive) and `run(&Args, &Screen) -> Result<Verdict, Failure>`; it is named once in
//! [`Command`] and once in [`Command::run`]. Exit codes: 0 done, 1 a check failed, 2 could not run.

mod amend;
mod ask;
mod bundle;
mod calibrate;
mod check;
mod close;
mod compare;
mod cord;
mod daemon;
mod export;
mod feed_place;
mod fit;
mod forecast;
mod hold;
mod link_health;
mod losses_file;
mod mark;
mod measured;
mod metrics;
mod new_file;
mod open;
mod read;
mod recover;
mod rehearse;
mod replay;
mod report;
mod results_text;
mod screen;
mod seal_child;
mod show;
mod stage;
mod tare;
mod trials;
mod verify;
mod virtual_rig;
mod watch;

use std::error::Error;
use std::process::ExitCode;

use clap::{Parser, Subcommand};

use screen::Screen;

/// Said wherever a limit is shown.
const CAUTION: &str = "Tautrail is no safety device: it advises and records. Interlocks, exclusion zones, local codes and \
                       licensed practice decide.";

/// The crew's instrument for testing rail launchers of small unmanned aircraft.
#[derive(Debug, Parser)]
#[command(name = "tautrail", version, about, after_help = CAUTION, arg_required_else_help = true)]
struct CommandLine {
    /// Print JSON for programs instead of text for people
    #[arg(long, global = true)]
    json: bool,
    #[command(subcommand)]
    command: Command,
}

#[derive(Debug, Subcommand)]
enum Command {
    Check(check::Args),
    Calibrate(calibrate::Args),
    Cord(cord::Args),
    Forecast(forecast::Args),
    Stage(stage::Args),
    Daemon(daemon::Args),
    Rehearse(rehearse::Args),
    Recover(recover::Args),
    Trials(trials::Args),
    Show(show::Args),
    Verify(verify::Args),
    Amend(amend::Args),
    Hold(hold::Args),
    Bundle(bundle::Args),
    Export(export::Args),
    Watch(watch::Args),
    Metrics(metrics::Args),
    Mark(mark::Args),
    Tare(tare::Args),
    Open(open::Args),
    Close(close::Args),
    Report(report::Args),
    Read(read::Args),
    Replay(replay::Args),
    Fit(fit::Args),
    Compare(compare::Args),
    #[command(hide = true)]
    SealChild(seal_child::Args),
    #[command(hide = true)]
    CountCords(cord::count::Args),
    #[command(hide = true)]
    VirtualRig(virtual_rig::Args),
}

impl Command {
    fn run(&self, screen: &Screen) -> Result<Verdict, Failure> {
        match self {
            Self::Check(args) => check::run(args, screen),
            Self::Calibrate(args) => calibrate::run(args, screen),
            Self::Cord(args) => cord::run(args, screen),
            Self::Forecast(args) => forecast::run(args, screen),
            Self::Stage(args) => stage::run(args, screen),
            Self::Daemon(args) => daemon::run(args, screen),
            Self::Rehearse(args) => rehearse::run(args, screen),
            Self::Recover(args) => recover::run(args, screen),
            Self::Trials(args) => trials::run(args, screen),
            Self::Show(args) => show::run(args, screen),
            Self::Verify(args) => verify::run(args, screen),
            Self::Amend(args) => amend::run(args, screen),
            Self::Hold(args) => hold::run(args, screen),
            Self::Bundle(args) => bundle::run(args, screen),
            Self::Export(args) => export::run(args, screen),
            Self::Watch(args) => watch::run(args, screen),
            Self::Metrics(args) => metrics::run(args, screen),
            Self::Mark(args) => mark::run(args, screen),
            Self::Tare(args) => tare::run(args, screen),
            Self::Open(args) => open::run(args, screen),
            Self::Close(args) => close::run(args, screen),
            Self::Report(args) => report::run(args, screen),
            Self::Read(args) => read::run(args, screen),
            Self::Replay(args) => replay::run(args, screen),
            Self::Fit(args) => fit::run(args, screen),
            Self::Compare(args) => compare::run(args, screen),
            Self::SealChild(args) => seal_child::run(args, screen),
            Self::CountCords(args) => cord::count::run(args, screen),
            Self::VirtualRig(args) => virtual_rig::run(args),
        }
    }
}

/// How a command that could run ended.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Verdict {
    Done,
    CheckFailed,
    /// A program carried inside ended with this exit code, and has said why.
    EndedWith(u8),
}

/// Why a command could not run; shown with its causes.
type Failure = Box<dyn Error>;

pub fn run() -> ExitCode {
    let line = CommandLine::parse();
    let screen = Screen::for_process(line.json);
    match line.command.run(&screen) {
        Ok(Verdict::Done) => ExitCode::SUCCESS,
        Ok(Verdict::CheckFailed) => ExitCode::from(1),
        Ok(Verdict::EndedWith(code)) => ExitCode::from(code),
        Err(failure) => {
            screen.failure(failure.as_ref());
            ExitCode::from(2)
        }
    }
}
