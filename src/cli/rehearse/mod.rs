//! `tautrail rehearse`: the whole job against the virtual rig.
//!
//! The virtual rig plays on ptys in a process of its own; the daemon is the real one and only sees port paths. What is
//! printed at the end comes from the sealed trial file and from the rig's own truth log.

mod beside;
mod narrator;
mod outcome;
mod stage;
mod troupe;
mod truth;

use std::path::PathBuf;
use std::time::Duration;

use tautrail::rig;

use super::screen::Screen;
use super::{CAUTION, Failure, Verdict};
use narrator::Narrator;
use stage::Stage;
use troupe::{Player, wait_until};

/// Rehearse the whole job against a virtual rig: daemon, journal, sealed trial, reading, replay, report
///
/// Takes about half a minute. All data are invented.
#[derive(Debug, clap::Args)]
#[command(after_help = REHEARSE_HELP)]
pub struct Args {
    /// Where trial, truth log and report go (made if absent)
    #[arg(long, default_value = "rehearsal")]
    out: PathBuf,
    /// What happens: `tautrail virtual-rig scenarios` lists them
    #[arg(long, default_value = "nominal")]
    scenario: String,
    /// Draws the virtual rig's hidden sensor errors, clocks and noise
    #[arg(long, default_value_t = 1)]
    seed: u64,
    /// Show the live display while it runs
    #[arg(long)]
    watch: bool,
}

const REHEARSE_HELP: &str = "\
Examples:
  tautrail rehearse                          trial, truth.json and report in ./rehearsal
  tautrail rehearse --out /tmp/r --watch     with the live display
  tautrail rehearse --seed 7 --json          other hidden errors, output for programs

Exit code: 0 all agreed, 1 the trial is incomplete or the launch speed is off by more than 1 %, 2 could not run.

Tautrail is no safety device: it advises and records. Interlocks, exclusion zones, local codes and licensed practice decide.";

const PORTS_WITHIN: Duration = Duration::from_secs(10);
const FEED_WITHIN: Duration = Duration::from_secs(10);
const TRIAL_WITHIN: Duration = Duration::from_secs(85);
const END_WITHIN: Duration = Duration::from_secs(20);
const LISTEN: Duration = Duration::from_millis(100);

#[derive(Debug, thiserror::Error)]
enum RehearseError {
    #[error("the virtual rig opened no ports within {} s; its log is {}", PORTS_WITHIN.as_secs(), log.display())]
    PortsMissing { log: PathBuf },
    #[error("the daemon opened no feed within {} s; its log is {}", FEED_WITHIN.as_secs(), log.display())]
    FeedMissing { log: PathBuf },
    #[error("no trial was sealed within {} s; the daemon's log is {}", TRIAL_WITHIN.as_secs(), log.display())]
    TrialMissing { log: PathBuf },
    #[error("--watch needs a terminal; run without it, or without --json and pipes")]
    TerminalNeeded,
}

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    if args.watch && (screen.json || !std::io::IsTerminal::is_terminal(&std::io::stdout())) {
        return Err(RehearseError::TerminalNeeded.into());
    }
    let stage = Stage::set(&args.out)?;
    let trial = play(args, &stage, screen)?;
    outcome::show(&stage, &trial, screen)
}

/// Plays the scenario through the real daemon; returns the sealed trial's path.
fn play(args: &Args, stage: &Stage, screen: &Screen) -> Result<PathBuf, Failure> {
    let quiet = args.watch || screen.json;
    if !quiet {
        screen.line(format!("Rehearsal in {} (invented data, virtual rig, seed {})", args.out.display(), args.seed));
    }
    let virtual_rig = start_virtual_rig(args, stage)?;
    let mut daemon = start_daemon(stage)?;
    let mut narrator = join_feed(stage, &mut daemon, *screen, quiet)?;
    let display = start_display(args, stage)?;
    wait_until(TRIAL_WITHIN, || -> Result<bool, Failure> {
        daemon.must_run()?;
        narrator.listen(LISTEN)?;
        Ok(stage.new_trial()?.is_some())
    })?;
    if let Some(display) = display {
        display.ask_to_end();
        display.end(END_WITHIN)?;
    }
    daemon.ask_to_end();
    daemon.end(END_WITHIN)?;
    virtual_rig.ask_to_end();
    virtual_rig.end(END_WITHIN)?;
    stage.new_trial()?.ok_or_else(|| RehearseError::TrialMissing { log: stage.dir().join("daemon.log") }.into())
}

fn start_virtual_rig(args: &Args, stage: &Stage) -> Result<Player, Failure> {
    let log = stage.dir().join("virtual-rig.log");
    let dir = stage.dir().display().to_string();
    let seed = args.seed.to_string();
    let words = ["virtual-rig", "play", "--scenario", &args.scenario, "--seed", &seed, "--dir", &dir];
    let mut player = Player::start("virtual rig", &words, log.clone())?;
    let text = std::fs::read_to_string(stage.rig_file())?;
    let ports: Vec<String> = rig::check(&text)
        .rig
        .map(|rig| rig.devices.into_iter().map(|device| device.port).collect())
        .unwrap_or_default();
    let ready = wait_until(PORTS_WITHIN, || player.must_run().map(|()| stage.ports_are_there(&ports)))?;
    if ready { Ok(player) } else { Err(RehearseError::PortsMissing { log }.into()) }
}

fn start_daemon(stage: &Stage) -> Result<Player, Failure> {
    let (rig, dir, socket) = (stage.rig_file(), stage.dir(), stage.socket());
    let words: [&std::ffi::OsStr; 6] =
        ["daemon".as_ref(), rig.as_ref(), "--dir".as_ref(), dir.as_ref(), "--socket".as_ref(), socket.as_ref()];
    Ok(Player::start("daemon", &words, stage.dir().join("daemon.log"))?)
}

fn join_feed(stage: &Stage, daemon: &mut Player, screen: Screen, quiet: bool) -> Result<Narrator, Failure> {
    let socket = stage.socket();
    let mut joined = None;
    wait_until(FEED_WITHIN, || {
        daemon.must_run()?;
        joined = Narrator::join(&socket, screen, quiet).ok();
        Ok::<_, troupe::TroupeError>(joined.is_some())
    })?;
    joined.ok_or_else(|| RehearseError::FeedMissing { log: stage.dir().join("daemon.log") }.into())
}

fn start_display(args: &Args, stage: &Stage) -> Result<Option<Player>, Failure> {
    if !args.watch {
        return Ok(None);
    }
    let socket = stage.socket();
    let words: [&std::ffi::OsStr; 3] = ["watch".as_ref(), "--socket".as_ref(), socket.as_ref()];
    Ok(Some(Player::start_on_terminal("display", &words)?))
}
