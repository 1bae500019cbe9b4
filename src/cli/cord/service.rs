//! `tautrail cord service RIG --trials DIR`: the cords on the rig with what they have served.

use std::path::{Path, PathBuf};

use jiff::civil::Date;
use serde_json::{Value, json};
use tautrail::archive::{CordService, cord_service};
use tautrail::rig::{self, CordItem, Rig, Served};

use crate::cli::screen::{Screen, Tone};
use crate::cli::{CAUTION, Failure, Verdict};

/// List the cords on the rig: place, lot, cycles and hours loaded, what is left until they retire
#[derive(Debug, clap::Args)]
#[command(after_help = SERVICE_HELP)]
pub struct Args {
    /// The rig file (TOML) with its [[cord]] tables
    rig: PathBuf,
    /// The archive directory whose trials are counted
    #[arg(long)]
    trials: PathBuf,
}

const SERVICE_HELP: &str = "\
Examples:
  tautrail cord service north-pier.toml --trials trials/
  tautrail cord service --json north-pier.toml --trials trials/

Each cord stands in the rig file:
  [[cord]]
  serial = \"7-01\"               lot = \"7\"             place = \"left inner\"
  in_service_since = \"2031-05-04\"
  cycles_before = 12            hours_before = \"0.4 h\"  what it did before this archive
  retire_cycles = 500           retire_hours = \"20 h\"   retire_on = \"2033-05-04\"

Cycles and hours are counted from the trials themselves, let-downs included, each trial once however often it was sealed.

Exit code: 0 all may stay, 1 one is to come off or a trial could not be counted, 2 the rig file or directory can't be used.

Limits are for advice and record only. Tautrail is no safety device: interlocks, local codes and licensed practice decide.";

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let rig = rig::load(&args.rig)?;
    let service = counted(&args.trials, screen)?;
    let today = today();
    if screen.json {
        screen.value(&as_json(&rig, &service, today));
    } else {
        print(&rig, &service, today, screen);
    }
    let worn = is_worn(&rig, &service, today);
    Ok(if worn || !service.not_counted.is_empty() { Verdict::CheckFailed } else { Verdict::Done })
}

/// Prints the cords of a rig with their service; whether one is to come off. For programs there is `cord service --json`.
pub fn check_service(rig: &Rig, dir: &Path, screen: &Screen) -> Result<bool, Failure> {
    let service = counted(dir, screen)?;
    let today = today();
    if !screen.json {
        print_cords(rig, &service, today, screen);
    }
    Ok(is_worn(rig, &service, today))
}

/// The cords that are to come off by the trials of an archive, a sentence each.
pub fn worn_cords(rig: &Rig, dir: &Path, screen: &Screen) -> Result<Vec<String>, Failure> {
    let service = counted(dir, screen)?;
    let today = today();
    let mut worn: Vec<String> =
        rig.details.cord_items.iter().filter_map(|cord| cord.worn(total(cord, &service), today)).collect();
    worn.extend(service.not_counted.iter().map(|one| format!("not counted: {}: {}", one.path.display(), one.why)));
    Ok(worn)
}

fn is_worn(rig: &Rig, service: &CordService, today: Option<Date>) -> bool {
    rig.details.cord_items.iter().any(|cord| !cord.retired(total(cord, service), today).is_empty())
}

/// Service of an archive, with progress on the screen.
fn counted(dir: &Path, screen: &Screen) -> Result<CordService, Failure> {
    let mut told = std::time::Instant::now();
    Ok(cord_service(dir, |index, n| {
        if !screen.json && told.elapsed().as_secs() >= 1 {
            told = std::time::Instant::now();
            eprintln!("trial {index} of {n}");
        }
    })?)
}

fn today() -> Option<Date> {
    Some(jiff::tz::TimeZone::UTC.to_datetime(jiff::Timestamp::now()).date())
}

fn total(cord: &CordItem, service: &CordService) -> Served {
    cord.served(service.by_serial.get(&cord.serial).copied().unwrap_or_default())
}

fn print(rig: &Rig, service: &CordService, today: Option<Date>, screen: &Screen) {
    screen.line(screen.toned(&format!("cords of {}, {} trials counted", rig.name, service.n_trials), Tone::Heading));
    if rig.details.cord_items.is_empty() {
        screen.line("the rig file lists no cords ([[cord]]), see `tautrail cord service --help`");
    }
    print_cords(rig, service, today, screen);
    if service.n_again + service.n_without_cords > 0 {
        let (again, without) = (service.n_again, service.n_without_cords);
        screen.line(format!("  {again} files hold a trial that was counted already, {without} trials list no cords"));
    }
    for one in &service.not_counted {
        let word = screen.toned("NOT COUNTED", Tone::Caution);
        screen.line(format!("{word} {}: {}", one.path.display(), one.why));
    }
    screen.line(CAUTION);
}

/// One line a cord.
fn print_cords(rig: &Rig, service: &CordService, today: Option<Date>, screen: &Screen) {
    for cord in &rig.details.cord_items {
        let served = total(cord, service);
        let since = cord.in_service_since.map_or_else(|| "-".to_owned(), |date| date.to_string());
        let CordItem { serial, lot, place, .. } = cord;
        let (cycles, hours) = (served.cycles, served.hours);
        screen.line(format!(
            "  cord {serial:<8} lot {lot:<6} {place:<14} since {since}  {cycles} cycles, {hours:.2} h loaded{}",
            limits(cord)
        ));
        for reason in cord.retired(served, today) {
            screen.line(format!("    {}: {reason}", screen.toned("TAKE OFF", Tone::Bad)));
        }
    }
}

fn limits(cord: &CordItem) -> String {
    let mut parts = Vec::new();
    parts.extend(cord.retire_cycles.map(|limit| format!("{limit} cycles")));
    parts.extend(cord.retire_hours.map(|limit| format!("{limit:.1} h")));
    parts.extend(cord.retire_on.map(|limit| limit.to_string()));
    if parts.is_empty() { String::new() } else { format!(" (retires at {})", parts.join(" or ")) }
}

fn as_json(rig: &Rig, service: &CordService, today: Option<Date>) -> Value {
    let cords: Vec<Value> = rig
        .details
        .cord_items
        .iter()
        .map(|cord| {
            let served = total(cord, service);
            json!({
                "serial": cord.serial, "lot": cord.lot, "place": cord.place, "cycles": served.cycles,
                "hours_loaded": served.hours, "take_off": cord.retired(served, today),
            })
        })
        .collect();
    let not_counted: Vec<Value> =
        service.not_counted.iter().map(|one| json!({ "path": one.path, "why": one.why })).collect();
    json!({
        "rig": rig.name, "trials_counted": service.n_trials, "cords": cords, "not_counted": not_counted,
        "caution": CAUTION,
    })
}
