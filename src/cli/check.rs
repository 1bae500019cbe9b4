//! `tautrail check RIG`: what is wrong with a rig file and where, what is uncalibrated, which ports are there.

use std::fs;
use std::io::ErrorKind;
use std::os::unix::fs::FileTypeExt;
use std::path::{Path, PathBuf};

use serde_json::{Value, json};
use tautrail::link::{self, ListedPort};
use tautrail::rig::{self, CalibrationRecord, Checked, Device, Finding, RecordState, Rig, Severity};
use tautrail::units::brief;

use super::feed_place::FeedPlace;
use super::link_health::{self, Health};
use super::screen::{Screen, Tone};
use super::{CAUTION, Failure, Verdict, cord};

/// Read a rig file and say what is wrong and where, what is uncalibrated, which ports are there
///
/// No port is opened: opening one resets many small boards. The machine's ports are listed with the names that stay the same
/// after a replug; of a daemon that records this rig here, the health of each link and of the journal is told: also how
/// long data wait to be on the disk.
#[derive(Debug, clap::Args)]
#[command(after_help = CHECK_HELP)]
pub struct Args {
    /// The rig file (TOML)
    rig: PathBuf,
    /// Don't look for the ports: for checking at the desk
    #[arg(long)]
    no_ports: bool,
    /// Count what each cord has served from the trials of this archive directory, and say which are to come off
    #[arg(long, value_name = "DIR")]
    trials: Option<PathBuf>,
    /// The daemon whose links are shown, if one records this rig
    #[command(flatten)]
    daemon: FeedPlace,
}

const CHECK_HELP: &str = "\
Examples:
  tautrail check north-pier.toml              at the rig, devices plugged in
  tautrail check --no-ports north-pier.toml   at the desk
  tautrail check --json north-pier.toml       for programs
  tautrail check --trials trials/ north-pier.toml   with the cords' cycles and hours

Exit code: 0 usable, 1 an error was found, a port is absent, a cord is to come off, or a running
daemon's link gives no samples or its clock is further off than the device states, 2 the file can't be read.

Limits in a rig file are for advice and record only. Tautrail is no safety device: interlocks, exclusion zones, local
codes and licensed practice decide.";

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let text = rig::read_joined(&args.rig)?;
    let checked = rig::check(&text);
    let devices = checked.rig.as_ref().filter(|_| !args.no_ports).map_or(&[][..], |rig| &rig.devices);
    let ports: Vec<Port<'_>> = devices.iter().map(|device| Port::look(&args.rig, device)).collect();
    let around = Around::of(args, checked.rig.as_ref());
    if screen.json {
        screen.value(&as_json(args, &checked, &ports, &around));
    } else {
        print(args, &checked, &ports, &around, screen);
    }
    let worn = match (&args.trials, &checked.rig) {
        (Some(dir), Some(rig)) => cord::check_service(rig, dir, screen)?,
        _ => false,
    };
    let usable = checked.rig.is_some() && ports.iter().all(|port| port.state.is_present()) && !worn;
    let usable = usable && around.health.links.iter().all(|link| link_health::troubles(link).next().is_none());
    Ok(if usable { Verdict::Done } else { Verdict::CheckFailed })
}

/// What is there beside the rig file's own ports.
#[derive(Default)]
struct Around {
    listed: Vec<ListedPort>,
    /// Of a daemon that records this rig.
    health: Health,
}

impl Around {
    fn of(args: &Args, rig: Option<&Rig>) -> Self {
        let Some(rig) = rig.filter(|_| !args.no_ports) else { return Self::default() };
        Self { listed: link::list(), health: link_health::ask(&args.daemon.socket(), &rig.name).unwrap_or_default() }
    }
}

/// A device's port as the file system shows it.
struct Port<'a> {
    device: &'a str,
    path: PathBuf,
    state: PortState,
}

enum PortState {
    Present,
    Absent,
    NotAPort,
    Unreachable(String),
}

impl PortState {
    fn is_present(&self) -> bool {
        matches!(self, Self::Present)
    }

    const fn word(&self) -> &'static str {
        match self {
            Self::Present => "ok",
            Self::Absent => "absent",
            Self::NotAPort => "wrong",
            Self::Unreachable(_) => "unknown",
        }
    }

    fn sentence(&self) -> String {
        match self {
            Self::Present => "is there (not opened)".to_owned(),
            Self::Absent => "does not exist: is the device plugged in, is the path right?".to_owned(),
            Self::NotAPort => "is no serial port".to_owned(),
            Self::Unreachable(why) => format!("can't be looked at: {why}"),
        }
    }
}

impl<'a> Port<'a> {
    fn look(rig_path: &Path, device: &'a Device) -> Self {
        let path = rig::port_path(rig_path, &device.port);
        let state = match fs::metadata(&path) {
            Ok(metadata) if metadata.file_type().is_char_device() => PortState::Present,
            Ok(_) => PortState::NotAPort,
            Err(error) if error.kind() == ErrorKind::NotFound => PortState::Absent,
            Err(error) => PortState::Unreachable(error.to_string()),
        };
        Self { device: &device.name, path, state }
    }
}

fn print(args: &Args, checked: &Checked, ports: &[Port<'_>], around: &Around, screen: &Screen) {
    let path = args.rig.display();
    for finding in &checked.findings {
        let Finding { line, column, key, message, severity } = finding;
        let tone = if *severity == Severity::Error { Tone::Bad } else { Tone::Caution };
        let key = if key.is_empty() { String::new() } else { format!("{key}: ") };
        screen.line(format!("{path}:{line}:{column}: {}: {key}{message}", screen.toned(severity.word(), tone)));
    }
    let n_errors = checked.findings.iter().filter(|finding| finding.severity == Severity::Error).count();
    let Some(rig) = &checked.rig else {
        screen.line(format!("{path}: {n_errors} to put right before this rig can be used"));
        screen.line(CAUTION);
        return;
    };
    print_rig(rig, screen);
    for port in ports {
        let tone = if port.state.is_present() { Tone::Good } else { Tone::Bad };
        let word = screen.toned(port.state.word(), tone);
        screen.line(format!("port {word}: {} of {} {}", port.path.display(), port.device, port.state.sentence()));
    }
    if args.no_ports {
        screen.line("ports were not looked for (--no-ports)");
    }
    print_around(ports, around, screen);
    screen.line(CAUTION);
}

fn print_around(ports: &[Port<'_>], around: &Around, screen: &Screen) {
    for link in &around.health.links {
        screen.line(link_health::sentence(link));
        let look_at = screen.toned("look at:", Tone::Caution);
        link_health::troubles(link).for_each(|trouble| screen.line(format!("  {look_at} {trouble}")));
    }
    around.health.journal.iter().for_each(|journal| screen.line(link_health::journal_sentence(journal)));
    for listed in &around.listed {
        let used = ports.iter().find(|port| fs::canonicalize(&port.path).is_ok_and(|node| node == listed.node));
        let by = used.map_or("not in this rig file".to_owned(), |port| format!("taken by {}", port.device));
        let stable = if listed.stable { "" } else { ", name may change after a replug" };
        screen.line(format!("on this machine: {} ({}{stable}), {by}", listed.path.display(), listed.node.display()));
    }
}

fn print_rig(rig: &Rig, screen: &Screen) {
    let Rig { name, payload, cords, limits, plan, .. } = rig;
    screen.line(screen.toned(&format!("rig {name}, payload {}", payload.name), Tone::Heading));
    screen.line(format!(
        "  moving mass {:.3} kg and {} cords of {:.3} kg, draw {:.2} m, window {:.1} to {:.1} m/s",
        rig.moving_mass_kg(),
        cords.count,
        cords.mass_kg,
        plan.draw_m,
        plan.launch_speed_min_mps,
        plan.launch_speed_max_mps
    ));
    screen.line(format!("  limits, for advice only: {:.0} N, {:.1} g", limits.tension_n, limits.peak_g));
    cord::print_standing(rig, screen);
    for channel in &rig.channels {
        let (role, unit) = (channel.role.word(), channel.role.unit());
        let state = RecordState::of(channel.record.as_ref(), today());
        let said = match &channel.record {
            Some(record) if state.is_valid() => {
                let CalibrationRecord { name, date, valid_until, tested, .. } = record;
                let (low, high) = (brief(tested.0, 5), brief(tested.1, 5));
                format!("calibrated {date}, valid until {valid_until}, {low} to {high} {unit} ({name})")
            }
            _ => screen.toned(&state.to_string(), Tone::Caution),
        };
        screen.line(format!("  channel {}: {role} in {unit}, {said}", channel.name));
    }
    for channel in &rig.uncalibrated {
        let word = screen.toned("UNCALIBRATED", Tone::Caution);
        screen.line(format!("  channel {}: {}, {word}: counts only", channel.name, channel.role.word()));
    }
}

/// The day in UTC, by this computer's clock.
pub fn today() -> Option<jiff::civil::Date> {
    Some(jiff::tz::Offset::UTC.to_datetime(jiff::Timestamp::now()).date())
}

fn as_json(args: &Args, checked: &Checked, ports: &[Port<'_>], around: &Around) -> Value {
    let findings: Vec<Value> = checked
        .findings
        .iter()
        .map(|finding| {
            json!({
                "severity": finding.severity.word(), "line": finding.line, "column": finding.column,
                "key": finding.key, "message": finding.message,
            })
        })
        .collect();
    let ports: Vec<Value> = ports
        .iter()
        .map(|port| {
            json!({
                "device": port.device, "path": port.path, "present": port.state.is_present(),
                "state": port.state.sentence(),
            })
        })
        .collect();
    let doubts = checked.rig.as_ref().map(|rig| tautrail::calibration::doubts(rig, today())).unwrap_or_default();
    let listed: Vec<Value> = around
        .listed
        .iter()
        .map(|port| json!({ "path": port.path, "node": port.node, "stable": port.stable }))
        .collect();
    let names = |rig: &Rig| rig.uncalibrated.iter().map(|channel| channel.name.clone()).collect::<Vec<_>>();
    json!({
        "rig_file": args.rig, "usable": checked.rig.is_some(), "rig": checked.rig.as_ref().map(|rig| &rig.name),
        "findings": findings, "calibration_doubts": doubts, "uncalibrated": checked.rig.as_ref().map(names).unwrap_or_default(),
        "ports_looked_for": checked.rig.is_some() && !args.no_ports, "ports": ports, "caution": CAUTION,
        "machine_ports": listed, "links": around.health.links, "journal": around.health.journal,
    })
}
