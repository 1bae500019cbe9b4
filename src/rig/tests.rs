//! The rig file's promises: a good one is understood whole, a bad one is answered with every finding at once.

mod documented;

use proptest::prelude::*;

use super::testing::{NORTH_PIER, TEXT_RIG, north_pier};
use super::*;
use crate::units::STANDARD_GRAVITY_MPS2;

/// Findings of north-pier after replacing one text, one a line.
#[track_caller]
fn findings_with(from: &str, to: &str) -> String {
    assert!(NORTH_PIER.contains(from), "{from:?} is not in the rig file");
    findings_of(&NORTH_PIER.replacen(from, to, 1))
}

fn findings_of(text: &str) -> String {
    check(text).findings.iter().map(ToString::to_string).collect::<Vec<_>>().join("\n")
}

#[test]
fn the_rehearsal_rig_is_read_whole_and_in_si() {
    let rig = north_pier();
    assert_eq!(check(&NORTH_PIER).findings, []);
    assert_eq!((rig.name.as_str(), rig.payload.name.as_str()), ("north-pier", "survey-8"));
    assert_eq!((rig.rail.zero_mark_x_m, rig.rail.length_m, rig.plan.draw_m), (4.0, 7.0, 4.0));
    assert!((rig.incline_deg() - 6.0).abs() < 1e-12);
    assert_eq!((rig.limits.tension_n, rig.cords.count), (900.0, 6));
    assert!((rig.limits.peak_g - 10.0).abs() < 1e-12);
    assert_eq!((rig.devices.len(), rig.channels.len(), rig.uncalibrated.len()), (2, 4, 0));
    let accel = rig.channel_with_role(Role::ShuttleSpecificForce).expect("it has an accelerometer");
    // What the virtual rig's accelerometer has: 800 counts a g; its invented readings are rounded.
    assert!((accel.calibration.coefficients[1] * 800.0 / STANDARD_GRAVITY_MPS2 - 1.0).abs() < 1e-5);
    assert!(rig.invented);
    assert_eq!(rig.text, *NORTH_PIER);
}

#[test]
fn a_mistyped_key_is_an_error_with_the_word_that_was_meant() {
    let findings = findings_with("incline = ", "inclin = ");
    assert_eq!(
        findings,
        "14:1: error: rail.incline: is missing\n16:1: error: rail.inclin: unknown key, did you mean \"incline\"?"
    );
}

/// One change, one finding: severity, key and message, whatever the line.
#[track_caller]
fn one_finding(from: &str, to: &str, expected: &str) {
    let findings = findings_with(from, to);
    let found: Vec<&str> =
        findings.lines().map(|line| line.splitn(3, ':').nth(2).unwrap_or(line).trim_start()).collect();
    assert_eq!(found, [expected]);
}

#[test]
fn a_wrong_quantity_is_refused_with_what_would_be_right() {
    one_finding(
        "length = \"7.0 m\"",
        "length = 7.0",
        "error: rail.length: has no unit, write it in quotes with its unit, such as \"7.0 m\"",
    );
    one_finding(
        "tension = \"900 N\"",
        "tension = \"90 kg\"",
        "error: limits.tension: \"kg\" is a mass, not a force; write \"kgf\" if the reading is in kilograms-force",
    );
    one_finding("length = \"7.0 m\"", "length = \"7000 m\"", "error: rail.length: is 7000 m, allowed is 0.2 to 100 m");
    one_finding(
        "mass = \"2.4 kg\"",
        "mass = \"-2.4 kg\"",
        "error: shuttle.mass: is -2.4 kg, allowed is 0.01 to 500 kg",
    );
    one_finding(
        "length = \"7.0 m\"",
        "length = [7, 0]",
        "error: rail.length: must be a quantity in quotes, found an array",
    );
    one_finding("invented = true", "invented = \"yes\"", "error: invented: must be true or false, found a string");
    one_finding("count = 6", "count = 6.5", "error: cords.count: is 6.5, cords come in whole numbers");
    one_finding("count = 6", "count = \"6\"", "error: cords.count: must be a plain number, found a string");
}

/// Findings of the text rig after replacing one text, one a line.
#[track_caller]
fn text_findings_with(from: &str, to: &str) -> Vec<String> {
    assert!(TEXT_RIG.contains(from), "{from:?} is not in the rig file");
    check(&TEXT_RIG.replacen(from, to, 1)).findings.iter().map(ToString::to_string).collect()
}

#[test]
fn a_force_printed_in_kg_is_refused_with_what_would_be_right() {
    assert_eq!(text_findings_with("name = \"force\"", "name = \"force\""), Vec::<String>::new());
    let found = text_findings_with("unit = \"kgf\"", "unit = \"kg\"");
    let [only] = &found[..] else { panic!("{found:#?}") };
    assert!(only.contains("error: device[0].text.column[0].unit"), "{only}");
    assert!(only.contains("\"kg\" is a mass, not a force; write \"kgf\""), "{only}");
}

#[test]
fn an_instrument_too_slow_for_the_winch_is_cautioned_with_the_limit() {
    let slow = text_findings_with("interval = \"50 ms\"", "interval = \"1 s\"");
    let [only] = &slow[..] else { panic!("{slow:#?}") };
    assert!(only.contains("caution: device[1].text.interval: a tension every 1.00 s is too slow"), "{only}");
    assert!(only.contains("667 ms is the limit"), "{only}");
    // The band of 10 % is passed in 0.1 s of a winch that takes one second; 50 ms and 45 ms of delay are just within.
    let with = |winch: &str| text_findings_with("tension_band", &format!("winch_time = \"{winch}\"\ntension_band"));
    assert_eq!(with("1 s"), Vec::<String>::new());
    let fast = with("0.9 s");
    let [only] = &fast[..] else { panic!("{fast:#?}") };
    assert!(only.contains("up to 95 ms old") && only.contains("90 ms is the limit"), "{only}");
}

#[test]
fn a_column_may_have_a_filter_and_a_range_of_its_own() {
    let rig = parse(&TEXT_RIG).unwrap_or_else(|error| panic!("{error}"));
    let column = |name: &str| rig.devices[2].text_column(name).cloned().unwrap_or_else(|| panic!("{name}"));
    let accel = column("accel");
    assert_eq!((accel.bandwidth_hz, accel.least, accel.greatest), (Some(120.0), Some(-40.0), Some(40.0)));
    assert!((accel.delay_s.unwrap_or(f64::NAN) - 1.876e-3).abs() < 1e-12);
    assert_eq!(column("position").delay_s, None);
    let found = text_findings_with("least = -40", "least = 40");
    assert!(found.len() == 1 && found[0].contains("column[1].least: is not below greatest"), "{found:#?}");
}

#[test]
fn dangling_references_are_found() {
    one_finding(
        "device = \"winch-node\"\ndevice_channel = \"line\"",
        "device = \"wich-node\"\ndevice_channel = \"line\"",
        "error: channel[0].device: there is no device \"wich-node\" in this rig file, did you mean \"winch-node\"?",
    );
    let twice = findings_with("name = \"anchor\"", "name = \"line\"");
    assert!(twice.contains("error: channel[1].name: \"line\" is already the name of channel[0]"), "{twice}");
    let others = "channel[1].record: records/anchor.toml is the record of channel \"anchor\", not of \"line\"";
    assert!(twice.contains(others) && twice.lines().count() == 2, "{twice}");
    one_finding(
        "port = \"ports/shuttle-node\"",
        "port = \"ports/winch-node\"",
        "error: device[1].port: \"ports/winch-node\" is already the port of device[0], a port serves one device",
    );
    one_finding(
        "device_channel = \"anchor\"",
        "device_channel = \"line\"",
        "error: channel: line and anchor both read \"line\" of device \"winch-node\"",
    );
    let findings = findings_with("role = \"cord_anchor_tension\"", "role = \"cord_anchor_tensoin\"");
    assert!(findings.contains(
        "channel[1].role: \"cord_anchor_tensoin\" is not a role, did you mean \"cord_anchor_tension\"? (roles: \
         release_line_tension, cord_anchor_tension, left_anchor_tension, right_anchor_tension, shuttle_position, \
         shuttle_specific_force)"
    ));
}

// The planned 607 N by hand: 6 cords · (101 N + (148.148 % − 148 %) / 2 % · 2 N) = 606.9 N; 7.05 g: (606.9 − 12) / 8.6 / 9.80665.
#[test]
fn numbers_that_are_impossible_together_are_found() {
    one_finding(
        "tension = \"900 N\"",
        "tension = \"500 N\"",
        "error: limits.tension: 500 N is below the plan, the planned draw pulls 607 N",
    );
    one_finding(
        "peak_g = \"10 g\"",
        "peak_g = \"7 g\"",
        "error: limits.peak_g: 7.00 g is below the plan, the planned draw releases at about 7.05 g",
    );
    one_finding(
        "free_length = \"2.7 m\"",
        "free_length = \"2.0 m\"",
        "error: plan.draw: stretches the cords by 200.0 %, the curve ends at 150.0 %: measure further or draw less",
    );
    one_finding(
        "draw = \"4.0 m\"",
        "draw = \"4.02 m\"",
        "error: plan.draw: 4.020 m from the zero mark at x = 4.000 m would end before the rail's start at x = 0",
    );
    one_finding(
        "launch_speed_max = \"18 m/s\"",
        "launch_speed_max = \"15 m/s\"",
        "error: plan.launch_speed_max: 15.00 m/s is not above launch_speed_min, 15.00 m/s: the window is empty",
    );
    one_finding(
        "brake_from = \"5.0 m\"",
        "brake_from = \"3.5 m\"",
        "error: rail.brake_from: at x = 3.500 m would brake under power, the cords pull up to x = 4.000 m",
    );
    one_finding(
        "slack_tension = \"15 N\"",
        "slack_tension = \"150 N\"",
        "error: plan.slack_tension: 150.0 N is a fifth or more of the planned 607 N: loaded cords would read slack",
    );
    one_finding(
        "brake_force = \"660 N\"",
        "brake_force = \"120 N\"",
        "caution: rail.brake_force: the shuttle alone at 18.0 m/s needs 3.24 m to stop, 2.00 m are left before the end stop",
    );
    let findings = findings_with("zero_mark = \"4.0 m\"", "zero_mark = \"7.5 m\"");
    assert!(
        findings.contains("rail.zero_mark: at x = 7.500 m lies beyond the rail, which ends at 7.000 m"),
        "{findings}"
    );
}

#[test]
fn a_cord_curve_that_no_cord_has_is_refused() {
    one_finding(
        "elongation = \"20 %\"",
        "elongation = \"10 %\"",
        "error: cords.curve[3]: elongation must increase, 10.0 % follows 10.0 %",
    );
    one_finding(
        "tension = \"24.5 N\"",
        "tension = \"12.0 N\"",
        "error: cords.curve[3]: tension must not fall, 12.0 N follows 12.5 N",
    );
    one_finding(
        "{ elongation = \"0 %\", tension = \"0.0 N\" },",
        "{ elongation = \"0 %\", tension = \"3.0 N\" },",
        "error: cords.curve[0]: the curve must begin at \"0 %\" and \"0 N\": a slack cord carries no force",
    );
}

#[test]
fn a_channel_without_calibration_is_kept_apart_from_values() {
    let text = NORTH_PIER.replacen("record = \"records/anchor.toml\"\n", "", 1);
    let checked = check(&text);
    let rig = checked.rig.expect("it is usable");
    assert!(rig.channel_with_role(Role::CordAnchorTension).is_none());
    assert_eq!(rig.uncalibrated.iter().map(|channel| channel.name.as_str()).collect::<Vec<_>>(), ["anchor"]);
    assert_eq!(
        findings_of(&text).split_once(": ").map(|(_, rest)| rest),
        Some("caution: channel[1]: has no calibration: recorded as counts, never shown as a value")
    );
}

#[test]
fn coefficients_without_a_record_are_refused_unless_the_file_says_so() {
    let inline = |more: &str| {
        let table = format!(
            "[channel.calibration]\n{more}zero_counts = -8000\ncoefficients = [\"0 N\", \"0.0005 N\"]\n\
             zero_uncertainty = \"0.5 N\"\nscale_uncertainty = \"0.1 %\"\n"
        );
        NORTH_PIER.replacen("record = \"records/anchor.toml\"\n", &table, 1)
    };
    let refused = findings_of(&inline(""));
    assert!(refused.contains("error: channel[1].calibration.without_record: coefficients stand without"), "{refused}");
    assert!(check(&inline("without_record = false\n")).rig.is_none());
    assert!(findings_of(&inline("without_record = 1\n")).contains("true or false"));
    let rig = parse(&inline("without_record = true\n")).unwrap();
    let anchor = rig.channel_with_role(Role::CordAnchorTension).expect("it has values");
    assert_eq!((anchor.calibration.zero_counts, &anchor.record), (-8000.0, &None));
    assert!(north_pier().channels.iter().all(|channel| channel.record.is_some()), "all others have records");
}

#[test]
fn a_plan_beyond_what_the_cell_was_tested_for_is_said() {
    // The joined text carries the record: of the line's cell it now says 600 N, and the planned draw pulls 607 N.
    let (before, after) = NORTH_PIER.split_once("#@attached records/line.toml").unwrap();
    let short = format!(
        "{before}#@attached records/line.toml{}",
        after.replacen("tested_to = \"1000 N\"", "tested_to = \"600 N\"", 1)
    );
    let findings = findings_of(&short);
    assert!(
        findings.contains("caution: plan.draw: pulls 607 N")
            && findings.contains("tested to 600 N only (records/line.toml)"),
        "{findings}"
    );
    assert_eq!(findings.lines().count(), 1, "{findings}");
}

#[test]
fn a_mass_without_uncertainty_is_taken_as_exact_and_said_so() {
    one_finding(
        "mass_uncertainty = \"0.005 kg\"\n",
        "",
        "caution: shuttle.mass: has no mass_uncertainty, so it is taken as exact",
    );
}

#[test]
fn an_empty_file_lists_all_that_is_missing() {
    let missing =
        ["name", "site", "rail", "shuttle", "payload", "cords", "losses", "limits", "plan", "device", "channel"];
    let findings = findings_of("");
    for key in missing {
        assert!(findings.contains(&format!("1:1: error: {key}: is missing")), "{key} in {findings}");
    }
    assert!(check("").rig.is_none());
}

#[test]
fn syntax_errors_come_alone_with_their_place() {
    let findings = findings_of("name = \"a\"\n[rail\nlength = 7\n");
    assert!(findings.starts_with("2:6: error: unclosed table"), "{findings}");
    assert!(!findings.contains("missing"), "{findings}");
    let twice = findings_of("[rail]\nlength = \"7 m\"\nlength = \"8 m\"\n");
    assert!(twice.starts_with("3:1: error: duplicate key"), "{twice}");
}

#[test]
fn a_refused_file_names_itself_in_every_line() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("rig.toml");
    std::fs::write(&path, NORTH_PIER.replacen("incline = ", "inclin = ", 1)).unwrap();
    let said = load(&path).expect_err("it is refused").to_string();
    let shown = path.display().to_string();
    assert!(said.starts_with(&format!("{shown} has 2 errors\n{shown}:14:1: error: rail.incline")), "{said}");
    let absent = load(&folder.path().join("none.toml")).expect_err("it is absent").to_string();
    assert!(absent.ends_with("none.toml: cannot be read: No such file or directory (os error 2)"), "{absent}");
}

#[test]
fn a_relative_port_is_taken_from_the_rig_files_folder() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("rig.toml");
    std::fs::write(&path, NORTH_PIER.replacen("ports/shuttle-node", "/dev/serial/by-id/shuttle", 1)).unwrap();
    let rig = load(&path).unwrap();
    assert_eq!(rig.devices[0].port, folder.path().join("ports/winch-node").display().to_string());
    assert_eq!(rig.devices[1].port, "/dev/serial/by-id/shuttle");
}

/// What must hold of any text: an answer, places inside the text, a rig only without errors, no NaN in it.
fn holds_of_any(text: &str) -> Result<(), TestCaseError> {
    let Checked { rig, findings } = check(text);
    let n_errors = findings.iter().filter(|finding| finding.severity == Severity::Error).count();
    prop_assert_eq!(rig.is_none(), n_errors > 0);
    for finding in &findings {
        let line = text.split('\n').nth(finding.line - 1).unwrap_or_default();
        prop_assert!(finding.column <= line.chars().count() + 1, "{} in {:?}", finding, line);
        prop_assert!(!finding.message.contains("NaN"), "{}", finding);
    }
    let has_no_nan = rig.is_none_or(|rig| !format!("{:?}", Rig { text: String::new(), ..rig }).contains("NaN"));
    prop_assert!(has_no_nan, "a value that was not read reached a rig");
    Ok(())
}

proptest! {
    #[test]
    fn any_text_is_answered(text in "(?s).{0,300}") {
        holds_of_any(&text)?;
    }

    #[test]
    fn any_line_may_be_lost_doubled_or_spoilt(
        line_idx in 0..120usize, what in 0..4u8, value in "[-0-9a-zA-Z.%/ \"\\[\\]{}]{0,12}",
    ) {
        let mut lines: Vec<String> = NORTH_PIER.lines().map(str::to_owned).collect();
        let line_idx = line_idx % lines.len();
        match what {
            0 => { lines.remove(line_idx); }
            1 => lines.insert(line_idx, lines[line_idx].clone()),
            2 => lines[line_idx] = value,
            _ => {
                let key = lines[line_idx].split('=').next().unwrap_or_default().to_owned();
                lines[line_idx] = format!("{key}= \"{}\"", value.replace('"', ""));
            }
        }
        holds_of_any(&lines.join("\n"))?;
    }
}
