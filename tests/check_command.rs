//! `tautrail check` as a crew runs it: exit codes, sentences, JSON.

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a test that cannot go on stops here")]

use std::path::Path;
use std::process::{Command, Output};

#[path = "support/rehearsal_rig.rs"]
mod rehearsal_rig;

use rehearsal_rig::rig_text;

fn check(folder: &Path, args: &[&str]) -> Output {
    let mut command = Command::new(env!("CARGO_BIN_EXE_tautrail"));
    command.current_dir(folder).arg("check").args(args).env("NO_COLOR", "1").output().expect("tautrail starts")
}

fn said(output: &Output) -> String {
    String::from_utf8(output.stdout.clone()).expect("UTF-8")
}

fn folder_with(text: &str) -> tempfile::TempDir {
    let folder = tempfile::tempdir().expect("a temporary folder");
    std::fs::write(folder.path().join("rig.toml"), text).expect("it can be written");
    folder
}

#[test]
fn a_thoroughly_bad_file_is_answered_whole() {
    let folder = folder_with(BAD);
    let output = check(folder.path(), &["rig.toml"]);
    assert_eq!(output.status.code(), Some(1));
    assert_eq!(said(&output), BAD_ANSWER);
}

/// Invented, and wrong in every way that a hurried engineer finds.
const BAD: &str = r#"name = "north pier"
colour = "blue"

[site]
latitude = "95 deg"
altitude = 6
air_density = "1.225 kg/m3"
head_wind = "5 kn"

[rail]
lenght = "7.0 m"
incline = "6 deg"
zero_mark = "4.0 m"
brake_from = "5.0 m"
brake_force = "66 kg"

[shuttle]
mass = "-2.4 kg"

[payload]
name = ""
mass = "6200 g"
mass_uncertainty = "0.01 kg"
drag_area = "0,05 m2"

[cords]
count = 6
free_length = "2.7 m"
mass = "0.35 kg"
travel_ratio = 1.0
force_uncertainty = "1.5"
curve = [
    { elongation = "0 %", tension = "0 N" },
    { elongation = "50 %", tension = "50 N" },
    { elongation = "40 %", tension = "43 N" },
]

[limits]
tension = "200 N"
peak_g = "10 g"

[plan]
draw = "1.0 m"
launch_speed_min = "18 m/s"
launch_speed_max = "15 m/s"
slack_tension = "15 N"
tension_band = "10 %"

[[device]]
name = "winch-node"
port = "/dev/ttyUSB0"
baud = 921600
protocol = "frame"

[[channel]]
name = "line"
device = "winchnode"
device_channel = "line"
role = "release_line"
[channel.calibration]
zero_counts = 12000
coefficients = ["0 N"]
zero_uncertainty = "0.5 N"
scale_uncertainty = "0.1 %"
"#;

const BAD_ANSWER: &str = r#"rig.toml:1:1: error: losses: is missing
rig.toml:1:8: error: name: "north pier" must be letters, digits, "-" or "_", at most 40 of them
rig.toml:2:1: error: colour: unknown key, known here: name, invented, site, rail, shuttle, payload, losses, limits, plan, gas, force_table, cords, device, channel, input, more_cords, rail_support, correlation, stage, cord, proof_load, reading
rig.toml:5:12: error: site.latitude: is 95 deg, allowed is -90 to 90 deg
rig.toml:6:12: error: site.altitude: has no unit, write it in quotes with its unit, such as "6 m"
rig.toml:8:13: error: site.head_wind: "kn" is not accepted: write "kt" for knots or "kN" for kilonewtons
rig.toml:10:1: error: rail.length: is missing
rig.toml:11:1: error: rail.lenght: unknown key, did you mean "length"?
rig.toml:15:15: error: rail.brake_force: "kg" is a mass, not a force; write "kgf" if the reading is in kilograms-force
rig.toml:18:8: error: shuttle.mass: is -2.4 kg, allowed is 0.01 to 500 kg
rig.toml:21:8: error: payload.name: is empty
rig.toml:22:8: error: payload.mass: "g" means 9.80665 m/s² here, never grams; write the mass in kg
rig.toml:24:13: error: payload.drag_area: "0,05 m2" has a decimal comma, write a point
rig.toml:31:21: error: cords.force_uncertainty: "1.5" has no unit, write a ratio in one of: %
rig.toml:35:5: error: cords.curve[2]: elongation must increase, 40.0 % follows 50.0 %
rig.toml:45:20: error: plan.launch_speed_max: 15.00 m/s is not above launch_speed_min, 18.00 m/s: the window is empty
rig.toml:51:8: caution: device[0].port: /dev/ttyUSB0 may name another device after a replug, prefer its link under /dev/serial/by-id/
rig.toml:53:12: error: device[0].protocol: "frame" is not known, known: "frames", "text"
rig.toml:57:10: error: channel[0].device: there is no device "winchnode" in this rig file, did you mean "winch-node"?
rig.toml:59:8: error: channel[0].role: "release_line" is not a role, did you mean "release_line_tension"? (roles: release_line_tension, cord_anchor_tension, left_anchor_tension, right_anchor_tension, shuttle_position, shuttle_specific_force)
rig.toml: 19 to put right before this rig can be used
Tautrail is no safety device: it advises and records. Interlocks, exclusion zones, local codes and licensed practice decide.
"#;

#[test]
fn a_port_that_is_not_there_is_a_failed_check_with_its_path() {
    let folder = folder_with(&rig_text("north-pier.toml"));
    let output = check(folder.path(), &["rig.toml"]);
    assert_eq!(output.status.code(), Some(1));
    let sentence =
        "port absent: ports/winch-node of winch-node does not exist: is the device plugged in, is the path right?";
    assert!(said(&output).contains(sentence), "{}", said(&output));
}

#[test]
fn a_file_is_no_port_and_a_terminal_is() {
    let ports =
        rig_text("north-pier.toml").replace("ports/winch-node", "rig.toml").replace("ports/shuttle-node", "/dev/ptmx");
    let folder = folder_with(&ports);
    let text = said(&check(folder.path(), &["rig.toml"]));
    assert!(text.contains("port wrong: rig.toml of winch-node is no serial port"), "{text}");
    assert!(text.contains("port ok: /dev/ptmx of shuttle-node is there (not opened)"), "{text}");
}

#[test]
fn a_port_is_looked_at_and_never_opened() {
    use rustix::event::{PollFd, PollFlags, Timespec, poll};
    use rustix::pty::{OpenptFlags, grantpt, openpt, ptsname, unlockpt};
    let master = openpt(OpenptFlags::RDWR | OpenptFlags::NOCTTY | OpenptFlags::CLOEXEC).unwrap();
    grantpt(&master).unwrap();
    unlockpt(&master).unwrap();
    let port = ptsname(&master, Vec::new()).unwrap().into_string().unwrap();
    // The far end of a pty that was opened and closed again is hung up; before the first opening it is not (Linux).
    let was_opened = || {
        let mut polled = [PollFd::new(&master, PollFlags::IN)];
        poll(&mut polled, Some(&Timespec { tv_sec: 0, tv_nsec: 0 })).unwrap();
        polled[0].revents().contains(PollFlags::HUP)
    };
    let folder = folder_with(&rig_text("north-pier.toml").replace("ports/winch-node", &port));
    let text = said(&check(folder.path(), &["rig.toml"]));
    assert!(text.contains(&format!("port ok: {port} of winch-node is there (not opened)")), "{text}");
    assert!(!was_opened(), "check opened the port, which resets many small boards");
    drop(std::fs::OpenOptions::new().read(true).write(true).open(&port).unwrap());
    assert!(was_opened(), "an opening would have been seen");
}

#[test]
fn at_the_desk_a_good_file_passes_and_limits_come_with_the_caution() {
    let folder = folder_with(&rig_text("north-pier.toml"));
    let output = check(folder.path(), &["--no-ports", "rig.toml"]);
    assert_eq!(output.status.code(), Some(0));
    let text = said(&output);
    assert!(text.contains("limits, for advice only: 900 N, 10.0 g"), "{text}");
    assert!(text.contains("Tautrail is no safety device: it advises and records."), "{text}");
    assert!(!text.contains('\x1b'), "NO_COLOR is honoured");
}

#[test]
fn a_file_that_cannot_be_read_ends_with_2_and_a_sentence() {
    let folder = folder_with("");
    let output = check(folder.path(), &["absent.toml"]);
    assert_eq!(output.status.code(), Some(2));
    let sentence = "tautrail: absent.toml: cannot be read: No such file or directory (os error 2)\n";
    assert_eq!(String::from_utf8_lossy(&output.stderr), sentence);
}

#[test]
fn programs_get_the_same_findings_as_json() {
    let folder = folder_with(&rig_text("north-pier.toml").replacen("incline = ", "inclin = ", 1));
    let output = check(folder.path(), &["--json", "rig.toml"]);
    assert_eq!(output.status.code(), Some(1));
    let value: serde_json::Value = serde_json::from_str(&said(&output)).expect("it is JSON");
    assert_eq!(value["usable"], false);
    assert_eq!(value["ports_looked_for"], false);
    assert_eq!(value["machine_ports"], serde_json::json!([]), "nothing is looked for at the desk");
    assert_eq!(value["findings"][1]["key"], "rail.inclin");
    assert_eq!((&value["findings"][1]["line"], &value["findings"][1]["column"]), (&16.into(), &1.into()));
    let failed = check(folder.path(), &["--json", "absent.toml"]);
    let value: serde_json::Value = serde_json::from_str(&said(&failed)).expect("failures are JSON too");
    assert_eq!(value["error"], "absent.toml: cannot be read: No such file or directory (os error 2)");
}

#[test]
fn the_help_shows_examples_and_the_caution() {
    let folder = folder_with("");
    let output = check(folder.path(), &["--help"]);
    assert_eq!(output.status.code(), Some(0));
    let text = said(&output);
    assert!(text.contains("tautrail check north-pier.toml") && text.contains("no safety device"), "{text}");
}
